"""Motions: exact inverses, and strains seen by finite differences."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from synthetic_images.motions import Affine, Bending, Displacement, Sinusoid, homogeneous, rigid, rotation

STRAIN = st.floats(-0.3, 0.5)
ANGLE = st.floats(-180, 180)
POINTS = np.random.default_rng(0).uniform(-600, 900, (2, 40))


def assert_inverse(motion):
    x, y = POINTS
    X, Y = motion.inverse(x, y)
    back_x, back_y = motion(X, Y)
    # The inverse is iterated to 1e-10 px; coordinates of 1000 px are rounded to 1e-13 and stretched.
    np.testing.assert_allclose(back_x, x, atol=1e-9, rtol=0)
    np.testing.assert_allclose(back_y, y, atol=1e-9, rtol=0)


def gradient(motion, X, Y, step=1e-3):
    """Central differences of the displacement: rows (uX, uY), (vX, vY), good to about 1e-10."""
    right, left = motion(X + step, Y), motion(X - step, Y)
    down, up = motion(X, Y + step), motion(X, Y - step)
    F = [
        [(right[0] - left[0]) / (2 * step), (down[0] - up[0]) / (2 * step)],
        [(right[1] - left[1]) / (2 * step), (down[1] - up[1]) / (2 * step)],
    ]
    return np.array(F, dtype=float) - np.eye(2)


def in_coupon_axes(H, angle_deg):
    """Turn a gradient to (transverse, axial), the axis clockwise from the vertical as seen."""
    a = np.radians(angle_deg)
    turn = np.array([[np.cos(a), np.sin(a)], [-np.sin(a), np.cos(a)]])
    return turn @ H @ turn.T


@given(STRAIN, STRAIN, st.floats(-0.2, 0.2), ANGLE, st.floats(-50, 50))
def test_homogeneous_strain_is_what_it_says(axial, transverse, shear, angle, shift):
    motion = homogeneous(
        axial, transverse, shear, axis_angle_deg=angle, centre=(170.0, 430.0), shift=(shift, -2 * shift)
    )
    assert_inverse(motion)
    H = in_coupon_axes(gradient(motion, 12.0, -7.0), angle)
    # Rounding of coordinates over the step: 1e-13 / 1e-3.
    np.testing.assert_allclose(H, [[transverse, shear / 2], [shear / 2, axial]], atol=1e-9)
    assert motion(170.0, 430.0) == pytest.approx((170 + shift, 430 - 2 * shift))


def test_axis_turns_clockwise_as_seen():
    """Turned clockwise by 30°, an axis that pointed down points down and to the left."""
    motion = homogeneous(0.1, 0.0, axis_angle_deg=30.0)
    along = np.array([-0.5, np.sqrt(3) / 2])
    np.testing.assert_allclose(motion(*along), 1.1 * along)
    np.testing.assert_allclose(rotation(30.0)(0.0, 1.0), along)


@given(STRAIN, STRAIN)
def test_quarter_turn_swaps_the_strains(axial, transverse):
    turned = homogeneous(axial, transverse, axis_angle_deg=90.0)
    np.testing.assert_allclose(turned(*POINTS), homogeneous(transverse, axial)(*POINTS), atol=1e-9)


@given(ANGLE, ANGLE)
def test_rotations_add(first, second):
    centre = (31.0, 77.0)
    once = rotation(first + second, centre)(*POINTS)
    twice = rotation(second, centre)(*rotation(first, centre)(*POINTS))
    np.testing.assert_allclose(once, twice, atol=1e-9)
    assert_inverse(rotation(first, centre))


@given(st.floats(-900, 900), st.floats(-900, 900))
def test_rigid_motion_is_the_same_everywhere(dx, dy):
    x, y = rigid(dx, dy)(*POINTS)
    np.testing.assert_allclose([x - POINTS[0], y - POINTS[1]], [[dx] * 40, [dy] * 40], atol=1e-12)
    assert_inverse(rigid(dx, dy))


@settings(deadline=None)  # the first call compiles
@given(ANGLE, st.floats(-2e-5, 2e-5), st.floats(-100, 100), st.floats(-400, 400))
def test_bending_adds_a_linear_axial_strain_and_no_shear(angle, curvature, across, along):
    axial, transverse, contraction, centre = 0.01, -0.003, 0.3, (160.0, 550.0)
    straight = homogeneous(axial, transverse, axis_angle_deg=angle, centre=centre, shift=(3.0, -9.0))
    motion = Bending(straight, angle, curvature, contraction)
    assert_inverse(motion)
    a = np.radians(angle)
    X = centre[0] + np.cos(a) * across - np.sin(a) * along
    Y = centre[1] + np.sin(a) * across + np.cos(a) * along
    H = in_coupon_axes(gradient(motion, X, Y), angle)
    # Differences of coordinates of 1000 px, as above.
    assert H[1, 1] == pytest.approx(axial + curvature * across, abs=1e-9)
    assert H[0, 0] == pytest.approx(transverse - contraction * curvature * across, abs=1e-9)
    assert H[0, 1] + H[1, 0] == pytest.approx(0.0, abs=2e-9)


@given(st.floats(-3, 3), st.floats(40, 300), ANGLE, ANGLE)
def test_sinusoid_inverse_and_amplitude(amplitude, wavelength, wave, along):
    motion = Sinusoid(amplitude, wavelength, wave, along, phase=0.4)
    assert_inverse(motion)
    x, y = motion(*POINTS)
    assert np.hypot(x - POINTS[0], y - POINTS[1]).max() <= abs(amplitude) + 1e-9
    # One wavelength further along the wave everything repeats.
    a = np.radians(wave)
    further = motion(POINTS[0] - np.sin(a) * wavelength, POINTS[1] + np.cos(a) * wavelength)
    np.testing.assert_allclose(further[0] + np.sin(a) * wavelength, x, atol=1e-9)
    np.testing.assert_allclose(further[1] - np.cos(a) * wavelength, y, atol=1e-9)


def test_any_function():
    motion = Displacement(lambda X, Y: (1e-4 * X * Y / 10, 0.5 * np.cos(X / 30) + 0.02 * Y))
    assert_inverse(motion)


def test_motions_that_fold_are_refused():
    with pytest.raises(ValueError, match="folds"):
        Sinusoid(10.0, 50.0)
    with pytest.raises(ValueError, match="no inverse"):
        Displacement(lambda X, Y: (-2.5 * X, 0 * Y)).inverse(*POINTS)
    with pytest.raises(ValueError, match="no inverse"):
        Bending(Affine(), 0.0, 0.1, 0.3).inverse(*POINTS)
