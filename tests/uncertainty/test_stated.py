"""What a test file states of force and section, as standard uncertainties."""

import pytest
from pydantic import ValidationError

from dic.testfile import LoadRecord, Specimen

SIDES = {"width": "12.5 mm", "thickness": "2 mm"}


@pytest.mark.parametrize("force_class", [0.5, 1, 2, 3])
def test_a_class_bounds_a_rectangular_distribution(force_class):
    """ISO 7500-1: relative error within the class in percent [from memory]; JCGM 100:2008, 4.3.7."""
    record = LoadRecord(source="machine.csv", force_class=force_class)
    assert record.relative_uncertainty == pytest.approx(force_class / 100 / 3**0.5, rel=1e-12)


def test_a_force_has_one_uncertainty():
    with pytest.raises(ValidationError, match="not both"):
        LoadRecord(source="machine.csv", force_class=1, force_uncertainty="0.5 %")
    with pytest.raises(ValidationError, match="no class 4"):
        LoadRecord(source="machine.csv", force_class=4)


def test_the_last_digit_stands_in_for_what_is_not_given():
    """A reading of resolution d lies anywhere within d: d / sqrt(12) (JCGM 100:2008, F.2.2.1)."""
    both = Specimen(**SIDES, calliper_resolution="0.01 mm")
    digit = 0.01 / 12**0.5
    assert both.area_uncertainty == pytest.approx(((digit / 12.5) ** 2 + (digit / 2) ** 2) ** 0.5, rel=1e-12)
    own = Specimen(**SIDES, calliper_resolution="0.01 mm", thickness_uncertainty="0.02 mm")
    assert own.side_uncertainty("thickness") == 0.02
    assert Specimen(**SIDES).area_uncertainty is None
