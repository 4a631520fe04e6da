"""Matching against formulas: bias, scatter, stated uncertainty, invariants, flags."""

import numba
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from dic.correlation import Flag, Settings, prepare_reference
from synthetic_images import homogeneous, rigid


@pytest.mark.parametrize(("kind", "limit"), [("dots", 1.0e-3), ("cosines", 0.3e-3)])
def test_bias_over_the_subpixel_shift_stays_small(photograph, prepared, matched, kind, limit):
    """No noise.  Limits: twice what the benchmark measures over more shifts, because few are tried."""
    reference = prepared(photograph(kind=kind))
    errors = [
        float(np.mean(matched(reference, photograph(rigid(s, -s), kind=kind)).u - s))
        for s in (0.125, 0.25, 0.5, 0.75, 0.875)
    ]
    assert np.ptp([0.0, *errors]) < limit


@pytest.mark.parametrize("quadratic", [False, True])
@pytest.mark.parametrize("kind", ["dots", "cosines"])
def test_scatter_is_near_the_cramer_rao_bound(photograph, prepared, matched, kind, quadratic):
    """Bound of a translation: σ·√2/√Σfₓ².  Six draws of 150 subsets that overlap by a half: 3 %
    statistical error on top of 1.03 (cosines) and 1.07 (dots); quadratic shapes pay a factor of 1.9
    for what they add to the constant term (the square root of 9/4 of each direction's, less overlap)."""
    clean = photograph(kind=kind, bits=16)
    slope = np.gradient(clean.astype(float), axis=1) * 255 / 65535
    errors = []
    for draw in range(6):
        reference = prepared(photograph(kind=kind, noise=0.01, frame=2 * draw), quadratic=quadratic)
        frame = photograph(rigid(0.3, 0.2), kind=kind, noise=0.01, frame=2 * draw + 1)
        errors.append(matched(reference, frame).u - 0.3)
    energy = [
        (slope[y - 15 : y + 16, x - 15 : x + 16] ** 2).sum()
        for x, y in zip(reference.x, reference.y, strict=True)
    ]
    bound = np.sqrt(np.mean(2 * 2.55**2 / np.array(energy)))
    assert np.sqrt(np.mean(np.square(errors))) < (2.1 if quadratic else 1.13) * bound


def test_homogeneous_strain_is_found_everywhere(photograph, prepared, matched):
    motion = homogeneous(0.02, -0.006, 0.004, centre=(130, 95), shift=(1.3, -0.8))
    reference = prepared(photograph())
    found = matched(reference, photograph(motion))
    x, y = motion(reference.x.astype(float), reference.y.astype(float))
    assert found.converged.all()
    # 16 bits, no noise: aliased edges scatter by 0.8 mpx, of which five are allowed.
    assert np.abs(found.u - (x - reference.x)).max() < 4e-3
    assert np.abs(found.v - (y - reference.y)).max() < 4e-3


@settings(max_examples=15, deadline=None)
@given(gain=st.floats(0.4, 1.6), offset=st.floats(-20, 40))
def test_gain_and_offset_of_the_light_change_nothing(photograph, prepared, matched, gain, offset):
    reference = prepared(photograph().astype(np.float32))
    frame = photograph(rigid(0.4, 0.1)).astype(np.float32)
    plain, lit = matched(reference, frame), matched(reference, gain * frame + 256 * offset)
    # Single-precision pictures: 3.4e-6 px by the accuracy study, twice that for both.
    np.testing.assert_allclose(plain.u, lit.u, atol=1e-5)
    np.testing.assert_allclose(plain.correlation, lit.correlation, atol=1e-5)


def test_transposed_pictures_exchange_u_and_v(photograph, prepared, matched):
    one, other = photograph(), photograph(rigid(0.4, -0.7))
    plain = matched(prepared(one), other)
    turned_reference = prepared(np.ascontiguousarray(one.T))
    turned = matched(turned_reference, np.ascontiguousarray(other.T))
    order = np.lexsort((turned_reference.y, turned_reference.x))
    np.testing.assert_allclose(plain.u, turned.v[order], atol=1e-4)
    np.testing.assert_allclose(plain.v, turned.u[order], atol=1e-4)


def test_a_picture_matched_with_itself_does_not_move(photograph, prepared, matched):
    image = photograph(noise=0.01)
    found = matched(prepared(image), image)
    assert np.abs(found.u).max() < 1e-5
    assert found.correlation.min() > 0.999999


def test_results_do_not_depend_on_the_number_of_threads(photograph, prepared, matched):
    reference, frame = prepared(photograph()), photograph(rigid(0.3, 0.3), noise=0.01)
    before = numba.get_num_threads()
    try:
        numba.set_num_threads(1)
        one = matched(reference, frame)
        numba.set_num_threads(before)
        many = matched(reference, frame)
    finally:
        numba.set_num_threads(before)
    assert np.array_equal(one.parameters, many.parameters)


