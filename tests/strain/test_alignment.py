"""Alignment from made-up motions: bending, its causes, its uncertainty and the verdict."""

from dataclasses import replace

import numpy as np
import pytest

from dic.correlation.grid import Grid
from dic.pattern import axes
from dic.strain import Region, Window
from dic.strain.alignment import UNTOLD, Alignment, Estimate, elastic_part, find_alignment, limit_of
from dic.strain.causes import OBSERVED, explain
from dic.strain.rates import Moved, gather_rates, mirrored, read_stations
from synthetic_images.readings import gauge_history

POISSON, SIGMA, STEP, SUBSET = 0.3, 0.004, 15, 15  # subsets side by side: independent noise
LENGTH, WIDTH = 900.0, 180.0
STRAINS = np.linspace(0.0002, 0.001, 9)
GRID = Grid(
    np.arange(60, 241, STEP), np.arange(50, 951, STEP), np.ones((61, 13), bool), subset=SUBSET, step=STEP
)
CENTRE = np.array([150.0, 500.0])


def bent(a, t, size):
    """Saint-Venant's bending; `size` is the strain at the edge per mean strain."""
    k = size / (WIDTH / 2)
    return k * a * t, -k / 2 * (a**2 + POISSON * t**2)


def s_shaped(a, t, size):
    """A moment that grows along the beam, with its parabolic shear; `size` at the gauge's end."""
    k = size / (WIDTH / 2) / (LENGTH / 2)
    along = k * a**2 * t / 2 - k * (1 + POISSON) * t**3 / 6
    return along, -k * (a**3 / 6 + POISSON * a * t**2 / 2)


def tilted_camera(a, t, size):
    """x·(g·x), g across the coupon: what a slanted view adds to a motion."""
    g = size / (WIDTH / 2)
    return g * t * a, g * t * t


def tapered(a, t, size):
    return size / LENGTH * a**2, -POISSON * size / (LENGTH / 2) * a * t


def measured(*, angle=0.0, moving_deg=0.0, noise=0.0, seed=0, **shapes):
    """Return the alignment of a coupon pulled with these additions to its stretch."""
    axial, transverse = axes(angle)
    region = Region(
        CENTRE, LENGTH if angle == 0 else 700.0, WIDTH if angle == 0 else 120.0, axial, transverse
    )
    x, y = np.meshgrid(GRID.columns, GRID.rows)
    a, t = region.coordinates(x, y)
    along, across = a.copy(), -POISSON * t
    for name, size in shapes.items():
        more = globals()[name](a, t, size)
        along, across = along + more[0], across + more[1]
    travel = 5000.0
    along, across = along + travel, across + travel * np.tan(np.radians(moving_deg))
    draw = np.random.default_rng(seed)
    sigma = np.full(x.shape, SIGMA)
    frames = []
    for strain in STRAINS:
        u, v = (strain * (along * axial[k] + across * transverse[k]) for k in (0, 1))
        u, v = (part + noise * draw.normal(0, SIGMA, x.shape) for part in (u, v))
        frames.append(Moved(u, v, sigma, sigma, strain * np.gradient(along, STEP, axis=0) * -1))
    rates = gather_rates(frames, STRAINS, GRID, region, Window(5, STEP, SUBSET))
    shift = np.stack([STRAINS * travel, STRAINS * travel * np.tan(np.radians(moving_deg))], axis=1)
    edge = sum(size for name, size in shapes.items() if name in ("bent", "tilted_camera"))
    found = find_alignment(
        history(shift, STRAINS * edge), 1e6 * STRAINS, np.ones(len(STRAINS), bool), rates, (0.05, "a rule")
    )
    return found, rates


def history(shift, bending):
    n = len(STRAINS)
    wobble = 1e-9 * np.cos(np.arange(n))
    return gauge_history(
        np.zeros(n), STRAINS, -POISSON * STRAINS, 0.0,
        shear=wobble, shift_px=shift, bending=bending + wobble,
    )  # fmt: skip


