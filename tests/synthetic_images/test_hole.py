"""The plate with a hole: its displacements against the published stresses."""

import numpy as np
import pytest

from synthetic_images import HoledPlate

PLATE = HoledPlate((3.0, -2.0), 100.0, 0.002, 0.3)


def strains(x, y, h=1e-3):
    """Return ∂u/∂x, ∂v/∂y and the shear angle by central differences, for a strain of 1 far away."""
    ux, vx = (
        (a - b) / (2 * h)
        for a, b in zip(PLATE.displacement(x + h, y), PLATE.displacement(x - h, y), strict=True)
    )
    uy, vy = (
        (a - b) / (2 * h)
        for a, b in zip(PLATE.displacement(x, y + h), PLATE.displacement(x, y - h), strict=True)
    )
    return ux / 0.002, vy / 0.002, (uy + vx) / 0.002


def around(radius, angle):
    """Return a point at an angle from the pull."""
    return 3.0 + radius * np.sin(angle), -2.0 + radius * np.cos(angle)


def test_the_displacements_give_kirschs_strain_everywhere():
    rng = np.random.default_rng(0)
    x, y = around(rng.uniform(101, 900, 500), rng.uniform(0, 2 * np.pi, 500))
    np.testing.assert_allclose(strains(x, y)[1] * 0.002, PLATE.axial(x, y), atol=1e-9)


def test_stress_at_the_edge_is_the_published_one():
    """Kirsch 1898: no traction on the hole, and σ(1 − 2·cos 2θ) along its edge: 3 at the sides, −1 above."""
    angle = np.linspace(0, 2 * np.pi, 40)
    exx, eyy, gxy = strains(*around(100.01, angle))
    s, c = np.sin(angle), np.cos(angle)
    radial = exx * s**2 + eyy * c**2 + gxy * s * c
    hoop = exx * c**2 + eyy * s**2 - gxy * s * c
    mixed = 2 * (exx - eyy) * s * c + gxy * (c**2 - s**2)
    # Plane stress, E = 1.  0.01 px beside the edge the shear stress is 4e-4, the strain 2.6 times that.
    np.testing.assert_allclose((radial + 0.3 * hoop) / 0.91, 0, atol=2e-3)
    np.testing.assert_allclose((hoop + 0.3 * radial) / 0.91, 1 - 2 * np.cos(2 * angle), atol=2e-3)
    np.testing.assert_allclose(mixed, 0, atol=2e-3)


def test_far_away_the_plate_is_stretched_evenly():
    exx, eyy, gxy = strains(*around(1e5, np.linspace(0, 6, 7)))
    np.testing.assert_allclose([exx, eyy, gxy], np.outer([-0.3, 1.0, 0.0], np.ones(7)), atol=1e-4)


def test_the_motion_comes_back_also_through_the_hole():
    x, y = np.random.default_rng(1).uniform(-150, 150, (2, 300))
    X, Y = PLATE.motion().inverse(*PLATE.motion()(x, y))
    np.testing.assert_allclose([X, Y], [x, y], atol=1e-8)


def test_the_hole_has_no_strain():
    assert np.isnan(PLATE.axial(3.0, 50.0))
    assert PLATE.axial(103.0, -2.0) == pytest.approx(0.006)
