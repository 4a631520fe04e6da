"""What can be told about a record before anything is asked of it."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from dic.errors import LoadRecordError, Notice
from dic.quantities import is_unit
from dic.sync.columns import Header, headers_of, recognised, unit_of
from dic.sync.instants import Segment, find_segments, refuse_backwards
from dic.sync.reading import decimals_assumed, open_record, read_instants
from dic.tables import Table
from dic.tables.layout import NAMES

Floats = NDArray[np.float64]


@dataclass(frozen=True)
class ColumnSurvey:
    """One column of a record.

    Attributes
    ----------
    number
        Counted from 1.
    header, unit
        As they stand in the file; the unit is None where there is none.
    quantity
        What it seems to be: ``time``, ``force``, ``displacement``, ``extensometer`` or ``trigger``; None
        where that cannot be told.
    low, high
        Least and largest number, in the column's unit (s for clock times); NaN where there is none.
    missing
        Rows without a number.
    clock
        ``"times of day"`` or ``"dates"`` (counted from the first one) where it holds those, else empty.
    """

    number: int
    header: str
    unit: str | None
    quantity: str | None
    low: float
    high: float
    missing: int
    clock: str


@dataclass(frozen=True)
class SegmentSurvey:
    """A stretch of a record within which time runs on: rows of the file, and times, s."""

    first_row: int
    last_row: int
    start_s: float
    end_s: float


@dataclass(frozen=True)
class RecordSurvey:
    """What a record holds.

    Attributes
    ----------
    sheet
        The workbook's sheet that was read; None for a text file.
    encoding, separator, decimal
        How it is written; the separator in words, the decimal mark of most columns.
    heading
        Lines above the headers.
    columns
        Its columns.
    rows
        Rows of data.
    segments
        Stretches within which time runs on; none where no column could be told to be the time.
    interval_s
        Median, least and largest time between stamps that differ, s; NaN where time is unknown.
    start_s, end_s
        First and last time, s; NaN where time is unknown.
    notices
        Doubts, with remedies.
    """

    sheet: str | None
    encoding: str
    separator: str
    decimal: str
    heading: int
    columns: tuple[ColumnSurvey, ...]
    rows: int
    segments: tuple[SegmentSurvey, ...]
    interval_s: tuple[float, float, float]
    start_s: float
    end_s: float
    notices: tuple[Notice, ...]

    def in_words(self) -> str:
        """Return how the file is written, as part of a sentence."""
        mark = "decimal comma" if self.decimal == "," else "decimal point"
        above = f", {self.heading} lines above the headers" if self.heading else ""
        if self.sheet is not None:
            return f"sheet '{self.sheet}' of a workbook{above}"
        return f"{self.encoding}, columns separated by {self.separator}, {mark}{above}"

    def candidates(self, quantity: str) -> tuple[ColumnSurvey, ...]:
        """Return the columns that could hold a quantity."""
        return tuple(column for column in self.columns if column.quantity == quantity)


def look_at_record(path: Path, sheet: str | None = None, decimal: str | None = None) -> RecordSurvey:
    """Tell what a load record holds, without being told what to look for.

    Parameters
    ----------
    path
        The file.
    sheet
        A workbook's sheet.
    decimal
        The decimal mark, where it is known.

    Raises
    ------
    LoadRecordError
        If the file cannot be read or is no table.
    """
    table = open_record(Path(path), decimal, sheet, key="the path")
    headers = headers_of(table)
    called = recognised("time", headers) or [h for h in headers if table.is_instant(h.position)]
    columns = tuple(_column(table, header, header in called) for header in headers)
    numbers = [header for header in headers if columns[header.position].missing < len(table.cells)]
    notices = [*table.notices, *decimals_assumed(table, [h for h in numbers if not _mixed(table, h)])]
    time_s = np.full(len(table.cells), np.nan)
    if len(called) == 1:
        try:
            instant = table.is_instant(called[0].position)
            unit = None if instant else unit_of("time", called[0], {}, table.path)
            read = read_instants(table, called[0], unit)
            time_s = read.time_s
            notices += read.notices
        except LoadRecordError as error:
            notices.append(Notice("record_time", str(error)))
    lines, time, segments = _running(table, time_s)
    for part in segments:
        try:
            refuse_backwards(time[part.first : part.last], lines[part.first : part.last], table.path)
        except LoadRecordError as error:
            notices.append(Notice("record_time", str(error)))
    marks = [table.decimal_of(h.position).mark for h in numbers if not _mixed(table, h)]
    return RecordSurvey(
        sheet=table.sheet,
        encoding=table.encoding,
        separator=NAMES[table.separator],
        decimal=max(marks, key=marks.count) if marks else ".",
        heading=table.heading,
        columns=columns,
        rows=len(table.cells),
        **_timing(lines, time, segments),
        notices=tuple(notices),
    )


def _column(table: Table, header: Header, is_time: bool) -> ColumnSurvey:
    position = header.position
    clock = table.is_instant(position)
    read = None
    if _mixed(table, header):
        values = np.full(len(table.cells), np.nan)
    else:
        read = read_instants(table, header, None) if clock else None
        values = read.time_s if read is not None else table.values(position)
    there = values[np.isfinite(values)]
    guess = header.guess()
    return ColumnSurvey(
        number=position + 1,
        header=header.text,
        unit=header.unit if header.unit and is_unit(header.unit) else None,
        quantity="time" if is_time else guess if guess != "time" else None,
        low=float(there.min()) if there.size else float("nan"),
        high=float(there.max()) if there.size else float("nan"),
        missing=len(values) - there.size,
        clock="" if read is None else "times of day" if read.epoch is None else "dates",
    )


def _mixed(table: Table, header: Header) -> bool:
    """Tell whether a column's decimal marks contradict each other."""
    if table.is_instant(header.position):
        return False
    try:
        table.decimal_of(header.position)
    except LoadRecordError:
        return True
    return False


def _running(table: Table, time_s: Floats) -> tuple[NDArray[np.int64], Floats, list[Segment]]:
    """Return rows and times where there is a time, and the segments; none where there are no two."""
    seen = np.flatnonzero(np.isfinite(time_s))
    time, lines = time_s[seen], table.cells.index.to_numpy()[seen]
    if seen.size < 2:
        return lines, time, []
    return lines, time, find_segments(time, table.breaks if seen.size == len(time_s) else ())


def _timing(lines: NDArray[np.int64], time: Floats, segments: list[Segment]) -> dict[str, Any]:
    if not segments:
        nan = float("nan")
        return {"segments": (), "interval_s": (nan, nan, nan), "start_s": nan, "end_s": nan}
    steps = np.concatenate([np.diff(time[s.first : s.last]) for s in segments])
    steps = steps[steps != 0]  # stamps that repeat
    spread = (
        (float(np.median(steps)), float(steps.min()), float(steps.max()))
        if steps.size
        else (float("nan"),) * 3
    )
    return {
        "segments": tuple(
            SegmentSurvey(
                int(lines[s.first]), int(lines[s.last - 1]), float(time[s.first]), float(time[s.last - 1])
            )
            for s in segments
        ),
        "interval_s": spread,
        "start_s": float(time[0]),
        "end_s": float(time[-1]),
    }
