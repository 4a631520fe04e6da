"""The machine's clock in a record: clock times and dates to seconds, stamps that repeat or start anew."""

from __future__ import annotations

import re
from dataclasses import dataclass
from datetime import datetime, timedelta
from pathlib import Path

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from dic.errors import LoadRecordError, Notice, listed
from dic.tables import Break

Floats = NDArray[np.float64]

_DAY = 86_400.0
#: Fewer rows are no test.
MIN_ROWS = 5

_CLOCK = r"(?:(?P<h>\d{1,3}):)?(?P<m>\d{1,2}):(?P<s>\d{1,2}(?:[.,]\d+)?)(?:\s?(?P<half>[AaPp])[Mm])?"
_DATE = r"(?P<a>\d{1,4})(?P<mark>[-./])(?P<b>\d{1,2})[-./](?P<c>\d{1,4})"
_INSTANT = re.compile(rf"^(?:{_DATE})?(?:T|\s+)?(?:{_CLOCK})?(?:Z|[+-]\d\d:?\d\d)?$", re.ASCII)


@dataclass(frozen=True)
class Instants:
    """Times as read.

    Attributes
    ----------
    time_s
        Seconds, NaN where a cell is no time, shape (n,); from the first one if the cells hold dates.
    epoch
        Date and wall-clock time of the first one, where the cells hold dates.
    style
        How they are written, for people.
    notices
        What was assumed.
    """

    time_s: Floats
    epoch: datetime | None
    style: str
    notices: tuple[Notice, ...] = ()


def from_clock(cells: list[str], path: Path) -> Instants:
    """Read clock times (``hh:mm:ss.fff``, ``mm:ss``) or dates with them (ISO 8601, d.m.Y, d/m/Y, m/d/Y).

    Where days and months cannot be told apart, the day is taken to stand first, or the month if a.m. and
    p.m. are used; time zones are not converted, since the camera's stamps are wall-clock times too.

    Parameters
    ----------
    cells
        The column's text.
    path
        The file, for messages.
    """
    parts = pd.Series(cells, dtype=object).str.extract(_INSTANT)
    number = {
        name: pd.to_numeric(parts[name].str.replace(",", "."), errors="coerce").to_numpy(np.float64)
        for name in ("h", "m", "s", "a", "b", "c")
    }
    clock = _clock(number, parts["half"])
    dated = np.isfinite(number["a"])
    if dated.sum() * 2 <= len(cells):
        style = "hh:mm:ss" if np.isfinite(number["h"]).any() else "mm:ss"
        return Instants(_past_midnight(np.where(dated, np.nan, clock)), None, style)
    days, doubt, style = _days(number, parts, path)
    # A date alone is its midnight; what stands after it and is no clock time is none.
    clock = np.where(np.isfinite(number["m"]), clock, 0.0)
    there = np.flatnonzero(np.isfinite(days + clock))
    if not there.size:
        return Instants(days + clock, None, style, doubt)
    first = there[0]
    # Days apart first: seconds since 1970 would leave no room for microseconds.
    time_s = (days - days[first]) * _DAY + (clock - clock[first])
    epoch = datetime(1970, 1, 1) + timedelta(days=float(days[first]), seconds=float(clock[first]))
    return Instants(time_s, epoch, style, doubt)


def _clock(number: dict[str, Floats], half: pd.Series[str]) -> Floats:
    """Return seconds since midnight, NaN where minutes or seconds are none."""
    hours = np.nan_to_num(number["h"])
    letter = half.str.lower()
    hours = np.where((letter == "p") & (hours < 12), hours + 12, hours)
    hours = np.where((letter == "a") & (hours == 12), 0, hours)
    seconds = 3600 * hours + 60 * number["m"] + number["s"]
    minutes_fit = (number["m"] < 60) | ~np.isfinite(number["h"])
    return np.where(minutes_fit & (number["s"] < 61), seconds, np.nan)


def _past_midnight(seconds: Floats) -> Floats:
    """Let the day's clock run on where it passes midnight."""
    step = np.diff(seconds, prepend=seconds[:1])
    return seconds + _DAY * np.cumsum(step < -0.9 * _DAY)


