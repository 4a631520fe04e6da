"""The clock from what frames and record both saw: start of loading, unloading at the end, fracture."""

from __future__ import annotations

from dataclasses import dataclass, replace
from math import hypot, sqrt

import numpy as np
from numpy.typing import NDArray

from dic.errors import ClockError, LoadRecordError, Notice
from dic.sync.force import has_load, wrong_sign
from dic.sync.locate import (
    BEGINNING,
    Located,
    beginning,
    cannot_tell,
    follows_turned,
    locate,
    within,
)
from dic.sync.misfit import Course
from dic.sync.noise import NORMAL_MEDIAN
from dic.sync.reach import ABOVE, BELOW, FACTOR
from dic.sync.record import Clock, LoadRecord
from dic.testfile import Sync

Floats = NDArray[np.float64]

#: Standard uncertainty of the drift up to which it is taken from the test, not assumed zero.
TELLING_DRIFT = 2e-4
#: Standard uncertainties by which two events may differ before they are said to contradict each other.
CONTRADICTION = 4
#: Share of the largest force that is left when a coupon is said to be broken.
BROKEN = 0.3
#: Share of the largest force below which the record's last rows show an unloaded coupon, and those rows.
UNLOADED, END_ROWS = 0.5, 5
#: Rows within which the force has fallen at fracture.
FALL_ROWS = 4

#: What the event is called.
FRACTURE = "the fracture"

_NEXT_TIME = "next time film two seconds of rest before the pull"


@dataclass(frozen=True)
class Seen:
    """What the camera saw, n frames.

    Attributes
    ----------
    time_s
        Camera times, s.
    axial, u_axial
        Axial strain and its standard uncertainty; NaN where not measured.
    shift_px
        Motion of the gauge along the axis, px; None where it is not known.
    """

    time_s: Floats
    axial: Floats
    u_axial: Floats
    shift_px: Floats | None = None

    @property
    def film(self) -> tuple[float, float]:
        """Camera times of the first and the last frame, s."""
        return float(self.time_s[0]), float(self.time_s[-1])

    def backwards(self) -> Seen:
        """Return the same, seen with time running backwards."""
        shift = None if self.shift_px is None else self.shift_px[::-1]
        return Seen(-self.time_s[::-1], self.axial[::-1], self.u_axial[::-1], shift)


def estimate(seen: Seen, record: LoadRecord, section: Sync) -> Clock:
    """Find the clock from the events that both saw.

    Parameters
    ----------
    seen
        What the camera saw.
    record
        The load record.
    section
        The test file's wishes; its drift, where given.

    Returns
    -------
    Clock
        See `dic.sync.fit_clock`.

    Raises
    ------
    ClockError
        If frames and record cannot be related at all.
    LoadRecordError
        If the force explains the strain only with its sign turned.
    """
    if not has_load(record):
        raise cannot_tell("the force never rises above its noise")
    given = section.assumed_drift
    seen = replace(seen, time_s=(1 + given) * seen.time_s)
    start = start_of_loading(seen, record)
    if start.why_wide:
        return _wide(start, seen, record, given)
    return _with_end(start, seen, record, section)


def start_of_loading(seen: Seen, record: LoadRecord) -> Located:
    """Find the offset from the start of loading: by strain and force, or by motion and crosshead travel."""
    by_force = _by_force(seen, record, "the start of loading")
    if not by_force.why_wide:
        return by_force
    by_travel = _by_travel(seen, record, "the start of the crosshead's motion")
    if by_travel is None:
        return by_force
    if not by_travel.why_wide:
        return by_travel
    low, high = max(by_force.low_s, by_travel.low_s), min(by_force.high_s, by_travel.high_s)
    return within(by_force, low, high) if low < high else by_force


def _by_force(seen: Seen, record: LoadRecord, words: str) -> Located:
    def up_to(limit: float) -> Course:
        return beginning(seen.time_s, seen.axial, seen.u_axial, record, limit=limit, same_sign=True)

    course = up_to(BEGINNING)
    usual = max(BEGINNING, float(np.abs(course.signal).max()))
    others = [up_to(usual * FACTOR**k) for k in range(-BELOW, ABOVE + 1)]
    try:
        found = locate(course, seen.film, words, others)
    except ClockError:
        _refuse_turned(course, seen, record)
        raise
    if found.why_wide:
        _refuse_turned(course, seen, record)
    return found


