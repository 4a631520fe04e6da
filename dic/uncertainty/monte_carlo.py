"""A budget propagated by draws: inputs that are not normal, effects that bend (JCGM 101:2008, the GUM's S1).

The model of measurement is value · Π(1 + relative error)^power + Σ effects: what is measured once and stands
in a quotient, like force and section, enters as it stands there; all else by its effect on the property.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from functools import cache
from math import copysign, floor, hypot, isfinite, log10, sqrt

import numpy as np
from numpy.typing import NDArray
from scipy.special import ndtri

Floats = NDArray[np.float64]

DRAWS = 100_000
SEED = 101
COVERAGE = 0.95


@dataclass(frozen=True)
class Effect:
    """What an input does to a property: ``linear · z + square · z²``, z of variance 1.

    Attributes
    ----------
    linear, square
        In the property's unit, counted positive where its amount grows.
    bounded
        Whether z is rectangular; it is normal otherwise.
    """

    linear: float
    square: float = 0.0
    bounded: bool = False


@dataclass(frozen=True)
class Factor:
    """A factor (1 + u · z)^power of the property, u relative; `bounded` as for `Effect`."""

    u: float
    power: int
    bounded: bool = False


class Contribution(float):
    """A standard uncertainty that is more than the spread of a normal, linear effect.

    The number itself is in the property's unit; `effects` and `factors` stand behind it.
    """

    effects: tuple[Effect, ...]
    factors: tuple[Factor, ...]

    def __new__(
        cls, u: float, effects: tuple[Effect, ...] = (), factors: tuple[Factor, ...] = ()
    ) -> Contribution:
        """Attach what stands behind a number."""
        made = super().__new__(cls, u)
        made.effects, made.factors = effects, factors
        return made


def bounded(u: float) -> Contribution:
    """Return the contribution of an input that lies anywhere within bounds, √3·u to either side."""
    return Contribution(u, (Effect(u, bounded=True),))


@dataclass(frozen=True)
class Draws:
    """The 95 % interval of the draws, as likely to be missed below as above, and their standard deviation."""

    low: float
    high: float
    standard_deviation: float


def monte_carlo(value: float, contributions: Mapping[str, float]) -> Draws | None:
    """Propagate the distributions of a budget.

    Parameters
    ----------
    value
        The property's best estimate.
    contributions
        Standard uncertainties by source; a plain number is a normal, linear effect.

    Returns
    -------
    Draws or None
        The same for the same budget; None where the value or a contribution is not known.

    Notes
    -----
    The interval is the probabilistically symmetric one (JCGM 101:2008, 7.7).  Each input is drawn in equal
    shares of its distribution, in random order (McKay, Beckman and Conover, Technometrics 21 (1979) 239,
    doi 10.2307/1268522), so that the ends are known much better than by free draws.
    """
    if not isfinite(value) or not isfinite(hypot(*contributions.values())):
        return None
    behind = [one for one in contributions.values() if isinstance(one, Contribution)]
    # The sum of normal effects is normal itself.
    spread = hypot(*(one for one in contributions.values() if not isinstance(one, Contribution)))
    effects = [Effect(spread), *(effect for one in behind for effect in one.effects)]
    factors = [factor for one in behind for factor in one.factors]
    outcome, outward = np.full(DRAWS, value), copysign(1.0, value)
    for number, factor in enumerate(factors):
        grown = (1 + factor.u * _standard(number, factor.bounded)) ** abs(factor.power)
        outcome = outcome * grown if factor.power > 0 else outcome / grown
    for number, effect in enumerate(effects, start=len(factors)):
        z = _standard(number, effect.bounded)
        outcome += outward * effect.linear * z
        if effect.square:
            outcome += outward * effect.square * z**2
    if not np.isfinite(outcome).all():
        return None
    ordered = np.sort(outcome)
    beyond = round((1 - COVERAGE) / 2 * DRAWS)
    return Draws(float(ordered[beyond - 1]), float(ordered[-beyond]), float(outcome.std()))


@cache
def _standard(number: int, within_bounds: bool) -> Floats:
    """Return the draws of one input, mean 0 and variance 1."""
    shares = (np.random.default_rng((SEED, number)).permutation(DRAWS) + 0.5) / DRAWS
    drawn = sqrt(12) * (shares - 0.5) if within_bounds else ndtri(shares)
    drawn.flags.writeable = False
    return drawn


def tolerance(u: float) -> float:
    """Return the numerical tolerance of a standard uncertainty: half a unit of its last significant digit.

    One digit, or two where the first is a 1 (JCGM 101:2008, 7.9.2, leaves the choice; this one is common
    practice in rounding), is 3 % to 25 % of the uncertainty.
    """
    if not u > 0:
        return 0.0
    power = floor(log10(u))
    return 0.5 * 10.0**power * (0.1 if u < 1.95 * 10.0**power else 1.0)


def agrees(value: float, u: float, draws: Draws) -> bool:
    """Return whether the linear, normal budget gives the draws' interval (JCGM 101:2008, 8.1).

    Both are held against each other at 95 %, 1.96 u to either side: that k = 2 is a little wider says
    nothing about the model.
    """
    half = float(ndtri((1 + COVERAGE) / 2)) * u
    worst = max(abs(value - half - draws.low), abs(value + half - draws.high))
    return worst <= max(tolerance(u), 1e-12 * abs(value))
