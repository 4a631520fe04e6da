"""Straight line by ordinary least squares, with everything a budget needs from it."""

from __future__ import annotations

from dataclasses import dataclass
from math import hypot, sqrt

import numpy as np
from numpy.typing import NDArray
from scipy import stats

Floats = NDArray[np.float64]


@dataclass(frozen=True)
class Line:
    """A fitted line y = intercept + slope · x.

    Attributes
    ----------
    slope, intercept
        The line.
    u_slope, u_intercept
        Their standard uncertainties, scaled by the residuals.
    correlation
        Correlation coefficient of intercept and slope.
    residual_s
        Standard deviation of the residuals, n - 2 degrees of freedom.
    r_squared
        Coefficient of determination.
    mean_x
        Mean abscissa, where the line is best known.
    n
        Number of points.
    """

    slope: float
    intercept: float
    u_slope: float
    u_intercept: float
    correlation: float
    residual_s: float
    r_squared: float
    mean_x: float
    n: int

    def at(self, x: float) -> float:
        """Return the line's value at x."""
        return self.intercept + self.slope * x

    def u_at(self, x: float) -> float:
        """Return the standard uncertainty of the line's value at x."""
        return hypot(self.residual_s / sqrt(self.n), self.u_slope * (x - self.mean_x))


def straight_line(x: Floats, y: Floats) -> Line:
    """Fit a straight line by ordinary least squares.

    Parameters
    ----------
    x, y
        Points, shape (n,), without NaN; x is taken as free of error.

    Returns
    -------
    Line
        Line and uncertainties (JCGM 100:2008, H.3).

    Raises
    ------
    ValueError
        With fewer than three points, or if all x are the same.
    """
    if len(x) < 3:
        raise ValueError("a line with an uncertainty needs at least three points")
    fit = stats.linregress(x, y)
    slope, intercept = float(fit.slope), float(fit.intercept)
    residuals = y - (intercept + slope * x)
    u_slope, u_intercept = float(fit.stderr), float(fit.intercept_stderr)
    mean_x = float(np.mean(x))
    return Line(
        slope=slope,
        intercept=intercept,
        u_slope=u_slope,
        u_intercept=u_intercept,
        # cov(intercept, slope) = -mean(x) · u(slope)², whatever the data.
        correlation=-mean_x / sqrt(float(np.mean(x**2))),
        residual_s=sqrt(float(residuals @ residuals) / (len(x) - 2)),
        r_squared=float(fit.rvalue) ** 2,
        mean_x=mean_x,
        n=len(x),
    )
