"""A coupon that necks, whose edges roll out of sight there, against the closed form of its displacements."""

from dataclasses import replace

import numpy as np
import pytest
from scipy.special import erf

from dic.correlation import Flag, Settings, Tracker, lay_grid, prepare_reference
from dic.pattern import axes, find_coupon
from dic.strain import GaugeReader, Region
from synthetic_images import Camera, Coupon, Dots
from synthetic_images.motions import Displacement

#: What the tests share is made once, also where workers share the tests.
pytestmark = pytest.mark.xdist_group("necking")

SHAPE, WIDTH, SUBSET, LENGTH = (280, 140), 92.0, 21, 130.0
CENTRE = ((SHAPE[1] - 1) / 2, (SHAPE[0] - 1) / 2)
#: The neck's half length, and the radius of what is out of sight at either edge, px.
NECK, ROLLED = 45.0, 34.0
#: Largest axial strain in the neck, and how much of each edge is out of sight, px, frame by frame.
STRAINS = (0.06, 0.12, 0.18, 0.22, 0.26, 0.30)
DEPTHS = (0.0, 0.0, 4.0, 8.0, 12.0, 16.0)


def displacement(strain, x, y):
    """Axial strain strain·exp(−(Y/NECK)²), transverse −0.45 of that: a smooth neck, in closed form."""
    place = (y - CENTRE[1]) / NECK
    across = -0.45 * strain * (x - CENTRE[0]) * np.exp(-(place**2))
    return across, strain * NECK * np.sqrt(np.pi) / 2 * erf(place)


def picture(strain, depth, frame):
    motion = Displacement(lambda x, y: displacement(strain, x, y))
    away = WIDTH / 2 - depth + ROLLED
    rolled = tuple((CENTRE[0] + side * away, CENTRE[1], ROLLED) for side in (-1, 1)) if depth else ()
    coupon = Coupon(Dots(4.5, area=(320, 420), seed=1), motion, CENTRE, WIDTH, 0.0, 0.1, holes=rolled)
    return Camera(bits=8, noise=0.01).photograph(coupon, SHAPE, frame=frame, seed=3)


@pytest.fixture(scope="module")
def followed():
    """Return the subsets, the gauge, and matches and readings of all frames."""
    image = picture(0.0, 0.0, 0).astype(float)
    rows = np.abs(np.arange(SHAPE[0]) - CENTRE[1]) < 90
    mask = find_coupon(image, 0.0, np.broadcast_to(rows[:, None], SHAPE)).mask
    grid = lay_grid(mask, SUBSET, 7)
    reference = prepare_reference(
        image, grid.x, grid.y, subset=SUBSET, settings=Settings(full_scale=255.0), mask=mask, frames=1
    )
    reader = GaugeReader(reference, grid, Region.around(mask, *axes(0.0)), LENGTH)
    tracker, found = Tracker(reference, grid.neighbours()), []
    for frame, state in enumerate(zip(STRAINS, DEPTHS, strict=True), start=1):
        match = tracker.follow(picture(*state, frame))
        found.append((match, reader.read(match)))
    return grid, reader, found


def true_match(grid, match, strain):
    """The match with the true field in it: to each subset's window the best straight line, noise-free."""
    half = SUBSET // 2
    dy, dx = (d.ravel() for d in np.mgrid[-half : half + 1, -half : half + 1])
    fields = displacement(strain, grid.x[:, None] + dx, grid.y[:, None] + dy)
    line = np.linalg.pinv(np.column_stack([np.ones(len(dx)), dx, dy]))
    return replace(match, parameters=np.hstack([field @ line.T for field in fields]))


def out_of_sight(grid, depth):
    """Whether a subset's centre is out of sight, and how far, px, it is from what is."""
    away = WIDTH / 2 - depth + ROLLED
    sides = [np.hypot(grid.x - CENTRE[0] - side * away, grid.y - CENTRE[1]) for side in (-1, 1)]
    beyond = np.min(sides, axis=0) - ROLLED if depth else np.full(len(grid.x), np.inf)
    return beyond < 0, beyond


def test_subsets_that_leave_the_material_are_lost_with_a_flag_and_no_others(followed):
    grid, _, found = followed
    lost = []
    for depth, (match, _) in zip(DEPTHS, found, strict=True):
        gone, beyond = out_of_sight(grid, depth)
        assert np.isnan(match.u[~match.converged]).all()
        assert set(match.flag[gone]) <= {Flag.NOT_CONVERGED, Flag.DECORRELATED}
        # A window reaches half its diagonal.
        assert match.converged[beyond > SUBSET / np.sqrt(2)].all()
        lost.append(np.sum(~match.converged))
        assert lost[-1] >= gone.sum()
    assert lost[:2] == [0, 0]
    assert lost[-1] >= 16


def test_mean_strains_follow_the_truth_all_the_same(followed):
    """Against the same mean of the true field, within three standard uncertainties along the pull.  Across
    it windows that hold some background are drawn along with the rim, by up to 0.4 px: 1.5 % of the mean."""
    grid, reader, found = followed
    for strain, (match, reading) in zip(STRAINS, found, strict=True):
        true = reader.read(true_match(grid, match, strain))
        assert reading.status == "ok"
        assert 0.85 < reading.valid_fraction <= 1.0
        assert abs(reading.axial - true.axial) < 3 * reading.u_axial
        assert abs(reading.extensometer - true.extensometer) < 3 * reading.u_extensometer
        assert reading.transverse == pytest.approx(true.transverse, rel=0.015)
        # Nor does the loss itself shift the mean: by 0.1 % at the most, in a field that is far from even.
        whole = reader.read(true_match(grid, replace(match, flag=np.zeros_like(match.flag)), strain))
        assert true.axial == pytest.approx(whole.axial, rel=0.001)


def test_the_extensometer_reads_the_change_of_length(followed):
    """ΔL/L₀ in closed form, but for the field's curvature within a band and a window, which a mean over a
    length d lowers by v″·d²/24, and noise."""
    _, _, found = followed
    place = LENGTH / 2 / NECK
    for strain, (_, reading) in zip(STRAINS, found, strict=True):
        _, end = displacement(strain, CENTRE[0], CENTRE[1] + LENGTH / 2)
        bend = 2 * place / NECK * strain * np.exp(-(place**2)) * 2 * SUBSET**2 / 24
        missing = 2 * end / LENGTH - reading.extensometer
        noise = 3 * reading.u_extensometer
        assert -noise < missing < 2 * bend / LENGTH + noise
