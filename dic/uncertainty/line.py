"""Straight lines, with everything a budget needs from them."""

from __future__ import annotations

from dataclasses import dataclass
from math import hypot, sqrt

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy import stats

from dic.uncertainty.both import line_of_both

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
        Standard deviation of the residuals in y, n - 2 degrees of freedom.
    r_squared
        Coefficient of determination.
    mean_x
        Abscissa at which slope and value are uncorrelated, where the line is best known.
    u_mean
        Standard uncertainty of the line's value there.
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
    u_mean: float
    n: int

    def at(self, x: float) -> float:
        """Return the line's value at x."""
        return self.intercept + self.slope * x

    def u_at(self, x: float) -> float:
        """Return the standard uncertainty of the line's value at x."""
        return hypot(self.u_mean, self.u_slope * (x - self.mean_x))


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


def line_with_errors_in_both(x: Floats, y: Floats, u_x: ArrayLike, u_y: ArrayLike) -> Line:
    """Fit a straight line to points that are uncertain in both coordinates.

    Parameters
    ----------
    x, y
        Points, shape (n,), without NaN.
    u_x, u_y
        Their standard uncertainties, independent of each other, not negative; one value for all or one
        for each.  Only their ratios decide the line; its own uncertainty is scaled by the residuals.

    Returns
    -------
    Line
        The line of largest likelihood and its uncertainties.

    Raises
    ------
    ValueError
        With fewer than three points, if all x are the same, or if a point has no uncertainty at all.

    See Also
    --------
    dic.uncertainty.line_of_both : The fit itself.
    """
    u_x, u_y = (np.broadcast_to(np.asarray(u, dtype=np.float64), x.shape) for u in (u_x, u_y))
    if not np.all(u_x**2 + u_y**2 > 0):
        raise ValueError("a point without any uncertainty fixes the line by itself")
    fit = line_of_both(x, u_x, y, u_y)
    residuals = y - fit.intercept - fit.slope * x
    u_slope, u_intercept = fit.u_slope * fit.misfit, fit.u_intercept * fit.misfit
    return Line(
        slope=fit.slope,
        intercept=fit.intercept,
        u_slope=u_slope,
        u_intercept=u_intercept,
        correlation=fit.correlation,
        residual_s=sqrt(float(residuals @ residuals) / (len(x) - 2)),
        r_squared=float(np.corrcoef(x, y)[0, 1]) ** 2 if np.ptp(y) else 0.0,
        mean_x=-fit.correlation * fit.u_intercept / fit.u_slope,
        u_mean=fit.misfit / sqrt(float(np.sum(1 / (u_y**2 + (fit.slope * u_x) ** 2)))),
        n=len(x),
    )
