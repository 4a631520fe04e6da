"""When each frame was taken, on the camera's own clock."""

from __future__ import annotations

from bisect import bisect_left
from collections.abc import Sequence
from dataclasses import dataclass
from datetime import datetime
from itertools import pairwise
from math import ceil
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from dic.errors import FrameError, Notice, listed
from dic.frames import instants
from dic.frames.doubts import gap_doubts, number_doubts, order_doubts
from dic.frames.even import even_rate
from dic.frames.names import name_pattern, times_in_names
from dic.frames.page import Page
from dic.frames.tags import Tags, read_tags
from dic.frames.times import times_from_file
from dic.testfile import Frames


@dataclass(frozen=True)
class FrameClock:
    """The camera's clock.

    Attributes
    ----------
    order
        Places of the frames in order of time, shape (n,).
    time_s
        Time of each frame in that order, s, shape (n,).
    epoch
        Date and time of the camera's time zero, on the clock that wrote the stamps, without a time
        zone; None where only differences of time are known.
    notices
        Doubts about the times.
    """

    order: NDArray[np.int64]
    time_s: NDArray[np.float64]
    epoch: datetime | None = None
    notices: tuple[Notice, ...] = ()


@dataclass(frozen=True)
class _Stamps:
    """Instants of the frames in the order of their names, ns."""

    ns: Sequence[int]
    where: str
    remedy: str
    dated: bool = True
    notices: tuple[Notice, ...] = ()


def frame_clock(
    section: Frames, folder: Path, pages: Sequence[Page], tags: Sequence[Tags] | None = None
) -> FrameClock:
    """Return the time of each frame.

    Parameters
    ----------
    section
        ``[frames]`` of the test file: a fixed ``rate``; ``times``, a table, see
        `dic.frames.times`; a ``clock`` that the files carry themselves; or nothing, for a video.  Of other
        frames of which nothing is said yet, the times are NaN.
    folder
        What relative paths start from.
    pages
        The frames in natural order of their names.
    tags
        The files' tags, where they are known already.

    Raises
    ------
    FrameError
        If a frame has no time, or two have the same.
    """
    names = [page.path.name for page in pages]
    if section.own_times:
        return _from_film(section, pages)
    if section.times is not None:
        found = times_from_file(folder / section.times, names)
        stamps = _Stamps(found.ns, section.times, "correct the times file", found.dated)
        return _ordered(names, stamps, section.start, zero=None if found.dated else 0, keep=not found.named)
    if section.name_time is not None:
        return _ordered(names, _from_names(section.name_time, names, section.rate), section.start)
    if section.clock == "modified":
        return _ordered(names, _from_dates(pages), section.start, keep=True)
    if section.clock == "tags":
        damaged = [bool(page.damage) for page in pages]
        return _from_tags(section, names, read_tags(pages) if tags is None else tags, damaged)
    if section.rate is None:
        return FrameClock(np.arange(len(names)), np.full(len(names), np.nan))
    time_s = section.start + np.arange(len(names)) / section.rate
    return FrameClock(np.arange(len(names)), time_s, None, tuple(number_doubts(names)))


def _ordered(
    names: list[str], stamps: _Stamps, start: float, *, zero: int | None = None, keep: bool = False
) -> FrameClock:
    """Put frames in order of their stamps, time counted from the first one or from `zero`.

    With `keep`, stamps that are not in order already are refused.
    """
    ns = stamps.ns
    order = np.array(sorted(range(len(ns)), key=ns.__getitem__), dtype=np.int64)
    out = next((k for k in range(1, len(ns)) if ns[k] <= ns[k - 1]), None) if keep else None
    if out is not None:
        raise FrameError(
            f"time does not increase from frame {names[out - 1]} to {names[out]}",
            where=stamps.where,
            remedy=stamps.remedy,
        )
    equal = next((k for k in range(1, len(ns)) if ns[order[k]] == ns[order[k - 1]]), None)
    if equal is not None:
        count = sum(ns[a] == ns[b] for a, b in pairwise(order))
        more = f" ({count} such pairs)" if count > 1 else ""
        raise FrameError(
            f"frames {names[order[equal - 1]]} and {names[order[equal]]} have the same time{more}",
            where=stamps.where,
            remedy=stamps.remedy,
        )
    first = ns[order[0]] if zero is None else zero
    time_s = start + np.array([(ns[k] - first) / instants.SECOND for k in order])
    in_order = [names[k] for k in order]
    notices = (*stamps.notices, *order_doubts(names, order.tolist()), *gap_doubts(in_order, time_s))
    epoch = _epoch(first, start) if stamps.dated else None
    return FrameClock(order, time_s, epoch, notices)


def _epoch(first: int, start: float) -> datetime | None:
    """Return the date and time of the camera's time zero, from the first frame's instant, ns, and time, s."""
    try:
        return instants.to_datetime(first - round(start * instants.SECOND))
    except OverflowError:
        return None


def _from_film(section: Frames, pages: Sequence[Page]) -> FrameClock:
    """Take the times that a video gives its own frames."""
    times = np.array([page.time_s for page in pages], dtype=float)
    if not (np.diff(times) > 0).all():
        raise FrameError(
            "gives its frames no increasing times", where=section.source, remedy="give frames.rate"
        )
    names = [f"{page.path.name}#{page.index + 1}" for page in pages]
    time_s = section.start + times
    return FrameClock(np.arange(len(pages)), time_s, None, tuple(gap_doubts(names, time_s)))


