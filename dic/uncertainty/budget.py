"""Putting contributions together, by the GUM (JCGM 100:2008)."""

from __future__ import annotations

from collections.abc import Mapping
from math import hypot, inf, sqrt


def combine(contributions: Mapping[str, float]) -> float:
    """Return the combined standard uncertainty of independent contributions.

    Parameters
    ----------
    contributions
        Standard uncertainties by source, all in the unit of the result.

    Returns
    -------
    float
        Their root sum of squares (JCGM 100:2008, 5.1.2); NaN if one of them is NaN.
    """
    return hypot(*contributions.values())


def few_readings(degrees_of_freedom: float) -> float:
    """Return the factor by which a standard uncertainty from few readings has to grow.

    A standard deviation from few readings is itself uncertain; the state of knowledge is Student's t
    distribution, whose own standard deviation is wider by this factor.  With it, the usual k = 2 keeps
    its meaning without tables of t.

    Parameters
    ----------
    degrees_of_freedom
        Readings less fitted parameters.

    Returns
    -------
    float
        sqrt(dof / (dof - 2)); infinite up to two degrees of freedom, where the data bound nothing.

    References
    ----------
    JCGM 101:2008, 6.4.9.4.
    """
    if degrees_of_freedom <= 2:
        return inf
    return sqrt(degrees_of_freedom / (degrees_of_freedom - 2))
