"""When each frame was taken, on the camera's own clock."""

from __future__ import annotations

from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from dic.errors import FrameError
from dic.frames.readers import READERS
from dic.quantities import factor, split_header
from dic.tables import Table, read_table
from dic.testfile import Frames

MOST_BYTES = 50_000_000


def frame_times(section: Frames, folder: Path, names: list[str]) -> NDArray[np.float64]:
    """Return the time of each frame, s, shape (n,).

    Parameters
    ----------
    section
        ``[frames]`` of the test file: a fixed ``rate``, or ``times``, a table with a column of file
        names (or none: then one row per frame, in order) and a column of times whose header holds
        the unit, see `dic.tables`.
    folder
        What relative paths start from.
    names
        The frames' file names in order.

    Raises
    ------
    FrameError
        If the file cannot be read, misses a frame or a unit, or time does not increase.
    """
    if section.rate is not None:
        return section.start + np.arange(len(names)) / section.rate
    assert section.times is not None  # noqa: S101  (the test file's check)
    time = section.start + _from_file(folder / section.times, names)
    back = np.flatnonzero(~(np.diff(time) > 0))
    if len(back):
        raise FrameError(
            f"time does not increase from frame {names[back[0]]} to {names[back[0] + 1]}",
            where=section.times,
            remedy="correct the times file",
        )
    return time


def _from_file(path: Path, names: list[str]) -> NDArray[np.float64]:
    table = read_table(path, FrameError, key="frames.times", most_bytes=MOST_BYTES)
    column = _time_column(table)
    time = table.numbers(column) * _seconds(table, column)
    rows = _rows_by_name(table, names)
    if rows is not None:
        return time[rows]
    if len(time) != len(names):
        raise FrameError(
            f"lists {len(time)} times for {len(names)} frames", where=str(path), remedy="one row per frame"
        )
    return time


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
        if not (cells.isin(names) | cells.str.lower().str.endswith(tuple(READERS))).any():
            continue
        rows = {name: row for row, name in enumerate(cells)}
        missing = [name for name in names if name not in rows]
        if missing:
            more = f" and {len(missing) - 1} more" if len(missing) > 1 else ""
            raise FrameError(
                f"has no row for frame {missing[0]}{more}",
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
