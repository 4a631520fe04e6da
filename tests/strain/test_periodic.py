"""The periodic error: found where the test shows it, left alone where it does not."""

import numpy as np
import pytest

from dic.strain.periodic import Periodic, PeriodicSums, SmoothField, determine, periodic_error, periodic_sums

RNG = np.random.default_rng(8)
X, Y = (part.ravel().astype(float) for part in np.meshgrid(np.arange(0, 300, 15), np.arange(0, 900, 15)))
SIGMA = 3e-3


def sums(strain, amplitude, *, disturbed=0.0, noise=SIGMA, shift=0.0):
    field = SmoothField(X, Y)
    v = strain * Y + shift + disturbed * np.sin(Y / 40)
    u = -0.3 * strain * X + shift
    affine = np.zeros((len(X), 6))
    affine[:, 1], affine[:, 5] = -0.3 * strain, strain
    for column, w, slope in ((0, u, 0.3 * strain), (3, v, strain)):
        false = sum(
            size * np.sin(2 * np.pi * waves * w) * np.sinc(31 * waves * slope)
            for waves, size in ((1, amplitude), (2, -amplitude / 2))
        )
        affine[:, column] = w + false + RNG.normal(0, noise, w.shape)
    return periodic_sums(
        field, affine, periodic_error(affine, 31), np.full(X.shape, SIGMA), np.full(X.shape, SIGMA)
    )


def test_the_amplitude_is_found_within_its_uncertainty():
    """Twenty tests: the root mean square of error over uncertainty is 1 ± 16 %, three of them allowed."""
    found = [
        determine([sums(e, 6e-4, shift=e * 77) for e in np.linspace(0.004, 0.02, 40)]) for _ in range(20)
    ]
    assert all(one.applied == (True, True) and one.frames == 40 for one in found)
    for k, truth in enumerate((6e-4, -3e-4)):
        off = [(one.amplitudes_px[k] - truth) / one.u_amplitudes_px[k] for one in found]
        assert np.sqrt(np.mean(np.square(off))) == pytest.approx(1.0, abs=0.48)


def test_without_an_error_nothing_is_corrected():
    found = determine([sums(e, 0.0) for e in np.linspace(0.004, 0.02, 40)])
    assert found.applied == (False, False)
    assert (np.abs(found.amplitudes_px) < 3 * np.array(found.u_amplitudes_px)).all()


def test_small_displacements_do_not_determine_it():
    found = determine([sums(e, 6e-4) for e in np.linspace(0, 0.0008, 40)])
    assert found.applied == (False, False)
    assert np.isnan(found.amplitudes_px).all()


def test_strain_that_is_visibly_not_uniform_is_not_used():
    assert not sums(0.01, 6e-4, disturbed=0.05).usable
    assert sums(0.01, 6e-4).usable


def test_it_can_be_switched_off():
    frames = [sums(e, 6e-4) for e in np.linspace(0.004, 0.02, 40)]
    assert determine(frames, correct=False).applied == (False, False)
    assert determine([PeriodicSums()] * 9).frames == 0


def test_a_strained_subset_averages_the_sine():
    """By quadrature: the mean of sin(2π(u + uₓξ)) over 31 px; 2e-3 for the steps of the pixels."""
    xi = np.arange(-15, 16)
    affine = np.array([[0.2, 0.02, 0.0, 0.0, 0.0, 0.0]])
    for k in (0, 1):
        expected = np.mean(np.sin(2 * np.pi * (k + 1) * (0.2 + 0.02 * xi)))
        assert periodic_error(affine, 31)[k, 0, 0] == pytest.approx(expected, abs=2e-3)


def test_the_correction_takes_off_only_what_is_applied():
    known = Periodic((1e-3, 5e-4), (1e-5, 2e-4), 9, (True, False))
    size, spread = known.correction(np.array([[2.0, 7.0]]))
    assert size[0] == pytest.approx(2e-3)
    assert spread[0] == pytest.approx(2e-5)
