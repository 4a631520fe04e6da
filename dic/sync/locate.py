"""Where an event seen by camera and machine puts the clocks: an offset, or the range that is possible."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field
from math import hypot, sqrt

import numpy as np
from numpy.typing import NDArray

from dic.errors import ClockError
from dic.sync.misfit import DEGREE, REST_FRAMES, Course, Misfit, turned
from dic.sync.reach import settled, shortened, unsaid_s
from dic.sync.record import LoadRecord

Floats = NDArray[np.float64]

#: Strain up to which nearly every solid answers force by a smooth, hardly curved line.
BEGINNING = 0.001
#: Share of the largest signal at the most: in a short test the last frames are left out, so that the
#: record still reaches the others when the offset is varied.
LARGEST_SHARE = 0.8
#: Frames wanted while that signal is reached; with fewer, more of the test is used.
LOADED_FRAMES = 6
#: Noises that the signal has to rise by, so that a short gauge on a stiff coupon still sees a slope.
STANDS_OUT = 20
#: Misfit (share of the window's largest signal) beyond which the camera's signal does not follow the
#: machine's at all: the worst that a parabola through a rest and a slope leaves is about as much.
WORST_MISFIT = 0.05
#: Frames on either side of the best offset that the record has to allow, so that the best is no mere end.
MARGIN = 1.5
#: Share of the shorter of film and record that lies within the other, at the least.
LEAST_OVERLAP = 0.5

_REMEDY = 'give sync.offset (machine time of the first camera second, for example "3.4 s")'


@dataclass(frozen=True)
class Located:
    """What one event says of the offset.

    Attributes
    ----------
    offset_s, u_s
        Offset and standard uncertainty, s.
    at_s
        Camera time of the event, s.
    words
        Which event, for people.
    why_wide
        Empty where the event tells the offset; else why it gives no more than a range, of which offset
        and uncertainty are the middle and that of a rectangular distribution.
    low_s, high_s
        Bounds of the offset where it is a range.
    tried_s, misfit
        Offsets around the best one, and the residual standard deviation relative to the best; for the report.
    """

    offset_s: float
    u_s: float
    at_s: float
    words: str
    why_wide: str = ""
    low_s: float = -np.inf
    high_s: float = np.inf
    tried_s: Floats = field(default_factory=lambda: np.empty(0), compare=False)
    misfit: Floats = field(default_factory=lambda: np.empty(0), compare=False)


def cannot_tell(why: str, remedy: str = _REMEDY) -> ClockError:
    """Return the error for clocks that cannot be joined at all."""
    return ClockError(why, where="sync.offset", remedy=remedy)


def beginning(
    time: Floats, signal: Floats, noise: Floats, record: LoadRecord, *, limit: float, same_sign: bool
) -> Course:
    """Cut out the measured frames up to a small signal, counted from the first frames.

    Raises
    ------
    ClockError
        If too few frames were measured, or the signal stays within its noise.
    """
    measured = np.isfinite(signal) & np.isfinite(noise)
    needed = REST_FRAMES + LOADED_FRAMES
    if measured.sum() < needed:
        raise cannot_tell(
            f"only {measured.sum()} frames were measured, {needed} are needed to find the start of loading"
        )
    time, noise = time[measured], noise[measured]
    rise = signal[measured] - np.median(signal[measured][:REST_FRAMES])
    size, usual = np.abs(rise), float(np.median(noise))
    # A median of three keeps one badly tracked frame from ending the beginning.
    steady = np.median([size, np.append(size[1:], size[-1]), np.append(size[0], size[:-1])], axis=0)
    if steady.max() < STANDS_OUT * usual:
        raise cannot_tell("the strain never rises above its noise")
    limit = min(max(limit, STANDS_OUT * usual), LARGEST_SHARE * float(steady.max()))
    last = _first_passage(steady, limit)
    while (steady[:last] > limit / LOADED_FRAMES / 2).sum() < LOADED_FRAMES and last < len(steady):
        limit *= 1.25
        last = _first_passage(steady, limit)
    # What lies above the limit before it is first passed is a badly tracked frame.
    early = np.flatnonzero(size[:last] <= limit)
    return Course(time[early], rise[early], float(np.median(noise[early])), record, same_sign)


def _first_passage(steady: Floats, limit: float) -> int:
    """Return the number of frames before a limit is first passed (all, if it never is)."""
    above = steady > limit
    return int(np.argmax(above)) if above.any() else len(steady)


def locate(course: Course, film: tuple[float, float], words: str, others: Sequence[Course] = ()) -> Located:
    """Find the offset with which the machine's signal explains the camera's, or the range of those that do.

    Parameters
    ----------
    course
        The event.
    film
        Camera times of the first and the last frame, s.
    words
        What the event is called.
    others
        The event over more and fewer frames, of which the longest that serves is used.

    Raises
    ------
    ClockError
        If no offset explains the signal.
    """
    misfit = Misfit(course)
    step = misfit.interval / 2
    time = course.record.time_s
    grid = np.arange(time[0] - course.time_s[-1], time[-1] - course.time_s[0] + step, step)
    found = misfit.mean_square(grid)
    best = int(np.argmin(found))
    margin = int(MARGIN * misfit.interval / step)
    around = slice(max(best - margin, 0), best + margin + 1)
    whole = best >= margin and best + margin < len(grid) and bool(np.isfinite(found[around]).all())
    if not whole:
        return _range(misfit, grid, film, words, "record and frames do not both begin some frames before it")
    if found[best] > (WORST_MISFIT * misfit.size) ** 2:
        raise does_not_follow()
    # Three standard deviations of a variance with that many degrees of freedom.
    rivals = found < found[best] * (1 + 3 * sqrt(2 / max(len(course.time_s) - DEGREE - 2, 1)))
    if np.ptp(grid[rivals]) > 2 * misfit.interval:
        shorter = shortened(misfit, others, float(grid[best]))
        if shorter is not None:
            return locate(shorter, film, words, others)
        return _range(misfit, grid, film, words, "many offsets explain the frames alike")
    offset = misfit.refined(float(grid[best]))
    if others:
        misfit = settled(misfit, others, offset)
        course, offset = misfit.course, misfit.refined(offset)
    u = hypot(misfit.uncertainty(offset), unsaid_s(misfit, offset))
    if not u < misfit.interval:
        return _range(misfit, grid, film, words, "it is seen too indistinctly")
    tried = offset + np.linspace(-2, 2, 81) * misfit.interval
    square = misfit.mean_square(tried)
    at = float(course.time_s[misfit.at_rest][-1]) if misfit.at_rest.any() else float(course.time_s[0])
    relative = np.sqrt(square / misfit.mean_square(np.array([offset])))
    return Located(offset, u, at, course.reach(words), tried_s=tried, misfit=relative)


def _range(misfit: Misfit, grid: Floats, film: tuple[float, float], words: str, why: str) -> Located:
    """Return the middle and the bounds of the offsets that do not contradict the data.

    A frame outside the record says nothing, so it counts as one that is missed by its noise.
    """
    course, time = misfit.course, misfit.course.record.time_s
    shorter = min(film[1] - film[0], time[-1] - time[0])
    shared = np.minimum(grid + film[1], time[-1]) - np.maximum(grid + film[0], time[0])
    total, inside = misfit.residuals(grid)
    told = inside >= DEGREE + 4
    mean = total / np.maximum(inside - DEGREE - 1, 1)
    if told.any() and mean[told].min() > (WORST_MISFIT * misfit.size) ** 2:
        raise does_not_follow()
    # Where few frames are inside, they may fit by chance; how noisy they are is told by offsets with many.
    many = told & (inside >= 0.8 * inside.max())
    variance = max(float(mean[many].min()), course.noise**2) if many.any() else course.noise**2
    # Three standard deviations of a sum of that many squares.
    bound = inside + 3 * np.sqrt(2 * np.maximum(inside, 1)) + 9
    possible = (shared >= LEAST_OVERLAP * shorter) & (~told | (total <= bound * variance))
    if not possible.any():
        raise does_not_follow()
    low, high = float(grid[possible][0]) - misfit.interval, float(grid[possible][-1]) + misfit.interval
    return within(Located(0.0, 0.0, float(course.time_s[0]), course.reach(words), why), low, high)


def within(found: Located, low: float, high: float) -> Located:
    """Return a range of offsets, with its middle and the uncertainty of a rectangular distribution."""
    middle, u = (low + high) / 2, (high - low) / sqrt(12)
    return Located(middle, u, found.at_s, found.words, found.why_wide, low, high)


def does_not_follow() -> ClockError:
    """Return the error for frames whose signal no offset explains."""
    return cannot_tell(
        "the strain of the first frames does not follow the force",
        f"check the frames' times (frames.rate, unless they bring their own), and whether frames or rows are "
        f"missing, or {_REMEDY}",
    )


def follows_turned(course: Course, film: tuple[float, float]) -> bool:
    """Tell whether the machine's signal explains the camera's with its sign turned."""
    try:
        return not locate(turned(course), film, "").why_wide
    except ClockError:
        return False
