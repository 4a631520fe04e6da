"""Cells to numbers: decimal commas and points, digits in groups, decided over whole columns."""

from __future__ import annotations

import re
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import NDArray

Floats = NDArray[np.float64]

#: What groups digits by threes besides a point or a comma: apostrophes, thin and other blanks.
_GROUPING = "'’ \u00a0\u202f"
_EXPONENT = r"(?:[eE][+-]?[0-9]+)?"


def _decisive(mark: str, other: str) -> re.Pattern[str]:
    """Return what shows that `mark` is the decimal mark, in a cell on a line of its own."""
    m, o = re.escape(mark), re.escape(other)
    return re.compile(
        # No group of three follows it, no group begins with a nought or holds four digits, digits are
        # grouped by another mark, or an exponent follows.
        rf"^[+-]?(?:[0-9{_GROUPING}{o}]*{m}(?:[0-9]{{0,2}}|[0-9]{{4,}}){_EXPONENT}"
        rf"|0[0-9]*{m}[0-9]+{_EXPONENT}"
        rf"|[0-9]{{4,}}{m}[0-9]+{_EXPONENT}"
        rf"|[0-9]{{1,3}}(?:[{_GROUPING}{o}][0-9]{{3}})+{m}[0-9]*{_EXPONENT}"
        rf"|[0-9]+{m}[0-9]+[eE][+-]?[0-9]+)$",
        re.MULTILINE,
    )


_SHOWS = {".": _decisive(".", ","), ",": _decisive(",", ".")}
#: Numbers in which a mark stands twice, so that it groups digits.
_TWICE = {
    mark: re.compile(rf"^[+-]?[0-9]{{1,3}}(?:{re.escape(mark)}[0-9]{{3}}){{2,}}", re.MULTILINE)
    for mark in ".,"
}


def decimal_marks(cells: Sequence[str]) -> set[str]:
    """Return the marks that must be decimal marks in a column: none where it does not show."""
    together = "\n".join(cells)
    commas, points = "," in together, "." in together
    shown = set()
    # Only a mark that is there can show; a single kind of mark, standing twice in a cell, groups digits.
    if points and (_SHOWS["."].search(together) or (commas and _TWICE[","].search(together))):
        shown.add(".")
    if commas and (_SHOWS[","].search(together) or (points and _TWICE["."].search(together))):
        shown.add(",")
    if not shown and commas != points:
        mark, other = (",", ".") if commas else (".", ",")
        shown = {other} if _TWICE[mark].search(together) else set()
    return shown


def has_marks(cells: Sequence[str]) -> bool:
    """Tell whether a comma or a point stands in a column's numbers."""
    return any(("," in cell or "." in cell) and cell[-1:].isdigit() for cell in cells)


@dataclass(frozen=True)
class Decimal:
    """A decimal mark, and how it was found.

    Attributes
    ----------
    mark
        ``"."`` or ``","``.
    assumed
        True where the cells can be read either way.
    """

    mark: str
    assumed: bool = False


def to_numbers(cells: Sequence[str], mark: str) -> Floats:
    """Return cells as finite numbers, shape (n,); NaN where a cell is none.

    Parameters
    ----------
    cells
        Text without line ends.
    mark
        The decimal mark; the other one, apostrophes and blanks may group digits by threes.
    """
    other = "." if mark == "," else ","
    together = "\n".join(cells).replace("−", "-")
    if any(group in together for group in other + _GROUPING):
        grouped = re.compile(
            rf"[+-]?[0-9]{{1,3}}([{other}{_GROUPING}])[0-9]{{3}}(?:\1[0-9]{{3}})*(?:{re.escape(mark)}[0-9]*)?{_EXPONENT}"
        )
        strip = str.maketrans("", "", other + _GROUPING)
        together = "\n".join(
            cell
            if cell.isalnum()
            else cell.translate(strip)
            if grouped.fullmatch(cell)
            else cell.replace(other, "?")
            for cell in together.split("\n")
        )
    values = _numbers(together.replace(mark, ".").split("\n"))
    return np.where(np.isfinite(values), values, np.nan)


def _numbers(cells: list[str]) -> Floats:
    """Return cells with decimal points as numbers, NaN where a cell is none."""
    try:
        return pd.to_numeric(pd.Series(cells, dtype=object), errors="coerce").to_numpy(dtype=np.float64)
    except (OverflowError, ValueError, TypeError):
        return np.array([_number(cell) for cell in cells])


def _number(cell: str) -> float:
    """Return one number; for the integers beyond 64 bits that the library trips over."""
    try:
        return float(cell) if len(cell) < 400 and "_" not in cell else np.nan
    except ValueError:
        return np.nan


#: Marks that numbers and instants may hold besides digits.
_NO_MARKS = str.maketrans("", "", ".,:'’ \u00a0\u202f−")


#: What columns of nothing but numbers consist of.
_NO_NUMBER = str.maketrans("", "", "0123456789.,+-\n")


def looks_like_value(cells: Sequence[str]) -> NDArray[np.bool_]:
    """Tell quickly which cells are numbers, whatever their marks mean; see `to_numbers` for the rest."""
    together = "\n".join(cells)
    if cells and all(cells) and not together.translate(_NO_NUMBER):
        return np.ones(len(cells), dtype=bool)
    return ~np.isnan(_numbers(together.translate(_NO_MARKS).split("\n")))
