"""The sources that codes of practice list stand in the budget, or are named as not included."""

import pytest

from dic.properties import evaluate
from dic.testfile import Properties

#: Sources of UNCERT CoP 07 (tensile) and CoP 16 (Poisson's ratio), 2000 [from memory], and the word under
#: which the budget has them.
COP_07 = {
    "force": "force",
    "cross-section": "section",
    "readings": "scatter",
    "extensometer": "interpolation",
}
COP_16 = {"alignment": "axis", "readings": "scatter", "strain measurement": "interpolation"}


@pytest.mark.parametrize(
    ("name", "sources"),
    [("youngs_modulus", COP_07), ("proof_stress_0_2", COP_07), ("poissons_ratio", COP_16)],
)
def test_every_listed_source_is_accounted_for(pull, name, sources):
    drawn = pull()
    found = evaluate(drawn.curve, drawn.specimen, None, drawn.clock, Properties()).properties[name]
    told = [row.source for row in found.budget]
    for source, word in sources.items():
        assert any(word in one for one in told), (source, told)
    # What is not included stands in the table itself, and has no share in the sum.
    assert sum(row.share for row in found.budget if row.included) == pytest.approx(1, rel=1e-9)
    if name != "poissons_ratio":
        assert any("load_record.force_uncertainty" in row.source for row in found.budget if not row.included)
