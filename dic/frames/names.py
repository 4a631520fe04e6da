"""Times in file names, by a pattern in strptime's terms and some of our own.

The pattern comes from the test file, so it is no regular expression: it is taken apart here, and every
part stands for a bounded number of digits.
"""

from __future__ import annotations

import re
from collections.abc import Sequence
from dataclasses import dataclass
from itertools import pairwise
from pathlib import Path

from dic.errors import FrameError
from dic.frames import instants

#: strptime's directives that are understood, with the digits that they stand for.
DIRECTIVES = {
    "Y": r"\d{4}",
    "y": r"\d{2}",
    "m": r"\d{1,2}",
    "d": r"\d{1,2}",
    "H": r"\d{1,2}",
    "M": r"\d{1,2}",
    "S": r"\d{1,2}",
    "f": r"\d{1,9}",
}
#: Whole numbers of a unit of time, in nanoseconds; ``{seconds}`` may have decimals.
UNITS = {
    "seconds": instants.SECOND,
    "milliseconds": 1_000_000,
    "microseconds": 1_000,
    "nanoseconds": 1,
}
#: ``{frame}`` counts frames at the rate; ``{number}`` and ``{text}`` are any digits and any text.
PLACEHOLDERS = {
    "seconds": r"\d{1,12}(?:[.,]\d{1,9})?",
    **dict.fromkeys(("milliseconds", "microseconds", "nanoseconds", "frame"), r"\d{1,19}"),
    "number": r"\d{1,18}",
    "text": r".{0,255}?",
}
_LONGEST = 200
#: More of them could take very long to fit to a name.
_MOST_PLACEHOLDERS = 4
_PARTS = re.compile(r"%(?P<directive>.)|\{(?P<placeholder>\w*)\}|(?P<literal>[^%{]+|.)", re.DOTALL)
_WRITE = 'write for example name_time = "cam_%Y%m%d_%H%M%S_%f" or "cam_{milliseconds}"'


@dataclass(frozen=True)
class NamePattern:
    """A pattern, ready to be held against names.

    Attributes
    ----------
    written
        As it stands in the test file.
    parts
        The directives and placeholders in it that say something of time.
    """

    written: str
    parts: frozenset[str]
    _expression: re.Pattern[str]

    @property
    def dated(self) -> bool:
        """Whether it gives the day as well."""
        return {"m", "d"} <= self.parts and bool({"Y", "y"} & self.parts)

    def read(self, name: str, rate: float | None = None) -> int | None:
        """Return a name's instant, ns (since midnight without a date); None where it does not fit.

        Parameters
        ----------
        name
            The file's name; its ending is left off.
        rate
            Frames per second, for ``{frame}``.
        """
        found = self._expression.fullmatch(Path(name).stem)
        if found is None:
            return None
        said = {key: value for key, value in found.groupdict().items() if key in self.parts}
        total = _of_day(said)
        for unit, worth in UNITS.items():
            whole, _, decimals = said.get(unit, "0").replace(",", ".").partition(".")
            total += int(whole) * worth + (instants.fraction(decimals) if decimals else 0)
        if "frame" in said and rate:
            total += round(int(said["frame"]) * instants.SECOND / rate)
        if not self.dated:
            return total if _possible(said) else None
        year = int(said["Y"]) if "Y" in said else _century(int(said["y"]))
        day = instants.from_parts(year, int(said["m"]), int(said["d"]))
        return day + total if day is not None and _possible(said) else None


def _of_day(said: dict[str, str]) -> int:
    seconds = 3600 * int(said.get("H", 0)) + 60 * int(said.get("M", 0)) + int(said.get("S", 0))
    return seconds * instants.SECOND + instants.fraction(said.get("f", "0"))


def _possible(said: dict[str, str]) -> bool:
    return int(said.get("H", 0)) < 24 and int(said.get("M", 0)) < 60 and int(said.get("S", 0)) < 60


def _century(year: int) -> int:
    """Return the year that two digits mean, as strptime has it (POSIX)."""
    return year + (1900 if year >= 69 else 2000)


