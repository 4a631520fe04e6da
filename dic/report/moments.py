"""The moments of a test that deserve a strain map."""

from __future__ import annotations

from dataclasses import dataclass
from math import isfinite

import numpy as np
from numpy.typing import NDArray

from dic.measurement import Measurement


@dataclass(frozen=True)
class Moment:
    """One frame that is worth a look.

    Attributes
    ----------
    letter
        Mark in the figures, A, B, ...
    title
        Why this frame, in words.
    row
        Its row in history and curve.
    """

    letter: str
    title: str
    row: int


def loading(measurement: Measurement) -> NDArray[np.bool_]:
    """Return which frames are measured and lie before the largest force, shape (n,)."""
    curve = measurement.curve
    measured = np.isfinite(curve.axial) & np.isfinite(curve.stress_MPa)
    return measured & (curve.time_s <= curve.peak_time_s)


def choose_moments(measurement: Measurement) -> list[Moment]:
    """Choose the middle of the modulus window, the proof stresses and the largest force.

    Parameters
    ----------
    measurement
        What the test gave.

    Returns
    -------
    list of Moment
        In order of time, each frame once; empty where no frame was measured.
    """
    curve, line = measurement.curve, measurement.line
    rows = np.flatnonzero(loading(measurement))
    if rows.size == 0:
        return []
    wanted: dict[int, list[str]] = {}
    if isfinite(line.slope):
        middle = 0.5 * (line.low + line.high)
        _want(wanted, rows[np.argmin(np.abs(curve.axial[rows] - middle))], "middle of the modulus window")
    for name, item in measurement.properties.items():
        if name.startswith("proof_stress_") and isfinite(item.value):
            _want(wanted, _first_beyond(curve.stress_MPa, rows, item.value), f"proof stress {item.symbol}")
    _want(wanted, rows[-1], "largest force")
    return [
        Moment(chr(ord("A") + place), ", ".join(titles), row)
        for place, (row, titles) in enumerate(sorted(wanted.items()))
    ]


def _first_beyond(stress: NDArray[np.float64], rows: NDArray[np.intp], level: float) -> int:
    """Return the first of `rows` whose stress reaches `level` (either sign), or the last one."""
    reached = rows[stress[rows] * np.sign(level) >= abs(level)]
    return int(reached[0] if reached.size else rows[-1])


def _want(wanted: dict[int, list[str]], row: int | np.intp, title: str) -> None:
    wanted.setdefault(int(row), []).append(title)
