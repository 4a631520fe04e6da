"""Sequences: seeding, prediction, a lost frame in between."""

import numpy as np
import pytest

from dic.correlation import Flag, Tracker, lay_grid, tracking
from dic.correlation import track as track_frames
from dic.correlation.tracking import seed, settle
from synthetic_images import Affine, homogeneous, rigid

#: Without noise, aliased edges scatter matches by 0.8 mpx; six of them.
ALIASING = 5e-3


@pytest.fixture(scope="module")
def track():
    """Return tracking with the neighbours of the grid that the shared reference is laid on."""
    return lambda frames, reference: track_frames(frames, reference, neighbours_of(reference))


def neighbours_of(reference):
    mask = reference.mask[: np.prod(reference.shape)].reshape(reference.shape) > 0
    grid = lay_grid(mask, reference.subset, 15)
    np.testing.assert_array_equal(grid.x, reference.x)
    return grid.neighbours()


def test_a_large_first_motion_is_seeded(photograph, prepared, track):
    reference = prepared(photograph())
    (found,) = track([photograph(rigid(-37.4, 21.7))], reference)
    seen = found.converged
    assert seen.mean() > 0.6  # the others moved out of the picture
    np.testing.assert_allclose(found.u[seen], -37.4, atol=ALIASING)
    np.testing.assert_allclose(found.v[seen], 21.7, atol=ALIASING)


def test_a_steady_pull_is_predicted(photograph, prepared, track):
    reference = prepared(photograph(), margin=24)
    strains = np.linspace(0, 0.05, 9)
    motions = [homogeneous(e, -0.3 * e, centre=(130, 95), shift=(0, -40 * e)) for e in strains]
    for motion, found in zip(motions, track(map(photograph, motions), reference), strict=True):
        assert found.converged.all()
        _, y = motion(reference.x.astype(float), reference.y.astype(float))
        np.testing.assert_allclose(found.v, y - reference.y, atol=ALIASING)


def test_a_covered_lens_loses_its_frame_and_no_other(photograph, prepared, track):
    reference = prepared(photograph())
    hand = np.full(reference.shape, 20000, np.uint16)
    frames = [photograph(rigid(0, -0.5 * k)) for k in range(6)]
    frames[3] = hand
    found = list(track(frames, reference))
    assert [match.converged.any() for match in found] == [True, True, True, False, True, True]
    np.testing.assert_allclose(found[5].v, -2.5, atol=ALIASING)


def test_a_patch_that_was_hidden_is_found_again(photograph, prepared, track):
    reference = prepared(photograph())
    frames = [photograph(rigid(0.2 * k, 0.0)).copy() for k in range(4)]
    frames[2][60:120, 90:160] = 30000
    found = list(track(frames, reference))
    assert not found[2].converged.all()
    assert found[3].converged.all()
    np.testing.assert_allclose(found[3].u, 0.6, atol=ALIASING)


def test_where_the_coupon_has_gone_only_a_few_subsets_are_tried(photograph, prepared, track, monkeypatch):
    """Each that fails takes all its iterations; without a sample, a broken coupon's frames took 50 times."""
    shape = (400, 400)
    reference = prepared(photograph(shape=shape))
    tried = []
    solve = tracking.match_frame

    def counted(*arguments):
        match = solve(*arguments)
        tried.append(int((match.iterations > 0).sum()))
        return match

    frames = [photograph(shape=shape), photograph(seed=2, shape=shape), photograph(shape=shape)]
    following = track(frames, reference)
    next(following)
    monkeypatch.setattr(tracking, "match_frame", counted)
    lost = next(following)
    assert not lost.converged.any()
    assert max(tried) < len(reference.x) / 8
    assert next(following).converged.all()


def in_view(reference, motion):
    x, y = reference.x.astype(float), reference.y.astype(float)
    half, (rows, columns) = reference.half, reference.shape
    corners = [motion(x + a, y + b) for a in (-half, half) for b in (-half, half)]
    return np.all([(a > 0) & (a < columns - 1) & (b > 0) & (b < rows - 1) for a, b in corners], axis=0)


