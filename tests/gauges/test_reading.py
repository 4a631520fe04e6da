"""What the named gauges read, against closed forms of homogeneous motions and against noise draws."""

import numpy as np
import pytest

from dic.gauges import NamedReader, NamedReadings, place_gauges
from dic.strain.periodic import Periodic
from dic.testfile import NamedGauge

# Stretched, narrowed, sheared and turned by 20°, upwards being the axis (y counts downwards).
TURN = np.deg2rad(20.0)
ROTATION = np.array([[np.cos(TURN), -np.sin(TURN)], [np.sin(TURN), np.cos(TURN)]])
DEFORMATION = ROTATION @ np.array([[0.8, 0.05], [0.0, 1.6]])

GAUGES = {
    "ext": {"kind": "extensometer", "length": 100, "width": 80},
    "slant": {"kind": "extensometer", "length": "90 px", "angle": "30 deg", "width": 40},
    "given": {"kind": "extensometer", "from": [60, 50], "to": [180, 140], "width": 40},
    "patch": {"kind": "area", "region": [60, 40, 120, 100]},
    "across": {"kind": "area", "points": [[60, 40], [200, 50], [150, 150]], "component": "transverse"},
    "sheared": {"kind": "area", "region": [60, 40, 120, 100], "component": "shear"},
    "wide": {"kind": "transverse", "stations": [0.3, 0.5, "3 mm"], "length": 120},
    "two": {"kind": "points", "from": [63, 51], "to": [203, 127]},
    "middle": {"kind": "line", "from": [100, 30], "to": [160, 160]},
}


def stretch(direction, deformation=DEFORMATION):
    """ΔL/L of a material line: |F·d| − 1 (Malvern 1969, chapter 4 [from memory])."""
    direction = np.asarray(direction, float)
    return np.linalg.norm(deformation @ direction) / np.linalg.norm(direction) - 1


def true_of(name, deformation=DEFORMATION):
    up, right = deformation @ [0.0, -1.0], deformation @ [1.0, 0.0]
    angle = np.deg2rad(30.0)
    return {
        "ext": stretch([0, 1], deformation),
        "slant": stretch([np.sin(angle), -np.cos(angle)], deformation),
        "given": stretch([120, 90], deformation),
        "patch": stretch([0, 1], deformation),
        "across": stretch([1, 0], deformation),
        "sheared": np.arcsin(up @ right / np.linalg.norm(up) / np.linalg.norm(right)),
        "wide": stretch([1, 0], deformation),
        "two": stretch([140, 76], deformation),
        "middle": stretch([60, 130], deformation),
    }[name]


@pytest.fixture(scope="module")
def placed(subsets, region):
    wanted = {name: NamedGauge.model_validate(keys) for name, keys in GAUGES.items()}
    return place_gauges(wanted, subsets, region, 0.05, None)


def histories(placed, subsets, matches):
    readings = NamedReadings(subsets, placed, None)
    for match in matches:
        readings.read(match, None)
    return {one.gauge.name: one for one in readings.histories(Periodic(), 0.05)}


@pytest.fixture(scope="module")
def read(placed, subsets, moved_by):
    lost = placed[0].probes[0].bands[0]  # the whole lower band of the extensometer
    matches = [moved_by(np.eye(2)), moved_by(DEFORMATION, (3.0, -2.0)), moved_by(np.eye(2), lost=lost)]
    return histories(placed, subsets, matches)


@pytest.mark.parametrize("name", GAUGES)
def test_large_strain_and_rotation_are_read_exactly(read, name):
    """A homogeneous motion leaves nothing to average: rounding only."""
    found = read[name]
    assert found.strain[0] == pytest.approx(0.0, abs=1e-12)
    assert found.strain[1] == pytest.approx(true_of(name), abs=1e-9)
    assert found.status[:2] == ("ok", "ok")


def test_stations_and_places_along_a_line(read):
    np.testing.assert_allclose(read["wide"].parts[1], true_of("wide"), atol=1e-9)
    middle = read["middle"]
    np.testing.assert_allclose(middle.parts[1], true_of("middle"), atol=1e-9)
    total = np.hypot(60, 130)
    places = np.array(middle.gauge.places_px)
    # Windows of three subsets, none of which may reach beyond the line.
    assert places[0] >= 31.5 - 1e-9
    assert places[-1] <= total - 31.5 + 1e-9
    assert np.all(np.diff(places) > 0)


def test_lengths_are_those_asked_for(read):
    assert read["ext"].gauge.length_px == 100
    assert read["ext"].length_mm == pytest.approx(5.0)
    assert read["two"].gauge.length_px == pytest.approx(np.hypot(140, 76))


def test_a_lost_band_is_nan_with_a_reason(read):
    assert np.isnan(read["ext"].strain[2])
    assert "lost" in read["ext"].status[2]
    assert np.isfinite(read["two"].strain[2])


def test_part_of_a_band_is_enough_and_does_not_shift_the_reading(placed, subsets, moved_by):
    """A sheared coupon with half a band lost: the plane through the rest keeps shear out."""
    sheared = np.array([[1.0, 0.0], [0.02, 1.0]])
    upper, _ = placed[0].probes[0].bands
    found = histories(placed, subsets, [moved_by(sheared, lost=upper[: len(upper) // 2])])["ext"]
    assert found.strain[0] == pytest.approx(stretch([0, 1], sheared), abs=1e-9)


def test_an_area_that_loses_its_edge_keeps_its_reading(placed, subsets, moved_by):
    """As where a coupon narrows and its outermost patches leave the material."""
    places = subsets.places
    edge = np.flatnonzero(places[:, 0] < 90)
    assert np.isin(placed[3].probes[0].members, edge).sum() > 10
    found = histories(placed, subsets, [moved_by(DEFORMATION, lost=edge)])["patch"]
    assert found.strain[0] == pytest.approx(true_of("patch"), abs=1e-9)


def test_columns_of_the_history(read):
    assert list(read["ext"].columns()) == ["ext", "u_ext", "status_ext"]
    stations = [column for number in (1, 2, 3) for column in (f"wide_{number}", f"u_wide_{number}")]
    assert list(read["wide"].columns()) == ["wide", "u_wide", *stations, "status_wide"]
    np.testing.assert_array_equal(read["wide"].columns()["u_wide_2"], read["wide"].u_parts[:, 1])


def test_scatter_is_as_stated(placed, subsets, photograph, matched):
    """Sixteen frames of 1 % noise: a standard deviation known to 18 %, three times that."""
    reader = NamedReader(subsets, placed)
    readings = [
        reader.read(matched(subsets.reference, photograph(noise=0.01, frame=k, bits=16))) for k in range(16)
    ]
    strain, u = np.array([one.strain for one in readings]), np.array([one.u for one in readings])
    for number in range(strain.shape[1]):
        assert strain[:, number].std(ddof=1) / u[:, number].mean() == pytest.approx(1.0, abs=0.54), number
    # The mean of a gauge's stations, whose subsets overlap.
    first = [len(gauge.probes) for gauge in placed]
    for number, gauge in enumerate(placed):
        if len(gauge.probes) > 1:
            start = sum(first[:number])
            mean = strain[:, start : start + len(gauge.probes)].mean(axis=1)
            stated = np.mean([one.u_mean[number] for one in readings])
            assert mean.std(ddof=1) / stated == pytest.approx(1.0, abs=0.54), gauge.name
