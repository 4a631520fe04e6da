"""Reading frames and load record for what they hold."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from dic.errors import InputError
from dic.frames import FrameSource
from dic.frames.doubts import gaps, same_picture
from dic.inspection.seen import ColumnSeen, Exposure, FramesSeen, RecordSeen
from dic.sync import LoadRecord
from dic.sync import look_at_record as tell_of_record
from dic.testfile import Frames
from dic.testfile import LoadRecord as RecordSection

#: Called with the frames done and the frames there are.
Progress = Callable[[int, int], None]


def look_at_frames(source: FrameSource, section: Frames, progress: Progress | None) -> FramesSeen:
    """Read every frame once, one in memory beside the one before."""
    full_scale = source.full_scale()
    wanted = {0, len(source) // 2, len(source) - 1}
    exposures, doubles, means = [], [], []
    unreadable: dict[str, str] = {}
    before: NDArray[Any] | None = None
    for index, name in enumerate(source.names):
        try:
            grey = source[index]
        except InputError as error:
            unreadable[name] = error.what
        else:
            means.append(float(grey.mean()))
            if before is not None and not source.lossy and same_picture(grey, before):
                doubles.append(name)
            if index in wanted:
                exposures.append(_exposure(name, grey, full_scale))
            before = grey
        if progress is not None:
            progress(index + 1, len(source))
    return FramesSeen(
        count=len(source),
        rows=source.shape[0],
        columns=source.shape[1],
        depth_bits=source.depth.bits,
        full_scale=full_scale,
        first=source.names[0],
        last=source.names[-1],
        **_times(source.time_s),
        clock=_clock_in_words(section),
        gaps=tuple((gap.after, gap.before) for gap in gaps(source.names, source.time_s)),
        doubles=tuple(doubles),
        unreadable=unreadable,
        exposures=tuple(exposures),
        brightness_drift=_drift(means),
    )


def _times(time_s: NDArray[np.float64]) -> dict[str, Any]:
    """Return first and last time, and the usual, shortest and longest interval, s."""
    step = np.diff(time_s)
    return {
        "first_s": float(time_s[0]),
        "last_s": float(time_s[-1]),
        "interval_s": float(np.median(step)),
        "shortest_s": float(step.min()),
        "longest_s": float(step.max()),
    }


def _drift(means: list[float]) -> float:
    """Return the largest change from the first mean grey value, as a share of it."""
    if not means or means[0] == 0:
        return float("nan")
    return float(np.max(np.abs(np.array(means) / means[0] - 1)))


def _exposure(name: str, grey: NDArray[Any], full_scale: float) -> Exposure:
    dark, median, bright = np.percentile(grey, [5, 50, 95])
    slope = np.diff(grey.astype(np.float32), axis=1)
    steep = float(np.sqrt(np.mean(slope**2)))
    return Exposure(
        frame=name,
        dark=float(dark),
        median=float(median),
        bright=float(bright),
        clipped=float(np.mean(grey >= full_scale)),
        detail_px=float(grey.std() / steep) if steep > 0 else float("nan"),
    )


def _clock_in_words(section: Frames) -> str:
    if section.times is not None:
        return f"the file {section.times}"
    if section.rate is None and section.clock is None:
        return "the video's own times" if section.own_times else "not said yet"
    if section.clock is None:
        return f"a fixed rate of {section.rate:g} Hz"
    said = {
        "tags": "each file's own time stamp",
        "names": f"the file names, as {section.name_time}",
        "modified": "the files' dates of modification",
    }
    return said.get(section.clock, section.clock)


#: Arrays of the load record: quantity, attribute, unit of its values.
_ARRAYS = (
    ("time", "time_s", "s"),
    ("force", "force_N", "N"),
    ("displacement", "displacement_mm", "mm"),
    ("extensometer", "extensometer", "1"),
    ("trigger", "trigger", "1"),
)


def look_at_record(record: LoadRecord, section: RecordSection) -> RecordSeen:
    """Return rates, ranges and columns of a load record, and how its file is written."""
    columns = []
    for quantity, attribute, unit in _ARRAYS:
        values = getattr(record, attribute)
        if values is not None:
            there = values[np.isfinite(values)]
            low, high = (float(there.min()), float(there.max())) if there.size else (np.nan, np.nan)
            columns.append(ColumnSeen(quantity, record.columns.get(quantity, quantity), low, high, unit))
    told = survey_record(record.path, section)
    return replace(told, rows=len(record.time_s), columns=tuple(columns), **_times(record.time_s))


def survey_record(path: Path, section: RecordSection) -> RecordSeen:
    """Return what a load record holds whose columns are not all known yet."""
    survey = tell_of_record(path, section.sheet, section.decimal)
    usual, shortest, longest = survey.interval_s
    return RecordSeen(
        file=str(path),
        rows=survey.rows,
        first_s=survey.start_s,
        last_s=survey.end_s,
        interval_s=usual,
        shortest_s=shortest,
        longest_s=longest,
        columns=tuple(
            ColumnSeen(one.quantity or "not told", one.header, one.low, one.high, one.unit or "")
            for one in survey.columns
        ),
        written=survey.in_words(),
        headers=tuple(column.header for column in survey.columns),
    )
