"""Images as B-splines: coefficients for the kernels, only where they are needed.

A light Gaussian smoothing of all images before the prefilter takes away what interpolation near the
Nyquist frequency would turn into bias; the evidence stands in ``interpolation.md`` beside this file.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy import ndimage

from dic.correlation.filters import SPLINES, coefficient_filters, slope_filter, smoothing_filter
from dic.correlation.tiles import filter_tiles

Image = NDArray[np.float32]
Floats = NDArray[np.float64]

#: Rows and columns added on every side so that no tap falls outside the stored coefficients.
MARGIN = 8
#: Elements behind the last row that whole blocks of eight may read (and then mask away).
TAIL = 64
#: A tile and its halo fit the processor's second-level cache.
TILE_ROWS, TILE_COLUMNS = 96, 128


@dataclass(frozen=True)
class SplineImage:
    """An image's spline coefficients, flat and padded for the kernels.

    Attributes
    ----------
    coefficients
        float32, flat: planes of rows of `stride` elements, `MARGIN` px extra on every side, `TAIL` at
        the end.  With two samples per pixel there are four planes: whole or half rows, and within
        these whole or half columns.
    stride, plane
        Elements per stored row and per plane.
    shape
        Rows and columns of the image itself.
    kind
        A key of `dic.correlation.filters.SPLINES`.
    """

    coefficients: Image
    stride: int
    plane: int
    shape: tuple[int, int]
    kind: str

    @property
    def sampling(self) -> int:
        """Coefficients per pixel and direction."""
        return SPLINES[self.kind].sampling

    @property
    def taps(self) -> tuple[int, ...]:
        """Marker for the kernels, as long as the spline has taps each way."""
        return (0,) * SPLINES[self.kind].taps


class Prefilter:
    """Turns frames of one size into spline coefficients.

    Keeps its buffers, so that a sequence allocates nothing per frame: each call overwrites what the
    one before returned.

    Parameters
    ----------
    shape
        Rows and columns of the frames.
    kind
        Kind of spline.
    smoothing
        Sigma of the Gaussian applied first, px.
    """

    def __init__(self, shape: tuple[int, int], kind: str, smoothing: float) -> None:
        self.shape, self.kind, self.smoothing = shape, kind, smoothing
        filters = coefficient_filters(kind, smoothing)
        self._lead = max(len(one) for one in filters) // 2
        taps = -(-(2 * self._lead + 1) // 8) * 8
        self._filters = np.zeros((len(filters), taps), np.float32)
        for row, one in zip(self._filters, filters, strict=True):
            first = self._lead - len(one) // 2
            row[first : first + len(one)] = one
        self._stride = shape[1] + 2 * MARGIN
        self._plane = self._stride * (shape[0] + 2 * MARGIN)
        self._out = np.zeros(len(filters) ** 2 * self._plane + TAIL, np.float32)

    def __call__(self, image: NDArray[np.generic], boxes: Floats | None = None) -> SplineImage:
        """Filter a frame.

        Parameters
        ----------
        image
            Grey values as stored, shape (rows, columns).
        boxes
            Where coefficients are needed: left, top, right, bottom in px, shape (n, 4); None for the
            whole frame.  Elsewhere they keep what an earlier frame left.
        """
        tiles = self._tiles(boxes)
        # Grey about its middle keeps the single-precision sums of the kernels accurate.
        level = np.float32(image[::16, ::16].mean())
        filter_tiles(
            np.ascontiguousarray(image), level, self._filters, self._filters, self._lead,
            tiles, TILE_ROWS, TILE_COLUMNS, MARGIN, self._stride, self._plane, self._out,
        )  # fmt: skip
        return SplineImage(self._out, self._stride, self._plane, self.shape, self.kind)

    def _tiles(self, boxes: Floats | None) -> NDArray[np.int64]:
        """Return the upper left corners of all tiles that the boxes touch, in the padded image."""
        rows = -(-(self.shape[0] + 2 * MARGIN) // TILE_ROWS)
        columns = -(-(self.shape[1] + 2 * MARGIN) // TILE_COLUMNS)
        if boxes is None:
            needed = np.ones((rows, columns), bool)
        else:
            # Corners of a summed-area table: +1 where a box begins, −1 behind its end.
            edges = np.zeros((rows + 1, columns + 1), np.int64)
            padded = np.nan_to_num(boxes + MARGIN, nan=-1.0)
            left, right = (np.clip(padded[:, k] // TILE_COLUMNS, 0, columns - 1).astype(int) for k in (0, 2))
            top, bottom = (np.clip(padded[:, k] // TILE_ROWS, 0, rows - 1).astype(int) for k in (1, 3))
            np.add.at(edges, (top, left), 1)
            np.add.at(edges, (bottom + 1, right + 1), 1)
            np.add.at(edges, (top, right + 1), -1)
            np.add.at(edges, (bottom + 1, left), -1)
            needed = edges.cumsum(axis=0).cumsum(axis=1)[:-1, :-1] > 0
        return np.argwhere(needed) * np.array([TILE_ROWS, TILE_COLUMNS])


def spline_image(image: NDArray[np.generic], kind: str, smoothing: float) -> SplineImage:
    """Return the coefficients of one whole image; for a sequence use `Prefilter`."""
    return Prefilter((image.shape[0], image.shape[1]), kind, smoothing)(image)


def smooth(image: NDArray[np.generic], sigma: float) -> Image:
    """Return the image as float32 about its mean, smoothed by a Gaussian of `sigma` px."""
    grey = image.astype(float)
    return blur(grey - grey.mean(), sigma)


def blur(image: NDArray[np.floating], sigma: float) -> Image:
    """Return the image smoothed by a Gaussian of `sigma` px, as float32."""
    kernel = smoothing_filter(sigma)
    return _separable(image, kernel, kernel)


def gradients(image: NDArray[np.generic], kind: str, smoothing: float) -> tuple[Image, Image]:
    """Return the smoothed image's spline slopes along x and y at the pixel centres, same shape."""
    grey = image.astype(float)
    grey -= grey.mean()
    value, slope = smoothing_filter(smoothing), slope_filter(kind, smoothing)
    return _separable(grey, value, slope), _separable(grey, slope, value)


def flat(image: NDArray[np.float32]) -> Image:
    """Return the pixels in one row with `TAIL` zeros behind them."""
    return np.concatenate([image.ravel(), np.zeros(TAIL, np.float32)])


def _separable(image: NDArray[np.floating], down: Floats, across: Floats) -> Image:
    rows = ndimage.correlate1d(image, across, axis=1, mode="mirror")
    return np.asarray(ndimage.correlate1d(rows, down, axis=0, mode="mirror"), np.float32)
