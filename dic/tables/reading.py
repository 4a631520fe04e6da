"""Reading a table: from a file to headers, units, cells, and what stands between and after them."""

from __future__ import annotations

import gc
from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from dataclasses import replace
from itertools import groupby
from pathlib import Path
from textwrap import shorten

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from dic.errors import InputError, Notice, printable
from dic.quantities import split_header
from dic.tables import layout, text, workbook
from dic.tables.layout import Row
from dic.tables.numbers import looks_like_value
from dic.tables.table import Break, Table

_SEPARATE = "export it as CSV, with semicolons or tabs between columns if numbers have a decimal comma"
#: Cells of text that a message quotes.
_QUOTED = 60


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
        The workbook's sheet; the first that holds a table of numbers by default.

    Raises
    ------
    InputError
        `fault`, if the file cannot be read or is no such table.
    """
    with _no_collection():
        return _read(path, fault, key=key, most_bytes=most_bytes, decimal=decimal, sheet=sheet)


@contextmanager
def _no_collection() -> Iterator[None]:
    """Keep the garbage collector from looking through a million cells, again and again as they are made."""
    running = gc.isenabled()
    gc.disable()
    try:
        yield
    finally:
        if running:
            gc.enable()


def _read(
    path: Path, fault: type[InputError], *, key: str, most_bytes: int, decimal: str | None, sheet: str | None
) -> Table:
    head, data = _bytes(path, fault, key, most_bytes)
    if workbook.is_old_workbook(head):
        raise fault(
            "is an Excel workbook of the old kind (.xls)", where=str(path), remedy="save it as .xlsx or CSV"
        )
    if workbook.is_workbook(head):
        rows, taken, others = workbook.workbook_rows(path, sheet, fault)
        notices = []
        if others:
            named = shorten(", ".join(f"'{name}'" for name in others), 200, placeholder=" …")
            said = (
                f"{path.name}: sheet '{taken}' was read; {named} could be meant too: say load_record.sheet."
            )
            notices = [Notice("record_sheet", said)]
        # Numbers of a workbook are written with a point; only text in it can have a comma.
        comma = any("," in cell for _, cells in layout.sample(rows) for cell in cells)
        decimal = decimal or (None if comma else ".")
        table = _laid_out(path, rows, "", fault, notices=notices, decimal=decimal, encoding="workbook")
        return replace(table, sheet=taken)
    if sheet is not None:
        raise fault("is no workbook, so it has no sheets", where=str(path), remedy="remove load_record.sheet")
    if not data.strip(b"\xef\xbb\xbf\xff\xfe \t\r\n\x00"):
        raise fault("is empty", where=str(path), remedy="export it again")
    found = text.lines_of(data, str(path), fault)
    lines = text.joined_quotes(found.lines, str(path), fault)
    separator = layout.find_separator(lines)
    _refuse_too_many(lines, separator, path, fault)
    rows, titles = _rows(lines, separator, str(path), fault)
    table = _laid_out(
        path, rows, separator, fault, titles=titles, encoding=found.encoding, decimal=decimal, notices=[]
    )
    at_the_end = len(table.cells) > 0 and table.cells.index[-1] == len(found.lines)
    return replace(table, unended=at_the_end)


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


def _rows(
    lines: list[tuple[int, str]], separator: str, where: str, fault: type[InputError]
) -> tuple[list[Row], dict[int, str]]:
    """Take lines apart into cells; also return remarks, which may hold the headers, by line."""
    rows: list[Row] = []
    remarks: dict[int, str] = {}
    for number, line in lines:
        if not (line[0].isdigit() or line[0].isalpha()) and layout.is_comment(line, separator):
            remarks[number] = line.strip().lstrip("#/%;").strip()
        else:
            rows.append((number, layout.split(line, separator)))
    widest = max((len(cells) for _, cells in rows), default=0)
    if widest > text.MOST_COLUMNS:
        raise fault(
            f"has {widest} columns, and no record has more than {text.MOST_COLUMNS}",
            where=where,
            remedy="export fewer columns",
        )
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
    body = rows[start:]
    columns = _columns(body, len(headers))
    keep, breaks, said = _data(body, columns, usual, headers, path, fault)
    _refuse_longer(body, keep, len(headers), path, fault)
    frame = pd.DataFrame(
        {k: np.array(cells, dtype=object)[keep] for k, cells in enumerate(columns)},
        index=np.array([number for number, _ in body], dtype=np.int64)[keep],
        dtype=object,
    )
    return Table(
        path, headers, separator, frame, fault, units, encoding, heading, breaks, (*notices, *said), decimal
    )


def _refuse_longer(
    body: list[Row], keep: NDArray[np.bool_], width: int, path: Path, fault: type[InputError]
) -> None:
    """Raise where a row of data holds more than the headers name."""
    for i, (number, cells) in enumerate(body):
        if len(cells) > width and keep[i] and any(cells[width:]):
            raise fault(
                f"holds more than the {width} cells that the headers name",
                where=f"{path}, row {number}",
                remedy=_SEPARATE,
            )


def _columns(body: list[Row], width: int) -> list[Sequence[str]]:
    """Return the cells by column, short rows filled up."""
    rows = [cells if len(cells) == width else (cells + [""] * width)[:width] for _, cells in body]
    return list(zip(*rows, strict=True)) if rows else [[] for _ in range(width)]


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
    body: list[Row],
    columns: list[Sequence[str]],
    usual: list[int],
    headers: list[str],
    path: Path,
    fault: type[InputError],
) -> tuple[NDArray[np.bool_], tuple[Break, ...], list[Notice]]:
    """Tell the rows of data; say what stands between them and after them."""
    if not body:
        return np.zeros(0, dtype=bool), (), []
    within = [column for column in usual if column < len(headers)]
    if not within:
        _refuse_longer(body, np.ones(len(body), dtype=bool), len(headers), path, fault)
        return np.zeros(len(body), dtype=bool), (), []
    keep = _rows_of_data(body, columns, within, headers)
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
        words = _words("; ".join(" ".join(filter(None, body[i][1])) for i in rows[:3]))
        breaks.append(Break(int(at[rows[0]]), body[rows[0]][0], words))
    return keep, tuple(breaks), notices


def _words(words: str) -> str:
    """Return text for a message."""
    return printable(shorten(words, _QUOTED, placeholder=" …"))


def _same(words: list[str], names: list[str]) -> bool:
    """Tell whether headers are the same, with their units or without."""
    return words == names or [split_header(w)[0] for w in words] == [split_header(n)[0] for n in names]


def _rows_of_data(
    body: list[Row], columns: list[Sequence[str]], usual: list[int], headers: list[str]
) -> NDArray[np.bool_]:
    """Tell rows of data, some of whose values may be missing, from text between them."""
    there = np.array([_values_in(columns[column]) for column in usual], dtype=bool)
    keep: NDArray[np.bool_] = there[0] | (2 * there.sum(axis=0) >= len(usual))
    for i in np.flatnonzero(~keep):
        cells = body[i][1]
        missing = {cell.lower() for cell in cells} <= layout.MISSING
        # With one column of numbers, a row as long as the others is one whose number is none.
        alone = len(usual) == 1 and len(cells) == len(headers) and cells != headers
        keep[i] = missing or (alone and not layout.is_units_row(cells))
    return keep


def _values_in(cells: Sequence[str]) -> NDArray[np.bool_]:
    there = looks_like_value(cells)
    # Dates and a.m. are more than digits and marks.
    for i in np.flatnonzero(~there).tolist():
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
    words = _words(" ".join(rest[0][1]))
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
