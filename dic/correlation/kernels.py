"""The inner loops: plain arrays in, plain arrays out, no options, no messages.

Every function here is called by others in this file only or through the fronts in `matching` and
`noise`.  They stay together because Numba's disk cache does not notice a change of a callee in another
file; `moments` and `tiles` hold the kernels that stand alone.

The form that makes it fast: all that Gauss–Newton needs from the deformed image are sums that are
linear in the interpolated grey value (plus its square), so one pass over a subset gives them all.
Along a row the whole-pixel part of the displacement is constant for long runs; inside a run the
loads are contiguous and the B-spline weights are polynomials of a linear ramp, so the compiler
vectorises.  A run is worked off in whole blocks of eight, the surplus masked away.

Warp of a subset, with ξ, η counted from its centre: x = x₀+ξ + u(ξ, η), y = y₀+η + v(ξ, η).  The
parameters are the coefficients of u and then of v in the powers (1, ξ, η), for the quadratic shape
(1, ξ, η, ξ², ξη, η²).

Two arguments are never read, only counted: `taps`, a tuple as long as the spline has taps each way,
and `shape`, one as long as u has parameters.  Their lengths are types, so that each combination is
compiled on its own, with the branches on them already taken.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numba import prange

from dic.correlation.compiling import exact, exactly_inlined, fast, inlined, parallel

_F = np.float32
_U = np.uint64

# States that solve_subsets can report (values of flags.Flag).
_CONVERGED, _OUT_OF_VIEW, _NOT_CONVERGED, _DECORRELATED = 0, 3, 4, 5

#: Assumed ratio of the second step to the first.  Measured with 1 % grey noise, first steps of 4 to
#: 50 mpx: 0.003 on sharp dots, 0.009 on smooth texture.
_FIRST_RATE = 0.01


# ---- B-spline values -------------------------------------------------------------------------


@inlined
def _weights4(t: Any) -> Any:
    """Cubic B-spline weights of four taps; the point lies t behind the second."""
    s, t2 = _F(1) - t, t * t
    t3 = t2 * t
    return (
        s * s * s * _F(1 / 6),
        _F(2 / 3) - t2 + _F(0.5) * t3,
        _F(1 / 6) + _F(0.5) * (t + t2 - t3),
        t3 * _F(1 / 6),
    )


@inlined
def _weights6(t: Any) -> Any:
    """Quintic B-spline weights of six taps; the point lies t behind the third."""
    c, t2 = _F(1 / 120), t * t
    w0 = ((((_F(5) - t) * t - _F(10)) * t + _F(10)) * t - _F(5)) * t + _F(1)
    w1 = ((((_F(5) * t - _F(20)) * t + _F(20)) * t + _F(20)) * t - _F(50)) * t + _F(26)
    w2 = ((_F(30) - _F(10) * t) * t2 - _F(60)) * t2 + _F(66)
    w3 = ((((_F(10) * t - _F(20)) * t - _F(20)) * t + _F(20)) * t + _F(50)) * t + _F(26)
    w4 = ((((_F(5) - _F(5) * t) * t + _F(10)) * t + _F(10)) * t + _F(5)) * t + _F(1)
    w5 = t2 * t2 * t
    return w0 * c, w1 * c, w2 * c, w3 * c, w4 * c, w5 * c


@inlined
def _weights8(t: Any) -> Any:
    """Septic B-spline weights of eight taps; the point lies t behind the fourth."""
    c = _F(1 / 5040)
    s, t2 = _F(1) - t, t * t
    s2, t3 = s * s, t2 * t
    s3 = s2 * s
    w0 = s3 * s3 * s
    w7 = t3 * t3 * t
    w1 = _septic_next(s)
    w6 = _septic_next(t)
    w2 = _septic_third(s)
    w5 = _septic_third(t)
    w3 = _septic_middle(s)
    w4 = _septic_middle(t)
    return w0 * c, w1 * c, w2 * c, w3 * c, w4 * c, w5 * c, w6 * c, w7 * c


@inlined
def _septic_next(t: Any) -> Any:
    return (
        (((((_F(-7) * t + _F(7)) * t + _F(21)) * t + _F(35)) * t + _F(35)) * t + _F(21)) * t + _F(7)
    ) * t + _F(1)


@inlined
def _septic_third(t: Any) -> Any:
    return (
        (((((_F(21) * t - _F(42)) * t - _F(84)) * t) * t + _F(280)) * t + _F(504)) * t + _F(392)
    ) * t + _F(120)


@inlined
def _septic_middle(t: Any) -> Any:
    return (
        (((((_F(-35) * t + _F(105)) * t + _F(105)) * t - _F(315)) * t - _F(665)) * t + _F(315)) * t + _F(1715)
    ) * t + _F(1191)


@inlined
def _row4(c: Any, r: Any, o: Any, w: Any) -> Any:
    return w[0] * c[r + o[0]] + w[1] * c[r + o[1]] + w[2] * c[r + o[2]] + w[3] * c[r + o[3]]


@inlined
def _row6(c: Any, i: Any, w: Any) -> Any:
    return (
        w[0] * c[i] + w[1] * c[i + _U(1)] + w[2] * c[i + _U(2)]
        + w[3] * c[i + _U(3)] + w[4] * c[i + _U(4)] + w[5] * c[i + _U(5)]
    )  # fmt: skip


@inlined
def _row8(c: Any, i: Any, w: Any) -> Any:
    return (
        w[0] * c[i] + w[1] * c[i + _U(1)] + w[2] * c[i + _U(2)] + w[3] * c[i + _U(3)]
        + w[4] * c[i + _U(4)] + w[5] * c[i + _U(5)] + w[6] * c[i + _U(6)] + w[7] * c[i + _U(7)]
    )  # fmt: skip


@inlined
def _value(taps: Any, c: Any, k: Any, r: Any, o: Any, tx: Any, ty: Any) -> Any:
    """Interpolated grey value k pixels into a run.

    `r` and `o` are the places of the first four rows and columns of taps; with six or eight taps
    the others follow at the same distance.
    """
    if len(taps) == 4:
        w, h = _weights4(tx), _weights4(ty)
        return (
            h[0] * _row4(c, r[0] + k, o, w)
            + h[1] * _row4(c, r[1] + k, o, w)
            + h[2] * _row4(c, r[2] + k, o, w)
            + h[3] * _row4(c, r[3] + k, o, w)
        )
    i, stride = r[0] + o[0] + k, r[1] - r[0]
    if len(taps) == 6:
        w, h = _weights6(tx), _weights6(ty)
        return (
            h[0] * _row6(c, i, w)
            + h[1] * _row6(c, i + stride, w)
            + h[2] * _row6(c, i + _U(2) * stride, w)
            + h[3] * _row6(c, i + _U(3) * stride, w)
            + h[4] * _row6(c, i + _U(4) * stride, w)
            + h[5] * _row6(c, i + _U(5) * stride, w)
        )
    w, h = _weights8(tx), _weights8(ty)
    return (
        h[0] * _row8(c, i, w)
        + h[1] * _row8(c, i + stride, w)
        + h[2] * _row8(c, i + _U(2) * stride, w)
        + h[3] * _row8(c, i + _U(3) * stride, w)
        + h[4] * _row8(c, i + _U(4) * stride, w)
        + h[5] * _row8(c, i + _U(5) * stride, w)
        + h[6] * _row8(c, i + _U(6) * stride, w)
        + h[7] * _row8(c, i + _U(7) * stride, w)
    )


# ---- Sums over a subset ----------------------------------------------------------------------


@inlined
def _run(taps: Any, shape: Any, c: Any, r: Any, o: Any, tx: Any, dtx: Any, ddtx: Any,
         ty: Any, dty: Any, ddty: Any, f: Any, fx: Any, fy: Any, m: Any,
         q: Any, n: Any, xi: Any) -> Any:  # fmt: skip
    """Return sums over one run of n pixels: g, g², gf, and g times fₓ, fₓξ, fₓξ², f_y, f_yξ, f_yξ²."""
    s, ss, sf = _F(0), _F(0), _F(0)
    x0, x1, x2, y0, y1, y2 = _F(0), _F(0), _F(0), _F(0), _F(0), _F(0)
    blocks = _U((n + 7) // 8) * _U(8)
    for k in range(blocks):
        ramp = _F(k)
        if len(shape) == 3:
            g = _value(taps, c, k, r, o, tx + ramp * dtx, ty + ramp * dty)
        else:
            g = _value(taps, c, k, r, o, tx + ramp * (dtx + ramp * ddtx), ty + ramp * (dty + ramp * ddty))
        p = q + k
        g = g * m[p] if k < _U(n) else _F(0)
        gxi = g * (xi + ramp)
        s += g
        ss += g * g
        sf += g * f[p]
        x0 += g * fx[p]
        y0 += g * fy[p]
        x1 += gxi * fx[p]
        y1 += gxi * fy[p]
        if len(shape) == 6:
            gxx = gxi * (xi + ramp)
            x2 += gxx * fx[p]
            y2 += gxx * fy[p]
    return s, ss, sf, x0, x1, x2, y0, y1, y2


@inlined
def _pixels_left(start: Any, slope: Any, n: Any) -> Any:
    """How many of n pixels keep the whole-pixel offset that the first one has, on a linear ramp."""
    room = np.floor(start) + 1.0 - start if slope > 0 else start - np.floor(start)
    if abs(slope) * n <= room:
        return n
    return min(n, int(room / abs(slope)) + 1)


@exactly_inlined
def _pixels_left_on_a_bow(start: Any, slope: Any, bow: Any, n: Any) -> Any:
    """Do the same on a quadratic ramp, where the offset may turn back: look pixel by pixel."""
    whole = np.floor(start)
    for k in range(1, n):
        if np.floor(start + k * (slope + k * bow)) != whole:
            return k
    return n


@exactly_inlined
def _tap_row(index: Any, sampling: Any, stride: Any, plane: Any) -> Any:
    """Where a row of coefficients lies: with two samples per pixel, odd rows are planes of their own."""
    if sampling == 1:
        return _U(index * stride)
    return _U((index & 1) * 2 * plane + (index >> 1) * stride)


@exactly_inlined
def _tap_column(index: Any, sampling: Any, plane: Any) -> Any:
    if sampling == 1:
        return _U(index)
    return _U((index & 1) * plane + (index >> 1))


@exactly_inlined
def _taps_at(column: Any, row: Any, sampling: Any, stride: Any, plane: Any) -> Any:
    """Return the places of the first four rows and columns of taps."""
    return (
        (
            _tap_row(row, sampling, stride, plane), _tap_row(row + 1, sampling, stride, plane),
            _tap_row(row + 2, sampling, stride, plane), _tap_row(row + 3, sampling, stride, plane),
        ),
        (
            _tap_column(column, sampling, plane), _tap_column(column + 1, sampling, plane),
            _tap_column(column + 2, sampling, plane), _tap_column(column + 3, sampling, plane),
        ),
    )  # fmt: skip


@fast
def _subset_sums(taps: Any, shape: Any, c: Any, sampling: Any, stride: Any, plane: Any, margin: Any,
                 f: Any, fx: Any, fy: Any, m: Any, width: Any,
                 x: Any, y: Any, half: Any, p: Any, sums: Any) -> None:  # fmt: skip
    """Write sums over a whole subset: g, g², gf, then g times the steepest-descent images."""
    sums[:] = 0.0
    side = 2 * half + 1
    count = len(shape)
    back = len(taps) // 2 - 1
    for eta in range(-half, half + 1):
        left = p[0] + p[2] * eta - p[1] * half
        top = p[count] + p[count + 2] * eta - p[count + 1] * half
        dx, dy, ddx, ddy = p[1], p[count + 1], 0.0, 0.0
        if len(shape) == 6:
            left += p[3] * half * half - p[4] * half * eta + p[5] * eta * eta
            top += p[count + 3] * half * half - p[count + 4] * half * eta + p[count + 5] * eta * eta
            dx += p[4] * eta - 2.0 * p[3] * half
            dy += p[count + 4] * eta - 2.0 * p[count + 3] * half
            ddx, ddy = p[3], p[count + 3]
        done = 0
        while done < side:
            # in units of the coefficients' sampling
            du = sampling * (left + done * (dx + done * ddx))
            dv = sampling * (top + done * (dy + done * ddy))
            slope_x, slope_y = sampling * (dx + 2.0 * done * ddx), sampling * (dy + 2.0 * done * ddy)
            if len(shape) == 3:
                n = _pixels_left(dv, slope_y, _pixels_left(du, slope_x, side - done))
            else:
                n = _pixels_left_on_a_bow(du, slope_x, sampling * ddx, side - done)
                n = _pixels_left_on_a_bow(dv, slope_y, sampling * ddy, n)
            iu, iv = int(np.floor(du)), int(np.floor(dv))
            column = x - half + done
            u = sampling * (column + margin) + iu - back
            v = sampling * (y + eta + margin) + iv - back
            r, o = _taps_at(u, v, sampling, stride, plane)
            s, ss, sf, x0, x1, x2, y0, y1, y2 = _run(
                taps, shape, c, r, o,
                _F(du - iu), _F(slope_x), _F(sampling * ddx), _F(dv - iv), _F(slope_y), _F(sampling * ddy),
                f, fx, fy, m, _U((y + eta) * width + column), n, _F(done - half),
            )  # fmt: skip
            sums[0] += s
            sums[1] += ss
            sums[2] += sf
            sums[3] += x0
            sums[4] += x1
            sums[5] += x0 * eta
            sums[3 + count] += y0
            sums[4 + count] += y1
            sums[5 + count] += y0 * eta
            if len(shape) == 6:
                sums[6] += x2
                sums[7] += x1 * eta
                sums[8] += x0 * (eta * eta)
                sums[6 + count] += y2
                sums[7 + count] += y1 * eta
                sums[8 + count] += y0 * (eta * eta)
            done += n


# ---- Warps -----------------------------------------------------------------------------------


@exactly_inlined
def _displaced(shape: Any, p: Any, first: Any, xi: Any, eta: Any) -> Any:
    """Displacement component whose parameters begin at `first`."""
    d = p[first] + p[first + 1] * xi + p[first + 2] * eta
    if len(shape) == 6:
        d += p[first + 3] * xi * xi + p[first + 4] * xi * eta + p[first + 5] * eta * eta
    return d


@exactly_inlined
def _in_view(shape: Any, x: Any, y: Any, half: Any, p: Any, rows: Any, columns: Any) -> Any:
    for xi in (-half, half):
        for eta in (-half, half):
            px = x + xi + _displaced(shape, p, 0, xi, eta)
            py = y + eta + _displaced(shape, p, len(shape), xi, eta)
            if not (0.0 <= px <= columns - 1.0 and 0.0 <= py <= rows - 1.0):
                return False
    return True


@exact
def _compose_inverse(shape: Any, p: Any, d: Any) -> None:
    """Replace the warp p by p ∘ d⁻¹: exactly for affine shapes, to first order in d for quadratic ones.

    What the quadratic form leaves out vanishes with the step, so the solution is the same.
    """
    if len(shape) == 3:
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
    else:
        q = p.copy()
        for k in (0, 6):
            # p(ξ − d(ξ)) − d(ξ), cut behind the second power
            gx, gxx, gxy = q[k + 1], 2.0 * q[k + 3], q[k + 4]
            gy, gyx, gyy = q[k + 2], q[k + 4], 2.0 * q[k + 5]
            for power in range(6):
                p[k + power] -= d[k + power] + gx * d[power] + gy * d[6 + power]
            p[k + 1] -= gxx * d[0] + gyx * d[6]
            p[k + 2] -= gxy * d[0] + gyy * d[6]
            p[k + 3] -= gxx * d[1] + gyx * d[7]
            p[k + 4] -= gxx * d[2] + gxy * d[1] + gyx * d[8] + gyy * d[7]
            p[k + 5] -= gxy * d[2] + gyy * d[8]


# ---- Whole subsets ---------------------------------------------------------------------------


@parallel
def solve_subsets(taps: Any, shape: Any, c: Any, sampling: Any, stride: Any, plane: Any, margin: Any,
                  rows: Any, columns: Any, f: Any, fx: Any, fy: Any, m: Any,
                  pixels: Any, mean: Any, norm: Any, average: Any, along: Any, inverse: Any,
                  xs: Any, ys: Any, half: Any, start: Any,
                  tolerance: Any, travel: Any, most: Any, least: Any) -> Any:  # fmt: skip
    """Match every subset by inverse compositional Gauss–Newton on ZNSSD.

    Parameters
    ----------
    taps, shape
        See the top of the file.
    c, sampling, stride, plane, margin
        Spline coefficients of the frame, flat and padded: samples per pixel, elements per row and
        per plane, pixels of margin.
    rows, columns
        Size of the frame.
    f, fx, fy, m, pixels, mean, norm, average, along, inverse
        The prepared reference.
    xs, ys, half
        Subset centres and half width.
    start
        Starting parameters, shape (n, p); a row with NaN is left alone and flagged not converged.
    tolerance
        Remaining error, px, below which the iteration stops.
    travel
        Distance from the start, px, beyond which a subset is given up.
    most
        Iterations at the most.
    least
        Correlation below which a match is refused.

    Returns
    -------
    p
        Parameters, shape (n, p); NaN where not converged.
    correlation
        ZNCC at the solution, shape (n,).
    residual
        Sum of squared residuals in the reference's grey levels, shape (n,).
    flag, iterations
        Shape (n,).
    """
    count, size = xs.size, 2 * len(shape)
    p = np.full((count, size), np.nan)
    correlation, residual = np.full(count, np.nan), np.full(count, np.nan)
    flag, iterations = np.full(count, _NOT_CONVERGED, np.uint8), np.zeros(count, np.uint8)
    reach = half * half / 3.0
    for i in prange(count):
        q, sums, right, d = start[i].copy(), np.empty(3 + size), np.empty(size), np.empty(size)
        before, zncc, left, gg, scale = 0.0, 0.0, 0.0, 0.0, 0.0
        state = _NOT_CONVERGED
        for iteration in range(most):
            if np.isnan(q.sum()):
                break
            if not _in_view(shape, xs[i], ys[i], half, q, rows, columns):
                state = _OUT_OF_VIEW
                break
            _subset_sums(
                taps, shape, c, sampling, stride, plane, margin, f, fx, fy, m, columns,
                xs[i], ys[i], half, q, sums,
            )  # fmt: skip
            iterations[i] = iteration + 1
            gg = sums[1] - sums[0] * sums[0] / pixels[i]
            if not gg > 0.0:
                state = _DECORRELATED
                break
            unit = (sums[2] - mean[i] * sums[0]) / norm[i]
            scale = norm[i] / np.sqrt(gg)
            for a in range(size):
                right[a] = sums[3 + a] - average[i, a] * sums[0] - along[i, a] * unit
            gain = 0.0
            for a in range(size):
                d[a] = 0.0
                for b in range(size):
                    d[a] += scale * inverse[i, a, b] * right[b]
                gain += d[a] * right[a]
            n = len(shape)
            step = np.sqrt(
                d[0] * d[0] + d[n] * d[n]
                + reach * (d[1] * d[1] + d[2] * d[2] + d[n + 1] * d[n + 1] + d[n + 2] * d[n + 2])
            )  # fmt: skip
            if not step < half:
                break
            _compose_inverse(shape, q, d)
            if not (abs(q[0] - start[i, 0]) < travel and abs(q[n] - start[i, n]) < travel):
                break
            # What the step explains of the residual is known without another pass.
            zncc = unit / np.sqrt(gg)
            left = max(gg - unit * unit - gain / scale, 0.0)
            rate = _FIRST_RATE if iteration == 0 else min(1.0, step / before)
            if step * rate < tolerance:
                state = _CONVERGED
                break
            before = step
        if state == _CONVERGED:
            zncc = np.sqrt(max(1.0 - left / gg, 0.0)) if zncc > 0.0 else zncc
            correlation[i] = zncc
            if zncc < least:
                state = _DECORRELATED
            else:
                for a in range(size):  # numba takes two seconds to compile the assignment of a whole row
                    p[i, a] = q[a]
                residual[i] = left * scale * scale
        flag[i] = state
    return p, correlation, residual, flag, iterations


@parallel
def residuals(taps: Any, shape: Any, c: Any, sampling: Any, stride: Any, plane: Any, margin: Any,
              f: Any, m: Any, width: Any, mean: Any, norm: Any,
              xs: Any, ys: Any, half: Any, p: Any) -> Any:  # fmt: skip
    """Return what matching leaves of some subsets: reference less frame, gain and offset taken out.

    Parameters are those of `solve_subsets` with the solution p in place of the start; the result has
    shape (n, side, side), zero where the mask is.
    """
    side, count, back = 2 * half + 1, len(shape), len(taps) // 2 - 1
    out = np.zeros((xs.size, side, side))
    for i in prange(xs.size):
        total, square, pixels = 0.0, 0.0, 0.0
        for row in range(side):
            for column in range(side):
                xi, eta = column - half, row - half
                q = (ys[i] + eta) * width + xs[i] + xi
                if m[q] == 0:
                    continue
                u = sampling * (xs[i] + xi + margin + _displaced(shape, p[i], 0, xi, eta))
                v = sampling * (ys[i] + eta + margin + _displaced(shape, p[i], count, xi, eta))
                iu, iv = int(np.floor(u)), int(np.floor(v))
                a, b = iu - back, iv - back
                r, o = _taps_at(a, b, sampling, stride, plane)
                g = _value(taps, c, _U(0), r, o, _F(u - iu), _F(v - iv))
                out[i, row, column] = g
                total += g
                square += g * g
                pixels += 1.0
        middle = total / pixels
        scale = norm[i] / np.sqrt(square - total * middle)
        for row in range(side):
            for column in range(side):
                q = (ys[i] + row - half) * width + xs[i] + column - half
                if m[q] != 0:
                    out[i, row, column] = f[q] - mean[i] - scale * (out[i, row, column] - middle)
    return out
