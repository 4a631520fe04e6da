"""Putting contributions together, by the GUM (JCGM 100:2008)."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from math import hypot, inf, isfinite, nan, sqrt


@dataclass(frozen=True)
class Input:
    """A quantity that properties depend on: best estimate, unit and standard uncertainty."""

    value: float
    unit: str
    standard_uncertainty: float


@dataclass(frozen=True)
class Row:
    """One line of a property's budget (JCGM 100:2008, 4 and 5).

    Attributes
    ----------
    source
        What is uncertain.
    value, unit, standard_uncertainty
        The input's best estimate and standard uncertainty; NaN where it is a scatter about no value, or is
        not included.
    sensitivity
        Change of the property per unit of the input, without its sign.
    contribution
        Sensitivity times standard uncertainty, in the property's unit; NaN where not included.
    share
        Part of the property's variance, 0 to 1.
    included
        Whether it is part of the stated uncertainty.
    """

    source: str
    value: float
    unit: str
    standard_uncertainty: float
    sensitivity: float
    contribution: float
    share: float
    included: bool = True


def budget_of(
    contributions: Mapping[str, float], unit: str, inputs: Mapping[str, Input], missing: tuple[str, ...]
) -> tuple[Row, ...]:
    """Lay out a property's budget, the largest contribution first, what is not included last.

    Parameters
    ----------
    contributions
        Standard uncertainties by source, in the property's unit.
    unit
        The property's unit, which is also that of sources that scatter it directly.
    inputs
        The inputs behind the sources, where there are some.
    missing
        Sources that are not included.
    """
    total = sum(u**2 for u in contributions.values() if isfinite(u))
    rows = []
    for source, u in sorted(contributions.items(), key=lambda pair: -abs(pair[1])):
        given = inputs.get(source) or Input(nan, unit, u)
        per_unit = u / given.standard_uncertainty if given.standard_uncertainty else nan
        share = u**2 / total if total else 0.0
        rows.append(Row(source, given.value, given.unit, given.standard_uncertainty, per_unit, u, share))
    lacking = [Row(source, nan, "", nan, nan, nan, nan, included=False) for source in missing]
    return (*rows, *lacking)


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
