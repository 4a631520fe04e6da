"""The periodic error: found where the test shows it, left alone where it does not."""

import numpy as np
import pytest

from dic.strain.periodic import PeriodicSums, SmoothField, determine, periodic_sums

RNG = np.random.default_rng(8)
X, Y = (part.ravel().astype(float) for part in np.meshgrid(np.arange(0, 300, 15), np.arange(0, 900, 15)))
SIGMA = 3e-3


def sums(strain, amplitude, *, disturbed=0.0, noise=SIGMA, shift=0.0):
    field = SmoothField(X, Y)
    v = strain * Y + shift + disturbed * np.sin(Y / 40)
    u = -0.3 * strain * X + shift
    moved = [w + amplitude * np.sin(2 * np.pi * w) + RNG.normal(0, noise, w.shape) for w in (u, v)]
    return periodic_sums(field, *moved, np.full(X.shape, SIGMA), np.full(X.shape, SIGMA))


def test_the_amplitude_is_found_within_its_uncertainty():
    """Twenty tests: the root mean square of error over uncertainty is 1 ± 16 %, three of them allowed."""
    found = [
        determine([sums(e, 6e-4, shift=e * 77) for e in np.linspace(0.004, 0.02, 40)]) for _ in range(20)
    ]
    assert all(one.applied and one.frames == 40 for one in found)
    off = [(one.amplitude_px - 6e-4) / one.u_amplitude_px for one in found]
    assert np.sqrt(np.mean(np.square(off))) == pytest.approx(1.0, abs=0.48)


def test_without_an_error_nothing_is_corrected():
    found = determine([sums(e, 0.0) for e in np.linspace(0.004, 0.02, 40)])
    assert not found.applied
    assert abs(found.amplitude_px) < 3 * found.u_amplitude_px


def test_small_displacements_do_not_determine_it():
    found = determine([sums(e, 6e-4) for e in np.linspace(0, 0.0008, 40)])
    assert not found.applied
    assert np.isnan(found.amplitude_px)


def test_strain_that_is_visibly_not_uniform_is_not_used():
    assert not sums(0.01, 6e-4, disturbed=0.05).usable
    assert sums(0.01, 6e-4).usable


def test_it_can_be_switched_off():
    frames = [sums(e, 6e-4) for e in np.linspace(0.004, 0.02, 40)]
    assert not determine(frames, correct=False).applied
    assert determine([PeriodicSums()] * 9).frames == 0
