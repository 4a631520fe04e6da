"""Doubts about when frames were taken: gaps, missing numbers, disorder, pictures shown twice."""

from __future__ import annotations

import re
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from itertools import pairwise
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from dic.errors import Notice, listed

#: An interval longer than this many usual ones is a gap: one dropped frame makes two of it.
GAP = 1.5
#: Every this many rows are compared first: pictures that differ nearly always differ there.
_ROWS_APART = 61


@dataclass(frozen=True)
class Gap:
    """Two frames that follow one another later than usual.

    Attributes
    ----------
    after, before
        Names of the two.
    duration_s
        Time between them, s.
    """

    after: str
    before: str
    duration_s: float


def gaps(names: Sequence[str], time_s: NDArray[np.float64]) -> tuple[Gap, ...]:
    """List the gaps in the frames' times.

    Parameters
    ----------
    names, time_s
        The frames in order, n of them.

    Returns
    -------
    tuple of Gap
        Where an interval is longer than 1.5 times the median.
    """
    between = np.diff(time_s)
    if len(between) < 2:
        return ()
    late = np.flatnonzero(between > GAP * np.median(between)).tolist()
    return tuple(Gap(names[k], names[k + 1], float(between[k])) for k in late)


def gap_doubts(names: Sequence[str], time_s: NDArray[np.float64]) -> Iterator[Notice]:
    """Tell of gaps in the times: the frames between were not measured, the others are where they belong."""
    found = gaps(names, time_s)
    if found:
        said = [f"{gap.duration_s:.4g} s after {gap.after}" for gap in found]
        yield Notice(
            "frames_dropped",
            f"Frames seem to be missing where the time between two is more than {GAP} times the usual "
            f"{np.median(np.diff(time_s)):.4g} s: {listed(said)}; the others keep their own times.",
        )


def number_gaps(names: Sequence[str]) -> list[tuple[str, str]]:
    """Return the pairs of names between which numbers are missing.

    Every second number, say, is a way of numbering; a jump among ones is a gap.
    """
    numbers = [
        int(found[-1]) if (found := re.findall(r"\d{1,12}", Path(name).stem)) else None for name in names
    ]
    jumps = [
        (one, other, b - a)
        for (one, a), (other, b) in pairwise(zip(names, numbers, strict=True))
        if a is not None and b is not None
    ]
    if 1 not in {step for *_, step in jumps}:
        return []
    return [(one, other) for one, other, step in jumps if step > 1]


def number_doubts(names: Sequence[str]) -> Iterator[Notice]:
    """Warn of gaps in the numbering, which a fixed rate would turn into wrong times."""
    found = number_gaps(names)
    if found:
        yield Notice(
            "frame_numbers_missing",
            f"Frame numbers jump from {found[0][0]} to {found[0][1]}"
            + (f" and in {len(found) - 1} more places" if len(found) > 1 else "")
            + "; if frames are missing, all later times are too early: give frames.times instead of a rate, "
            'or, where the numbers count frames, clock = "names" with {frame} in name_time beside it.',
        )


def order_doubts(names: Sequence[str], order: Sequence[int]) -> Iterator[Notice]:
    """Tell which frames were put elsewhere because of their times."""
    out = [names[b] for a, b in pairwise(order) if b < a]
    if out:
        yield Notice(
            "frames_reordered",
            f"The order of names is not the order of times; frames were put in order of time: {listed(out)} "
            "would have come earlier by name. Check that the times are right.",
        )


class RepeatWatch:
    """Tells frame by frame whether a camera froze, that is, shows the picture before again.

    Two exposures never give the same picture, because each pixel has its own noise.  Only a source
    whose first two pictures are the same may be without noise (a drawn test), and is left alone.

    Parameters
    ----------
    alike_at_rest
        Whether compression may have taken the noise out, so that frames at rest are the same by right;
        the source then is left alone.
    """

    def __init__(self, *, alike_at_rest: bool = False) -> None:
        self._last: NDArray[Any] | None = None
        self._noisy: bool | None = False if alike_at_rest else None

    def frozen(self, frame: NDArray[Any]) -> bool:
        """Whether the next frame repeats the one before it in a source that has noise."""
        last, self._last = self._last, frame
        if last is None:
            return False
        same = same_picture(last, frame)
        if self._noisy is None:
            self._noisy = not same
        return same and self._noisy


def same_picture(one: NDArray[Any], other: NDArray[Any]) -> bool:
    """Whether two pictures are identical in every pixel."""
    return np.array_equal(one[::_ROWS_APART], other[::_ROWS_APART]) and np.array_equal(one, other)
