"""A look at frames before there is a test file: what they are, and which clocks they carry."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path

import numpy as np

from dic.errors import FrameError, Notice
from dic.frames.clock import best_stamps, frame_clock
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
    notices
        Doubts about it.
    """

    keys: dict[str, str]
    rate_hz: float
    duration_s: float
    notices: tuple[Notice, ...]


@dataclass(frozen=True)
class FramesSurvey:
    """What was found.

    Attributes
    ----------
    source
        The frames, with a rate that only stands in.
    clocks
        The clocks that the files carry, by name: ``tags``, ``names``, ``video``, ``modified``; only
        those that can be used.
    notices
        Doubts about the frames.
    """

    source: FrameSource
    clocks: dict[str, ClockFound]
    notices: tuple[Notice, ...]


def look_at_frames(path: str | Path) -> FramesSurvey:
    """Look at a folder, a file or a pattern of frames.

    Parameters
    ----------
    path
        The frames.

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
    # What numbers missing would do to a rate, it does not do to the clocks that were found.
    notices = tuple(notice for notice in source.notices if notice.code != "frame_numbers_missing")
    return FramesSurvey(source, clocks_found(source), notices)


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
        rate = float(1 / np.median(np.diff(clock.time_s)))
        found[name] = ClockFound(keys, rate, float(np.ptp(clock.time_s)), clock.notices)
    return found
