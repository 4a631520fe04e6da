"""Straight line through points that are uncertain in both coordinates."""

from __future__ import annotations

from dataclasses import dataclass
from math import sqrt

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]

#: The slope settles in a handful of rounds; it is given up where it does not.
ROUNDS = 100


@dataclass(frozen=True)
class LineOfBoth:
    """A fitted line y = intercept + slope · x.

    Attributes
    ----------
    slope, intercept
        The line.
    u_slope, u_intercept
        Their standard uncertainties from the points' stated ones, not scaled by the residuals.
    correlation
        Correlation coefficient of intercept and slope.
    misfit
        Root of the mean weighted square of the residuals over n - 2 degrees of freedom: 1 where the
        points scatter as their uncertainties say.
    n
        Number of points.
    """

    slope: float
    intercept: float
    u_slope: float
    u_intercept: float
    correlation: float
    misfit: float
    n: int


def line_of_both(x: Floats, u_x: Floats, y: Floats, u_y: Floats) -> LineOfBoth:
    """Fit a straight line, each coordinate of each point with its own standard uncertainty.

    Parameters
    ----------
    x, y
        Points, shape (n,), without NaN.
    u_x, u_y
        Standard uncertainties, independent of each other; at a point not both zero.

    Returns
    -------
    LineOfBoth
        The line that makes the sum of both coordinates' weighted squares least.

    Raises
    ------
    ValueError
        With fewer than three points, if all x are the same, or if the slope does not settle.

    References
    ----------
    York, Evensen, Martínez and De Basabe Delgado, American Journal of Physics 72 (2004) 367,
    doi 10.1119/1.1632486.
    """
    if len(x) < 3 or not np.ptp(x) > 0:
        raise ValueError("a line with an uncertainty needs at least three points with different x")
    slope = float(np.polyfit(x, y, 1)[0])
    for _ in range(ROUNDS):
        weight = 1 / (u_y**2 + slope**2 * u_x**2)
        mean_x, mean_y = np.average(x, weights=weight), np.average(y, weights=weight)
        dx, dy = x - mean_x, y - mean_y
        beta = weight * (u_y**2 * dx + slope * u_x**2 * dy)
        last, slope = slope, float(np.sum(weight * beta * dy) / np.sum(weight * beta * dx))
        if abs(slope - last) <= 1e-12 * abs(slope) + 1e-300:
            break
    else:
        raise ValueError("the slope does not settle")
    weight = 1 / (u_y**2 + slope**2 * u_x**2)
    intercept = float(mean_y - slope * mean_x)
    adjusted = mean_x + beta
    centre = np.average(adjusted, weights=weight)
    u_slope = 1 / sqrt(float(np.sum(weight * (adjusted - centre) ** 2)))
    u_intercept = sqrt(1 / float(weight.sum()) + float(centre) ** 2 * u_slope**2)
    residual = float(np.sum(weight * (y - intercept - slope * x) ** 2))
    return LineOfBoth(
        slope=slope,
        intercept=intercept,
        u_slope=u_slope,
        u_intercept=u_intercept,
        correlation=-float(centre) * u_slope / u_intercept,
        misfit=sqrt(residual / (len(x) - 2)),
        n=len(x),
    )
