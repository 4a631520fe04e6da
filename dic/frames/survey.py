"""A look at frames before there is a test file: what they are, and which clocks they carry."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from datetime import datetime
from pathlib import Path

import numpy as np

from dic.errors import FrameError, Notice
from dic.frames.clock import FrameClock, best_stamps, frame_clock
from dic.frames.doubts import Gap, RepeatWatch, gaps, number_gaps
from dic.frames.names import suggested_pattern
from dic.frames.source import FrameSource, open_frames
from dic.frames.tags import read_tags
from dic.testfile import Frames

#: A rate that stands in where none is known yet.
_ANY_RATE = 1.0


@dataclass(frozen=True)
class ClockFound:
    """A clock that the files carry.

    Attributes
    ----------
    keys
        What to write into ``[frames]`` for it.
    rate_hz
        Frames per second, from the median interval.
    duration_s
        From the first frame to the last, s.
    epoch
        Date and time of the first frame, None where unknown.
    gaps
        Where frames seem to be missing.
    notices
        Doubts about it.
    """

    keys: dict[str, str]
    rate_hz: float
    duration_s: float
    epoch: datetime | None
    gaps: tuple[Gap, ...]
    notices: tuple[Notice, ...]


@dataclass(frozen=True)
class FrameExposure:
    """How one frame is exposed.

    Attributes
    ----------
    name
        The frame.
    median
        Median grey value, as a share of the full scale.
    clipped
        Share of pixels at the full scale.
    dark
        Share of pixels at zero.
    """

    name: str
    median: float
    clipped: float
    dark: float


@dataclass(frozen=True)
class FramesSurvey:
    """What was found.

    Attributes
    ----------
    source
        The frames, with a rate that only stands in.
    count, shape
        How many, and rows and columns.
    dtype
        Type of the stored values.
    full_scale
        Largest grey value at the depth in use.
    first, last
        Names of the first and the last frame.
    formats
        The files' endings.
    clocks
        The clocks that the files carry, by name: ``tags``, ``names``, ``video``, ``modified``; only
        those that can be used.
    number_gaps
        Names of the frames between which numbers are missing.
    repeated
        Frames that show the picture of the frame before; None where it was not asked for.
    exposures
        The first, the middle and the last frame.
    exposure_s
        Exposure time as the first file says it, s; None where it does not.
    notices
        Doubts about the frames.
    """

    source: FrameSource
    count: int
    shape: tuple[int, int]
    dtype: str
    full_scale: float
    first: str
    last: str
    formats: tuple[str, ...]
    clocks: dict[str, ClockFound]
    number_gaps: tuple[tuple[str, str], ...]
    repeated: tuple[str, ...] | None
    exposures: tuple[FrameExposure, ...]
    exposure_s: float | None
    notices: tuple[Notice, ...]

    @property
    def depth_bits(self) -> int:
        """Bits in use."""
        return self.source.depth.bits


def look_at_frames(
    path: str | Path, *, repeats: bool = False, progress: Callable[[int, int], None] | None = None
) -> FramesSurvey:
    """Look at a folder, a file or a pattern of frames.

    Parameters
    ----------
    path
        The frames.
    repeats
        Whether to read every frame and look for pictures that are shown twice.
    progress
        Called with the frames read and the frames there are, where every frame is read.

    Returns
    -------
    FramesSurvey
        What they are; nothing is measured.

    Raises
    ------
    FrameError
        If there are none, or they cannot be frames of one test.
    """
    path = Path(path)
    source = open_frames(Frames(source=path.name, rate=_ANY_RATE), path.parent)
    full_scale = source.full_scale()
    return FramesSurvey(
        source=source,
        count=len(source),
        shape=source.shape,
        dtype=str(source.pages[0].dtype),
        full_scale=full_scale,
        first=source.names[0],
        last=source.names[-1],
        formats=tuple(sorted({page.path.suffix.lower() for page in source.pages})),
        clocks=clocks_found(source),
        number_gaps=tuple(number_gaps([page.path.name for page in source.pages])),
        repeated=repeated_frames(source, progress) if repeats else None,
        exposures=exposures(source, (0, len(source) // 2, len(source) - 1), full_scale),
        exposure_s=source.exposure_s,
        # What numbers missing would do to a rate, it does not do to the clocks that were found.
        notices=tuple(notice for notice in source.notices if notice.code != "frame_numbers_missing"),
    )


def clocks_found(source: FrameSource) -> dict[str, ClockFound]:
    """Return the clocks that the files carry and that can be used.

    Parameters
    ----------
    source
        The frames in natural order of their names.
    """
    tags = read_tags(source.pages)
    damaged = [bool(page.damage) for page in source.pages]
    pattern = suggested_pattern([page.path.name for page in source.pages])
    video = source.pages[0].film is not None
    wanted: dict[str, dict[str, str] | None] = {
        "video": {} if video else None,
        "tags": {"clock": "tags"} if best_stamps(tags, damaged) is not None else None,
        "names": {"clock": "names", "name_time": pattern} if pattern is not None else None,
        "modified": {"clock": "modified"},
    }
    found = {}
    for name, keys in wanted.items():
        if keys is None:
            continue
        try:
            # The files' own names need not be ones that a test file may hold.
            section = Frames.model_validate({"source": f"frames{source.pages[0].path.suffix}", **keys})
            clock = frame_clock(section, Path(), source.pages, tags)
        except FrameError:
            continue
        found[name] = _described(keys, [source.names[k] for k in clock.order], clock)
    return found


def _described(keys: dict[str, str], names: list[str], clock: FrameClock) -> ClockFound:
    return ClockFound(
        keys=keys,
        rate_hz=float(1 / np.median(np.diff(clock.time_s))),
        duration_s=float(np.ptp(clock.time_s)),
        epoch=clock.epoch,
        gaps=gaps(names, clock.time_s),
        notices=clock.notices,
    )


def exposures(source: FrameSource, frames: Sequence[int], full_scale: float) -> tuple[FrameExposure, ...]:
    """Return how some frames are exposed; frames that cannot be read are left out.

    Parameters
    ----------
    source
        The frames.
    frames
        Their numbers, counted from 0.
    full_scale
        Largest grey value at the depth in use.
    """
    found = []
    for k in frames:
        try:
            grey = source[k]
        except FrameError:
            continue
        share = np.median(grey) / full_scale, np.mean(grey >= full_scale), np.mean(grey == 0)
        found.append(FrameExposure(source.names[k], *(float(one) for one in share)))
    return tuple(found)


def repeated_frames(
    source: FrameSource, progress: Callable[[int, int], None] | None = None
) -> tuple[str, ...]:
    """Return the names of the frames that show the picture of the frame before; all are read."""
    watch, found = RepeatWatch(), []
    for k, name in enumerate(source.names):
        try:
            before = watch.repeats
            watch.frozen(source[k])
            if watch.repeats > before:
                found.append(name)
        except FrameError:
            pass
        if progress is not None:
            progress(k + 1, len(source))
    return tuple(found)