@pytest.mark.parametrize(("angle", "size"), [(0.0, 0.05), (0.0, -0.02), (5.0, 0.1)])
def test_uniform_bending_is_read_at_every_station(angle, size):
    width = WIDTH if angle == 0 else 120.0
    found, _ = measured(angle=angle, bent=size * width / WIDTH)
    expected = size * width / WIDTH * width / WIDTH
    assert found.bending.value == pytest.approx(expected, rel=1e-6)
    assert found.bending_change.value == pytest.approx(0, abs=1e-6)
    np.testing.assert_allclose(found.stations.bending, expected, rtol=1e-6)
    np.testing.assert_allclose(found.stations.strain, 1.0, rtol=1e-6)
    # Plane sections turn by κ per length: the ends in opposite ways.
    turned = found.turning_ends[1].value - found.turning_ends[0].value
    length = LENGTH if angle == 0 else 700.0
    assert turned == pytest.approx(-expected / (width / 2) * length, rel=1e-6)


def test_a_station_without_subsets_says_nothing():
    _, rates = measured(bent=0.05)
    kept = abs(rates.along) > LENGTH / 6  # the middle one of five is gone, its neighbours are not
    member = rates.member.copy()
    member[rates.member] = kept
    parts = {key: getattr(rates, key)[kept] for key in ("along", "across", "moved_along", "moved_across")}
    stations = read_stations(replace(rates, member=member, **parts))
    for values in (stations.strain, stations.bending, stations.u_strain, stations.u_bending):
        np.testing.assert_array_equal(np.isfinite(values), [True, True, False, True, True])
    np.testing.assert_allclose(stations.strain[[0, 1, 3, 4]], 1.0, rtol=1e-6)


def test_an_s_is_largest_at_the_ends():
    found, _ = measured(s_shaped=0.04)
    assert found.bending.value == pytest.approx(0, abs=1e-9)
    assert found.bending_change.value == pytest.approx(0.04, rel=1e-6)
    assert found.largest.value == pytest.approx(0.04, rel=1e-6)
    assert found.stations.bending[0] < 0 < found.stations.bending[-1]


CASES = [
    ({}, ()),
    ({"bent": 0.05}, ("offset",)),
    ({"s_shaped": 0.05}, ("opposed",)),
    ({"s_shaped": 0.05, "moving_deg": 1.0}, ("tilt",)),
    ({"moving_deg": 1.0}, ("oblique",)),
    ({"tilted_camera": 0.05}, ("camera",)),
    ({"tapered": 0.05}, ("taper",)),
    ({"bent": 0.05, "s_shaped": 0.04}, ("offset", "opposed")),
]


@pytest.mark.parametrize(("motion", "causes"), CASES)
def test_each_motion_is_named_for_what_it_is(motion, causes):
    for seed in range(3):
        found, _ = measured(noise=1.0, seed=seed, **motion)
        assert found.causes.found == causes
        assert found.causes.possible == ()
        assert found.causes.straight is (causes == ())


def test_faint_patterns_are_not_told_apart():
    """Bending at the edge alone, its axis and transverse strain lost in noise: a grip or the camera."""
    observed = np.zeros(len(OBSERVED))
    observed[OBSERVED.index("bending")] = 0.05
    spread = np.full(len(OBSERVED), 0.002)
    spread[[OBSERVED.index("curved"), OBSERVED.index("across")]] = 0.2
    found = explain(observed, np.diag(spread**2), POISSON)
    assert found.found == ()
    assert {"offset", "camera"} <= set(found.possible)
    assert not found.straight


def test_without_travel_a_tilt_is_not_claimed():
    observed = np.zeros(len(OBSERVED))
    observed[[OBSERVED.index("change"), OBSERVED.index("curved_change")]] = 0.05
    observed[-1] = np.nan
    assert explain(observed, np.diag(np.full(len(OBSERVED), 0.002) ** 2), POISSON).found == ("opposed",)


