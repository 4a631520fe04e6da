"""The interpolation's periodic error, determined from the test itself and taken off the gauges.

Interpolation leaves an error of C₁·sin(2πu) + C₂·sin(4πu) in each displacement component, u in px;
with a good interpolation both are aliasing, of like size.  While a coupon stretches, its subsets pass
through all sub-pixel places, so the test shows them itself: regress what a smooth field leaves of the
displacements on the sines.
"""

from __future__ import annotations

from dataclasses import dataclass, field

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


#: Waves per pixel of the error's parts.
HARMONICS = (1, 2)
#: What is left of each part after the correction, px, besides the pattern's own aliasing.  On 30 virtual
#: pictures of speckles of 3.5 to 5 px without noise, transverse strains of a gauge 127 px wide came out
#: 0.07 % too small on the mean and axial ones 0.001 % too large; of both that is a first wave of 0.8e-4 px.
LEAST_LEFT_PX = (0.8e-4, 0.0)
#: What each part may be where the test does not show it, px: about the largest found on such pictures.
UNSEEN_PX = (4e-4, 1e-4)


@dataclass(frozen=True)
class PeriodicSums:
    """One frame's share in the regression: Σ residual·sine, Σ sine·sine, and whether it may be used.

    Shapes (h,) and (h, h), h the number of `HARMONICS`.
    """

    product: Floats = field(default_factory=lambda: np.zeros(len(HARMONICS)))
    square: Floats = field(default_factory=lambda: np.zeros((len(HARMONICS), len(HARMONICS))))
    usable: bool = False


@dataclass(frozen=True)
class Periodic:
    """Amplitudes of the periodic error, one for each of `HARMONICS`.

    Attributes
    ----------
    amplitudes_px, u_amplitudes_px
        C₁, C₂ and their standard uncertainties, px; NaN where the test does not determine them.
    frames
        Frames that they were determined from.
    applied
        Which of them the gauges were corrected for.
    """

    amplitudes_px: tuple[float, ...] = (float("nan"),) * len(HARMONICS)
    u_amplitudes_px: tuple[float, ...] = (float("nan"),) * len(HARMONICS)
    frames: int = 0
    applied: tuple[bool, ...] = (False,) * len(HARMONICS)

    def correction(self, response: Floats) -> tuple[Floats, Floats]:
        """Return what to take off a reading, and the standard uncertainty that this brings.

        Parameters
        ----------
        response
            The reading's error per px of each amplitude, shape (..., h).
        """
        use = np.array(self.applied)
        size = np.where(use, self.amplitudes_px, 0.0) * response
        spread = np.where(use, self.u_amplitudes_px, 0.0) * response
        return size.sum(axis=-1), np.sqrt((spread**2).sum(axis=-1))

    def left(self, response: Floats) -> Floats:
        """Return what may be left of each part of the error in a reading, one standard uncertainty.

        Where a part was not taken off, its amplitude is part of what is left.  Sines do not describe the
        error to its end: `LEAST_LEFT_PX` of the first wave is taken as left in any case.

        Parameters
        ----------
        response
            The reading's error per px of each amplitude, shape (..., h).

        Returns
        -------
        ndarray
            Shape (..., h), with the sign of the response: readings have the same error together.
        """
        alone = np.where(self.applied, 0.0, self.amplitudes_px)
        size = np.hypot(np.hypot(alone, self.u_amplitudes_px), LEAST_LEFT_PX)
        return np.where(np.isfinite(size), size, UNSEEN_PX) * response


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


def periodic_error(affine: Floats, subset: int) -> Floats:
    """Return the error of each subset's parameters per px of each amplitude.

    Parameters
    ----------
    affine
        u, uₓ, u_y, v, vₓ, v_y of each subset, px, shape (n, 6).
    subset
        Side of a subset, px.

    Returns
    -------
    ndarray
        Shape (h, n, 6).  Under strain a subset covers several sub-pixel places, over which each sine is
        averaged: sin(2πhu)·sinc(hN·uₓ)·sinc(hN·u_y).
    """
    false = np.empty((len(HARMONICS), *affine.shape))
    for k, waves in enumerate(HARMONICS):
        for first in (0, 3):
            phase, slopes = 2 * np.pi * waves * affine[:, first], affine[:, first + 1 : first + 3]
            averaged = np.sinc(waves * subset * slopes).prod(axis=1)
            false[k, :, first] = averaged * np.sin(phase)
            false[k, :, first + 1 : first + 3] = (averaged * np.cos(phase) * 2 * np.pi * waves)[
                :, None
            ] * slopes
    return false


def periodic_sums(
    smooth: SmoothField, affine: Floats, false: Floats, sigma_u: Floats, sigma_v: Floats
) -> PeriodicSums:
    """Return one frame's share in the regression; `false` is the frame's `periodic_error`, sigmas in px."""
    product, square = np.zeros(len(HARMONICS)), np.zeros((len(HARMONICS), len(HARMONICS)))
    misfit = 0.0
    for first, sigma in ((0, sigma_u), (3, sigma_v)):
        moved = affine[:, first]
        if np.ptp(moved) < LEAST_SPAN_PX:
            continue
        residual = smooth.left_over(moved)
        sines = np.stack([smooth.left_over(one[:, first]) for one in false])
        product += sines @ residual
        square += sines @ sines.T
        misfit = max(misfit, float(residual.std() / np.sqrt(np.mean(sigma**2))))
    return PeriodicSums(product, square, bool(square[0, 0] > 0.0 and misfit < MOST_RESIDUAL))


def determine(sums: list[PeriodicSums], correct: bool = True) -> Periodic:
    """Join the frames' shares: least squares, uncertainties by leaving out one frame at a time."""
    used = [one for one in sums if one.usable]
    n = len(used)
    if n < LEAST_FRAMES:
        return Periodic(frames=n)
    products, squares = np.array([one.product for one in used]), np.array([one.square for one in used])
    amplitudes = np.linalg.solve(squares.sum(axis=0), products.sum(axis=0))
    rest = squares.sum(axis=0) - squares, (products.sum(axis=0) - products)[..., None]
    without = np.linalg.solve(*rest)[..., 0]
    spread = np.sqrt((n - 1) / n * ((without - without.mean(axis=0)) ** 2).sum(axis=0))
    applied = correct & (np.abs(amplitudes) > LEAST_RATIO * spread)
    return Periodic(tuple(amplitudes.tolist()), tuple(spread.tolist()), n, tuple(applied.tolist()))
