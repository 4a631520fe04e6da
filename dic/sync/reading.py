"""Reading the testing machine's record: columns by name or number, units from headers or test file."""

from __future__ import annotations

from pathlib import Path
from textwrap import shorten

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from dic.errors import LoadRecordError, nearest
from dic.quantities import EXAMPLES, factor, split_header
from dic.sync.record import LoadRecord
from dic.tables import read_table
from dic.testfile import Column
from dic.testfile import LoadRecord as Section

Floats = NDArray[np.float64]

#: A day at 1 kHz with five columns stays below this; anything larger is something else.
MAX_BYTES = 500_000_000
#: Fewer rows are no test.
MIN_ROWS = 5

_KINDS = {"time": "time", "force": "force", "displacement": "length", "extensometer": "strain"}


def read_load_record(section: Section, path: Path) -> LoadRecord:
    """Read the machine's record from a text table.

    For headers, separators and decimal commas see `dic.tables`.  A column is named by its header, by
    its header without the unit if that is unambiguous, or by its number, counted from 1.  The unit
    stands in the header, as in "Force (kN)", "Load [lbf]" or "Kraft / N", or in the test file's
    ``units`` under the header or under the quantity (``time``, ``force``, ``displacement``,
    ``extensometer``).

    Parameters
    ----------
    section
        The test file's description of the record.
    path
        The file, UTF-8 with or without byte-order mark.

    Returns
    -------
    LoadRecord
        Time, force and the other named columns in internal units.

    Raises
    ------
    LoadRecordError
        If the file cannot be read, a column or unit is not understood, a value is not a number, time
        does not increase, or fewer than `MIN_ROWS` rows are there.
    """
    table = read_table(path, LoadRecordError, key="load_record.source", most_bytes=MAX_BYTES)
    headers = table.headers
    written = {quantity: getattr(section, quantity) for quantity in _KINDS}
    positions = {
        quantity: _position(column, headers, quantity, path)
        for quantity, column in written.items()
        if column is not None
    }
    _refuse_stray_units(section.units, headers, path)
    units = {
        quantity: _unit(quantity, headers[position], section.units, path)
        for quantity, position in positions.items()
    }
    if len(table.cells) < MIN_ROWS:
        raise LoadRecordError(
            f"holds {len(table.cells)} rows of data, at least {MIN_ROWS} are needed",
            where=str(path),
            remedy="export the whole test",
        )
    values = {
        quantity: table.numbers(position) * _worth(units[quantity], _KINDS[quantity])
        for quantity, position in positions.items()
    }
    _check_time(values["time"], table.cells.index, path)
    return LoadRecord(
        path=path,
        time_s=values["time"],
        force_N=values["force"],
        displacement_mm=values.get("displacement"),
        extensometer=values.get("extensometer"),
        columns={
            quantity: f"{split_header(headers[position])[0]} ({units[quantity]})"
            for quantity, position in positions.items()
        },
    )


def _position(column: Column, headers: list[str], quantity: str, path: Path) -> int:
    """Return where a column stands, counted from 0."""
    where = f"{path}, load_record.{quantity}"
    there = shorten(", ".join(f"'{header}'" for header in headers), 300, placeholder=" …")
    if isinstance(column, int):
        if 1 <= column <= len(headers):
            return column - 1
        raise LoadRecordError(
            f"there is no column {column}, the file has {len(headers)} ({there})",
            where=where,
            remedy="count from 1",
        )
    found = [i for i, header in enumerate(headers) if header == column.strip()]
    found = found or [i for i, header in enumerate(headers) if split_header(header)[0] == column.strip()]
    if len(found) == 1:
        return found[0]
    if found:
        raise LoadRecordError(
            f"'{column}' fits {len(found)} columns ({there})",
            where=where,
            remedy="give the column's number, counted from 1",
        )
    hint = nearest(column, headers)
    remedy = hint if hint.endswith("?") else "name one of them, or give its number counted from 1"
    raise LoadRecordError(f"there is no column '{column}', only {there}", where=where, remedy=remedy)


def _refuse_stray_units(units: dict[str, str], headers: list[str], path: Path) -> None:
    """Raise if a unit is given for something that is not there."""
    known = {*headers, *(split_header(header)[0] for header in headers), *_KINDS}
    for key in units:
        if key not in known:
            raise LoadRecordError(
                f"there is no column or quantity '{key}'",
                where=f"{path}, load_record.units",
                remedy=nearest(key, known),
            )


def _unit(quantity: str, header: str, units: dict[str, str], path: Path) -> str:
    """Return a column's unit, checked to be one of its quantity."""
    name, in_header = split_header(header)
    given = next((units[key] for key in (header, name, quantity) if key in units), None)
    where = f"{path}, column '{header}'"
    kind = _KINDS[quantity]
    unit = in_header if given is None else given
    if not unit:
        raise LoadRecordError(
            "says no unit",
            where=where,
            remedy=f'add load_record.units = {{ {quantity} = "{EXAMPLES[kind].split()[-1]}" }}',
        )
    try:
        worth = _worth(unit, kind)
    except ValueError as error:
        raise LoadRecordError(
            str(error),
            where=where,
            remedy=f"correct it, or give the right one as load_record.units.{quantity}",
        ) from error
    if given is not None and _contradicts(in_header, worth, kind):
        raise LoadRecordError(
            f"the header says {in_header} but load_record.units says {given}",
            where=where,
            remedy="remove the wrong one",
        )
    return unit


def _worth(unit: str, kind: str) -> float:
    """Return what one `unit` is worth in the internal unit of `kind`.

    No unit of time, force, length or strain needs an exponent, and one from a stranger's header could
    be large enough to keep the unit library busy for ever.
    """
    if not all(part.strip().isalpha() or part.strip() == "%" for part in unit.split("/")):
        raise ValueError(f"'{unit}' is not a unit of {kind}; write for example \"{EXAMPLES[kind]}\"")
    return factor(unit, kind)


def _contradicts(in_header: str | None, worth: float, kind: str) -> bool:
    """Tell whether a header names another unit; a remark like "(filtered)" is no unit."""
    try:
        return in_header is not None and _worth(in_header, kind) != worth
    except ValueError:
        return False


def _check_time(time_s: Floats, lines: pd.Index[int], path: Path) -> None:
    """Raise where time stands still or runs back."""
    back = np.flatnonzero(np.diff(time_s) <= 0)
    if back.size:
        here = back[0] + 1
        raise LoadRecordError(
            f"time does not increase (from {time_s[here - 1]:g} s to {time_s[here]:g} s)",
            where=f"{path}, row {lines[here]}",
            remedy="export one test only, with enough digits in the time",
        )
