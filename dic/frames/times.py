"""A table with the time of each frame, by name or in order."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path

from dic.errors import FrameError, listed
from dic.frames import instants
from dic.frames.readers import READERS
from dic.quantities import factor, split_header
from dic.tables import Table, read_table

MOST_BYTES = 50_000_000
MOST_SECONDS = 1e12


@dataclass(frozen=True)
class ListedTimes:
    """What a times file says.

    Attributes
    ----------
    ns
        Instant of each frame, ns, in the frames' order.
    named
        Whether the file names the frames, so that their times do not hang on their order.
    dated
        Whether they are dates with times of day rather than counted from a zero of the file's own.
    """

    ns: list[int]
    named: bool
    dated: bool


def times_from_file(path: Path, names: list[str]) -> ListedTimes:
    """Read a times file.

    Parameters
    ----------
    path
        A table with a column of file names (or none: then one row per frame, in order) and a column of
        times, whose header holds the unit or whose cells are times of day, with dates or without.
    names
        The frames' file names in order.

    Raises
    ------
    FrameError
        If the file cannot be read, or misses a frame or a unit.
    """
    table = read_table(path, FrameError, key="frames.times", most_bytes=MOST_BYTES)
    column = _time_column(table)
    dates, clock = (
        [one for cell in table.cells[column] if (one := read(cell)) is not None]
        for read in (instants.from_text, instants.of_day)
    )
    dated = 0 < len(dates) == len(table.cells)
    if dated:
        ns = dates
    elif 0 < len(clock) == len(table.cells):
        ns = instants.past_midnight(clock)
    else:
        seconds = table.numbers(column) * _seconds(table, column)
        far = abs(seconds) > MOST_SECONDS
        if far.any():
            raise FrameError(
                "holds a time of more than 30,000 years",
                where=f"{path}, row {table.cells.index[int(far.argmax())]}",
                remedy="check the unit in the header",
            )
        ns = [round(float(one) * instants.SECOND) for one in seconds]
    rows = _rows_by_name(table, names)
    if rows is None and len(ns) != len(names):
        raise FrameError(
            f"lists {len(ns)} times for {len(names)} frames", where=str(path), remedy="one row per frame"
        )
    return ListedTimes(ns if rows is None else [ns[row] for row in rows], rows is not None, dated)


def _time_column(table: Table) -> int:
    for position, header in enumerate(table.headers):
        if split_header(header)[0].lower() in ("time", "t"):
            return position
    raise FrameError(
        "has no column 'time'", where=str(table.path), remedy=f"there are: {', '.join(table.headers)}"
    )


def _seconds(table: Table, column: int) -> float:
    """Return what the column's unit is worth in seconds."""
    header = table.headers[column]
    unit = split_header(header)[1]
    where = f"{table.path}, column '{header}'"
    if unit is None:
        raise FrameError("says no unit", where=where, remedy='write for example "time (s)"')
    try:
        return factor(unit, "time")
    except ValueError as error:
        raise FrameError(str(error), where=where) from error


def _rows_by_name(table: Table, names: list[str]) -> list[int] | None:
    """Return the row of each frame where the table names frames; None where it lists them in order."""
    if len(set(names)) < len(names):  # the pages of one file
        return None
    for position, header in enumerate(table.headers):
        cells = table.cells[position].str.strip()
        # Numbers alone count frames.
        stems = {Path(name).stem: name for name in names if not Path(name).stem.isdigit()}
        if len(stems) == len(names):
            cells = cells.map(lambda cell, stems=stems: stems.get(cell, cell))
        if not (cells.isin(names) | cells.str.lower().str.endswith(tuple(READERS))).any():
            continue
        rows = {name: row for row, name in enumerate(cells)}
        missing = [name for name in names if name not in rows]
        if missing:
            raise FrameError(
                f"has no row for frame {listed(missing, 1)}",
                where=f"{table.path}, column '{header}'",
                remedy="name every frame as its file is named",
            )
        twice = cells[cells.isin(names) & cells.duplicated()]
        if len(twice):
            raise FrameError(
                f"names {twice.iloc[0]} twice",
                where=f"{table.path}, row {twice.index[0]}",
                remedy="keep one row per frame",
            )
        return [rows[name] for name in names]
    return None
