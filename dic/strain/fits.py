"""Local polynomial fits over windows with gaps: kernels on plain arrays.

All of them take fields that are padded by half a window, so that every window lies inside, `valid`
(0 or 1) of the same shape, the windows' corners `tops` and `lefts`, shape (m,), and the window's
`basis`, shape (window, window, p), and `weight`, shape (window, window).  On one thread: they see only
the windows with gaps, which are few, and waiting for a second thread would cost more.
"""

from __future__ import annotations

from typing import Any

import numpy as np

from dic.correlation.compiling import exactly_inlined, serial


@serial
def normals(valid: Any, tops: Any, lefts: Any, basis: Any, weight: Any) -> Any:
    """Return the matrices of the normal equations, shape (m, p, p)."""
    size, terms = weight.shape[0], basis.shape[2]
    out = np.zeros((tops.size, terms, terms))
    for n in range(tops.size):
        for i in range(size):
            for j in range(size):
                share = weight[i, j] * valid[tops[n] + i, lefts[n] + j]
                if share == 0.0:
                    continue
                for k in range(terms):
                    for m in range(terms):
                        out[n, k, m] += share * basis[i, j, k] * basis[i, j, m]
    return out


@exactly_inlined
def _shares(valid: Any, top: Any, left: Any, basis: Any, weight: Any, solving: Any) -> Any:
    """Return what each point of one window adds to the slopes along x and y, shape (window, window, 2)."""
    size, terms = weight.shape[0], basis.shape[2]
    share = np.zeros((size, size, 2))
    for i in range(size):
        for j in range(size):
            counts = weight[i, j] * valid[top + i, left + j]
            for k in range(terms):
                share[i, j, 0] += counts * solving[0, k] * basis[i, j, k]
                share[i, j, 1] += counts * solving[1, k] * basis[i, j, k]
    return share


@serial
def slopes(field: Any, valid: Any, tops: Any, lefts: Any, basis: Any, weight: Any, solving: Any) -> Any:
    """Return the slopes of fitted polynomials.

    Parameters
    ----------
    field
        Several components, 0 where not valid, shape (c, rows, columns).
    solving
        What turns moments into the slopes along x and y, shape (m, 2, p).

    Returns
    -------
    ndarray
        Shape (m, c, 2).
    """
    size = weight.shape[0]
    out = np.zeros((tops.size, field.shape[0], 2))
    for n in range(tops.size):
        share = _shares(valid, tops[n], lefts[n], basis, weight, solving[n])
        for c in range(field.shape[0]):
            for i in range(size):
                for j in range(size):
                    value = field[c, tops[n] + i, lefts[n] + j]
                    out[n, c, 0] += share[i, j, 0] * value
                    out[n, c, 1] += share[i, j, 1] * value
    return out


@serial
def covariances(
    valid: Any, tops: Any, lefts: Any, basis: Any, weight: Any, solving: Any, overlap: Any
) -> Any:
    """Return the covariance of both slopes for points that scatter with variance one.

    Parameters
    ----------
    solving
        As for `slopes`.
    overlap
        Correlation of two points by their distance in rows and columns, shape (reach, reach); farther
        ones are independent.

    Returns
    -------
    ndarray
        Variance along x, covariance, variance along y, shape (m, 3).
    """
    size, reach = weight.shape[0], overlap.shape[0]
    out = np.zeros((tops.size, 3))
    for n in range(tops.size):
        share = _shares(valid, tops[n], lefts[n], basis, weight, solving[n])
        for i in range(size):
            for j in range(size):
                along_x, along_y = 0.0, 0.0
                for r in range(max(0, i - reach + 1), min(size, i + reach)):
                    for s in range(max(0, j - reach + 1), min(size, j + reach)):
                        alike = overlap[abs(r - i), abs(s - j)]
                        along_x += alike * share[r, s, 0]
                        along_y += alike * share[r, s, 1]
                out[n, 0] += share[i, j, 0] * along_x
                out[n, 1] += share[i, j, 0] * along_y
                out[n, 2] += share[i, j, 1] * along_y
    return out