def _refuse_turned(course: Course, seen: Seen, record: LoadRecord) -> None:
    if follows_turned(course, seen.film):
        raise wrong_sign(record, longer=bool(course.signal.sum() > 0))


def _by_travel(seen: Seen, record: LoadRecord, words: str) -> Located | None:
    """Do the same with the motion in the picture and the crosshead's travel; None where there is neither."""
    if seen.shift_px is None or record.displacement_mm is None:
        return None
    there = np.isfinite(record.displacement_mm)
    if there.sum() < 3 or np.ptp(record.displacement_mm[there]) == 0:
        return None
    travel = replace(record, time_s=record.time_s[there], force_N=record.displacement_mm[there])
    noise = np.where(np.isfinite(seen.shift_px), _noise(seen.shift_px), np.nan)
    try:
        course = beginning(seen.time_s, seen.shift_px, noise, travel, limit=0.0, same_sign=False)
        return locate(course, seen.film, words)
    except ClockError:
        return None


def _noise(signal: Floats) -> float:
    """Estimate a signal's noise from how it misses the line between its neighbours."""
    bend = np.diff(signal[np.isfinite(signal)], 2)
    return float(np.median(np.abs(bend))) / (NORMAL_MEDIAN * sqrt(6)) if bend.size else 0.0


def end_of_unloading(seen: Seen, record: LoadRecord) -> Located | None:
    """Find the offset from the end of unloading: the start of loading, with time running backwards."""
    back = replace(
        record,
        time_s=-record.time_s[::-1],
        force_N=record.force_N[::-1],
        displacement_mm=None if record.displacement_mm is None else record.displacement_mm[::-1],
    )
    size = np.abs(back.force_N)
    unloaded = float(np.median(size[:END_ROWS])) < UNLOADED * float(size.max())
    for find in (_by_force, _by_travel) if unloaded else (_by_travel,):
        words = "the end of unloading" if find is _by_force else "the end of the crosshead's motion"
        try:
            found = find(seen.backwards(), back, words)
        except (ClockError, LoadRecordError):
            continue
        if found is not None and not found.why_wide:
            return replace(found, offset_s=-found.offset_s, at_s=-found.at_s)
    return None


def fracture(seen: Seen, record: LoadRecord) -> tuple[float, float] | None:
    """Return the offsets between which fracture was seen by both; None where it was not seen by both.

    The camera brackets it by the last measured frame and the one after, with which the frames are lost to
    the end, or the picture jumps; the machine by the rows between which the force falls.
    """
    broke = _frames_lost(seen)
    fell = None if broke is None else _force_fell(record)
    if broke is None or fell is None:
        return None
    return fell[0] - broke[1], fell[1] - broke[0]


def _frames_lost(seen: Seen) -> tuple[float, float] | None:
    measured = np.flatnonzero(np.isfinite(seen.axial))
    if measured.size < 3:
        return None
    last = int(measured[-1])
    if last + 1 < len(seen.time_s):
        return float(seen.time_s[last]), float(seen.time_s[last + 1])
    jump = np.abs(np.diff(seen.axial[measured]))
    k = int(np.argmax(jump))
    if jump[k] < 30 * max(float(np.median(jump)), float(np.nanmedian(seen.u_axial))):
        return None
    return float(seen.time_s[measured[k]]), float(seen.time_s[measured[k + 1]])


def _force_fell(record: LoadRecord) -> tuple[float, float] | None:
    size = np.abs(record.sound_N)
    borne = np.flatnonzero(size > BROKEN * size.max())
    last = int(borne[-1])
    if last + 1 >= len(size):
        return None
    before = max(last - FALL_ROWS, 0)
    if size[before] - size[last + 1] < BROKEN * size.max():
        return None
    return float(record.time_s[before]), float(record.time_s[last + 1])


