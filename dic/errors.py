"""What can go wrong, told to people in one sentence: what, where, and what to do."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from difflib import get_close_matches


class TautenError(Exception):
    """Base of every error that tauten raises on purpose."""


class InputError(TautenError):
    """The input is at fault; the person who made it can mend it (exit status 2).

    Parameters
    ----------
    what
        What is wrong.
    where
        File, key, column, row or frame where it was met.
    remedy
        What to do about it.
    """

    def __init__(self, what: str, *, where: str = "", remedy: str = "") -> None:
        self.what, self.where, self.remedy = what, where, remedy
        place = f"{where}: " if where else ""
        cure = f"; {remedy}" if remedy else ""
        sentence = printable(f"{place}{what}{cure}")
        super().__init__(sentence if sentence.endswith(("?", ".")) else f"{sentence}.")


def printable(text: str) -> str:
    """Return a text on one line, without what in a stranger's headers could steer a terminal."""
    return "".join(letter if letter.isprintable() else " " for letter in text)


class TestFileError(InputError):
    """The test file (or scenario file) cannot be understood."""

    __test__ = False  # the name starts with Test, but it is no test case


class FrameError(InputError):
    """A camera frame is missing, unreadable or does not fit the others."""


class PatternError(InputError):
    """The picture shows no coupon or no texture that can be tracked."""


class TrackingError(InputError):
    """Tracking found nothing that could be trusted."""


class LoadRecordError(InputError):
    """The testing machine's record cannot be understood."""


class ClockError(InputError):
    """Frames and load record cannot be put on one clock."""


class StoreError(InputError):
    """A result folder cannot be written or read."""


@dataclass(frozen=True)
class Notice:
    """Something that the user should know but that does not stop the job.

    Attributes
    ----------
    code
        Short stable name, for programs.
    text
        One sentence with what was met and what to do, for people.
    """

    code: str
    text: str

    def __post_init__(self) -> None:
        # it may quote a stranger's headers
        object.__setattr__(self, "text", printable(self.text))


def nearest(word: str, known: Iterable[str]) -> str:
    """Say which known word comes nearest, or list them all.

    Parameters
    ----------
    word
        What was written.
    known
        What could have been written.

    Returns
    -------
    str
        A half sentence that fits `InputError`'s remedy.
    """
    known = sorted(known)
    close = get_close_matches(word, known, n=1, cutoff=0.6)
    if close:
        return f"did you mean '{close[0]}'?"
    return "choose from: " + ", ".join(known)


def listed(items: Sequence[object], most: int = 3) -> str:
    """Return the first few of many items, and how many more there are."""
    more = f" and {len(items) - most} more" if len(items) > most else ""
    return ", ".join(map(str, items[:most])) + more
