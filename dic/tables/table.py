"""A table as it was read: headers, units, cells, and what was met on the way."""

from __future__ import annotations

from dataclasses import dataclass, field
from functools import cached_property
from itertools import groupby
from pathlib import Path
from textwrap import shorten

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from dic.errors import InputError, Notice
from dic.quantities import split_header
from dic.tables import layout, text, workbook
from dic.tables.layout import Row
from dic.tables.numbers import Decimal, decimal_marks, has_marks, looks_like_value, to_numbers

_SEPARATE = "export it as CSV, with semicolons or tabs between columns if numbers have a decimal comma"


@dataclass(frozen=True)
class Break:
    """Rows of text between rows of data.

    Attributes
    ----------
    before
        Row of data that follows, counted from 0.
    row
        First of them, as a line of the file.
    words
        What stands there, shortened.
    """

    before: int
    row: int
    words: str


@dataclass(frozen=True)
class Table:
    """A table as it was read.

    Attributes
    ----------
    path
        The file.
    headers
        Column headers, n of them; empty where a column has none.
    separator
        What stands between columns; empty in a workbook.
    cells
        Text, n columns numbered from 0, indexed by line of the file (row of the sheet).
    fault
        The error to raise where something is wrong with it.
    units
        What a row of units below the headers says of each column; None where it says nothing.
    encoding
        How the file's bytes were understood.
    heading
        Lines above the headers.
    breaks
        Rows of text between rows of data.
    notices
        What was left out or assumed.
    decimal
        The decimal mark, where it is given.
    """

    path: Path
    headers: list[str]
    separator: str
    cells: pd.DataFrame
    fault: type[InputError]
    units: list[str | None] = field(default_factory=list)
    encoding: str = "utf-8"
    heading: int = 0
    breaks: tuple[Break, ...] = ()
    notices: tuple[Notice, ...] = ()
    decimal: str | None = None

    def texts(self, position: int) -> list[str]:
        """Return a column's cells."""
        cells: list[str] = self.cells[position].tolist()
        return cells

    def numbers(self, position: int) -> NDArray[np.float64]:
        """Return a column as finite numbers.

        Raises
        ------
        InputError
            The table's `fault`, naming row and column, if a cell is no number.
        """
        values = self.values(position)
        bad = np.flatnonzero(np.isnan(values))
        if bad.size:
            raise self.no_number(position, int(bad[0]))
        return values

    def values(self, position: int) -> NDArray[np.float64]:
        """Return a column as numbers, NaN where a cell is none."""
        return to_numbers(self.texts(position), self.decimal_of(position).mark)

    def no_number(self, position: int, row: int) -> InputError:
        """Return the error for a cell that is no number, its row counted from 0."""
        cell = shorten(self.cells[position].iloc[row], 60, placeholder=" …")
        return self.fault(
            f"'{cell}' is not a number",
            where=f"{self.path}, row {self.cells.index[row]}, column {self.name(position)}",
            remedy="correct or remove the row",
        )

    def name(self, position: int) -> str:
        """Return a column's header in quotes, or its number."""
        header = shorten(self.headers[position], 60, placeholder=" …")
        return f"'{header}'" if header else str(position + 1)

    def decimal_of(self, position: int) -> Decimal:
        """Return a column's decimal mark: as given, as it shows in the column, or else in the others.

        Raises
        ------
        InputError
            The table's `fault`, if the column has both.
        """
        if self.decimal is not None:
            return Decimal(self.decimal)
        shown = self._shown[position] if position in self._shown else self._marks(position)
        if len(shown) == 2:
            raise self.fault(
                "has numbers with a decimal comma and numbers with a decimal point",
                where=f"{self.path}, column {self.name(position)}",
                remedy='say load_record.decimal = "," or "."',
            )
        if shown:
            return Decimal(next(iter(shown)))
        elsewhere = set().union(*(marks for marks in self._shown.values() if len(marks) == 1))
        if len(elsewhere) == 1:
            return Decimal(elsewhere.pop())
        return self._assumed(position)

    def _assumed(self, position: int) -> Decimal:
        """Return the mark that is usual where cells such as 1,234 can be read either way."""
        cells = self.texts(position)
        with_comma = any("," in cell for cell in cells)
        mark = "," if with_comma and self.separator != "," else "."
        return Decimal(mark, assumed=has_marks(cells))

    def _marks(self, position: int) -> set[str]:
        return decimal_marks(self.texts(position))

    @cached_property
    def _shown(self) -> dict[int, set[str]]:
        """Return the decimal marks that show in each column of numbers."""
        return {
            position: self._marks(position)
            for position in range(len(self.headers))
            if not self.is_instant(position)
        }

    def is_instant(self, position: int) -> bool:
        """Tell whether a column holds clock times or dates, by its first cells."""
        cells = [cell for cell in self.texts(position)[:50] if cell.lower() not in layout.MISSING]
        return bool(cells) and 2 * sum(bool(layout.INSTANT.fullmatch(c)) for c in cells) > len(cells)


