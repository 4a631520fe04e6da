"""The force while nothing is loaded yet: its zero, taken off when asked, named when it is off."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from dic.errors import LoadRecordError, Notice
from dic.sync.record import LoadRecord

#: Fewer samples say too little of a zero.
FEWEST = 5
#: Standard deviations by which loading stands out from the idle force.
_STANDS_OUT = 6
#: Share of the span of force that loading exceeds for sure.
_LOADED = 0.02
#: Part of the time before loading that is idle for sure: the toe of the loading hides in the rest.
_SURELY = 0.8
#: Share of the largest force below which a zero is not worth a word.
_WORTH_A_WORD = 0.002


def idle_samples(record: LoadRecord) -> int:
    """Return how many samples at the record's start lie before the loading; 0 if too few to tell.

    Loading has begun where the force has left the median of the samples before by six standard deviations
    of its noise, or 2 % of its span, for good; a fifth of the time until then is left out for its toe.
    """
    force = record.force_N
    noise = float(np.median(record.noise_N))
    span = float(np.ptp(force))
    limit = max(_STANDS_OUT * noise, 1e-9 * span)
    loaded = np.flatnonzero(np.abs(force - np.median(force[:FEWEST])) > max(_LOADED * span, limit))
    if not loaded.size:
        return 0
    before = force[: loaded[0]]
    if before.size < FEWEST:
        return 0
    level = float(np.median(before[: max(FEWEST, before.size // 2)]))
    idle = np.flatnonzero(np.abs(before - level) <= limit)
    count = int((idle[-1] + 1) * _SURELY) if idle.size else 0
    return count if count >= FEWEST else 0


def tared(record: LoadRecord, tare: bool | float) -> LoadRecord:
    """Take the mean idle force off, if asked; else say if it is not zero.

    Parameters
    ----------
    record
        The record as read.
    tare
        True for the idle part as it is found, or how many seconds from the record's start are idle.

    Raises
    ------
    LoadRecordError
        If zero is asked for and there is no idle part.
    """
    if tare is False:
        return _with_doubt(record)
    if tare is True:
        count = idle_samples(record)
    else:
        count = int(np.sum(record.time_s <= record.time_s[0] + tare))
    if count < FEWEST:
        raise LoadRecordError(
            f"has only {count} samples before loading to take the force's zero from",
            where=str(record.path),
            remedy='give load_record.tare = "2 s" with the time that is idle, or false',
        )
    zero = float(record.force_N[:count].mean())
    seconds = float(record.time_s[count - 1] - record.time_s[0])
    text = (
        f"{record.path.name}: {zero:.5g} N, the mean of the first {seconds:.3g} s, were taken off the force, "
        "as asked."
    )
    return replace(
        record, force_N=record.force_N - zero, notices=(*record.notices, Notice("record_tared", text))
    )


def _with_doubt(record: LoadRecord) -> LoadRecord:
    """Say if the idle force is not zero."""
    count = idle_samples(record)
    if not count:
        return record
    zero = float(record.force_N[:count].mean())
    scatter = float(record.force_N[:count].std()) / np.sqrt(count)
    largest = float(np.abs(record.force_N).max())
    if abs(zero) <= max(5 * scatter, _WORTH_A_WORD * largest):
        return record
    text = (
        f"{record.path.name}: the force is {zero:.4g} N ({100 * zero / largest:.2g} % of the largest) "
        "before loading; if the coupon was free then, say load_record.tare = true."
    )
    return replace(record, notices=(*record.notices, Notice("record_zero", text)))
