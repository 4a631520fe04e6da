"""Separable filtering of an image, tile by tile: kernels on plain arrays."""

from __future__ import annotations

from typing import Any

import numpy as np
from numba import prange

from dic.correlation.compiling import exactly_inlined, inlined, parallel

_F = np.float32
_U = np.uint64


@inlined
def _weigh(source: Any, offset: Any, stride: Any, weights: Any, target: Any, first: Any, n: Any) -> None:
    """target[first + i] = Σ weights[k]·source[offset + k·stride + i], eight taps at a time.

    `weights` holds a multiple of eight.  Eight taps per pass keep what is summed up in registers.
    """
    for i in range(_U(n)):
        target[first + i] = _F(0)
    for k in range(0, weights.size, 8):
        a0, a1, a2, a3 = weights[k], weights[k + 1], weights[k + 2], weights[k + 3]
        a4, a5, a6, a7 = weights[k + 4], weights[k + 5], weights[k + 6], weights[k + 7]
        o = offset + _U(k) * stride
        for i in range(_U(n)):
            target[first + i] += (
                a0 * source[o + i] + a1 * source[o + stride + i]
                + a2 * source[o + _U(2) * stride + i] + a3 * source[o + _U(3) * stride + i]
                + a4 * source[o + _U(4) * stride + i] + a5 * source[o + _U(5) * stride + i]
                + a6 * source[o + _U(6) * stride + i] + a7 * source[o + _U(7) * stride + i]
            )  # fmt: skip


@exactly_inlined
def _mirrored(i: Any, n: Any) -> Any:
    """Index of the pixel that a place beyond the rim repeats, mirrored about the outermost pixel."""
    if n == 1:
        return 0
    i = i % (2 * n - 2)
    return i if i < n else 2 * n - 2 - i


@parallel
def filter_tiles(image: Any, level: Any, down: Any, across: Any, lead: Any, tiles: Any, tile_rows: Any,
                 tile_columns: Any, margin: Any, stride: Any, plane: Any, out: Any) -> None:  # fmt: skip
    """Filter an image tile by tile with every pair of a vertical and a horizontal filter.

    Parameters
    ----------
    image, level
        Grey values as stored, shape (rows, columns), and the grey that is taken as zero.
    down, across
        Filters, shape (phases, taps), a multiple of eight taps each.
    lead
        Taps before a filter's middle.
    tiles
        Upper left corners of the tiles in the padded image, shape (n, 2), rows and columns.
    tile_rows, tile_columns
        Size of a tile.
    margin, stride, plane
        Layout of the result: pixels of margin on every side, elements per row and per plane.
    out
        Result, flat: one plane per pair of phases, the vertical phase counting first.
    """
    rows, columns = image.shape
    taps = down.shape[1]
    for t in prange(tiles.shape[0]):
        height = min(tile_rows, rows + 2 * margin - tiles[t, 0])
        width = min(tile_columns, columns + 2 * margin - tiles[t, 1])
        wide = width + taps
        grey = np.empty((height + taps) * wide, np.float32)
        part = np.empty(height * wide, np.float32)
        for r in range(height + taps):
            row = _mirrored(tiles[t, 0] + r - lead - margin, rows)
            first = tiles[t, 1] - lead - margin
            if first >= 0 and first + wide <= columns:
                for i in range(wide):
                    grey[r * wide + i] = _F(image[row, first + i]) - level
            else:
                for i in range(wide):
                    grey[r * wide + i] = _F(image[row, _mirrored(first + i, columns)]) - level
        for vertical in range(down.shape[0]):
            for r in range(height):
                _weigh(grey, _U(r * wide), _U(wide), down[vertical], part, _U(r * wide), wide)
            for horizontal in range(across.shape[0]):
                base = (vertical * across.shape[0] + horizontal) * plane + tiles[t, 0] * stride + tiles[t, 1]
                for r in range(height):
                    _weigh(part, _U(r * wide), _U(1), across[horizontal], out, _U(base + r * stride), width)
