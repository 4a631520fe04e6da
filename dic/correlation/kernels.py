"""The inner loops: plain arrays in, plain arrays out, no options, no messages.

Every function here is called by others in this file only or through the fronts in `reference`,
`matching` and `dic.strain.precision`.  They stay together because Numba's disk cache does not notice
a change of a callee in another file.

The form that makes it fast: all that Gauss–Newton needs from the deformed image are sums that are
linear in the interpolated grey value (plus its square), so one pass over a subset gives them all.
Along a row the whole-pixel part of the displacement is constant for long runs; inside a run the
loads are contiguous and the B-spline weights are polynomials of a linear ramp, so the compiler
vectorises.  A run is worked off in whole blocks of eight, the surplus masked away.

Warp of a subset, with ξ, η counted from its centre: x = x₀+ξ + u + uₓξ + u_yη, y = y₀+η + v + vₓξ +
v_yη; the parameters stand in the order (u, uₓ, u_y, v, vₓ, v_y).
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numba import njit, prange

#: Reassociation and contraction let sums vectorise; NaN and infinity keep their meaning.
_FAST = {"reassoc", "contract", "nsz", "arcp"}
_F = np.float32
_U = np.uint64

# States that solve_subsets can report (values of flags.Flag).
_CONVERGED, _OUT_OF_VIEW, _NOT_CONVERGED, _DECORRELATED = 0, 3, 4, 5

#: Assumed ratio of the second step to the first; measured 0.003 to 0.02 for starts within 0.1 px.
_FIRST_RATE = 0.03


@njit(fastmath=_FAST, forceinline=True)
def _weights(t: Any) -> Any:
    """Quintic B-spline weights of the six taps around a point that lies t behind the third."""
    c = _F(1 / 120)
    t2 = t * t
    w0 = ((((_F(5) - t) * t - _F(10)) * t + _F(10)) * t - _F(5)) * t + _F(1)
    w1 = ((((_F(5) * t - _F(20)) * t + _F(20)) * t + _F(20)) * t - _F(50)) * t + _F(26)
    w2 = ((_F(30) - _F(10) * t) * t2 - _F(60)) * t2 + _F(66)
    w3 = ((((_F(10) * t - _F(20)) * t - _F(20)) * t + _F(20)) * t + _F(50)) * t + _F(26)
    w4 = ((((_F(5) - _F(5) * t) * t + _F(10)) * t + _F(10)) * t + _F(5)) * t + _F(1)
    w5 = t2 * t2 * t
    return w0 * c, w1 * c, w2 * c, w3 * c, w4 * c, w5 * c


@njit(fastmath=_FAST, forceinline=True)
def _row(c: Any, i: Any, w: Any) -> Any:
    return (
        w[0] * c[i] + w[1] * c[i + _U(1)] + w[2] * c[i + _U(2)]
        + w[3] * c[i + _U(3)] + w[4] * c[i + _U(4)] + w[5] * c[i + _U(5)]
    )  # fmt: skip


@njit(fastmath=_FAST, forceinline=True)
def _value(c: Any, i: Any, stride: Any, tx: Any, ty: Any) -> Any:
    """Interpolated grey value; i is the upper left of the 6 × 6 taps."""
    w, h = _weights(tx), _weights(ty)
    return (
        h[0] * _row(c, i, w)
        + h[1] * _row(c, i + stride, w)
        + h[2] * _row(c, i + _U(2) * stride, w)
        + h[3] * _row(c, i + _U(3) * stride, w)
        + h[4] * _row(c, i + _U(4) * stride, w)
        + h[5] * _row(c, i + _U(5) * stride, w)
    )


@njit(fastmath=_FAST, forceinline=True)
def _run(c: Any, i: Any, stride: Any, tx: Any, dtx: Any, ty: Any, dty: Any,
         f: Any, fx: Any, fy: Any, q: Any, n: Any, xi: Any) -> Any:  # fmt: skip
    """Return sums over one run of n pixels: g, g², gf, gfₓ, gf_y, gfₓξ, gf_yξ."""
    s, ss, sf, sx, sy, sxx, syx = _F(0), _F(0), _F(0), _F(0), _F(0), _F(0), _F(0)
    blocks = _U((n + 7) // 8) * _U(8)
    for k in range(blocks):
        ramp = _F(k)
        g = _value(c, i + k, stride, tx + ramp * dtx, ty + ramp * dty)
        g = g if k < _U(n) else _F(0)
        p = q + k
        gxi = g * (xi + ramp)
        s += g
        ss += g * g
        sf += g * f[p]
        sx += g * fx[p]
        sy += g * fy[p]
        sxx += gxi * fx[p]
        syx += gxi * fy[p]
    return s, ss, sf, sx, sy, sxx, syx


@njit(fastmath=_FAST, forceinline=True)
def _pixels_left(start: Any, slope: Any, n: Any) -> Any:
    """How many of n pixels keep the whole-pixel offset that the first one has."""
    room = np.floor(start) + 1.0 - start if slope > 0 else start - np.floor(start)
    if abs(slope) * n <= room:
        return n
    return min(n, int(room / abs(slope)) + 1)


@njit(fastmath=_FAST)
def _subset_sums(c: Any, stride: Any, margin: Any, f: Any, fx: Any, fy: Any, width: Any,
                 x: Any, y: Any, half: Any, p: Any, sums: Any) -> None:  # fmt: skip
    """Write sums over a whole subset: g, g², gf, then g times the six steepest-descent images."""
    sums[:] = 0.0
    side = 2 * half + 1
    for eta in range(-half, half + 1):
        left = p[0] + p[2] * eta - p[1] * half
        top = p[3] + p[5] * eta - p[4] * half
        done = 0
        while done < side:
            du, dv = left + p[1] * done, top + p[4] * done
            n = _pixels_left(du, p[1], side - done)
            n = _pixels_left(dv, p[4], n)
            iu, iv = int(np.floor(du)), int(np.floor(dv))
            column = x - half + done
            tap = _U((y + eta + iv + margin - 2) * stride + column + iu + margin - 2)
            s, ss, sf, sx, sy, sxx, syx = _run(
                c, tap, _U(stride), _F(du - iu), _F(p[1]), _F(dv - iv), _F(p[4]),
                f, fx, fy, _U((y + eta) * width + column), n, _F(done - half),
            )  # fmt: skip
            sums[0] += s
            sums[1] += ss
            sums[2] += sf
            sums[3] += sx
            sums[4] += sxx
            sums[5] += sx * eta
            sums[6] += sy
            sums[7] += syx
            sums[8] += sy * eta
            done += n


@njit(forceinline=True)
def _in_view(x: Any, y: Any, half: Any, p: Any, rows: Any, columns: Any) -> Any:
    for sx in (-half, half):
        for sy in (-half, half):
            px = x + sx + p[0] + p[1] * sx + p[2] * sy
            py = y + sy + p[3] + p[4] * sx + p[5] * sy
            if not (0.0 <= px <= columns - 1.0 and 0.0 <= py <= rows - 1.0):
                return False
    return True


@njit
def _compose_inverse(p: Any, d: Any) -> None:
    """Replace the warp p by p ∘ d⁻¹."""
    a, b, e, g = 1.0 + d[1], d[2], d[4], 1.0 + d[5]
    det = a * g - b * e
    ia, ib, ie, ig = g / det, -b / det, -e / det, a / det
    iu, iv = -(ia * d[0] + ib * d[3]), -(ie * d[0] + ig * d[3])
    p0, p1, p2, p3, p4, p5 = p[0], 1.0 + p[1], p[2], p[3], p[4], 1.0 + p[5]
    p[0] = p0 + p1 * iu + p2 * iv
    p[1] = p1 * ia + p2 * ie - 1.0
    p[2] = p1 * ib + p2 * ig
    p[3] = p3 + p4 * iu + p5 * iv
    p[4] = p4 * ia + p5 * ie
    p[5] = p4 * ib + p5 * ig - 1.0


@njit(parallel=True, cache=True)
def gram(f: Any, fx: Any, fy: Any, width: Any, xs: Any, ys: Any, half: Any) -> Any:
    """Sum the products of every two of (1, f, and the six steepest-descent images) over each subset.

    Parameters
    ----------
    f, fx, fy
        Reference grey and gradients, flat.
    width
        Elements per row.
    xs, ys, half
        Subset centres, shape (n,), and pixels on either side.

    Returns
    -------
    products
        Shape (n, 8, 8).
    """
    products = np.zeros((xs.size, 8, 8))
    for i in prange(xs.size):
        b = np.ones(8)
        for eta in range(-half, half + 1):
            for xi in range(-half, half + 1):
                q = (ys[i] + eta) * width + xs[i] + xi
                b[1] = f[q]
                _descent(fx[q], fy[q], xi, eta, b[2:])
                for k in range(8):
                    for m in range(k + 1):
                        products[i, k, m] += b[k] * b[m]
        for k in range(8):
            for m in range(k):
                products[i, m, k] = products[i, k, m]
    return products


@njit(forceinline=True)
def _descent(fx: Any, fy: Any, xi: Any, eta: Any, j: Any) -> None:
    j[0], j[1], j[2] = fx, fx * xi, fx * eta
    j[3], j[4], j[5] = fy, fy * xi, fy * eta


@njit(parallel=True, cache=True)
def solve_subsets(c: Any, stride: Any, margin: Any, rows: Any, columns: Any,
                  f: Any, fx: Any, fy: Any,
                  mean: Any, norm: Any, average: Any, along: Any, inverse: Any,
                  xs: Any, ys: Any, half: Any,
                  start: Any, tolerance: Any, most: Any, least: Any) -> Any:  # fmt: skip
    """Match every subset by inverse compositional Gauss–Newton on ZNSSD.

    Parameters
    ----------
    c, stride, margin
        Spline coefficients of the frame, flat and padded.
    rows, columns
        Size of the frame.
    f, fx, fy, mean, norm, average, along, inverse
        The prepared reference.
    xs, ys, half
        Subset centres and half width.
    start
        Starting parameters, shape (n, 6); a row with NaN is left alone and flagged not converged.
    tolerance
        Remaining error, px, below which the iteration stops.
    most
        Iterations at the most.
    least
        Correlation below which a match is refused.

    Returns
    -------
    p
        Parameters, shape (n, 6); NaN where not converged.
    correlation
        ZNCC at the solution, shape (n,).
    noise
        Root mean square residual in the reference's grey levels, shape (n,).
    flag, iterations
        Shape (n,).
    """
    count = xs.size
    p = np.full((count, 6), np.nan)
    correlation, noise = np.full(count, np.nan), np.full(count, np.nan)
    flag, iterations = np.full(count, _NOT_CONVERGED, np.uint8), np.zeros(count, np.uint8)
    pixels = (2 * half + 1) ** 2
    reach = half * half / 3.0
    for i in prange(count):
        q, sums, right, d = start[i].copy(), np.empty(9), np.empty(6), np.empty(6)
        before, zncc, left = 0.0, 0.0, 0.0
        state = _NOT_CONVERGED
        for iteration in range(most):
            if np.isnan(q.sum()):
                break
            if not _in_view(xs[i], ys[i], half, q, rows, columns):
                state = _OUT_OF_VIEW
                break
            _subset_sums(c, stride, margin, f, fx, fy, columns, xs[i], ys[i], half, q, sums)
            iterations[i] = iteration + 1
            gg = sums[1] - sums[0] * sums[0] / pixels
            if not gg > 0.0:
                state = _DECORRELATED
                break
            unit = (sums[2] - mean[i] * sums[0]) / norm[i]
            scale = norm[i] / np.sqrt(gg)
            for a in range(6):
                right[a] = sums[3 + a] - average[i, a] * sums[0] - along[i, a] * unit
            gain = 0.0
            for a in range(6):
                d[a] = 0.0
                for b in range(6):
                    d[a] += scale * inverse[i, a, b] * right[b]
                gain += d[a] * right[a]
            step = np.sqrt(
                d[0] * d[0] + d[3] * d[3]
                + reach * (d[1] * d[1] + d[2] * d[2] + d[4] * d[4] + d[5] * d[5])
            )  # fmt: skip
            if not step < half:
                break
            _compose_inverse(q, d)
            # What the step explains of the residual is known without another pass.
            zncc = unit / np.sqrt(gg)
            left = gg - unit * unit - gain / scale
            rate = _FIRST_RATE if iteration == 0 else min(1.0, step / before)
            if step * rate < tolerance:
                state = _CONVERGED
                break
            before = step
        if state == _CONVERGED:
            explained = 1.0 - max(left, 0.0) / (gg if gg > 0.0 else 1.0)
            zncc = np.sqrt(max(explained, 0.0)) if zncc > 0.0 else zncc
            if zncc < least:
                state = _DECORRELATED
            else:
                p[i] = q
                noise[i] = np.sqrt(max(left, 0.0) / (pixels - 8)) * scale
            correlation[i] = zncc
        flag[i] = state
    return p, correlation, noise, flag, iterations


@njit(cache=True)
def spread_weights(f: Any, fx: Any, fy: Any, width: Any, mean: Any, norm: Any, average: Any, along: Any,
                   inverse: Any, xs: Any, ys: Any, half: Any,
                   on_u: Any, on_v: Any, out: Any) -> None:  # fmt: skip
    """Add up how every pixel's grey enters a weighted sum of displacements.

    A gauge reads Σ (on_u·u + on_v·v); each u and v is a weighted sum of the grey values in its
    subset.  `out`, shape (rows, columns), receives the sum of those weights, so that overlapping
    subsets share their pixels' noise as they do in truth.
    """
    j, row = np.empty(6), np.empty(6)
    for i in range(xs.size):
        if on_u[i] == 0.0 and on_v[i] == 0.0:
            continue
        for a in range(6):
            row[a] = on_u[i] * inverse[i, 0, a] + on_v[i] * inverse[i, 3, a]
        steady, tied = 0.0, 0.0
        for a in range(6):
            steady += row[a] * average[i, a]
            tied += row[a] * along[i, a]
        for eta in range(-half, half + 1):
            for xi in range(-half, half + 1):
                q = (ys[i] + eta) * width + xs[i] + xi
                _descent(fx[q], fy[q], xi, eta, j)
                weight = -steady - tied * (f[q] - mean[i]) / norm[i]
                for a in range(6):
                    weight += row[a] * j[a]
                out[ys[i] + eta, xs[i] + xi] += weight
