"""Images as B-splines: coefficients, values and gradients at the pixel centres.

Unser, Aldroubi, Eden 1993, doi 10.1109/78.193221 (exact prefilter for B-spline interpolation).
A light Gaussian smoothing of both images before the prefilter takes away what interpolation near
the Nyquist frequency would turn into bias; the measured evidence stands in the benchmarks.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy import ndimage

Image = NDArray[np.float32]

#: Rows and columns added on every side so that no tap falls outside the stored coefficients.
MARGIN = 8
#: Elements behind the last row that whole blocks of eight may read (and then mask away).
TAIL = 32

#: Quintic B-spline at the whole numbers −2…2, and its first derivative there.
_VALUE = np.array([1, 26, 66, 26, 1]) / 120
_SLOPE = np.array([1, 10, 0, -10, -1]) / 24


@dataclass(frozen=True)
class SplineImage:
    """An image's spline coefficients, flat and padded for the kernels.

    Attributes
    ----------
    coefficients
        float32, flat, rows of `stride` elements, `MARGIN` extra on every side, `TAIL` at the end.
    stride
        Elements per stored row.
    shape
        Rows and columns of the image itself.
    """

    coefficients: Image
    stride: int
    shape: tuple[int, int]


def smooth(image: NDArray[np.generic], sigma: float) -> Image:
    """Return the image as float32 about its mean, smoothed by a Gaussian of `sigma` px.

    Taking the mean away keeps the single-precision sums of the kernels accurate.
    """
    grey = image.astype(np.float32)
    grey -= grey.mean(dtype=np.float64)
    return blur(grey, sigma)


def blur(image: Image, sigma: float) -> Image:
    """Return the image smoothed by the Gaussian, cut at least three whole pixels from its centre."""
    if sigma == 0:
        return image
    return ndimage.gaussian_filter(image, sigma, mode="mirror", truncate=max(4.0, 3.0 / sigma))


def spline_image(smoothed: Image) -> SplineImage:
    """Prefilter a smoothed image into quintic B-spline coefficients."""
    padded = np.pad(_prefilter(smoothed), MARGIN, mode="reflect")
    return SplineImage(flat(padded), padded.shape[1], (smoothed.shape[0], smoothed.shape[1]))


def gradients(smoothed: Image) -> tuple[Image, Image]:
    """Return the spline's slope along x and along y at the pixel centres, same shape as the image."""
    coefficients = _prefilter(smoothed)
    along_x = _separable(coefficients, _VALUE, _SLOPE)
    along_y = _separable(coefficients, _SLOPE, _VALUE)
    return along_x, along_y


def flat(image: NDArray[np.float32]) -> Image:
    """Return the pixels in one row with `TAIL` zeros behind them."""
    return np.concatenate([image.ravel(), np.zeros(TAIL, np.float32)])


def _prefilter(image: Image) -> Image:
    return ndimage.spline_filter(image, order=5, output=np.float32, mode="mirror")


def _separable(image: Image, down: NDArray[np.float64], across: NDArray[np.float64]) -> Image:
    # correlate, not convolve: a positive slope weight sits on the left neighbour, hence the flip.
    rows = ndimage.correlate1d(image, across[::-1], axis=1, mode="mirror")
    return ndimage.correlate1d(rows, down[::-1], axis=0, mode="mirror")
