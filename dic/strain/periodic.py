"""The interpolation's periodic error, determined from the test itself and taken off the gauges.

Interpolation leaves an error of C·sin(2πu) in each displacement component, u in px.  While a coupon
stretches, its subsets pass through all sub-pixel places, so the test shows C itself: regress what a
smooth field leaves of the displacements on sin(2πu).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]

#: Displacements must span most of a period, or sin(2πu) looks like a smooth field.
LEAST_SPAN_PX = 0.9
#: What a cubic field leaves may exceed the subsets' stated scatter by this much; more is a strain
#: that is not smooth, of which the regression would make a wrong C.
MOST_RESIDUAL = 1.5
#: The correction pays only where C is determined this well; elsewhere it adds scatter.
LEAST_RATIO = 3.0
#: Frames below which the scatter of C says nothing.
LEAST_FRAMES = 5


@dataclass(frozen=True)
class PeriodicSums:
    """One frame's share in the regression: Σ residual·sine, Σ sine², and whether it may be used."""

    product: float = 0.0
    square: float = 0.0
    usable: bool = False


@dataclass(frozen=True)
class Periodic:
    """Amplitude of the periodic error.

    Attributes
    ----------
    amplitude_px, u_amplitude_px
        C and its standard uncertainty, px; NaN where the test does not determine it.
    frames
        Frames that it was determined from.
    applied
        Whether the gauges were corrected.
    """

    amplitude_px: float
    u_amplitude_px: float
    frames: int
    applied: bool


class SmoothField:
    """Least-squares fits of cubic polynomials over fixed points; what they leave is looked at.

    Parameters
    ----------
    x, y
        The points, shape (n,).
    """

    def __init__(self, x: Floats, y: Floats) -> None:
        one = (x - x.mean()) / max(float(np.ptp(x)), 1.0)
        other = (y - y.mean()) / max(float(np.ptp(y)), 1.0)
        powers = [one**i * other**j for i in range(4) for j in range(4 - i)]
        self._basis = np.linalg.qr(np.column_stack(powers))[0]

    def left_over(self, values: Floats) -> Floats:
        """Return values less their fit, shape (n,)."""
        return values - self._basis @ (self._basis.T @ values)


def periodic_sums(field: SmoothField, u: Floats, v: Floats, sigma_u: Floats, sigma_v: Floats) -> PeriodicSums:
    """Return one frame's share in the regression for C; arguments in px, shape (n,)."""
    product = square = misfit = 0.0
    for moved, sigma in ((u, sigma_u), (v, sigma_v)):
        if np.ptp(moved) < LEAST_SPAN_PX:
            continue
        residual, sine = field.left_over(moved), field.left_over(np.sin(2 * np.pi * moved))
        product += float(residual @ sine)
        square += float(sine @ sine)
        misfit = max(misfit, float(residual.std() / np.sqrt(np.mean(sigma**2))))
    return PeriodicSums(product, square, square > 0.0 and misfit < MOST_RESIDUAL)


def determine(sums: list[PeriodicSums], correct: bool = True) -> Periodic:
    """Join the frames' shares: C by least squares, its uncertainty by leaving out one frame at a time."""
    used = [one for one in sums if one.usable]
    if len(used) < LEAST_FRAMES:
        return Periodic(float("nan"), float("nan"), len(used), False)
    product, square = np.array([s.product for s in used]), np.array([s.square for s in used])
    amplitude = product.sum() / square.sum()
    without = (product.sum() - product) / (square.sum() - square)
    n = len(used)
    uncertainty = float(np.sqrt((n - 1) / n * ((without - without.mean()) ** 2).sum()))
    return Periodic(
        float(amplitude), uncertainty, n, bool(correct and abs(amplitude) > LEAST_RATIO * uncertainty)
    )
