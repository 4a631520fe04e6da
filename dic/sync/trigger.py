"""The clock from a column of the load record that says when the frames were taken."""

from __future__ import annotations

from dataclasses import dataclass
from math import hypot, sqrt

import numpy as np
from numpy.typing import NDArray

from dic.errors import ClockError, Notice
from dic.sync.record import Clock, LoadRecord
from dic.testfile import Sync

Floats = NDArray[np.float64]

#: Levels of a counter, at the least; with fewer the column is a signal that goes up and down.
LEAST_COUNTS = 3
#: Frames from which a drift can be told.
LEAST_FRAMES = 10
#: Times the uncertainty of one frame's row by which times may miss the line through them.
WORST_MISS = 5


@dataclass(frozen=True)
class Marks:
    """Frames that the record marks: numbers counted from 0, and machine times with their half width, s."""

    frame: NDArray[np.int64]
    time_s: Floats
    half_s: Floats
    words: str


def trigger_clock(camera_time_s: Floats, record: LoadRecord, section: Sync) -> Clock:
    """Put the frames on the machine's clock by the record's trigger column.

    A column that never falls and takes many whole values counts frames: frame k was taken between the row
    in which the counter first reaches k and the row before.  Any other column is a signal, which rises
    when a frame is taken; a single rise marks the first frame.

    Parameters
    ----------
    camera_time_s
        Times of the frames on the camera's clock, s, shape (n,).
    record
        The load record, with its trigger column.
    section
        The test file's wishes; its drift, where given.

    Returns
    -------
    Clock
        Offset, with the rows' spacing as width of a rectangular distribution, which many frames do not
        make smaller, because frames and rows may keep step; drift from ten frames on.

    Raises
    ------
    ClockError
        If there is no such column, it marks no frames, or their times contradict the camera's.
    """
    if record.trigger is None:
        raise ClockError(
            "there is no trigger column",
            where='sync.source = "trigger"',
            remedy="name it in load_record.trigger, or leave out sync.source",
        )
    marks = _marks(record, record.trigger, len(camera_time_s))
    known = (marks.frame >= 0) & (marks.frame < len(camera_time_s))
    if not known.any():
        raise _unfit(record, "marks none of the frames")
    camera, machine = camera_time_s[marks.frame[known]], marks.time_s[known]
    u_row = float(np.max(marks.half_s[known])) / sqrt(3)
    drift, u_drift = section.assumed_drift, 0.0
    fitted = section.drift == "auto" and known.sum() >= LEAST_FRAMES and np.ptp(camera) > 0
    if fitted:
        drift = float(np.polyfit(camera - camera[0], machine - machine[0], 1)[0]) - 1.0
        u_drift = u_row * sqrt(2) / float(np.ptp(camera))
    missed = machine - (1 + drift) * camera
    offset = float(np.mean(missed))
    scatter = float(np.std(missed))
    if scatter > WORST_MISS * u_row:
        raise _unfit(
            record, f"misses the frames' times by {scatter:.2g} s", "check frames.rate, and for lost frames"
        )
    notes = ["a frame is taken as exposed when its mark appears in the record"]
    if not fitted and section.drift == "auto":
        notes.append("both clocks are taken to run equally fast")
    notices: tuple[Notice, ...] = ()
    counted = int(marks.frame.max()) + 1
    if counted != len(camera_time_s) and len(marks.frame) > 1:
        text = (
            f"{record.path.name}: the trigger column marks {counted} frames and there are "
            f"{len(camera_time_s)}; the first frame was joined to the first mark; check that no frame "
            "is missing at the beginning."
        )
        notices = (Notice("trigger_count", text),)
    return Clock(
        offset, hypot(u_row, scatter / sqrt(len(missed))), drift, marks.words, tuple(notes), u_drift, notices
    )


def _marks(record: LoadRecord, column: Floats, frames: int) -> Marks:
    there = np.isfinite(column)
    value, time = column[there], record.time_s[there]
    if value.size < 2 or np.ptp(value) == 0:
        raise _unfit(record, "never changes")
    steps = np.diff(value)
    counts = bool((steps >= 0).all() and (value == np.rint(value)).all())
    if counts and np.unique(value).size >= LEAST_COUNTS:
        rows = np.flatnonzero(steps > 0) + 1
        rows = rows[(value[rows] >= 1) & (value[rows] <= frames + 1e6)]
        # Where the counter skips a number, that frame was not seen by the record.
        return Marks(
            value[rows].astype(np.int64) - 1,
            *_between(time, rows),
            "from the frame counter in the load record",
        )
    high = value > (value.min() + value.max()) / 2
    rows = np.flatnonzero(high[1:] & ~high[:-1]) + 1
    if rows.size not in (1, frames):
        raise _unfit(record, f"rises {rows.size} times where there are {frames} frames")
    return Marks(np.arange(rows.size), *_between(time, rows), "from the trigger signal in the load record")


def _between(time: Floats, rows: NDArray[np.intp]) -> tuple[Floats, Floats]:
    """Return the middle between each row and the one before, and half the time between them."""
    return (time[rows] + time[rows - 1]) / 2, (time[rows] - time[rows - 1]) / 2


def _unfit(record: LoadRecord, what: str, also: str = "") -> ClockError:
    remedy = " and ".join(filter(None, [also, 'say sync.source = "loading" to do without it']))
    return ClockError(f"the trigger column {what}", where=str(record.path), remedy=remedy)
