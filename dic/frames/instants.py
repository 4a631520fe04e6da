"""Instants as whole nanoseconds since 1970, so that stamps keep their last digit; and their text."""

from __future__ import annotations

import re
from datetime import datetime, timedelta

SECOND = 1_000_000_000
DAY = 24 * 3600 * SECOND
_ZERO = datetime(1970, 1, 1)
#: ``2026:05:04 10:20:30`` as EXIF and TIFF write it, or ISO 8601, with any part of a second.
_STAMP = re.compile(
    r"\s*(\d{4})[:/.-](\d{1,2})[:/.-](\d{1,2})[T ]"
    r"\s?(\d{1,2}):(\d{1,2}):(\d{1,2})(?:[.,](\d{1,9}))?[\s\0]*(?:Z|[+-]\d\d:?\d\d)?",
    re.ASCII,
)
#: ``10:20:30`` with any part of a second.
_CLOCK = re.compile(r"\s*(\d{1,2}):(\d{2}):(\d{2})(?:[.,](\d{1,9}))?\s*", re.ASCII)
#: No stamp is longer.
_LONGEST = 60


def from_text(text: str) -> int | None:
    """Return the instant that a stamp names, on the clock that wrote it; None where it is no stamp.

    A time zone behind it is not converted: it is the same for all stamps of a test.
    """
    found = _STAMP.fullmatch(text) if len(text) <= _LONGEST else None
    if found is None:
        return None
    *parts, digits = found.groups()
    return from_parts(*(int(part) for part in parts), nanoseconds=fraction(digits or ""))


def of_day(text: str) -> int | None:
    """Return the nanoseconds since midnight that a time of day names; None where it is none."""
    found = _CLOCK.fullmatch(text) if len(text) <= _LONGEST else None
    if found is None:
        return None
    *parts, digits = found.groups()
    return from_parts(1970, 1, 1, *(int(part) for part in parts), nanoseconds=fraction(digits or ""))


def past_midnight(found: list[int]) -> list[int]:
    """Let times of day run on where a test passes midnight: half a day backwards is no disorder."""
    if found and max(found) - min(found) > DAY // 2:
        return [instant + DAY if instant < DAY // 2 else instant for instant in found]
    return found


def from_parts(
    year: int, month: int, day: int, hour: int = 0, minute: int = 0, second: int = 0, *, nanoseconds: int = 0
) -> int | None:
    """Return the instant of a date and a time of day; None where the calendar has no such day or time."""
    try:
        return from_datetime(datetime(year, month, day, hour, minute, second)) + nanoseconds
    except ValueError:
        return None


def from_datetime(moment: datetime) -> int:
    """Return the instant of a date and time, to the second."""
    return (moment - _ZERO) // timedelta(seconds=1) * SECOND


def fraction(digits: str) -> int:
    """Return the nanoseconds of the digits behind a second's decimal point, nine of them at most."""
    return int(digits.ljust(9, "0")[:9])


def to_datetime(instant: int) -> datetime:
    """Return an instant for people, to the microsecond."""
    return _ZERO + timedelta(microseconds=instant // 1000)
