"""The clock that joins frames and load record: which source it comes from."""

from __future__ import annotations

from dataclasses import replace
from datetime import datetime

import numpy as np
from numpy.typing import NDArray

from dic.errors import ClockError, Notice
from dic.sync.estimate import Seen, estimate
from dic.sync.record import Clock, LoadRecord
from dic.sync.trigger import trigger_clock
from dic.testfile import Sync

Floats = NDArray[np.float64]

#: Time by which two computers' times of day are commonly apart, s; dates beyond contradict the loading.
OTHER_DATES_S = 120.0


def fit_clock(
    camera_time_s: Floats,
    axial: Floats,
    u_axial: Floats,
    record: LoadRecord,
    section: Sync,
    *,
    shift_px: Floats | None = None,
    epoch: datetime | None = None,
) -> Clock:
    """Put the frames on the machine's clock.

    A given offset is used as it is; so is a trigger column, where the record has one, and absolute time,
    where the test file asks for it.  Otherwise the offset is found from when loading starts: while strain
    is small it is a smooth function of force, strain = a + b·force + c·force², so the right offset is the
    one with which the force explains the strain of the frames best (least squares, which is maximum
    likelihood for normal noise).  a, b and c follow for each offset linearly, which leaves one unknown; it
    is searched on a grid over all offsets that overlap, then refined.  The curvature c keeps elastomers
    and a slightly bent coupon from shifting the clock; as many frames are used as it describes (see
    `dic.sync.reach`).  Rigid motion while grips seat does not disturb: neither strain nor force knows of
    it.  The same is done with time running backwards for the unloading at the end, which gives the drift;
    and with the gauge's motion and the crosshead's travel where strain and force do not tell.

    Parameters
    ----------
    camera_time_s
        Times of the frames on the camera's clock, s, shape (n,).
    axial, u_axial
        Axial strain of the frames and its standard uncertainty; NaN where not measured.
    record
        The load record.
    section
        The test file's wishes: source, offset and relative drift.
    shift_px
        Motion of the gauge along the axis, px.
    epoch
        Date and time of the camera's time zero.

    Returns
    -------
    Clock
        Offset and standard uncertainty.  A mere slope fits at many offsets: then the middle of those that
        do not contradict the data, with the uncertainty of a rectangular distribution over them, and a
        notice that says so.

    Raises
    ------
    ClockError
        If frames and record do not overlap, or nothing relates them: too few frames, no loading, strain
        that follows the force at no offset.
    LoadRecordError
        If the force explains the strain only with its sign turned.
    """
    known = known_clock(camera_time_s, record, section, epoch)
    if known is not None:
        return known
    clock = estimate(Seen(camera_time_s, axial, u_axial, shift_px), record, section)
    doubts = (*_unused_trigger(camera_time_s, record, section), *_other_dates(clock, record, epoch))
    return replace(clock, notices=(*doubts, *clock.notices))


def known_clock(
    camera_time_s: Floats, record: LoadRecord, section: Sync, epoch: datetime | None = None
) -> Clock | None:
    """Return the clock that is given or recorded, or None where it has to be estimated from the frames.

    Raises
    ------
    ClockError
        If frames and record do not overlap on it, or what `sync.source` asks for is not there.
    """
    if section.offset != "auto":
        clock = _given(section.offset, "given in the test file", "given offset", section)
    elif section.source == "absolute":
        offset = _apart(record, epoch)
        clock = _given(offset, "from the dates in frames and record", "two clocks' setting", section)
    elif section.source == "loading":
        return None
    else:
        try:
            clock = trigger_clock(camera_time_s, record, section)
        except ClockError:
            if section.source == "trigger":
                raise
            return None
    _require_overlap(clock, camera_time_s, record)
    return clock


def _given(offset_s: float, method: str, whose: str, section: Sync) -> Clock:
    """Return the clock of an offset that needs no finding, and say if its uncertainty is not known."""
    u = section.offset_uncertainty
    notes = (
        () if u is not None else (f"not included: the uncertainty of the {whose} (sync.offset_uncertainty)",)
    )
    return Clock(offset_s, u or 0.0, section.assumed_drift, method, notes)


def _apart(record: LoadRecord, epoch: datetime | None) -> float:
    if epoch is None or record.epoch is None:
        lacking = " and ".join(
            name for name, known in (("frames", epoch), ("load record", record.epoch)) if known is None
        )
        raise ClockError(
            f"no dates in the {lacking}",
            where='sync.source = "absolute"',
            remedy="use files with date and time of day in both, or another source",
        )
    return (epoch - record.epoch).total_seconds()


def _unused_trigger(camera_time_s: Floats, record: LoadRecord, section: Sync) -> tuple[Notice, ...]:
    """Say why a trigger column was not used."""
    if record.trigger is None or section.source == "loading":
        return ()
    try:
        trigger_clock(camera_time_s, record, section)
    except ClockError as error:
        return (Notice("trigger_unused", f"The clocks were joined by the loading instead: {error}"),)
    return ()


def _other_dates(clock: Clock, record: LoadRecord, epoch: datetime | None) -> tuple[Notice, ...]:
    """Say so where the dates in frames and record put the clocks far from where they were found."""
    if epoch is None or record.epoch is None:
        return ()
    apart = _apart(record, epoch) - clock.offset_s
    if abs(apart) <= OTHER_DATES_S + 2 * clock.offset_standard_uncertainty_s:
        return ()
    text = (
        f"The dates in frames and load record put the frames {abs(apart):.3g} s "
        f"{'later' if apart > 0 else 'earlier'} than the loading does: one computer's time of day is wrong "
        "(a time zone makes whole hours), or the record is of another test; check that both belong together."
    )
    return (Notice("clock_dates", text),)


def _require_overlap(clock: Clock, camera_time_s: Floats, record: LoadRecord) -> None:
    at = clock.machine_time(camera_time_s)
    if at.max() < record.time_s[0] or at.min() > record.time_s[-1]:
        raise ClockError(
            f"the two clocks do not overlap: the frames run from {at.min():g} s to {at.max():g} s of the "
            f"machine's clock, the record from {record.time_s[0]:g} s to {record.time_s[-1]:g} s",
            where=str(record.path),
            remedy="correct sync.offset",
        )
