"""How a table lies in a file: what separates its columns, and which rows are headers, units and data."""

from __future__ import annotations

import csv
import re
from collections import Counter
from collections.abc import Iterator, Sequence
from typing import TypeVar

from dic.quantities import is_unit

#: In order of preference where two explain the rows equally well; a blank stands for any white space.
SEPARATORS = ("\t", ";", "|", ",", " ")
#: How people call them.
NAMES = {"\t": "tab", ";": "semicolon", "|": "bar", ",": "comma", " ": "blanks", "": "workbook"}
#: Rows that the separator and the columns' kinds are judged by.
_SAMPLE = 400
#: Share of a sample's rows in which a column has to hold numbers.
_USUALLY = 0.6
#: Characters by which the separator is judged, at the most.
_LOOKED_AT = 400_000
#: Lines of numbers above the headers that are looked past.
_NUMBERED = 5

_PLAIN = r"[+\-−]?(?:\d+(?:[.,]\d*)?|\d{1,3}(?:[,.'’]\d{3})+(?:[.,]\d*)?|[.,]\d+)(?:[eE][+\-−]?\d+)?"
_BLANKS = r"[+\-−]?\d{1,3}(?:[ \u00a0\u202f]\d{3})+"
CLOCK = r"\d{1,3}:\d{1,2}(?::\d{1,2})?(?:[.,]\d+)?(?:\s?[AaPp][Mm])?"
DATE = r"\d{1,4}[-./]\d{1,2}[-./]\d{1,4}"
INSTANT = re.compile(rf"(?:{DATE}(?:(?:T|\s+){CLOCK}(?:Z|[+-]\d\d:?\d\d)?)?|{CLOCK})", re.ASCII)
_NUMBER = re.compile(rf"(?:{_PLAIN}|{_BLANKS}(?:[.,]\d*)?)", re.ASCII)
#: Between commas, blanks that group digits need a decimal point after them: "0,5 100,5" is two numbers.
_BETWEEN_COMMAS = re.compile(rf"(?:{_PLAIN}|{_BLANKS}\.\d*)", re.ASCII)

#: What machines and spreadsheets write where there is no value.
MISSING = frozenset(
    {"", "-", "--", "---", "----", "-----", "*", "**", "***", "nan", "n/a", "na", "#n/a", "#nv", "null",
     "none", "ovl", "over", "ovr", "ovfl", "overload", "overflow", "inf", "+inf", "-inf", "err", "error",
     "####", "#div/0!", "#value!", "#num!", "?"}
)  # fmt: skip

_COMMENT = re.compile(r'\s*"?(?:#|//|%)')
_RULE = re.compile(r"[\s\-=_*+|.;,]*[-=_*]{3}[\s\-=_*+|.;,]*$")

Row = tuple[int, list[str]]
Line = TypeVar("Line")


def is_comment(line: str, separator: str) -> bool:
    """Tell whether a line is a remark or a ruled line."""
    if _COMMENT.match(line):
        return True
    if line.lstrip().startswith(";") and separator != ";":
        return True
    return bool(_RULE.match(line)) and not any(c.isalnum() for c in line)


def split(line: str, separator: str) -> list[str]:
    """Return the cells of a line."""
    if '"' in line:
        cells = next(csv.reader([line], delimiter=separator, skipinitialspace=True), [])
        return [cell.strip() for cell in cells if cell or separator != " "]
    if separator == " ":
        return line.split()
    if separator == "|":
        line = line.strip().strip("|")
    cells = line.split(separator)
    return cells if len(line.split(None, 1)) == 1 else [*map(str.strip, cells)]


def is_value(cell: str, separator: str = ";") -> bool:
    """Tell whether a cell looks like a number or an instant, whatever its marks mean."""
    number = _BETWEEN_COMMAS if separator == "," else _NUMBER
    return bool(number.fullmatch(cell) or INSTANT.fullmatch(cell))


