"""Straight lines, with everything a budget needs from them."""

from __future__ import annotations

from dataclasses import dataclass, replace
from math import hypot, nan, sqrt

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy import stats

Floats = NDArray[np.float64]

#: The slope of a line with errors in both settles in a handful of rounds; it is given up where it does not.
ROUNDS = 100


@dataclass(frozen=True)
class Line:
    """A fitted line y = intercept + slope · x.

    Attributes
    ----------
    slope, intercept
        The line.
    u_slope, u_intercept
        Their standard uncertainties.
    correlation
        Correlation coefficient of intercept and slope.
    residual_s
        Standard deviation of the residuals in y, n - 2 degrees of freedom.
    r_squared
        Coefficient of determination.
    mean_x
        Abscissa at which slope and value are uncorrelated, where the line is best known.
    u_mean
        Standard uncertainty of the line's value there.
    n
        Number of points.
    misfit
        Root of the mean square of the residuals in the points' stated standard uncertainties, over n - 2
        degrees of freedom: 1 where the points scatter as these say; NaN where none are stated.
    """

    slope: float
    intercept: float
    u_slope: float
    u_intercept: float
    correlation: float
    residual_s: float
    r_squared: float
    mean_x: float
    u_mean: float
    n: int
    misfit: float = nan

    def at(self, x: float) -> float:
        """Return the line's value at x."""
        return self.intercept + self.slope * x

    def u_at(self, x: float) -> float:
        """Return the standard uncertainty of the line's value at x."""
        return hypot(self.u_mean, self.u_slope * (x - self.mean_x))

    @property
    def relative_error(self) -> float:
        """Standard error of the slope that all residuals of the straight line give, relative to the slope."""
        return sqrt((1 / self.r_squared - 1) / (self.n - 2)) if self.r_squared > 0 else nan

    def steeper(self) -> Line:
        """Return the line turned about its own middle by its slope's standard uncertainty."""
        return replace(
            self, slope=self.slope + self.u_slope, intercept=self.intercept - self.u_slope * self.mean_x
        )


def straight_line(x: Floats, y: Floats) -> Line:
    """Fit a straight line by ordinary least squares.

    Parameters
    ----------
    x, y
        Points, shape (n,), without NaN; x is taken as free of error.

    Returns
    -------
    Line
        Line and uncertainties, scaled by the residuals (JCGM 100:2008, H.3).

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
    residual_s = sqrt(float(residuals @ residuals) / (len(x) - 2))
    mean_x = float(np.mean(x))
    return Line(
        slope=slope,
        intercept=intercept,
        u_slope=float(fit.stderr),
        u_intercept=float(fit.intercept_stderr),
        # cov(intercept, slope) = -mean(x) · u(slope)², whatever the data.
        correlation=-mean_x / sqrt(float(np.mean(x**2))),
        residual_s=residual_s,
        r_squared=float(fit.rvalue) ** 2,
        mean_x=mean_x,
        u_mean=residual_s / sqrt(len(x)),
        n=len(x),
    )


def line_with_errors_in_both(
    x: Floats, y: Floats, u_x: ArrayLike, u_y: ArrayLike, *, scaled: bool = True
) -> Line:
    """Fit a straight line to points that are uncertain in both coordinates.

    Parameters
    ----------
    x, y
        Points, shape (n,), without NaN.
    u_x, u_y
        Their standard uncertainties, independent of each other, not negative; one value for all or one
        for each.  Only their ratios decide the line.
    scaled
        Whether the line's own uncertainties are scaled by the residuals, or follow from the stated ones.

    Returns
    -------
    Line
        The line of largest likelihood and its uncertainties: it makes the sum of both coordinates' weighted
        squares least.

    Raises
    ------
    ValueError
        With fewer than three points, if all x are the same, if a point has no uncertainty at all, or if the
        slope does not settle.

    References
    ----------
    York, Evensen, Martínez and De Basabe Delgado, American Journal of Physics 72 (2004) 367,
    doi 10.1119/1.1632486.
    """
    if len(x) < 3 or not np.ptp(x) > 0:
        raise ValueError("a line with an uncertainty needs at least three points with different x")
    u_x, u_y = (np.broadcast_to(np.asarray(u, dtype=np.float64), x.shape) for u in (u_x, u_y))
    if not np.all(u_x**2 + u_y**2 > 0):
        raise ValueError("a point without any uncertainty fixes the line by itself")
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
    centre = float(np.average(adjusted, weights=weight))
    u_slope = 1 / sqrt(float(np.sum(weight * (adjusted - centre) ** 2)))
    u_mean = 1 / sqrt(float(weight.sum()))
    u_intercept = hypot(u_mean, centre * u_slope)
    residuals = y - intercept - slope * x
    misfit = sqrt(float(np.sum(weight * residuals**2)) / (len(x) - 2))
    scale = misfit if scaled else 1.0
    return Line(
        slope=slope,
        intercept=intercept,
        u_slope=u_slope * scale,
        u_intercept=u_intercept * scale,
        correlation=-centre * u_slope / u_intercept,
        residual_s=sqrt(float(residuals @ residuals) / (len(x) - 2)),
        r_squared=float(np.corrcoef(x, y)[0, 1]) ** 2 if np.ptp(y) else 0.0,
        mean_x=centre,
        u_mean=u_mean * scale,
        n=len(x),
        misfit=misfit,
    )
