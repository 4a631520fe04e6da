"""Moduli of unloading and loading again, where a test has cycles."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
from numpy.typing import NDArray

from dic.properties.loading import MIN_FRAMES, Loading, Undetermined
from dic.properties.sheet import Entry, Reading, Sheet, window_of
from dic.uncertainty import few_readings, straight_line

Floats = NDArray[np.float64]

#: A reversal counts from this share of the largest stress, and of the noise.
REVERSAL = 0.1
NOISE = 10
#: A branch along which strain does not follow stress like this is no elastic one but a neck or a fracture.
STRAIGHT = 0.98


def cycle_entries(sheet: Sheet) -> list[Entry]:
    """List one modulus for each unloading, and for each loading after one."""
    try:
        branches = elastic_branches(sheet)
    except Undetermined:
        return []
    entries, count = [], {True: 0, False: 0}
    for branch, rising in branches:
        count[rising] += 1
        number = count[rising] + rising  # the first loading is Young's modulus itself
        kind = "loading" if rising else "unloading"
        entries.append(
            Entry(
                f"{kind}_modulus_{number}",
                f"E{'l' if rising else 'u'}{number}",
                "MPa",
                _reader(sheet, branch, f"{kind} {number}"),
            )
        )
    return entries


def elastic_branches(sheet: Sheet) -> list[tuple[Loading, bool]]:
    """Return the branches after the first loading, and whether each goes up, in the modulus' stresses."""
    whole, window = sheet.whole, sheet.elastic.window
    stress = sheet.loading.stress[window.frames]
    found = []
    for branch in branches_of(whole.stress, float(np.median(whole.u_stress)))[1:]:
        part = whole.part(branch)
        inside = (part.stress >= stress.min()) & (part.stress <= stress.max())
        if inside.sum() < MIN_FRAMES:
            continue
        there = np.flatnonzero(inside)
        part = part.part(slice(int(there[0]), int(there[-1]) + 1))
        if np.ptp(part.stress) == 0 or np.ptp(part.strain) == 0:
            continue
        if np.corrcoef(part.stress, part.strain)[0, 1] >= STRAIGHT:
            found.append((part, bool(part.stress[-1] > part.stress[0])))
    return found


def branches_of(stress: Floats, noise: float) -> list[slice]:
    """Cut a course of stress at its reversals.

    Parameters
    ----------
    stress
        Stress at the frames, shape (n,).
    noise
        Standard deviation of its noise.
    """
    if not len(stress):
        return []
    threshold = max(REVERSAL * float(stress.max() - stress.min()), NOISE * noise)
    turns, extreme, rising = [0], 0, True
    for place, value in enumerate(stress):
        gone = stress[extreme] - value if rising else value - stress[extreme]
        if gone <= 0:
            extreme = place
        elif gone > threshold:
            turns.append(extreme)
            extreme, rising = place, not rising
    return [slice(first, last + 1) for first, last in zip(turns, [*turns[1:], len(stress) - 1], strict=True)]


def _reader(sheet: Sheet, branch: Loading, which: str) -> Callable[[], Reading]:
    """Return the reading of one branch's modulus."""

    def read() -> Reading:
        line = straight_line(branch.stress, branch.strain)
        value = 1 / line.slope
        return Reading(
            value,
            f"line of strain on stress over {which}, in the stresses of the modulus' window",
            {"scatter": value * line.u_slope / line.slope * few_readings(line.n - 2)}
            | sheet.of_stress(value),
            window_of(branch),
            (f"r² = {line.r_squared:.6f}, {line.n} frames",),
            missing=sheet.left_out(),
        )

    return read