def test_stated_uncertainties_are_the_scatter():
    """60 draws: a scatter is known to 9 %, three of them allowed."""
    draws = [measured(noise=1.0, seed=seed, bent=0.05)[0] for seed in range(60)]
    for name in ("bending", "bending_change", "along"):
        values = np.array([getattr(one, name).value for one in draws])
        stated = np.mean([getattr(one, name).u for one in draws])
        assert stated == pytest.approx(values.std(ddof=1), rel=0.28), name
    stations = np.array([one.stations.bending for one in draws])
    stated = np.mean([one.stations.u_bending for one in draws], axis=0)
    np.testing.assert_allclose(stated, stations.std(axis=0, ddof=1), rtol=0.35)  # the worst of five
    assert stations.mean() == pytest.approx(0.05, abs=0.002)


def test_overlapping_subsets_are_less_sure():
    """Three rows and columns share each pixel: the variance of a mean is nearly nine times as large."""
    _, rates = measured(noise=1.0)
    design = np.ones((len(rates.along), 1))
    _, alone = rates.fit(rates.moved_along, 1.0, design)
    shared = replace(rates, overlap=Window(99, 5, SUBSET).overlap())
    _, sharing = shared.fit(rates.moved_along, 1.0, design)
    # Correlations 1, 2/3 and 1/3 to either side; the outermost of n have neighbours on one side only.
    rows, columns = (3 - 2 * (2 / 3 + 2 / 3) / n for n in (61, 13))
    assert sharing[0, 0] / alone[0, 0] == pytest.approx(rows * columns, rel=1e-9)


def test_contrast_maps_mirror_the_strain():
    found, rates = measured(bent=0.06)
    x, y = np.meshgrid(GRID.columns, GRID.rows)
    _, t = rates.region.coordinates(x, y)
    np.testing.assert_allclose(found.sides[1:-1], (0.06 * t / (WIDTH / 2))[1:-1], atol=1e-9)
    np.testing.assert_allclose(found.ends[1:-1], 0, atol=1e-9)
    gap = replace(rates, strain=np.where((x == 60) & (y == 500), np.nan, rates.strain))
    assert np.isnan(mirrored(gap, across=True)[30, [0, -1]]).all()


VERDICTS = [(0.04, 0.004, "within"), (0.06, 0.004, "beyond"), (0.045, 0.004, UNTOLD), (np.nan, 1, UNTOLD)]


@pytest.mark.parametrize(("value", "u", "said"), VERDICTS)
def test_the_verdict_holds_the_uncertainty_against_the_limit(value, u, said):
    assert Alignment(largest=Estimate(value, u), limit=0.05).verdict == said
    assert Alignment(largest=Estimate(value, u)).verdict == ""


def test_limits_and_where_they_come_from():
    """ASTM D3039: 10 % at the most; ASTM E606: 5 % [both from memory]."""
    assert limit_of(None, "ASTM D3039") == (0.10, "ASTM D3039")
    assert limit_of(None, "ASTM E606") == (0.05, "ASTM E606")
    assert limit_of(0.03, "ASTM D3039") == (0.03, "the test file")
    assert limit_of(None, "ISO 23788") == limit_of(None, None) == (None, "")


def test_too_few_frames_or_patches_are_no_alignment():
    found, rates = measured()
    few = np.zeros(len(STRAINS), bool)
    few[:2] = True
    found = find_alignment(history(np.zeros((9, 2)), 0 * STRAINS), STRAINS, few, None)
    assert "2 frames" in found.reason
    assert np.isnan(found.bending.value)
    narrow = replace(rates, across=0 * rates.across)
    found = find_alignment(history(np.zeros((9, 2)), 0 * STRAINS), STRAINS, few, narrow)
    assert "span" in found.reason


def test_the_elastic_part_ends_where_its_window_is_left():
    moved = history(np.zeros((9, 2)), 0 * STRAINS)
    sprung = replace(
        moved, axial=np.array([0.0, 0.0002, 0.0004, 0.0006, 0.002, 0.01, 0.0005, 0.0004, np.nan])
    )
    assert np.flatnonzero(elastic_part(sprung, 0.0002, 0.0006)).tolist() == [1, 2, 3]
