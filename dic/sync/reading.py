"""Reading the testing machine's record: its columns in internal units, on one running clock."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import replace
from itertools import pairwise
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from dic.errors import LoadRecordError, Notice, listed
from dic.sync.columns import Header, Unit, find_columns, headers_of, refuse_stray_units, unit_of
from dic.sync.idle import tared
from dic.sync.instants import (
    MIN_ROWS,
    Instants,
    Segment,
    find_segments,
    from_clock,
    refuse_backwards,
    spread_stamps,
)
from dic.sync.record import LoadRecord
from dic.tables import Break, Table, read_table
from dic.testfile import LoadRecord as Section

Floats = NDArray[np.float64]

#: Four million numbers, which is what a table may hold, of some twenty characters each.
MAX_BYTES = 100_000_000
#: Share of the rows in which time or force may be missing; more is no accident.
MOST_MISSING = 0.05
#: Rows in succession in which they may be.
LONGEST_GAP = 10
#: Rows that the last one is compared with, itself among them.
_COMPARED = 11


def read_load_record(section: Section, path: Path) -> LoadRecord:
    """Read the machine's record from a text table or a workbook.

    For what a table may look like see `dic.tables`.  A column is named by its header, by its header
    without the unit if that is unambiguous, or by its number, counted from 1; time and force are
    recognised by their headers if they are not named.  The unit stands in the header, as in "Force (kN)",
    "Load [lbf]" or "Kraft / N", in a row of its own below, or in the test file's ``units`` under the
    header or under the quantity.

    Parameters
    ----------
    section
        The test file's description of the record.
    path
        The file.

    Returns
    -------
    LoadRecord
        Time, force and the other named columns in internal units.

    Raises
    ------
    LoadRecordError
        If the file cannot be read, a column or unit is not understood, too many values are missing, time
        runs back or starts anew, or fewer than `MIN_ROWS` rows are there.
    """
    table = open_record(path, section.decimal, section.sheet)
    headers = headers_of(table)
    named = {q: getattr(section, q) for q in ("time", "force", "displacement", "extensometer", "trigger")}
    columns = find_columns(table, named, headers)
    refuse_stray_units(section.units, headers, path)
    units = {
        quantity: unit_of(quantity, header, section.units, path)
        for quantity, header in columns.items()
        if quantity != "trigger" and not (quantity == "time" and table.is_instant(header.position))
    }
    if len(table.cells) < MIN_ROWS:
        raise LoadRecordError(
            f"holds {len(table.cells)} rows of data, at least {MIN_ROWS} are needed",
            where=str(path),
            remedy="export the whole test",
        )
    instants = read_instants(table, columns["time"], units.get("time"))
    values = {q: _values(table, header, units.get(q)) for q, header in columns.items() if q != "time"}
    whole = _whole_rows(table, columns, {"time": instants.time_s, "force": values["force"]})
    rows, time_s, joined = _one_clock(table, instants.time_s, whole, section.segment)
    record = LoadRecord(
        path=path,
        time_s=time_s,
        force_N=values["force"][rows],
        displacement_mm=_taken(values, "displacement", rows),
        extensometer=_strain(values, units.get("extensometer"), section.extensometer_length, rows, path),
        trigger=_taken(values, "trigger", rows),
        epoch=instants.epoch,
        columns={q: _shown(header, units.get(q), instants, q) for q, header in columns.items()},
        notices=(
            *table.notices,
            *instants.notices,
            *decimals_assumed(table, columns.values()),
            *_missing(table, columns, whole, values),
            *joined,
        ),
    )
    return tared(record, section.tare)


def open_record(
    path: Path, decimal: str | None = None, sheet: str | None = None, *, key: str = "load_record.source"
) -> Table:
    """Read the table that a record is, without a last row that may be cut off."""
    table = read_table(
        path,
        LoadRecordError,
        key=key,
        most_bytes=MAX_BYTES,
        decimal=decimal,
        sheet=sheet,
    )
    return _without_cut_row(table) if table.unended else table


def _without_cut_row(table: Table) -> Table:
    """Leave out a last row without a line end that may be cut off in the middle of a number.

    What is left of such a number has fewer digits behind the decimal mark than the rows before, or no
    decimal mark at all.
    """
    *before, last = table.texts(len(table.headers) - 1)[-_COMPARED:]
    if last and _decimals(last) >= max(map(_decimals, before), default=0) > 0:
        return table
    text = (
        f"{table.path.name}: the last row ({table.cells.index[-1]}) has no line end and may be cut off, so "
        "it was left out; if the test went on, export it again."
    )
    return replace(
        table, cells=table.cells.iloc[:-1], notices=(*table.notices, Notice("record_cut_off", text))
    )


def _decimals(cell: str) -> int:
    """Return how many characters follow a decimal mark, 0 where there is none."""
    return len(cell) - 1 - mark if (mark := max(map(cell.rfind, ".,"))) >= 0 else 0


def read_instants(table: Table, header: Header, unit: Unit | None) -> Instants:
    """Return a column's times; what has no unit are clock times or dates."""
    if unit is None:
        return from_clock(table.texts(header.position), table.path)
    return Instants(table.values(header.position) * unit.worth, None, unit.text)


