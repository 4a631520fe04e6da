"""Text tables as machines and spreadsheets export them: one line of headers, then rows of cells."""

from __future__ import annotations

import csv
import warnings
from dataclasses import dataclass
from pathlib import Path
from textwrap import shorten

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from dic.errors import InputError

#: Longest header line that is looked at.
MAX_HEADER = 100_000

_SEPARATE = "export it as CSV, with semicolons or tabs between columns if numbers have a decimal comma"


@dataclass(frozen=True)
class Table:
    """A text table as it was read.

    Attributes
    ----------
    path
        The file.
    headers
        Column headers, n of them.
    separator
        What stands between columns.
    cells
        Text, n columns numbered from 0, indexed by line of the file; blank lines are left out.
    fault
        The error to raise where something is wrong with it.
    """

    path: Path
    headers: list[str]
    separator: str
    cells: pd.DataFrame
    fault: type[InputError]

    def numbers(self, position: int) -> NDArray[np.float64]:
        """Return a column as finite numbers; a decimal comma is one where it cannot be the separator.

        Raises
        ------
        InputError
            The table's `fault`, naming row and column, if a cell is no number.
        """
        text = self.cells[position]
        if self.separator != ",":
            text = text.str.replace(",", ".", regex=False)
        values = np.asarray(pd.to_numeric(text, errors="coerce"), dtype=np.float64)
        bad = np.flatnonzero(~np.isfinite(values))
        if bad.size:
            cell = shorten(str(text.iloc[bad[0]]), 60, placeholder=" …")
            raise self.fault(
                f"'{cell}' is not a number",
                where=f"{self.path}, row {text.index[bad[0]]}, column '{self.headers[position]}'",
                remedy="correct or remove the row",
            )
        return values


def read_table(path: Path, fault: type[InputError], *, key: str, most_bytes: int) -> Table:
    """Read a text table, UTF-8 with or without byte-order mark.

    The first line holds the headers; columns are separated by tab, semicolon or comma, whichever of
    these, in this order, stands in it.

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

    Raises
    ------
    InputError
        `fault`, if the file cannot be read or is no such table.
    """
    try:
        if path.stat().st_size > most_bytes:
            raise fault(
                f"is larger than {most_bytes // 1_000_000} MB",
                where=str(path),
                remedy="export only this test",
            )
        with path.open(encoding="utf-8-sig", newline="") as file:
            line = file.readline(MAX_HEADER)
    except OSError as error:
        raise fault(f"cannot be read ({error.strerror})", where=str(path), remedy=f"check {key}") from error
    except UnicodeDecodeError as error:
        raise _no_text(path, fault) from error
    separator = next((mark for mark in "\t;" if mark in line), ",")
    headers = [header.strip() for header in next(csv.reader([line], delimiter=separator), [])]
    if "\0" in line or not any(headers):
        raise fault("has no line of column headers at its top", where=str(path), remedy="export it as CSV")
    return Table(path, headers, separator, _cells(path, separator, len(headers), fault), fault)


def _no_text(path: Path, fault: type[InputError]) -> InputError:
    return fault("is not UTF-8 text", where=str(path), remedy="export it as CSV in UTF-8")


def _cells(path: Path, separator: str, width: int, fault: type[InputError]) -> pd.DataFrame:
    """Read the cells as text, indexed by line of the file, blank lines left out.

    One more column than there are headers is read: text there means that a row's cells are not where
    the headers say, as with a decimal comma in a file whose separator is the comma.
    """
    try:
        with warnings.catch_warnings():
            warnings.simplefilter("error", pd.errors.ParserWarning)
            table = pd.read_csv(
                path,
                sep=separator,
                header=None,
                names=list(range(width + 1)),
                index_col=False,
                skiprows=1,
                dtype=str,
                keep_default_na=False,
                skip_blank_lines=False,
                encoding="utf-8-sig",
            )
    except UnicodeDecodeError as error:
        raise _no_text(path, fault) from error
    except (pd.errors.ParserError, pd.errors.ParserWarning, OSError, ValueError) as error:
        raise fault(
            f"is no table of {width} columns ({shorten(str(error), 120, placeholder=' …')})",
            where=str(path),
            remedy=_SEPARATE,
        ) from error
    table.index = table.index + 2
    # A short or blank line leaves cells missing even where empty cells are kept as text.
    table = table.fillna("")
    table = table[(table != "").any(axis=1)]
    longer = np.flatnonzero(table[width] != "")
    if longer.size:
        raise fault(
            f"holds more than the {width} cells that the headers name",
            where=f"{path}, row {table.index[longer[0]]}",
            remedy=_SEPARATE,
        )
    return table.drop(columns=width)
