"""Sums over the reference alone, and how its pixels enter a gauge: kernels on plain arrays."""

from __future__ import annotations

from typing import Any

import numpy as np
from numba import prange

from dic.correlation.compiling import exactly_inlined, parallel, serial


@exactly_inlined
def _descent(fx: Any, fy: Any, xi: Any, eta: Any, j: Any) -> None:
    """Steepest-descent images at one pixel; `j` has as many places as there are parameters."""
    count = j.size // 2
    for first, slope in ((0, fx), (count, fy)):
        j[first], j[first + 1], j[first + 2] = slope, slope * xi, slope * eta
        if count == 6:
            j[first + 3], j[first + 4], j[first + 5] = slope * xi * xi, slope * xi * eta, slope * eta * eta


@parallel
def gram(f: Any, fx: Any, fy: Any, m: Any, width: Any, xs: Any, ys: Any, half: Any, parameters: Any) -> Any:
    """Sum the products of every two of (1, f, and the steepest-descent images) over each subset.

    Parameters
    ----------
    f, fx, fy, m
        Reference grey, gradients and mask (0 or 1), flat.
    width
        Elements per row.
    xs, ys, half
        Subset centres, shape (n,), and pixels on either side.
    parameters
        6 or 12.

    Returns
    -------
    products
        Shape (n, 2 + parameters, 2 + parameters).
    """
    size = 2 + parameters
    products = np.zeros((xs.size, size, size))
    for i in prange(xs.size):
        b = np.ones(size)
        for eta in range(-half, half + 1):
            for xi in range(-half, half + 1):
                q = (ys[i] + eta) * width + xs[i] + xi
                if m[q] == 0:
                    continue
                b[1] = f[q]
                _descent(fx[q], fy[q], xi, eta, b[2:])
                for k in range(size):
                    for n in range(k + 1):
                        products[i, k, n] += b[k] * b[n]
        for k in range(size):
            for n in range(k):
                products[i, n, k] = products[i, k, n]
    return products


@serial
def spread_weights(f: Any, fx: Any, fy: Any, m: Any, width: Any, mean: Any, norm: Any, average: Any,
                   along: Any, inverse: Any, xs: Any, ys: Any, half: Any,
                   on: Any, out: Any) -> None:  # fmt: skip
    """Add up how every pixel's grey enters a weighted sum of the subsets' affine parameters.

    A gauge reads Σ on·(u, uₓ, u_y, v, vₓ, v_y), `on` of shape (n, 6); each parameter is a weighted sum
    of the grey values in its subset.  `out`, shape (rows, columns), receives the sum of those weights,
    so that overlapping subsets share their pixels' noise as they do in truth.
    """
    size = average.shape[1]
    j, row = np.empty(size), np.empty(size)
    for i in range(xs.size):
        row[:] = 0.0
        for k in range(6):
            which = k if k < 3 else size // 2 + k - 3
            for a in range(size):
                row[a] += on[i, k] * inverse[i, which, a]
        steady, tied = 0.0, 0.0
        for a in range(size):
            steady += row[a] * average[i, a]
            tied += row[a] * along[i, a]
        for eta in range(-half, half + 1):
            for xi in range(-half, half + 1):
                q = (ys[i] + eta) * width + xs[i] + xi
                if m[q] == 0:
                    continue
                _descent(fx[q], fy[q], xi, eta, j)
                weight = -steady - tied * (f[q] - mean[i]) / norm[i]
                for a in range(size):
                    weight += row[a] * j[a]
                out[ys[i] + eta, xs[i] + xi] += weight