def read_table(
    path: Path,
    fault: type[InputError],
    *,
    key: str,
    most_bytes: int,
    decimal: str | None = None,
    sheet: str | None = None,
) -> Table:
    """Read a table of numbers from a text file or an Excel workbook.

    Text may be UTF-8, UTF-16 or Windows-1252; columns are separated by tabs, semicolons, bars, commas or
    blanks, whichever leaves most of the text as numbers.  Lines above the headers, remarks and what
    follows the data are left out; a row of units may stand below the headers.

    Parameters
    ----------
    path
        The file.
    fault
        The error to raise where something is wrong with it.
    key
        The test file's key that names it.
    most_bytes
        Size from which it is something else.
    decimal
        The decimal mark, ``"."`` or ``","``; found from the columns by default.
    sheet
        The workbook's sheet; the first that holds anything by default.

    Raises
    ------
    InputError
        `fault`, if the file cannot be read or is no such table.
    """
    head, data = _bytes(path, fault, key, most_bytes)
    if workbook.is_old_workbook(head):
        raise fault(
            "is an Excel workbook of the old kind (.xls)", where=str(path), remedy="save it as .xlsx or CSV"
        )
    if workbook.is_workbook(head):
        rows, taken, sheets = workbook.workbook_rows(path, sheet, fault)
        notices = []
        if sheet is None and len(sheets) > 1:
            others = shorten(
                ", ".join(f"'{name}'" for name in sheets if name != taken), 200, placeholder=" …"
            )
            notices = [
                Notice("record_sheet", f"{path.name}: sheet '{taken}' was read; there are also {others}.")
            ]
        # Numbers of a workbook are written with a point; only text in it can have a comma.
        comma = any("," in cell for _, cells in layout.sample(rows) for cell in cells)
        decimal = decimal or (None if comma else ".")
        return _laid_out(path, rows, "", fault, notices=notices, decimal=decimal, encoding="workbook")
    if sheet is not None:
        raise fault("is no workbook, so it has no sheets", where=str(path), remedy="remove load_record.sheet")
    found = text.lines_of(data, str(path), fault)
    lines = text.joined_quotes(found.lines, str(path), fault)
    separator = layout.find_separator(lines)
    _refuse_too_many(lines, separator, path, fault)
    rows, titles = _rows(lines, separator)
    return _laid_out(
        path, rows, separator, fault, titles=titles, encoding=found.encoding, decimal=decimal, notices=[]
    )


def _bytes(path: Path, fault: type[InputError], key: str, most_bytes: int) -> tuple[bytes, bytes]:
    """Return a file's first bytes and, unless it is a workbook, all of them."""
    try:
        if path.exists() and not path.is_file():
            raise fault("cannot be read (it is no file)", where=str(path), remedy=f"check {key}")
        if path.stat().st_size > most_bytes:
            raise fault(
                f"is larger than {most_bytes // 1_000_000} MB",
                where=str(path),
                remedy="export only this test",
            )
        with path.open("rb") as file:
            head = file.read(8)
            zipped = workbook.is_workbook(head) or workbook.is_old_workbook(head)
            return head, b"" if zipped else head + file.read(most_bytes)
    except OSError as error:
        raise fault(f"cannot be read ({error.strerror})", where=str(path), remedy=f"check {key}") from error
    except ValueError as error:  # a NUL in the name
        raise fault("is no file name", where=repr(str(path)), remedy=f"check {key}") from error


