"""A table as it was read: headers, units, cells, and what was met on the way."""

from __future__ import annotations

from dataclasses import dataclass, field
from functools import cached_property
from pathlib import Path
from textwrap import shorten

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from dic.errors import InputError, Notice
from dic.tables import layout
from dic.tables.numbers import Decimal, decimal_marks, has_marks, to_numbers


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
    sheet
        The workbook's sheet; None in a text file.
    unended
        Whether the last row is the file's last line and has no line end, so that it may be cut off.
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
    sheet: str | None = None
    unended: bool = False

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
        if not np.isfinite(self.values(position)).any() and not self.is_instant(position):
            return self.fault(
                f"holds no numbers ('{cell}' is not a number)",
                where=f"{self.path}, column {self.name(position)}",
                remedy="name another column, or export it again",
            )
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