def name_pattern(written: str) -> NamePattern:
    """Take a pattern apart.

    Raises
    ------
    ValueError
        If it holds something unknown, or nothing that says a time.
    """
    if len(written) > _LONGEST:
        raise ValueError(f"a pattern has at most {_LONGEST} characters")
    expression, parts = "", []
    for found in _PARTS.finditer(written):
        directive, placeholder, literal = found.group("directive", "placeholder", "literal")
        if literal is not None and literal not in "%{":
            expression += re.escape(literal)
        elif directive == "%":
            expression += "%"
        elif directive in DIRECTIVES:
            expression += f"(?P<{directive}>{DIRECTIVES[directive]})"
            parts.append(directive)
        elif placeholder in PLACEHOLDERS:
            expression += f"(?P<{placeholder}>{PLACEHOLDERS[placeholder]})"
            parts.append(placeholder)
        else:
            known = ", ".join([*(f"%{key}" for key in DIRECTIVES), *(f"{{{key}}}" for key in PLACEHOLDERS)])
            raise ValueError(f"'{found[0]}' is not understood in a pattern; there are {known}")
    twice = next((part for part in parts if parts.count(part) > 1), None)
    if twice is not None:
        raise ValueError(f"the pattern holds '{twice}' twice")
    if len(PLACEHOLDERS.keys() & set(parts)) > _MOST_PLACEHOLDERS:
        raise ValueError(f"a pattern holds at most {_MOST_PLACEHOLDERS} placeholders")
    timed = frozenset(parts) - {"number", "text"}
    if not timed & {"S", "frame", *UNITS}:
        raise ValueError(f"the pattern says no seconds; {_WRITE}")
    return NamePattern(written, timed, re.compile(expression, re.ASCII | re.DOTALL))


def times_in_names(pattern: NamePattern, names: Sequence[str], rate: float | None) -> list[int]:
    """Return the instant of each name, ns; a test that runs past midnight goes on.

    Raises
    ------
    FrameError
        If a name does not fit the pattern.
    """
    found = []
    for name in names:
        instant = pattern.read(name, rate)
        if instant is None:
            raise FrameError(
                f"does not fit the pattern '{pattern.written}'",
                where=name,
                remedy=f"correct frames.name_time, or take the file out; {_WRITE}",
            )
        found.append(instant)
    return instants.past_midnight(found) if "H" in pattern.parts and not pattern.dated else found


_DATE_TIME = re.compile(
    r"(?<!\d)(?:19|20)\d\d([-_.]?)(?:0[1-9]|1[0-2])\1(?:[0-2]\d|3[01])([-_.T ]{0,2})"
    r"(?:[01]\d|2[0-3])([-_.h]?)[0-5]\d([-_.m]?)[0-5]\d(?:([-_.,s]?)(\d{1,9}))?(?!\d)",
    re.ASCII,
)


_COUNTED = re.compile(r"(?<![\d.,])\d{1,12}(?:[.,]\d{1,9})?(?=(?P<unit>ms|us|µs|ns|s)(?![A-Za-z]))")
_WRITTEN_UNITS = {"s": "seconds", "ms": "milliseconds", "us": "microseconds", "µs": "microseconds",
                  "ns": "nanoseconds"}  # fmt: skip


def suggested_pattern(names: Sequence[str]) -> str | None:
    """Return a pattern for date and time, or for a counted time with its unit, or None.

    All names fit it, each later than the one before.
    """
    stem = Path(names[0]).stem
    if not stem.isprintable():  # no text that could stand in a test file
        return None
    counted = _COUNTED.search(stem)
    if counted is not None:
        before, after = stem[: counted.start()], stem[counted.end() :]
        return _first_that_fits(names, before, f"{{{_WRITTEN_UNITS[counted['unit']]}}}", after)
    found = _DATE_TIME.search(stem)
    if found is None:
        return None
    day, between, hour, minute, below, digits = (part or "" for part in found.groups())
    middle = f"%Y{day}%m{day}%d{between}%H{hour}%M{minute}%S{below}{'%f' if digits else ''}"
    return _first_that_fits(names, stem[: found.start()], middle, stem[found.end() :])


def _first_that_fits(names: Sequence[str], before: str, middle: str, after: str) -> str | None:
    """Return a pattern around the time that all names fit, or None."""
    for counter in (before, after):
        if "%" in counter or "{" in counter:
            return None
    # A counter may stand beside the time, once.
    for head, tail in (
        (before, after),
        (re.sub(r"\d+", "{number}", before, count=1), after),
        (before, re.sub(r"\d+", "{number}", after, count=1)),
    ):
        pattern = name_pattern(head + middle + tail)
        instants_read = [pattern.read(name) for name in names]
        known = [instant for instant in instants_read if instant is not None]
        if len(known) == len(names) and all(a < b for a, b in pairwise(known)):
            return pattern.written
    return None
