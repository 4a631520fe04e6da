"""How fine a displacement a subset still shows: sinusoids of falling wavelength, cut-off and noise."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray
from scenes import SIGMA, Settings, clean, grid_on, matched, noisy, reference_of, rigid, start_at
from scipy.optimize import brentq
from table import Bench

from synthetic_images import Sinusoid

SHAPE = (300, 960)
SUBSET = 31
AMPLITUDE = 0.2
#: Wavelengths in subsets.
WAVES = {
    False: np.array([2.0, 2.5, 3.0, 3.5, 4.0, 5.0, 7.0, 10.0]),
    True: np.array([1.1, 1.2, 1.3, 1.4, 1.6, 2.0, 2.5]),
}


def theory(quadratic: bool, wavelength: NDArray[np.float64]) -> NDArray[np.float64]:
    """Transfer of a least-squares polynomial at the middle of a subset to a sinusoid, by formula.

    Affine: a moving average, sin(πN/λ)/(N·sin(π/λ)) (Schreier & Sutton 2002, doi 10.1007/BF02410987).
    Quadratic: the Savitzky–Golay weights of order two (Savitzky & Golay 1964, doi 10.1021/ac60214a047).
    """
    m = SUBSET // 2
    x = np.arange(-m, m + 1)
    weights = np.ones(SUBSET) / SUBSET
    if quadratic:
        weights = 3 * (3 * m * m + 3 * m - 1 - 5 * x * x) / ((2 * m - 1) * (2 * m + 1) * (2 * m + 3))
    return np.array([float(weights @ np.cos(2 * np.pi * x / one)) for one in np.atleast_1d(wavelength)])


def cut_off(waves: NDArray[np.float64], transfer: NDArray[np.float64]) -> float:
    """Return the wavelength with a loss of 10 %, from a smooth line through the losses."""
    # the loss falls nearly with the square (affine) or the fourth power (quadratic) of the wavelength
    log = np.polynomial.Polynomial.fit(np.log(waves), np.log(np.maximum(1 - transfer, 1e-6)), 3)
    return float(np.exp(brentq(lambda w: log(w) - np.log(0.1), np.log(waves[0]), np.log(waves[-1]))))


def transfer_of(settings: Settings, wavelength: float) -> float:
    """Return how much of a sinusoid's amplitude is measured, without noise."""
    still = clean("sharp", rigid(0, 0), SHAPE)
    # waves run along x, displacement along x
    motion = Sinusoid(AMPLITUDE, wavelength, wave_deg=90.0, along_deg=90.0, phase=0.3)
    reference = reference_of(still, grid_on(SHAPE, SUBSET, step=7), settings)
    found = matched(reference, clean("sharp", motion, SHAPE), start_at(reference, motion))
    x, y = reference.x.astype(float), reference.y.astype(float)
    truth = motion(x, y)[0] - x
    good = np.isfinite(found.u)
    return float(found.u[good] @ truth[good] / (truth[good] @ truth[good]))


def noise_of(settings: Settings) -> float:
    still = clean("sharp", rigid(0, 0), SHAPE)
    errors = []
    for k in range(3):
        reference = reference_of(noisy(still, k), grid_on(SHAPE, SUBSET), settings)
        frame = noisy(clean("sharp", rigid(0.3, 0.2), SHAPE), 100 + k)
        errors.append(matched(reference, frame, start_at(reference, rigid(0.3, 0.2))).u - 0.3)
    return float(np.sqrt(np.nanmean(np.square(errors))))


def run() -> Bench:
    bench = Bench()
    curves = {}
    for quadratic in (False, True):
        name, settings = "quadratic" if quadratic else "affine", Settings(quadratic=quadratic)
        waves = WAVES[quadratic]
        measured = np.array([transfer_of(settings, SUBSET * wave) for wave in waves])
        expected = theory(quadratic, SUBSET * waves)
        curves[name], curves[f"{name}, formula"] = (waves, measured), (waves, expected)
        mine, its = cut_off(waves, measured), cut_off(waves, expected)
        bounds = {} if quadratic else {"low": 3.8, "high": 4.2}
        bench.add(f"{name}: wavelength with 10 % loss / subset", mine, **bounds)
        bench.add(f"{name}: the same by formula", its)
        bench.add(f"{name}: largest departure from the formula", np.abs(measured - expected).max())
        noise = noise_of(settings)
        bench.add(f"{name}: random error of u", 1e3 * noise, "mpx")
        bench.add(
            f"{name}: figure of merit, cut-off × noise / grey noise", mine * SUBSET * noise / SIGMA, "px²"
        )
    bench.curves.append(
        ("Transfer of a sinusoidal displacement", "wavelength / subset", "measured share", curves)
    )
    return bench