def _refuse_too_many(
    lines: list[tuple[int, str]], separator: str, path: Path, fault: type[InputError]
) -> None:
    blank = separator == " "
    cells = len(lines) + sum(len(line) // 2 if blank else line.count(separator) for _, line in lines)
    if cells > text.MOST_CELLS and blank:
        cells = sum(len(line.split()) for _, line in lines)
    if cells > text.MOST_CELLS:
        raise fault(
            f"holds more than {text.MOST_CELLS} cells",
            where=str(path),
            remedy="export only this test, or fewer columns",
        )


def _rows(lines: list[tuple[int, str]], separator: str) -> tuple[list[Row], dict[int, str]]:
    """Take lines apart into cells; also return remarks, which may hold the headers, by line."""
    rows: list[Row] = []
    remarks: dict[int, str] = {}
    for number, line in lines:
        if not (line[0].isdigit() or line[0].isalpha()) and layout.is_comment(line, separator):
            remarks[number] = line.strip().lstrip("#/%;").strip()
        else:
            rows.append((number, layout.split(line, separator)))
    return [row for row in rows if any(row[1])], remarks


def _laid_out(
    path: Path,
    rows: list[Row],
    separator: str,
    fault: type[InputError],
    *,
    notices: list[Notice],
    encoding: str,
    decimal: str | None,
    titles: dict[int, str] | None = None,
) -> Table:
    """Find headers, units, data, and what is neither."""
    usual = layout.value_columns(rows)
    start = layout.first_data_row(rows, usual) if usual else len(rows)
    headers, units, heading = _headers(rows, start, separator, titles or {})
    if not any(headers) and (start == len(rows) or start > 0 or not rows):
        raise fault("has no line of column headers at its top", where=str(path), remedy="export it as CSV")
    if not any(headers):
        headers = [""] * max(len(cells) for _, cells in rows[start:][:50])
    width = len(headers)
    data, breaks, said = _data(rows[start:], usual, headers, path, fault)
    for number, cells in data:
        if len(cells) > width and any(cells[width:]):
            raise fault(
                f"holds more than the {width} cells that the headers name",
                where=f"{path}, row {number}",
                remedy=_SEPARATE,
            )
    lines = [number for number, _ in data]
    padded = [cells if len(cells) == width else (cells + [""] * width)[:width] for _, cells in data]
    columns = (
        dict(enumerate(map(list, zip(*padded, strict=True)))) if padded else {k: [] for k in range(width)}
    )
    frame = pd.DataFrame(
        {k: np.array(v, dtype=object) for k, v in columns.items()}, index=lines, dtype=object
    )
    return Table(
        path, headers, separator, frame, fault, units, encoding, heading, breaks, (*notices, *said), decimal
    )


def _headers(
    rows: list[Row], start: int, separator: str, remarks: dict[int, str]
) -> tuple[list[str], list[str | None], int]:
    """Return headers, what a row of units says, and how many rows stand above them."""
    width = len(rows[start][1]) if start < len(rows) else 0
    above = start - 1
    units: list[str | None] = []
    if above > 0 and layout.is_units_row(rows[above][1]) and not _has_values(rows[above - 1][1]):
        units = [layout.bare_unit(cell) or None for cell in rows[above][1]]
        above -= 1
    if above < 0:
        before = rows[start][0] if start < len(rows) else 0
        remark = next((remarks[n] for n in sorted(remarks, reverse=True) if n < before and remarks[n]), "")
        cells = _cells_of_headers(remark, separator, width)
        return (cells, units, 0) if len(cells) == width else ([], units, 0)
    cells = list(rows[above][1])
    if separator == " " and len(cells) != width:
        cells = _cells_of_headers(" ".join(cells), " ", width)
    while len(cells) > 1 and not cells[-1]:
        cells.pop()
    if start < len(rows) and _has_values(cells) and 2 * sum(map(layout.is_value, cells)) >= len(cells):
        return [], units, 0
    units += [None] * (len(cells) - len(units))
    return cells, units, above


def _cells_of_headers(line: str, separator: str, width: int) -> list[str]:
    return layout.headers_by_blanks(line, width) if separator == " " else layout.split(line, separator)


def _has_values(cells: list[str]) -> bool:
    return any(map(layout.is_value, cells))


def _data(
    body: list[Row], usual: list[int], headers: list[str], path: Path, fault: type[InputError]
) -> tuple[list[Row], tuple[Break, ...], list[Notice]]:
    """Keep the rows of data; say what stands between them and after them."""
    if not body:
        return [], (), []
    keep = _rows_of_data(body, usual, headers)
    last = int(np.flatnonzero(keep)[-1]) if keep.any() else -1
    # A row that was cut off in the middle would be data with values missing.
    if last == len(body) - 1 > 0 and len(body[last][1]) < len(body[last - 1][1]):
        keep[last], last = False, last - 1
    notices = _after(body, last, path)
    breaks, at = [], np.cumsum(keep)
    for is_kept, group in groupby(range(last + 1), key=lambda i: bool(keep[i])):
        rows = list(group)
        if is_kept:
            continue
        _refuse_other_headers([body[i] for i in rows], headers, path, fault)
        words = shorten("; ".join(" ".join(filter(None, body[i][1])) for i in rows[:3]), 60, placeholder=" …")
        breaks.append(Break(int(at[rows[0]]), body[rows[0]][0], words))
    return [body[i] for i in np.flatnonzero(keep)], tuple(breaks), notices


def _same(words: list[str], names: list[str]) -> bool:
    """Tell whether headers are the same, with their units or without."""
    return [split_header(word)[0] for word in words] == [split_header(name)[0] for name in names]


def _rows_of_data(body: list[Row], usual: list[int], headers: list[str]) -> NDArray[np.bool_]:
    """Tell rows of data, some of whose values may be missing, from text between them."""
    there = np.array([_values_in(body, column) for column in usual])
    keep = there[0] | (2 * there.sum(axis=0) >= len(usual))
    for i in np.flatnonzero(~keep):
        cells = body[i][1]
        missing = {cell.lower() for cell in cells} <= layout.MISSING
        # With one column of numbers, a row as long as the others is one whose number is none.
        alone = len(usual) == 1 and len(cells) == len(headers) and cells != headers
        keep[i] = missing or (alone and not layout.is_units_row(cells))
    return keep


def _values_in(body: list[Row], column: int) -> NDArray[np.bool_]:
    cells = [cells[column] if column < len(cells) else "" for _, cells in body]
    there = looks_like_value(cells)
    # Dates and a.m. are more than digits and marks.
    for i in np.flatnonzero(~there):
        there[i] = bool(cells[i]) and layout.is_value(cells[i])
    return there


def _after(body: list[Row], last: int, path: Path) -> list[Notice]:
    """Say what stands after the last row of data."""
    rest = body[last + 1 :]
    if not rest:
        return []
    number, cells = rest[-1]
    whole = len(body[last][1])
    if len(rest) == 1 and 0 < len(cells) < whole and layout.is_value(cells[0]):
        said = f"{path.name} ends in the middle of row {number}; the rows before it are used. "
        return [Notice("record_cut_off", said + "If the test went on, export it again.")]
    words = shorten(" ".join(rest[0][1]), 60, placeholder=" …")
    rows = f"row {rest[0][0]}" if len(rest) == 1 else f"rows {rest[0][0]} to {number}"
    return [Notice("record_trailer", f"{path.name}: {rows} after the data ('{words}') left out.")]


def _refuse_other_headers(rows: list[Row], headers: list[str], path: Path, fault: type[InputError]) -> None:
    """Raise where rows between data name other columns than the table's headers do."""
    names = [name for name in headers if name]
    for number, cells in rows:
        words = [cell for cell in cells if cell]
        if len(words) == len(names) > 1 and not _same(words, names) and not layout.is_units_row(cells):
            if any(map(layout.is_value, words)):
                continue
            raise fault(
                "names other columns than the headers at the top",
                where=f"{path}, row {number}",
                remedy="export the parts as files of their own",
            )
