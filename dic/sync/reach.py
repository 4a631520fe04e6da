"""How far into the test the start of loading is followed: as far as a gentle parabola describes it."""

from __future__ import annotations

from collections.abc import Sequence
from math import sqrt

import numpy as np
from numpy.typing import NDArray

from dic.sync.misfit import DEGREE, Course, Misfit

Floats = NDArray[np.float64]

#: Step from one reach to the next, and how many are tried below and above the usual one: up to four times
#: it the offset still gains, because a longer line tells slope and curvature better.
FACTOR, BELOW, ABOVE = 1.25, 6, 6
#: F values of a cubic term: below the first a longer reach is taken (one in twenty by chance is beyond),
#: above the second the usual one is shortened, as for steels that yield gradually from the start.
NONE, CLEAR = 4.0, 16.0
#: Steps that are taken back from the longest reach in which no cubic term shows, unless all that there is
#: shows none: its bias in units of noise falls with the reach to the power of about three and a half, to a
#: fifth with two steps.
BACK = 2


def settled(usual: Misfit, courses: Sequence[Course], offset_s: float) -> Misfit:
    """Choose how many frames of the event are used.

    The longest reach is taken in which the data show no cubic term and scatter no more than in the usual
    one; the usual one, where none is; a shorter one, where the usual one shows a cubic term clearly.

    Parameters
    ----------
    usual
        The misfit over the usual reach.
    courses
        The same event over other reaches.
    offset_s
        The offset found over the usual reach, s.

    Returns
    -------
    Misfit
        Over the reach that was chosen.
    """
    longer, shorter = _sorted(usual.course, courses)
    bend, variance = _cubic(usual, offset_s)
    least = max(variance, usual.course.noise**2)
    for k in range(len(longer) - 1, 0, -1):
        one = usual.over(longer[k])
        its_bend, its_variance = _cubic(one, offset_s)
        # Three standard deviations of a variance with that many degrees of freedom.
        bound = 1 + 3 * sqrt(2 / max(len(longer[k].time_s) - DEGREE - 2, 1))
        if its_bend < NONE and its_variance < bound * least:
            return one if k == len(longer) - 1 else usual.over(longer[max(k - BACK, 0)])
    chosen = usual
    if bend > CLEAR:
        for course in shorter:
            chosen = usual.over(course)
            if _cubic(chosen, offset_s)[0] < NONE:
                break
    return chosen


def _sorted(usual: Course, courses: Sequence[Course]) -> tuple[list[Course], list[Course]]:
    """Return the usual course and those with more frames, rising, and those with fewer, falling."""
    by_count = {len(one.time_s): one for one in courses}
    counts = sorted(by_count)
    own = len(usual.time_s)
    longer = [by_count[n] for n in counts if n > own]
    return [usual, *longer], [by_count[n] for n in reversed(counts) if n < own]


def _cubic(misfit: Misfit, near_s: float) -> tuple[float, float]:
    """Return the F value of a cubic term at the best offset, and the residual variance without it.

    The offset's share is made linear: a search over offsets would find hollows that are noise.
    """
    offset, half = misfit.refined(near_s), misfit.interval / 2
    variance = float(misfit.mean_square(np.array([offset]))[0])
    before, force, after = misfit.force_at(offset + np.array([-half, 0.0, half]))
    inside = np.isfinite(before + force + after)
    spare = int(inside.sum()) - DEGREE - 3
    if not np.isfinite(variance) or spare < 1:
        return np.inf, np.inf
    force, signal = force[inside] / np.abs(force[inside]).max(), misfit.course.signal[inside]
    known = np.column_stack([np.vander(force, DEGREE + 1), (after - before)[inside]])
    left = _residual_square(known, signal)
    least = _residual_square(np.column_stack([known, force ** (DEGREE + 1)]), signal)
    return (left - least) / (least / spare), variance


def _residual_square(columns: Floats, signal: Floats) -> float:
    scale = np.abs(columns).max(axis=0)
    columns = columns / np.where(scale > 0, scale, 1.0)
    fitted = columns @ np.linalg.lstsq(columns, signal, rcond=None)[0]
    return float(np.sum((signal - fitted) ** 2))


def shortened(misfit: Misfit, courses: Sequence[Course], offset_s: float) -> Course | None:
    """Return the event over the next shorter reach if this one shows a cubic term clearly."""
    _, shorter = _sorted(misfit.course, courses)
    return shorter[0] if shorter and _cubic(misfit, offset_s)[0] > CLEAR else None


def unsaid_s(misfit: Misfit, offset_s: float) -> float:
    """Return the standard uncertainty from ending the polynomial where it ends, s.

    One degree more moves the offset by so much: half the width of a rectangular distribution.
    """
    return abs(misfit.over(misfit.course, DEGREE + 1).refined(offset_s) - offset_s) / sqrt(3)
