"""When each frame was taken, on the camera's own clock."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from dic.errors import FrameError
from dic.quantities import factor, split_header
from dic.testfile import Frames

if TYPE_CHECKING:
    import pandas as pd

MOST_BYTES = 50_000_000


def frame_times(section: Frames, folder: Path, names: list[str]) -> NDArray[np.float64]:
    """Return the time of each frame, s, shape (n,).

    Parameters
    ----------
    section
        ``[frames]`` of the test file: a fixed ``rate``, or ``times``, a CSV with a column of file
        names (or none: then one row per frame, in order) and a column of times whose header holds
        the unit.
    folder
        What relative paths start from.
    names
        The frames' file names in order.

    Raises
    ------
    FrameError
        If the file cannot be read, misses a frame, or time does not increase.
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
    import pandas as pd

    try:
        if path.stat().st_size > MOST_BYTES:
            raise FrameError("is far too large for a list of frame times", where=str(path))
        with path.open(encoding="utf-8-sig") as file:
            header = file.readline(10_000)
            separator = next((mark for mark in "\t;" if mark in header), ",")
        table = pd.read_csv(path, sep=separator, encoding="utf-8-sig")
    except (OSError, UnicodeDecodeError, pd.errors.ParserError, pd.errors.EmptyDataError) as error:
        raise FrameError(
            f"cannot be read ({' '.join(str(error).split())})", where=str(path), remedy="check frames.times"
        ) from error
    column = _time_column(table, path)
    time = pd.to_numeric(table[column], errors="coerce").to_numpy(float)
    try:
        time = time * factor(split_header(column)[1] or "s", "time")
    except ValueError as error:
        raise FrameError(str(error), where=f"{path}, column '{column}'") from error
    named = [other for other in table.columns if set(names) <= set(table[other].astype(str))]
    if named and len(set(names)) == len(names):
        rows = {str(name): row for row, name in enumerate(table[named[0]])}
        time = time[[rows[name] for name in names]]
    if len(time) != len(names):
        raise FrameError(
            f"lists {len(time)} times for {len(names)} frames", where=str(path), remedy="one row per frame"
        )
    bad = np.flatnonzero(~np.isfinite(time))
    if len(bad):
        raise FrameError(f"no time for frame {names[bad[0]]}", where=str(path), remedy="fill it in")
    return time


def _time_column(table: pd.DataFrame, path: Path) -> str:
    for column in table.columns:
        if split_header(str(column))[0].lower() in ("time", "t"):
            return str(column)
    listed = ", ".join(map(str, table.columns))
    raise FrameError("has no column 'time'", where=str(path), remedy=f"there are: {listed}")