def sample(rows: Sequence[Line]) -> Iterator[Line]:
    """Yield the first rows, and more spread over the rest."""
    half = _SAMPLE // 2
    yield from rows[:half]
    if len(rows) > half:
        yield from rows[half :: max(1, (len(rows) - half) // half)]


def find_separator(lines: Sequence[tuple[int, str]]) -> str:
    """Return what separates the columns: with it, most of the text is numbers in equally long rows."""
    looked_at = [line for _, line in sample(lines)]
    total = 0
    for count, line in enumerate(looked_at):
        total += len(line)
        if total > _LOOKED_AT:
            looked_at = looked_at[: max(count, 1)]
            break
    best, most = ",", 0.0
    for separator in SEPARATORS:
        told = [line for line in looked_at if not is_comment(line, separator)]
        if separator == " ":  # between date and time of day it separates no columns
            told = [line for line in told if not is_value(line.strip())]
        rows = [split(line, separator) for line in told]
        rows = [row for row in rows if len(row) > 1]
        if not rows:
            continue
        width = Counter(map(len, rows)).most_common(1)[0][0]
        covered = sum(_covered(row, separator) for row in rows if len(row) == width)
        if covered > most * (1 + 1e-9):
            best, most = separator, covered
    return best


def _covered(row: list[str], separator: str) -> float:
    """Return the share of a row's text that is numbers."""
    total = sum(map(len, row))
    return sum(len(cell) for cell in row if is_value(cell, separator)) / total if total else 0.0


def value_columns(rows: Sequence[Row]) -> list[int]:
    """Return the columns that usually hold numbers or instants, judged by rows of the usual length."""
    looked_at = [cells for _, cells in sample(rows)]
    with_values = [cells for cells in looked_at if any(map(is_value, cells))]
    if not with_values:
        return []
    width = Counter(map(len, with_values)).most_common(1)[0][0]
    usual = [cells for cells in with_values if len(cells) == width]
    return [
        column
        for column in range(width)
        if sum(is_value(cells[column]) for cells in usual) >= max(1, _USUALLY * len(usual))
    ]


def is_sound(cells: list[str], columns: list[int]) -> bool:
    """Tell whether a row holds a value in each of these columns."""
    return all(column < len(cells) and is_value(cells[column]) for column in columns)


def first_data_row(rows: Sequence[Row], columns: list[int]) -> int:
    """Return where the data begin; `len(rows)` where nowhere."""
    start = _sound_from(rows, columns, 0)
    # A line of numbers above the headers, such as the columns' numbers, is no data.
    for _ in range(_NUMBERED):
        near = range(start + 1, min(start + 3, len(rows)))
        header = next((i for i in near if _is_text(rows[i][1], len(columns))), None)
        following = len(rows) if header is None else _sound_from(rows, columns, header)
        if len(rows) - following < 3:
            break
        start = following
    return start


def _sound_from(rows: Sequence[Row], columns: list[int], first: int) -> int:
    """Return the first row of data from `first` on, with those before it in which values are missing."""
    after = range(first, len(rows))
    start = next((i for i in after if is_sound(rows[i][1], columns)), len(rows))
    while first < start < len(rows) and _has_gaps(rows[start - 1][1], columns):
        start -= 1
    return start


def _is_text(cells: list[str], columns: int) -> bool:
    """Tell whether a row could hold the headers of so many columns."""
    return sum(map(bool, cells)) >= max(columns, 2) and not any(map(is_value, cells))


def _has_gaps(cells: list[str], columns: list[int]) -> bool:
    """Tell whether a row is one of data with marks for missing values."""
    there = [cells[column] if column < len(cells) else "" for column in columns]
    values = sum(map(is_value, there))
    return 2 * values >= len(columns) and all(is_value(cell) or cell.lower() in MISSING for cell in there)


def is_units_row(cells: list[str]) -> bool:
    """Tell whether a row consists of units, bare or in brackets."""
    written = [bare_unit(cell) for cell in cells if cell]
    return bool(written) and all(map(_is_unit, written)) and any(unit not in _NO_UNIT for unit in written)


def bare_unit(cell: str) -> str:
    """Return a unit without its brackets."""
    cell = cell.strip()
    for opening, closing in ("()", "[]", "{}", "<>"):
        if cell.startswith(opening) and cell.endswith(closing):
            return cell[1:-1].strip()
    return cell


_NO_UNIT = ("", "-", "--", "1")
_CLOCK_UNITS = frozenset({"hh:mm:ss", "mm:ss", "h:m:s", "hms", "°c", "°f", "c", "v", "mv", "a", "bar", "#"})


def _is_unit(text: str) -> bool:
    if text in _NO_UNIT or text.lower() in _CLOCK_UNITS or text.lower().startswith("hh:mm"):
        return True
    return is_unit(text)


def headers_by_blanks(line: str, width: int) -> list[str]:
    """Split a line of headers between which there are blanks, as there may be within them."""
    line = line.strip()
    wide = re.split(r"\s{2,}|\t", line)
    if len(wide) == width:
        return wide
    cells: list[str] = []
    for word in line.split():
        # "Force (kN)", "Force [kN]" and "Force / kN" belong together.
        if cells and (word[0] in "([/" or cells[-1].endswith("/")):
            cells[-1] += f" {word}"
        else:
            cells.append(word)
    return cells