def _from_names(name_time: str, names: list[str], rate: float | None) -> _Stamps:
    try:
        pattern = name_pattern(name_time)
    except ValueError as error:
        raise FrameError(str(error), where="frames.name_time") from error
    ns = times_in_names(pattern, names, rate)
    remedy = "correct frames.name_time so that it says the whole time, or give frames.rate"
    return _Stamps(ns, f"frames.name_time = '{name_time}'", remedy, pattern.dated)


def _from_dates(pages: Sequence[Page]) -> _Stamps:
    ns = []
    for page in pages:
        state = page.path.stat()
        local = datetime.fromtimestamp(state.st_mtime_ns // instants.SECOND)
        ns.append(instants.from_datetime(local) + state.st_mtime_ns % instants.SECOND)
    notice = Notice(
        "clock_modified",
        "Frame times are the files' modification dates, which say when a file was written, not when the "
        "shutter opened, and which copying or unpacking may change; give a rate, a times file or another "
        "clock if there is one.",
    )
    remedy = "the files were copied or changed; give a rate or a times file"
    return _Stamps(ns, 'frames.clock = "modified"', remedy, notices=(notice,))


def _from_tags(
    section: Frames, names: list[str], tags: Sequence[Tags], damaged: Sequence[bool]
) -> FrameClock:
    stamps = best_stamps(tags, damaged)
    if stamps is None:
        without = [name for name, one in zip(names, tags, strict=True) if not any(one.taken)]
        whose = listed(without) if without else "some of the frames"
        raise FrameError(
            f"no time stamp common to all frames ({whose})",
            where='frames.clock = "tags"',
            remedy="give a rate or a times file, or take out the files without a stamp",
        )
    remedy = "give a rate or a times file"
    if any(one is not None and one % instants.SECOND for one in stamps):
        return _ordered(names, _Stamps(_filled(stamps), 'frames.clock = "tags"', remedy), section.start)
    return _from_whole_seconds(names, stamps, section.start)


def best_stamps(tags: Sequence[Tags], damaged: Sequence[bool]) -> list[int | None] | None:
    """Return the instants from the tag nearest to the shutter that all sound frames have, ns.

    Parameters
    ----------
    tags
        What each frame says.
    damaged
        Whether it is known to be damaged: then it has no reading, and need not say a time.

    Returns
    -------
    list or None
        None where no tag is common to the sound frames.
    """
    for column in zip(*(one.taken for one in tags), strict=True):
        if all(bad or instant is not None for instant, bad in zip(column, damaged, strict=True)):
            return list(column)
    return None


def _filled(stamps: Sequence[int | None]) -> list[int]:
    """Fill in the instants that are missing, evenly between those that are known and on beyond them."""
    known = {k: instant for k, instant in enumerate(stamps) if instant is not None}
    places = list(known)
    filled = []
    for k in range(len(stamps)):
        after = min(max(bisect_left(places, k), 1), len(places) - 1)
        one, other = places[max(after - 1, 0)], places[after]
        filled.append(known[one] + (known[other] - known[one]) * (k - one) // max(other - one, 1))
    return filled


def _from_whole_seconds(names: list[str], stamps: list[int | None], start: float) -> FrameClock:
    """Take the even rate that explains stamps without sub-seconds, or the stamps if they all differ."""
    where, remedy = 'frames.clock = "tags"', "the stamps are whole seconds: give a rate or a times file"
    frames = np.array([k for k, one in enumerate(stamps) if one is not None])
    seconds = np.array([one // instants.SECOND for one in stamps if one is not None], dtype=np.int64)
    even = even_rate(seconds, frames) if (np.diff(seconds) >= 0).all() else None
    if even is not None:
        notice = Notice(
            "stamps_whole_seconds",
            f"The files' time stamps are whole seconds; frames were taken as evenly {even.interval_s:.6g} s "
            f"apart (standard uncertainty {_two_digits(even.u_interval_s)} s), which explains every stamp. "
            "Give frames.rate if it is known better.",
        )
        time_s = start + even.interval_s * np.arange(len(stamps), dtype=np.float64)
        return FrameClock(
            np.arange(len(stamps)), time_s, _epoch(round(even.first_s * instants.SECOND), start), (notice,)
        )
    coarse = Notice(
        "stamps_whole_seconds",
        "The files' time stamps are whole seconds, and no even rate explains them; each time may be wrong by "
        "up to 1 s. Give a times file if there is one.",
    )
    return _ordered(names, _Stamps(_filled(stamps), where, remedy, notices=(coarse,)), start)


def _two_digits(value: float) -> str:
    """Write an uncertainty with two digits, rounded up so that it is not understated."""
    if not value > 0:
        return "0"
    unit = 10.0 ** (np.floor(np.log10(value)) - 1)
    return f"{ceil(value / unit - 1e-9) * unit:.2g}"


def exposure_of(section: Frames, pages: Sequence[Page]) -> float | None:
    """Return the exposure time, s: as given, else as the first file says it; None where it does not."""
    return section.exposure if section.exposure is not None else read_tags(pages[:1])[0].exposure_s