@pytest.mark.parametrize("case", range(6))
def test_turned_scaled_and_far_away_is_found(photograph, prepared, case):
    """Rotation to 10°, scale to 10 %, motion to half the picture; every subset still in view is found."""
    rng = np.random.default_rng(case)
    turn, scale = np.radians(rng.uniform(-10, 10)), rng.uniform(0.9, 1.1)
    c, s = scale * np.cos(turn), scale * np.sin(turn)
    motion = Affine(
        ((c, -s), (s, c)), (130.0, 95.0), (rng.uniform(-0.4, 0.4) * 260, rng.uniform(-0.4, 0.4) * 190)
    )
    reference = prepared(photograph(kind="cosines"))
    (found,) = track_frames([photograph(motion, kind="cosines")], reference, neighbours_of(reference))
    visible = in_view(reference, motion)
    x, y = motion(reference.x.astype(float), reference.y.astype(float))
    assert visible.sum() > 5
    assert found.converged[visible].all()
    np.testing.assert_allclose(found.u[visible], (x - reference.x)[visible], atol=0.01)
    np.testing.assert_allclose(found.v[visible], (y - reference.y)[visible], atol=0.01)


def test_rough_matching_mends_starts_that_are_four_pixels_off(photograph, prepared):
    """Study: capture from 4 px is 100 % on pictures smoothed by 1.5 px."""
    one, other = photograph(noise=0.01), photograph(rigid(0.4, -0.3), noise=0.01, frame=1)
    reference = prepared(one, margin=24)
    angle = np.random.default_rng(2).uniform(0, 2 * np.pi, len(reference.x))
    start = np.zeros((len(reference.x), 6))
    start[:, 0], start[:, 3] = 0.4 + 4 * np.cos(angle), -0.3 + 4 * np.sin(angle)
    better = settle(reference, one, other, start)
    assert np.isfinite(better).all(axis=1).mean() > 0.99
    np.testing.assert_allclose(better[:, 0], 0.4, atol=0.1)


def test_a_coupon_that_is_not_there_is_not_found(photograph, prepared):
    from dic.correlation import spline_image

    reference = prepared(photograph())
    other = photograph(seed=77)
    found = seed(reference, other, spline_image(other, "twofold", 0.5), neighbours_of(reference))
    assert not found.converged.any()
    assert np.isnan(found.parameters).all()


def test_a_crack_is_flagged_and_not_smoothed_over(photograph, prepared, track):
    """The left half stays, the right half moves by 3 px: subsets across the crack resemble neither."""
    still, moved = photograph(), photograph(rigid(3, 0))
    cracked = np.where(np.arange(260) < 130, still, moved)
    cracked[:, 130:133] = 5000
    reference = prepared(still, margin=24)
    (found,) = track([cracked], reference)
    left, right = reference.x + 15 < 130, reference.x - 15 >= 133
    assert found.converged[left | right].all()
    np.testing.assert_allclose(found.u[left], 0, atol=ALIASING)
    np.testing.assert_allclose(found.u[right], 3, atol=ALIASING)
    across = abs(reference.x - 130) < 5
    assert (found.flag[across] == Flag.DECORRELATED).all()


def test_a_worn_pattern_renews_the_reference_and_keeps_count_of_it(photograph, prepared):
    """The pattern fades into another while it moves; the motion stays true, its uncertainty grows."""
    reference = prepared(photograph(noise=0.01))
    tracker = Tracker(reference, neighbours_of(reference))
    shares = np.linspace(0, 0.9, 13)
    found = []
    for k, share in enumerate(shares):
        motion = homogeneous(0.002 * k, -0.0006 * k, centre=(130, 95), shift=(0.3 * k, 0))
        old, new = photograph(motion), photograph(motion, seed=50)
        mixed = ((1 - share) * old.astype(float) + share * new) / 257
        rng = np.random.default_rng(k)
        found.append(
            tracker.follow(np.rint(mixed + rng.normal(0, 2.55, mixed.shape)).clip(0, 255).astype(np.uint8))
        )
    assert found[-1].links >= 1
    assert found[-1].converged.mean() > 0.9
    good = found[-1].converged
    x, _ = motion(reference.x.astype(float), reference.y.astype(float))
    error = found[-1].u[good] - (x - reference.x)[good]
    # Each link adds its own scatter, and half a subset of pattern that is not what it was a little bias.
    assert np.abs(np.median(error)) < 0.01
    assert np.std(error) < 3 * np.median(found[-1].sigma_u[good])
    assert np.median(found[-1].sigma_u[good]) > 1.3 * np.median(found[0].sigma_u)
