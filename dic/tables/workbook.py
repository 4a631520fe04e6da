"""Excel workbooks (.xlsx) as rows of text, within bounds."""

from __future__ import annotations

import warnings
import zipfile
import zlib
from datetime import date, datetime, time, timedelta
from pathlib import Path
from typing import Any
from xml.etree.ElementTree import ParseError

from dic.errors import InputError
from dic.tables import layout
from dic.tables.text import MOST_CELLS, MOST_COLUMNS

#: What a workbook of `MOST_CELLS` numbers unpacks to, about.
MOST_UNPACKED = 250_000_000
#: Texts that cells share are kept in memory all at once.
MOST_SHARED = 20_000_000
_CHUNK = 1 << 20
#: Rows of numbers that make a table; a sheet of notes and settings has fewer.
_LEAST_ROWS = 5

Rows = list[tuple[int, list[str]]]


def is_workbook(head: bytes) -> bool:
    """Tell by its first bytes whether a file is a zip archive, as workbooks are."""
    return head.startswith(b"PK\x03\x04")


def is_old_workbook(head: bytes) -> bool:
    """Tell by its first bytes whether a file is a workbook of the kind used until 2007."""
    return head.startswith(b"\xd0\xcf\x11\xe0\xa1\xb1\x1a\xe1")


def workbook_rows(path: Path, sheet: str | None, fault: type[InputError]) -> tuple[Rows, str, list[str]]:
    """Read one sheet's rows as text; formulas count as the value that was stored with them.

    Parameters
    ----------
    path
        The workbook.
    sheet
        The sheet's name; None takes the first that holds a table of numbers, else the first that holds
        anything.
    fault
        The error to raise where it cannot be used.

    Returns
    -------
    rows, taken, others
        Numbered rows without the blank ones, the sheet's name, and the names of others that could be meant.
    """
    try:
        from openpyxl import load_workbook
        from openpyxl.utils.exceptions import InvalidFileException
    except ImportError as error:
        raise fault(
            "is an Excel workbook, and what reads those is not installed",
            where=str(path),
            remedy="install it with: pip install 'tauten[excel]', or export the record as CSV",
        ) from error
    try:
        _refuse_bombs(path, fault)
        # Opened here, because the library leaves a file open where it fails over its content.
        with path.open("rb") as file, warnings.catch_warnings():
            warnings.simplefilter("ignore")  # about styles and links, which no record needs
            book = load_workbook(file, read_only=True, data_only=True, keep_links=False)
            return _sheet(book, sheet, path, fault)
    except (
        InvalidFileException, zipfile.BadZipFile, ParseError, KeyError, ValueError, TypeError, AttributeError,
        IndexError, OverflowError, EOFError, zlib.error, OSError, NotImplementedError, RuntimeError,
        AssertionError,
    ) as error:  # fmt: skip
        raise fault(
            "is no Excel workbook that can be read",
            where=str(path),
            remedy="save it again, or export it as CSV",
        ) from error


def _refuse_bombs(path: Path, fault: type[InputError]) -> None:
    """Raise where a workbook would unpack to more than a record holds, or defines text that grows."""
    with zipfile.ZipFile(path) as archive:
        parts = archive.infolist()
        shared = sum(p.file_size for p in parts if "sharedstrings" in p.filename.lower())
        if sum(p.file_size for p in parts) > MOST_UNPACKED or shared > MOST_SHARED or len(parts) > 5000:
            raise fault(
                "unpacks to more than a load record holds", where=str(path), remedy="export it as CSV"
            )
        for part in parts:
            if part.filename.lower().endswith((".xml", ".rels")):
                _refuse_definitions(archive, part, path, fault)


def _refuse_definitions(
    archive: zipfile.ZipFile, part: zipfile.ZipInfo, path: Path, fault: type[InputError]
) -> None:
    end = b""
    with archive.open(part) as file:
        while chunk := file.read(_CHUNK):
            if b"<!" in end + chunk or b"<\0!" in end + chunk:
                raise fault("holds definitions that no record needs", where=f"{path}, {part.filename[:60]}")
            end = chunk[-2:]


def _sheet(book: Any, sheet: str | None, path: Path, fault: type[InputError]) -> tuple[Rows, str, list[str]]:
    names = [page.title for page in book.worksheets]
    if sheet is not None and sheet not in names:
        there = ", ".join(f"'{name[:60]}'" for name in names[:20])
        raise fault(f"there is no sheet '{sheet}'", where=str(path), remedy=f"there are: {there}")
    read: dict[str, Rows] = {}
    held = 0
    for name in [sheet] if sheet is not None else names:
        read[name] = _rows(book[name], path, fault)
        held += sum(len(cells) for _, cells in read[name])
        if held > MOST_CELLS:  # sheets further back may be anything
            break
    filled = [name for name, rows in read.items() if rows]
    tables = [name for name in filled if _holds_table(read[name])] or filled
    if tables:
        return read[tables[0]], tables[0], tables[1:]
    raise fault("holds no rows", where=str(path), remedy="name the sheet with load_record.sheet")


def _holds_table(rows: Rows) -> bool:
    """Tell whether a sheet holds columns of numbers beside one another."""
    columns = layout.value_columns(rows)
    return len(columns) > 1 and sum(layout.is_sound(cells, columns) for _, cells in rows) >= _LEAST_ROWS


def _rows(page: Any, path: Path, fault: type[InputError]) -> Rows:
    # The stated dimensions would pad every row to the widest that there could be.
    page.reset_dimensions()
    rows: Rows = []
    cells = 0
    for number, values in enumerate(page.iter_rows(values_only=True), start=1):
        width = len(values)
        while width and values[width - 1] is None:
            width -= 1
        cells += len(values)
        if cells > MOST_CELLS or width > MOST_COLUMNS:
            raise fault(
                "holds more cells than a load record", where=str(path), remedy="export only this test"
            )
        if width:
            rows.append((number, [text_of(value) for value in values[:width]]))
    return rows


def text_of(value: object) -> str:
    """Return a cell's value as it would stand in a text file with decimal points."""
    if value is None:
        return ""
    if isinstance(value, bool):
        return str(int(value))
    if isinstance(value, datetime):
        return value.isoformat(" ")
    if isinstance(value, date | time):
        return value.isoformat()
    if isinstance(value, timedelta):
        seconds = value.total_seconds()
        hours, rest = divmod(abs(seconds), 3600)
        return f"{hours:02.0f}:{rest // 60:02.0f}:{rest % 60:09.6f}"
    return " ".join(str(value).split())