def _values(table: Table, header: Header, unit: Unit | None) -> Floats:
    return table.values(header.position) * (unit.worth if unit else 1.0)


def decimals_assumed(table: Table, headers: Iterable[Header]) -> tuple[Notice, ...]:
    """Say where cells such as 1,234 can be read either way."""
    doubtful = [
        (table.name(header.position), table.decimal_of(header.position).mark)
        for header in headers
        if not table.is_instant(header.position) and table.decimal_of(header.position).assumed
    ]
    if not doubtful:
        return ()
    names = ", ".join(name for name, _ in doubtful)
    mark = doubtful[0][1]
    other = "." if mark == "," else ","
    word = {",": "a decimal comma", ".": "a decimal point"}[mark]
    text = (
        f"{table.path.name}: the numbers of {names} can be read either way and were taken to have {word}; "
        f'say load_record.decimal = "{mark}" to confirm it, or "{other}".'
    )
    return (Notice("record_decimal", text),)


def _whole_rows(table: Table, columns: dict[str, Header], needed: dict[str, Floats]) -> NDArray[np.bool_]:
    """Tell which rows hold time and force; raise where too many do not."""
    whole = np.ones(len(table.cells), dtype=bool)
    for quantity, values in needed.items():
        bad = np.flatnonzero(~np.isfinite(values))
        longest = max(map(len, np.split(bad, np.flatnonzero(np.diff(bad) > 1) + 1)))
        if bad.size > MOST_MISSING * len(values) or longest > LONGEST_GAP:
            raise table.no_number(columns[quantity].position, int(bad[0]))
        whole[bad] = False
    if whole.sum() < MIN_ROWS:
        raise LoadRecordError(f"holds only {whole.sum()} whole rows", where=str(table.path))
    return whole


def _missing(
    table: Table, columns: dict[str, Header], whole: NDArray[np.bool_], values: dict[str, Floats]
) -> tuple[Notice, ...]:
    """Say which rows were left out, and in how many an optional column holds no number."""
    found = []
    if not whole.all():
        rows = [int(row) for row in table.cells.index[~whole]]
        text = (
            f"{table.path.name}: row{'s' if len(rows) > 1 else ''} {listed(rows, 10)} left out, as time or "
            "force is no number there; if the load cell was overloaded, the largest force is not in the "
            "record."
        )
        found.append(Notice("record_rows_left_out", text))
    for quantity in values.keys() - {"force"}:
        header, none = columns[quantity], int(np.isnan(values[quantity]).sum())
        if none == len(table.cells):
            raise table.no_number(header.position, 0)
        if none:
            text = f"{table.path.name}: column {table.name(header.position)} holds no number in {none} rows."
            found.append(Notice("record_values_missing", text))
    return tuple(found)


