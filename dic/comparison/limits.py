"""The error limits of extensometer classes, and whether a difference would keep them."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.stats import norm

Floats = NDArray[np.float64]

#: Without a gauge length only a limit's relative part is known; near zero strain it says nothing, so
#: stations count from this share of the largest strain.
RELATIVE_FROM = 0.2
#: Probability with which all stations together stay within their intervals.
CONFIDENCE = 0.95

WITHIN, BEYOND, UNTOLD = "within", "beyond", "cannot be told"


@dataclass(frozen=True)
class Class:
    """A class and its limit: the larger of a fixed error, as strain or in mm, and a relative one."""

    standard: str
    name: str
    relative: float
    fixed_strain: float | None = None
    fixed_mm: float | None = None

    def limit(self, strain: Floats, length_mm: float | None) -> Floats:
        """Return the limit at each strain; the relative part alone where the fixed one is not known."""
        fixed = self.fixed_strain
        if self.fixed_mm is not None:
            fixed = self.fixed_mm / length_mm if length_mm else None
        return np.maximum(self.relative * np.abs(strain), fixed or 0.0)

    def knows_fixed(self, length_mm: float | None) -> bool:
        """Tell whether the fixed part is known."""
        return self.fixed_strain is not None or bool(length_mm)


#: Limits of the bias error, ISO 9513, and of the strain error, ASTM E83 [both from memory].
CLASSES = (
    Class("ISO 9513", "0.2", 0.002, fixed_mm=0.6e-3),
    Class("ISO 9513", "0.5", 0.005, fixed_mm=1.5e-3),
    Class("ISO 9513", "1", 0.010, fixed_mm=3.0e-3),
    Class("ISO 9513", "2", 0.020, fixed_mm=6.0e-3),
    Class("ASTM E83", "A", 0.001, fixed_strain=0.00002),
    Class("ASTM E83", "B-1", 0.005, fixed_strain=0.0001),
    Class("ASTM E83", "B-2", 0.005, fixed_strain=0.0002),
    Class("ASTM E83", "C", 0.010, fixed_strain=0.001),
    Class("ASTM E83", "D", 0.010, fixed_strain=0.01),
    Class("ASTM E83", "E", 0.010, fixed_strain=0.1),
)


@dataclass(frozen=True)
class Verdict:
    """Whether the difference would keep one class's limit.

    Attributes
    ----------
    standard, name
        Whose class.
    verdict
        ``within``, ``beyond`` or ``cannot be told``: the interval of the difference at every station
        lies inside the limit, at one station outside of it, or neither.
    strain
        Where the difference uses most of the limit.
    used
        The share of the limit that it uses there.
    note
        What was not known; empty where nothing was missing.
    """

    standard: str
    name: str
    verdict: str
    strain: float
    used: float
    note: str = ""


def joint_factor(stations: int) -> float:
    """Return the coverage factor with which all of several independent intervals hold together."""
    return float(norm.ppf(0.5 + 0.5 * CONFIDENCE ** (1 / max(stations, 1))))


def verdicts(strain: Floats, difference: Floats, u: Floats, length_mm: float | None) -> list[Verdict]:
    """Hold the difference at several stations against the limits of all classes.

    Parameters
    ----------
    strain, difference, u
        Strain, difference and its standard uncertainty at each station, shape (m,), without NaN.
    length_mm
        Gauge length of the contact extensometer; None where unknown.

    Returns
    -------
    list of Verdict
        One for each class, the finest first.
    """
    interval = joint_factor(len(strain)) * u
    return [_verdict(one, strain, difference, interval, length_mm) for one in CLASSES]


def _verdict(
    one: Class, strain: Floats, difference: Floats, interval: Floats, length_mm: float | None
) -> Verdict:
    whole = one.knows_fixed(length_mm)
    if not whole:
        far = np.abs(strain) >= RELATIVE_FROM * np.abs(strain).max()
        strain, difference, interval = strain[far], difference[far], interval[far]
    limit, size = one.limit(strain, length_mm), np.abs(difference)
    worst = int(np.argmax(size / limit))
    verdict, note = UNTOLD, "" if whole else "relative part of the limit alone"
    if np.all(size + interval <= limit):
        verdict = WITHIN
    elif np.any(size - interval > limit):
        verdict = BEYOND if whole else UNTOLD
        note = "" if whole else "beyond the relative part, perhaps not beyond the one in µm"
    return Verdict(
        one.standard, one.name, verdict, float(strain[worst]), float(size[worst] / limit[worst]), note
    )
