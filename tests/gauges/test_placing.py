"""Gauges that do not fit on the coupon are named, with the picture's coordinates and what would fit."""

import numpy as np
import pytest
from pydantic import ValidationError

from dic.errors import TestFileError
from dic.gauges import place_gauges
from dic.gauges.probes import Subsets
from dic.strain import Region
from dic.testfile import NamedGauge


def place(subsets, coupon, name="g", scale=0.05, **keys):
    return place_gauges({name: NamedGauge.model_validate(keys)}, subsets, coupon, scale, None)


@pytest.mark.parametrize(
    ("keys", "said"),
    [
        (
            {"kind": "extensometer", "length": 400},
            r"gauges\.g: reaches out .*: x 130 to 130, y -106 to 294 px; .* 260 px wide",
        ),
        ({"kind": "extensometer", "length": 30}, r"is 30 px long, shorter than two subsets; make it 42 px"),
        ({"kind": "extensometer", "centre": [129, 60], "length": 118}, r"no subset lies at x 129, y 1 px"),
        ({"kind": "area", "region": [-5, 10, 90, 90]}, r"out of the picture: x -5 to 85, y 10 to 100"),
        ({"kind": "area", "region": [50, 50, 90, 20]}, r"is 20 px long, shorter than two subsets"),
        ({"kind": "area", "region": [0, 0, 60, 10]}, r"off the speckled coupon; subsets lie from x 1\d"),
        ({"kind": "points", "from": [20, 2], "to": [20, 150]}, r"no subset lies at x 20, y 2 px"),
        ({"kind": "points", "from": [60, 60], "to": [70, 60]}, r"is 10 px long"),
        ({"kind": "line", "from": [50, 50], "to": [50, 300]}, r"the picture is 260 px wide and 190 px high"),
        ({"kind": "transverse", "length": 300}, r"out of the picture"),
        ({"kind": "edge_width"}, r"long edges are not both in view"),
    ],
)
def test_what_does_not_fit_is_said(subsets, region, keys, said):
    with pytest.raises(TestFileError, match=said) as caught:
        place(subsets, region, **keys)
    assert "\n" not in str(caught.value)


@pytest.fixture(scope="module")
def strip(subsets):
    """Subsets from x 125 on only."""
    return Subsets(subsets.reference, subsets.grid, subsets.places + np.array([111.0, 0.0]))


def test_a_gauge_beside_the_coupon_is_refused_though_its_wide_bands_reach_it(strip, region):
    with pytest.raises(TestFileError, match=r"no subset lies at x 60, y 145 px"):
        place(strip, region, kind="extensometer", centre=[60, 95], length=100)


def test_an_area_that_is_partly_off_the_coupon_says_how_much(strip, region):
    """Of 60 to 250 px, 120 carry subsets."""
    (one,) = place(strip, region, kind="area", region=[60, 30, 190, 120])
    share = int(one.note.split()[1])
    # Half a step on either side of 190 px.
    assert abs(share - 100 * 120 / 190) < 6


def test_an_area_is_the_gauge_region_even_where_that_leaves_the_picture(subsets, region):
    """A coupon that stands askew has corners of its region beyond the picture."""
    askew = Region(region.centre, 280.0, 120.0, np.array([0.0, -1.0]), np.array([1.0, 0.0]))
    (one,) = place(subsets, askew, kind="area")
    assert len(one.probes[0].members) > 100
    assert not one.note


def test_a_length_in_mm_needs_the_scale(subsets, region):
    with pytest.raises(TestFileError, match=r"camera\.scale"):
        place(subsets, region, scale=float("nan"), kind="extensometer", length="5 mm")


def test_places_may_count_from_the_middle_of_the_region(subsets, region):
    """2 mm to the right and 1 mm up at 0.05 mm/px: 40 px to the right and 20 px up the picture."""
    (one,) = place(subsets, region, kind="points", **{"from": ["2 mm", "1 mm"], "to": ["-40 px", "-20 px"]})
    assert one.outlines[0].tolist() == [[169.5, 74.5], [89.5, 114.5]]


@pytest.mark.parametrize("name", ["force_N", "strain_axial", "name"])
def test_no_gauge_has_the_name_of_a_column(subsets, region, name):
    with pytest.raises(TestFileError, match="taken by another column"):
        place(subsets, region, name=name, kind="extensometer", length=100)


def test_two_gauges_whose_columns_collide_are_refused(subsets, region):
    wanted = {
        "t": NamedGauge(kind="transverse"),
        "t_1": NamedGauge(kind="extensometer", length=100),
    }
    with pytest.raises(TestFileError, match="'t_1' is taken"):
        place_gauges(wanted, subsets, region, 0.05, None)


@pytest.mark.parametrize(
    ("keys", "said"),
    [
        ({"kind": "points", "from": [1, 2]}, "needs to"),
        ({"kind": "area", "length": 100}, 'length means nothing for kind "area"'),
        ({"kind": "extensometer", "length": "5 kg"}, "not a unit of length"),
        ({"kind": "extensometer", "length": "five px"}, "is not a length"),
        ({"kind": "extensometer", "length": "-5 mm"}, "not longer than zero"),
        ({"kind": "extensometer", "length": -5}, "greater than 0"),
        ({"kind": "extensometer", "from": [1, 2], "to": [3, 4], "length": 5}, "without length, centre"),
        ({"kind": "area", "region": [1, 2, 3, 4], "points": [[1, 2], [3, 4], [5, 6]]}, "not both"),
        ({"kind": "transverse", "stations": [1.5]}, "less than or equal to 1"),
        ({"kind": "tape"}, "extensometer"),
    ],
)
def test_wrong_keys_are_refused_by_the_test_file(keys, said):
    with pytest.raises(ValidationError, match=said):
        NamedGauge.model_validate(keys)