def _one_clock(
    table: Table, time_s: Floats, whole: NDArray[np.bool_], wanted: str | int | None
) -> tuple[NDArray[np.intp], Floats, tuple[Notice, ...]]:
    """Return the rows that are used and their times, which increase; and what was joined or spread."""
    rows = np.flatnonzero(whole)
    before: NDArray[np.intp] = np.cumsum(whole) - whole
    breaks = tuple(replace(b, before=int(before[b.before])) for b in table.breaks if b.before < len(before))
    time, lines = time_s[rows], table.cells.index.to_numpy()[rows]
    segments = find_segments(time, breaks)
    notices: tuple[Notice, ...] = ()
    if isinstance(wanted, int):
        if wanted > len(segments):
            raise LoadRecordError(
                f"there is no segment {wanted}, only {len(segments)}: {_in_words(segments, time, lines)}",
                where=f"{table.path}, load_record.segment",
            )
        part = segments[wanted - 1]
        here = slice(part.first, part.last)
        rows, time, lines = rows[here], time[here], lines[here]
        if len(rows) < MIN_ROWS:
            raise LoadRecordError(
                f"segment {wanted} holds only {len(rows)} rows, at least {MIN_ROWS} are needed",
                where=str(table.path),
            )
        segments = [Segment(0, len(rows))]
    elif len(segments) > 1 and wanted is None:
        raise LoadRecordError(
            f"time starts anew, so there are {len(segments)} segments: {_in_words(segments, time, lines)}",
            where=f"{table.path}, row {lines[segments[1].first]}",
            remedy='say which with load_record.segment = 1, or "all" to put them end to end',
        )
    elif breaks and len(segments) == 1:
        notices = (_joined(table, breaks),)
    for part in segments:
        refuse_backwards(time[part.first : part.last], lines[part.first : part.last], table.path)
    if len(segments) > 1:
        time = _end_to_end(time, segments)
        text = (
            f"{table.path.name}: {len(segments)} segments were put end to end, as asked; how long the "
            "machine paused between them is not in the record and counts as one sample."
        )
        notices = (*notices, Notice("record_segments", text))
    time, spread = spread_stamps(time, table.path)
    return rows, time, (*notices, *spread)


def _joined(table: Table, breaks: Sequence[Break]) -> Notice:
    row, words = breaks[0].row, breaks[0].words
    text = (
        f"{table.path.name}: text between the data left out ({len(breaks)} "
        f"place{'s' if len(breaks) > 1 else ''}, first row {row}: '{words}'); time runs on there, so "
        "the parts were joined."
    )
    return Notice("record_joined", text)


def _end_to_end(time: Floats, segments: list[Segment]) -> Floats:
    """Let each segment begin one usual interval after the one before has ended."""
    steps = np.diff(time)
    usual = float(np.median(steps[steps > 0])) if (steps > 0).any() else 0.0
    shifted = time.copy()
    for before, part in pairwise(segments):
        shift = shifted[before.last - 1] + usual - time[part.first]
        shifted[part.first : part.last] += shift
    return shifted


def _in_words(segments: list[Segment], time: Floats, lines: NDArray[np.int64]) -> str:
    """Return segments with rows and times, for messages."""
    shown = [
        f"{k} (rows {lines[s.first]} to {lines[s.last - 1]}, {time[s.first]:g} to {time[s.last - 1]:g} s)"
        for k, s in enumerate(segments[:8], start=1)
    ]
    return ", ".join(shown) + (" …" if len(segments) > 8 else "")


def _taken(values: dict[str, Floats], quantity: str, rows: NDArray[np.intp]) -> Floats | None:
    return values[quantity][rows] if quantity in values else None


def _strain(
    values: dict[str, Floats], unit: Unit | None, length_mm: float | None, rows: NDArray[np.intp], path: Path
) -> Floats | None:
    """Return the contact extensometer's strain; an elongation counts per gauge length."""
    reading = _taken(values, "extensometer", rows)
    if reading is None or unit is None or unit.kind == "strain":
        return reading
    if length_mm is None:
        raise LoadRecordError(
            f"the extensometer's column is an elongation ({unit.text}), and its gauge length is not given",
            where=str(path),
            remedy='add load_record.extensometer_length = "50 mm"',
        )
    return reading / length_mm


def _shown(header: Header, unit: Unit | None, instants: Instants, quantity: str) -> str:
    """Return header and unit for people."""
    name = header.name or f"column {header.position + 1}"
    text = unit.text if unit else instants.style if quantity == "time" else ""
    return f"{name} ({text})" if text else name
