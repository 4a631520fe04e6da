"""The digital filters that turn grey values into B-spline coefficients.

Smoothing, exact prefilter and, for the twofold spline, the half-pixel samples are all linear and
separable, so each comes down to one short symmetric filter per direction.  It is computed from the
filters' transfer functions and cut where nothing is left that a camera could show.

Unser, Aldroubi, Eden 1993, doi 10.1109/78.193220 and 10.1109/78.193221.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cache

import numpy as np
from numpy.typing import NDArray
from scipy.interpolate import BSpline

Floats = NDArray[np.float64]

#: Taps below this share of the largest are left out: 0.0003 grey levels of 255.
NEGLIGIBLE = 1e-6
#: Length of the circle on which responses are worked out; far longer than any of them.
_CIRCLE = 256


@dataclass(frozen=True)
class Spline:
    """A kind of interpolation.

    Attributes
    ----------
    degree
        Degree of the B-spline in the inner loop; it has degree + 1 taps each way.
    sampling
        Coefficients per pixel and direction, 1 or 2.
    source
        Degree of the spline that gives the values between the pixels; `degree` where sampling is 1.
    """

    degree: int
    sampling: int
    source: int

    @property
    def taps(self) -> int:
        """Taps each way."""
        return self.degree + 1


#: The kinds that a test file can name.
SPLINES = {
    "cubic": Spline(3, 1, 3),
    "quintic": Spline(5, 1, 5),
    "septic": Spline(7, 1, 7),
    "twofold": Spline(3, 2, 7),
}


@cache
def coefficient_filters(kind: str, smoothing: float) -> tuple[Floats, ...]:
    """Return the filters from grey values to coefficients, one per phase, each of odd length.

    Parameters
    ----------
    kind
        A key of `SPLINES`.
    smoothing
        Sigma of the Gaussian applied first, px.

    Returns
    -------
    tuple of ndarray
        For sampling 1 one filter.  For sampling 2 those of the coefficients at whole pixels and half
        a pixel behind them.  Correlate: coefficient[i] = Σ filter[k]·grey[i + k − half].
    """
    spline = SPLINES[kind]
    fine = np.arange(_CIRCLE * spline.sampling)
    frequency = _frequencies(len(fine)) * spline.sampling  # cycles per pixel
    # Values of the source spline at the fine sampling, per unit grey at pixel 0 ...
    values = _smoothing(smoothing, frequency) / _sampled(spline.source, _frequencies(_CIRCLE))[fine % _CIRCLE]
    positions = (fine + len(fine) // 2) % len(fine) - len(fine) // 2
    values = values * np.fft.fft(bspline(spline.source, positions / spline.sampling)).real
    # ... then the inner loop's own prefilter on that sampling.
    values = values / _sampled(spline.degree, _frequencies(len(fine)))
    response = np.fft.ifft(values).real
    # A response tells where one pixel's grey goes; a filter tells where one coefficient's grey comes from.
    return tuple(
        _cut(np.roll(response[phase :: spline.sampling], _CIRCLE // 2))[::-1].copy()
        for phase in range(spline.sampling)
    )


@cache
def smoothing_filter(smoothing: float) -> Floats:
    """Return the Gaussian's own filter, odd length, sum one."""
    frequency = _frequencies(_CIRCLE)
    return _cut(np.roll(np.fft.ifft(_smoothing(smoothing, frequency)).real, _CIRCLE // 2))


@cache
def slope_filter(kind: str, smoothing: float) -> Floats:
    """Return the filter to the smoothed source spline's slope at the pixel centres, odd length."""
    source = SPLINES[kind].source
    k = np.arange(-8, 9)
    slope = BSpline.basis_element(np.arange(source + 2) - (source + 1) / 2, extrapolate=False).derivative()
    at = np.nan_to_num(slope(k.astype(float)))
    frequency = _frequencies(_CIRCLE)
    # A derivative is odd: its transfer function is imaginary.
    transfer = -1j * (at[None, :] * np.sin(2 * np.pi * frequency[:, None] * k[None, :])).sum(axis=1)
    full = transfer * _smoothing(smoothing, frequency) / _sampled(source, frequency)
    # Correlation runs the other way than convolution, hence the minus.
    return -_cut(np.roll(np.fft.ifft(full).real, _CIRCLE // 2))  # odd: turning it round is the minus


def bspline(degree: int, x: Floats) -> Floats:
    """Return the centred B-spline of a degree at x, from SciPy's own basis."""
    basis = BSpline.basis_element(np.arange(degree + 2) - (degree + 1) / 2, extrapolate=False)
    return np.nan_to_num(basis(x))


def _frequencies(n: int) -> Floats:
    return np.asarray(np.fft.fftfreq(n), float)


def _smoothing(sigma: float, frequency: Floats) -> Floats:
    """Transfer function of a Gaussian sampled at the pixels.

    The continuous one has a kink at Nyquist's frequency, which would make the response long.
    """
    if sigma == 0:
        return np.ones_like(frequency)
    k = np.arange(1, int(np.ceil(8 * sigma)) + 1)
    weights = np.exp(-0.5 * (k / sigma) ** 2)
    total = 1 + 2 * weights.sum()
    return (1 + 2 * (weights * np.cos(2 * np.pi * frequency[:, None] * k)).sum(axis=1)) / total


def _sampled(degree: int, frequency: Floats) -> Floats:
    """Transfer function of the B-spline sampled at whole numbers: what a prefilter inverts."""
    k = np.arange(-(degree // 2), degree // 2 + 1)
    return (bspline(degree, k.astype(float)) * np.cos(2 * np.pi * frequency[:, None] * k)).sum(axis=1)


def _cut(response: Floats) -> Floats:
    """Cut a response centred on the circle's middle to its significant taps, odd length."""
    middle = len(response) // 2
    significant = np.flatnonzero(np.abs(response) > NEGLIGIBLE * np.abs(response).max())
    half = int(np.abs(significant - middle).max())
    return np.ascontiguousarray(response[middle - half : middle + half + 1])


@cache
def noise_gains(kind: str, smoothing: float) -> tuple[float, float]:
    """Return the variances that white noise of variance one keeps in the pictures compared.

    Returns
    -------
    reference, frame
        After smoothing alone, and after smoothing and interpolation, mean over all sub-pixel places.
    """
    spline = SPLINES[kind]
    smoothed = float((smoothing_filter(smoothing) ** 2).sum())
    filters = coefficient_filters(kind, smoothing)
    half = max(len(one) for one in filters) // 2 + 8
    fine = np.zeros(spline.sampling * (2 * half + 1))
    for phase, one in enumerate(filters):
        # the coefficients around one pixel of grey one
        first = half - len(one) // 2
        fine[phase + spline.sampling * first :: spline.sampling][: len(one)] = one[::-1]
    places = np.arange(0, len(fine) - 1, 1 / 16)
    values = (fine[None, :] * bspline(spline.degree, places[:, None] - np.arange(len(fine))[None, :])).sum(
        axis=1
    )
    # sums over the places of one sub-pixel phase, then the mean over the phases
    between = float((values**2).sum()) / (16 * spline.sampling)
    return smoothed**2, between**2