def _wide(start: Located, seen: Seen, record: LoadRecord, drift: float) -> Clock:
    """Return the clock of a test whose beginning does not tell the offset, as far as it is known."""
    broke = fracture(seen, record)
    method = f"from {start.words}, as far as it tells"
    end = end_of_unloading(seen, record)
    if end is not None:
        start, method = end, f"from {end.words}"
    elif broke is not None and broke[0] < start.high_s and broke[1] > start.low_s:
        start = within(start, max(start.low_s, broke[0]), min(start.high_s, broke[1]))
        method = "from the fracture, between the last frame before it and the first one after"
    notices: tuple[Notice, ...] = ()
    if start.why_wide and end is None:
        text = (
            f"The clocks are joined only to within ± {(start.high_s - start.low_s) / 2:.2g} s "
            f"({start.words}: {start.why_wide}), so values that need both are as uncertain as stated; give "
            f"sync.offset if you know it, and {_NEXT_TIME}."
        )
        notices = (Notice("clock_wide", text),)
    notes = ("both clocks are taken to run equally fast",) if drift == 0 else ()
    return Clock(
        start.offset_s,
        start.u_s,
        drift,
        method,
        (*notes, "film and record are taken to cover the same test, at least half of the shorter one"),
        0.0,
        notices,
        start.tried_s,
        start.misfit,
    )


def _with_end(start: Located, seen: Seen, record: LoadRecord, section: Sync) -> Clock:
    """Return the clock from the start of loading, its drift from the test's end where that tells it."""
    given = section.assumed_drift
    notes = ["strain is taken as a smooth function of force where loading starts"]
    method, drift, u_drift = f"from {start.words}", 0.0, 0.0
    told = _told_drift(start, seen, record) if section.drift == "auto" else None
    if told is not None:
        drift, u_drift, words = told
        method = f"{method}, and from {words}"
        if words == FRACTURE:
            notes.append("the frames are taken to be lost at the coupon's fracture, not before")
    elif section.drift == "auto":
        notes.append("both clocks are taken to run equally fast")
    return Clock(
        start.offset_s - drift * start.at_s,
        start.u_s,
        (1 + given) * (1 + drift) - 1,
        method,
        tuple(notes),
        u_drift,
        _contradicted(start, drift, seen, record),
        start.tried_s - drift * start.at_s,
        start.misfit,
    )


def _told_drift(start: Located, seen: Seen, record: LoadRecord) -> tuple[float, float, str] | None:
    """Return drift, standard uncertainty and event from unloading or fracture; None where neither tells it.

    Frames may be lost before the coupon breaks, so a fracture counts only where it does not contradict
    clocks that run equally fast; it then says how equally.
    """
    # A coupon that broke was not unloaded, and looking for it in a long film takes long.
    broke = _fracture_event(seen, record)
    end = end_of_unloading(seen, record) if broke is None else broke
    if broke is not None and _contradicted(start, 0.0, seen, record):
        return None
    if end is None or end.at_s <= start.at_s:
        return None
    span = end.at_s - start.at_s
    found, u = (end.offset_s - start.offset_s) / span, hypot(end.u_s, start.u_s) / span
    if u <= TELLING_DRIFT or (broke is None and abs(found) > CONTRADICTION * u):
        return found, u, end.words.split(",")[0]
    return None


def _fracture_event(seen: Seen, record: LoadRecord) -> Located | None:
    """Return the fracture with the middle of its offsets and a rectangular distribution's uncertainty."""
    lost, broke = _frames_lost(seen), fracture(seen, record)
    if lost is None or broke is None:
        return None
    return within(Located(0.0, 0.0, (lost[0] + lost[1]) / 2, FRACTURE), *broke)


def _contradicted(start: Located, drift: float, seen: Seen, record: LoadRecord) -> tuple[Notice, ...]:
    """Say so where the clock puts the fracture that the camera saw apart from the machine's."""
    broke, lost = fracture(seen, record), _frames_lost(seen)
    if broke is None or lost is None:
        return ()
    here, slack = start.offset_s + drift * (lost[0] - start.at_s), CONTRADICTION * start.u_s
    apart = max(broke[0] - here, here - broke[1]) - slack
    if apart <= 0:
        return ()
    order = "before" if here < broke[0] else "after"
    text = (
        f"With the clocks joined from the start of loading, the last frames are lost at least {apart:.2g} s "
        f"{order} the force falls: the pattern failed at another time than the coupon, or a clock runs "
        "wrong; check frames.rate and for missing frames, or give sync.drift."
    )
    return (Notice("clock_fracture", text),)