def test_averaging_the_reference_lowers_the_scatter(photograph, prepared, matched):
    """Bound: √(1/16 + 1)/√2 = 0.73; the study measured 0.74."""
    frames = [photograph(noise=0.01, frame=k) for k in range(16)]
    scatter = {}
    for n in (1, 16):
        reference = prepared(np.mean(frames[:n], axis=0), frames=n)
        errors = [
            matched(reference, photograph(rigid(0.3, 0.2), noise=0.01, frame=100 + k)).u - 0.3
            for k in range(6)
        ]
        scatter[n] = np.std(errors)
    assert scatter[16] / scatter[1] == pytest.approx(0.73, abs=0.05)


def test_flag_low_texture(photograph, prepared, matched):
    image = photograph().copy()
    image[:, :80] = 30000
    reference = prepared(image)
    found = matched(reference, image)
    blank = reference.x + 15 < 80 - 4  # smoothing carries a little texture over the border
    assert (found.flag[blank] == Flag.LOW_TEXTURE).all()
    assert np.isnan(found.u[blank]).all()


def test_flag_saturated(photograph, prepared, matched):
    image = photograph(bits=8, noise=0.0).copy()
    image[40:100, 100:180] = np.maximum(
        image[40:100, 100:180], 1.4 * image[40:100, 100:180].astype(float)
    ).clip(max=255)
    reference = prepared(image)
    clipped = [
        (image[y - 15 : y + 16, x - 15 : x + 16] >= 255).mean() > 0.1
        for x, y in zip(reference.x, reference.y, strict=True)
    ]
    found = matched(reference, image)
    assert any(clipped)
    assert (found.flag[clipped] == Flag.SATURATED).all()
    assert np.isnan(found.u[clipped]).all()
    assert found.converged[~np.array(clipped)].all()


def test_a_mask_leaves_only_its_own_pixels_in_the_match(photograph, prepared, matched):
    """Behind a mask the background may do what it likes."""
    one, other = photograph().copy(), photograph(rigid(0.4, -0.2)).copy()
    one[:, 200:], other[:, 200:] = 12000, 50000
    mask = np.zeros(one.shape, bool)
    mask[8:-8, 8:195] = True
    from dic.correlation import lay_grid

    grid = lay_grid(mask, 31, 12)
    partial = grid.x + 15 > 195
    assert partial.any()
    settings = Settings(full_scale=65535.0)
    reference = prepare_reference(one, grid.x, grid.y, subset=31, settings=settings, mask=mask)
    found = matched(reference, other)
    assert found.converged.all()
    # aliased edges scatter by 0.8 mpx, in partial subsets by 1.1
    np.testing.assert_allclose(found.u, 0.4, atol=5e-3)
    np.testing.assert_allclose(found.v, -0.2, atol=5e-3)


def test_quadratic_shapes_follow_a_bow_that_affine_ones_cannot(photograph, prepared, matched):
    from synthetic_images import Displacement

    bow = Displacement(lambda X, Y: (5e-4 * (Y - 95) ** 2, 0 * X))
    image = photograph(bow)
    worst = {}
    for quadratic in (False, True):
        reference = prepared(photograph(), quadratic=quadratic)
        start = np.zeros((len(reference.x), 2 * len(reference.settings.shape)))
        start[:, 0] = 5e-4 * (reference.y - 95) ** 2
        start[:, 2] = 1e-3 * (reference.y - 95)
        found = matched(reference, image, start)
        assert found.converged.mean() > 0.95  # the outermost start beyond the rim
        worst[quadratic] = np.nanmax(np.abs(found.u - start[:, 0]))
    # an affine subset sees the mean of the bow over its height, 5e-4·(31² − 1)/12 = 0.04 px
    assert worst[False] > 0.03
    assert worst[True] < 8e-3  # aliased edges, 1.6 mpx for quadratic shapes, five of them


def test_flag_out_of_view(photograph, prepared, matched):
    reference = prepared(photograph())
    start = np.zeros((len(reference.x), 6))
    start[:, 0] = 30
    found = matched(reference, photograph(rigid(30, 0)), start)
    gone = reference.x + 15 + 30 > 259
    assert gone.any()
    assert (found.flag[gone] == Flag.OUT_OF_VIEW).all()
    assert np.isnan(found.u[gone]).all()
    assert found.converged[~gone].all()


def test_flag_decorrelated_or_not_converged_where_the_pattern_is_another(photograph, prepared, matched):
    reference = prepared(photograph())
    found = matched(reference, photograph(seed=99))
    assert np.isin(found.flag, [Flag.DECORRELATED, Flag.NOT_CONVERGED, Flag.OUT_OF_VIEW]).all()
    assert np.isnan(found.parameters).all()
    assert np.isnan(found.noise_grey)


def test_a_uniform_frame_is_never_data(photograph, prepared, matched):
    found = matched(prepared(photograph()), np.full((190, 260), 77, np.uint8))
    assert not found.converged.any()
    assert np.isnan(found.parameters).all()


def test_a_uniform_reference_has_no_usable_subset():
    from dic.correlation import lay_grid

    grid = lay_grid(np.ones((100, 120), bool), 31, 10)
    flat = np.full((100, 120), 5, np.uint8)
    reference = prepare_reference(flat, grid.x, grid.y, subset=31, settings=Settings())
    assert (reference.unusable == Flag.LOW_TEXTURE).all()
    assert not reference.usable.any()
