"""Grey noise as the matching feels it.

The residual holds more than camera noise: sharp edges are aliased by the pixels, and no interpolation
matches them wholly.  That part is fine-grained and hardly moves a subset, while the residual's plain
mean square counts it fully and would overstate the uncertainty.  What counts for a displacement is the
residual's power where the gradients have theirs.  So residual and gradients are correlated with
themselves over a few pixels, and the product is compared with the one that white noise, smoothed and
fitted in the same way, would give.

This is the idea of covariances that stay true under correlated errors (Newey & West 1987,
doi 10.2307/1913610), pooled over subsets.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy import fft

from dic.correlation.filters import smoothing_filter
from dic.correlation.kernels import residuals
from dic.correlation.reference import Reference
from dic.correlation.splines import MARGIN, SplineImage

Floats = NDArray[np.float64]

#: Lags, px, over which smoothed noise still resembles itself.
LAGS = 3
#: Subsets that are looked at in each frame: 32 hold thousands of independent pixels.
SAMPLE = 32


@dataclass(frozen=True)
class NoiseProbe:
    """Subsets of a reference in which the noise is looked at.

    Attributes
    ----------
    which
        Their numbers, shape (k,).
    gradients
        Autocorrelation of their gradients over the lags, shape (k, 2·LAGS + 1, 2·LAGS + 1).
    expected
        What white raw noise of variance one in one frame would give of residual's autocorrelation times
        gradients', before the two pictures' shares are added, shape (k,).
    """

    which: NDArray[np.int64]
    gradients: Floats
    expected: Floats

    def felt(self, reference: Reference, frame: SplineImage, parameters: Floats, gain: float) -> float:
        """Return the grey noise of one raw frame, grey levels; NaN where no sampled subset was measured.

        Parameters
        ----------
        reference, frame
            What was matched.
        parameters
            The solution, shape (n, p).
        gain
            `dic.correlation.matching.residual_gain`.
        """
        good = np.isfinite(parameters[self.which]).all(axis=1)
        if not good.any():
            return float("nan")
        some, kit = self.which[good], reference.estimator
        left = residuals(
            frame.taps, reference.settings.shape, frame.coefficients, frame.sampling, frame.stride,
            frame.plane, MARGIN, reference.f, reference.mask, reference.shape[1], kit.mean[some],
            kit.norm[some], reference.x[some], reference.y[some], reference.half, parameters[some],
        )  # fmt: skip
        found = (_autocorrelation(left) * self.gradients[good]).sum()
        return float(np.sqrt(max(found, 0.0) / (gain * self.expected[good].sum())))


def probe_noise(reference: Reference) -> NoiseProbe:
    """Choose subsets evenly among the usable ones and work out what white noise would leave in them."""
    usable = np.flatnonzero(reference.usable)
    which = (
        usable[np.linspace(0, len(usable) - 1, min(SAMPLE, len(usable))).astype(int)]
        if len(usable)
        else usable
    )
    gradients = np.empty((len(which), 2 * LAGS + 1, 2 * LAGS + 1))
    expected = np.empty(len(which))
    for k, number in enumerate(which):
        f, fx, fy, m = (_patch(part, reference, number) for part in
                        (reference.f, reference.fx, reference.fy, reference.mask))  # fmt: skip
        gradients[k] = _autocorrelation(np.stack([fx * m, fy * m])).sum(axis=0)
        expected[k] = (gradients[k] * _noise_after_fit(f, fx, fy, m, reference)).sum()
    return NoiseProbe(which, gradients, expected)


def _patch(flat: NDArray[np.float32], reference: Reference, number: int) -> Floats:
    picture = flat[: reference.shape[0] * reference.shape[1]].reshape(reference.shape)
    x, y, half = reference.x[number], reference.y[number], reference.half
    return picture[y - half : y + half + 1, x - half : x + half + 1].astype(float)


def _noise_after_fit(f: Floats, fx: Floats, fy: Floats, m: Floats, reference: Reference) -> Floats:
    """Return the autocorrelation that smoothed white noise has left after the fit, over the lags.

    With Q an orthonormal basis of what is fitted and Σ the smoothed noise's covariance, the residual's
    covariance is (1 − QQᵀ)·Σ·(1 − QQᵀ).
    """
    half = reference.half
    eta, xi = np.mgrid[-half : half + 1, -half : half + 1].astype(float)
    powers = [np.ones_like(xi), xi, eta]
    if reference.settings.quadratic:
        powers += [xi * xi, xi * eta, eta * eta]
    columns = [np.ones_like(f), f, *(slope * power for slope in (fx, fy) for power in powers)]
    scaled = np.stack([(column * m).ravel() / max(np.abs(column).max(), 1e-30) for column in columns], axis=1)
    basis = np.linalg.qr(scaled)[0].T.reshape(-1, *f.shape)
    kernel = smoothing_filter(reference.settings.smoothing)
    kernel = np.convolve(kernel, kernel)
    reach = len(kernel) // 2
    lags = np.arange(-LAGS, LAGS + 1)
    one = np.where(np.abs(lags) <= reach, kernel[np.clip(lags + reach, 0, 2 * reach)], 0.0)
    white = _autocorrelation(m[None])[0] * one[:, None] * one[None, :]
    passed = np.stack([_convolved(image, kernel) * m for image in basis])
    inner = np.einsum("iab,jab->ij", basis, passed)
    mixed = np.einsum("ij,jab->iab", inner, basis)
    # QQᵀΣ + ΣQQᵀ − QQᵀΣQQᵀ, summed along its diagonals
    return white - (2 * _correlation(basis, passed) - _correlation(basis, mixed)).sum(axis=0)


def _convolved(image: Floats, kernel: Floats) -> Floats:
    rows = np.apply_along_axis(np.convolve, 1, image, kernel, "same")
    return np.apply_along_axis(np.convolve, 0, rows, kernel, "same")


def _autocorrelation(images: Floats) -> Floats:
    return _correlation(images, images)


def _correlation(one: Floats, other: Floats) -> Floats:
    """Return Σ one(p)·other(p + d), made even in d, over lags up to LAGS, (k, 2·LAGS + 1, 2·LAGS + 1)."""
    size = [fft.next_fast_len(edge + LAGS, real=True) for edge in one.shape[1:]]
    spectrum = np.conj(fft.rfft2(one, size)) * fft.rfft2(other, size)
    sums = fft.irfft2(spectrum, size)
    lags = np.arange(-LAGS, LAGS + 1)
    sums = sums[:, lags[:, None], lags[None, :]]
    return (sums + sums[:, ::-1, ::-1]) / 2