def _days(
    number: dict[str, Floats], parts: pd.DataFrame, path: Path
) -> tuple[Floats, tuple[Notice, ...], str]:
    """Return days since 1970, what was assumed about them, and how dates are written."""
    a, b, c = number["a"], number["b"], number["c"]
    doubt: tuple[Notice, ...] = ()
    if np.nanmax(a) > 31:
        year, month, day, style = a, b, c, "Y-m-d"
    else:
        dotted = bool((parts["mark"] == ".").any())
        day_first = dotted or bool(np.nanmax(a) > 12)
        if not day_first and not np.nanmax(b) > 12:
            day_first = not parts["half"].notna().any()
            order = "day before month" if day_first else "month before day"
            shown = f"{a[np.isfinite(a)][0]:02.0f}/{b[np.isfinite(b)][0]:02.0f}"
            text = (
                f"{path.name}: dates such as {shown} were read as {order}; where that is wrong, "
                "export ISO 8601 dates (year first)."
            )
            doubt = (Notice("record_dates", text),)
        day, month = (a, b) if day_first else (b, a)
        year = np.where(c < 100, 2000 + c, c)
        style = "d.m.Y" if dotted else "d/m/Y" if day_first else "m/d/Y"
    # Beyond these years lies no load record, and the calendar ends.
    sane = (year > 1900) & (year < 2200)
    table = pd.DataFrame({"year": np.where(sane, year, np.nan), "month": month, "day": day})
    dates = pd.to_datetime(table, errors="coerce").to_numpy("datetime64[D]")
    return np.where(np.isnat(dates), np.nan, dates.astype(np.float64)), doubt, style


@dataclass(frozen=True)
class Segment:
    """A stretch of a record within which time runs on.

    Attributes
    ----------
    first, last
        Its rows of data, counted from 0, the last not included.
    """

    first: int
    last: int


def find_segments(time_s: Floats, breaks: tuple[Break, ...]) -> list[Segment]:
    """Split a record where its time starts anew.

    Time starts anew where it falls back to, or before, where the segment began, or where it falls behind
    any rows of text between the data.  Where that would leave mostly segments of too few rows, the clock is
    broken, and the record is one segment whose time runs back.

    Parameters
    ----------
    time_s
        Finite times, s, shape (n,).
    breaks
        Rows of text between the data.
    """
    cuts = [0]
    after_text = {b.before for b in breaks}
    steps = np.diff(time_s)
    usual = float(np.median(steps[steps > 0])) if (steps > 0).any() else 0.0
    for back in np.flatnonzero(steps < 0) + 1:
        anew = time_s[back] <= time_s[cuts[-1]] + usual / 2
        if (anew or back in after_text) and back - cuts[-1] > 1:
            cuts.append(int(back))
    ends = [*cuts[1:], len(time_s)]
    if np.median(np.subtract(ends, cuts)) < MIN_ROWS:
        return [Segment(0, len(time_s))]
    return [Segment(first, last) for first, last in zip(cuts, ends, strict=True)]


def refuse_backwards(time_s: Floats, lines: NDArray[np.int64], path: Path) -> None:
    """Raise where time runs back."""
    back = np.flatnonzero(np.diff(time_s) < 0) + 1
    if not back.size:
        return
    if 2 * back.size > len(time_s):
        raise LoadRecordError(
            f"time runs backwards, from {time_s[0]:g} s to {time_s[-1]:g} s",
            where=f"{path}, rows {lines[0]} to {lines[-1]}",
            remedy="export the rows in the order in which they were measured",
        )
    here = back[0]
    raise LoadRecordError(
        f"time does not increase (from {time_s[here - 1]:g} s to {time_s[here]:g} s)",
        where=f"{path}, row{'s' if back.size > 1 else ''} {listed(lines[back].tolist(), 5)}",
        remedy="correct or remove these rows, or export one test only",
    )


def spread_stamps(time_s: Floats, path: Path) -> tuple[Floats, tuple[Notice, ...]]:
    """Give rows that share a time stamp times of their own, evenly up to the next stamp.

    A machine whose clock is coarser than its rows writes a stamp several times.  Averaging such rows would
    lower the largest force, and leaving rows out would lose it; spread out, they are right to one stamp.

    Parameters
    ----------
    time_s
        Times that do not run back, s, shape (n,).
    path
        The file, for messages.

    Raises
    ------
    LoadRecordError
        If time stands still throughout.
    """
    starts = np.flatnonzero(np.diff(time_s, prepend=-np.inf) > 0)
    counts = np.diff(np.append(starts, len(time_s)))
    if counts.max(initial=1) == 1:
        return time_s, ()
    stamps = time_s[starts]
    if len(stamps) < 2:
        raise LoadRecordError("time stands still", where=str(path), remedy="export the time with more digits")
    usual = float(np.median(np.diff(stamps)))
    room = np.minimum(np.append(np.diff(stamps), usual), usual)
    within = np.arange(len(time_s)) - np.repeat(starts, counts)
    spread = time_s + np.repeat(room / counts, counts) * within
    repeated = len(time_s) - len(stamps)
    text = (
        f"{path.name}: {repeated} rows repeat the time stamp before them; rows with one stamp were spread "
        f"evenly up to the next, so times are uncertain by up to {usual:.3g} s. Export the time with more "
        "digits."
    )
    return spread, (Notice("record_repeated_stamps", text),)
