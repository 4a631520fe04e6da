"""A test file drafted from what frames and load record hold, with blanks for what only the user knows."""

from __future__ import annotations

import os
from collections.abc import Iterator
from pathlib import Path
from textwrap import wrap

import tomli_w
from pydantic import ValidationError

from dic.errors import FrameError, Notice, StoreError, TestFileError, printable
from dic.frames import FramesSurvey, look_at_frames
from dic.quantities import measures
from dic.sync import ColumnSurvey, RecordSurvey, look_at_record

#: Clocks of the frames, from the best; files' dates are too easily changed to be taken unasked.
_CLOCKS = {
    "video": "the video's own times",
    "tags": "each file's own time stamp",
    "names": "the time in the file names",
}
#: A header is repeated up to this length; a longer one is named by its column's number.
_LONGEST_HEADER = 60
#: Columns listed at the most.
_MOST_COLUMNS = 40


def write_draft(frames: Path, record: Path, out: Path) -> list[str]:
    """Look at frames and load record, and write a commented test file for them.

    Parameters
    ----------
    frames
        A folder, a file or a pattern.
    record
        The machine's record.
    out
        The test file to write; paths in it start from its folder.

    Returns
    -------
    list of str
        The keys that are left to fill in.

    Raises
    ------
    InputError
        If an input cannot be read, or the test file exists already or cannot be written.
    """
    remedy = "name another with --out, or move the old one away"
    if os.path.lexists(out):
        raise StoreError("exists already and is left as it is", where=str(out), remedy=remedy)
    text, blanks = draft(frames, record, out.parent)
    try:
        with out.open("x", encoding="utf-8", newline="\n") as file:
            file.write(text)
    except FileExistsError as error:
        raise StoreError("exists already and is left as it is", where=str(out), remedy=remedy) from error
    except OSError as error:
        raise StoreError(
            f"cannot be written ({error.strerror})", where=str(out), remedy="name another with --out"
        ) from error
    return blanks


def draft(frames: Path, record: Path, folder: Path) -> tuple[str, list[str]]:
    """Return the text of a test file that lies in a folder, and the keys that are left to fill in.

    Raises
    ------
    InputError
        If an input cannot be read.
    """
    seen, read = _look(frames), look_at_record(record)
    if "video" in seen.clocks:  # its own times are taken where it is named itself
        frames = seen.source.pages[0].path
    lines = [
        *_heading(),
        *_specimen(record),
        *_frames(seen, _relative(frames, folder)),
        *_record(read, _relative(record, folder)),
        *_ending(),
    ]
    section, blanks = "", []
    for line in lines:
        if line.startswith("["):
            section = line.strip("[]")
        elif '= ""' in line.split("#")[0] and not line.startswith("material"):
            blanks.append(f"{section}.{line.split(' ')[0]}")
    return "\n".join(lines) + "\n", blanks


def _look(frames: Path) -> FramesSurvey:
    path = Path(os.path.abspath(frames))  # "." has no name, and links stay as they are
    try:
        return look_at_frames(path)
    except ValidationError as error:
        raise FrameError(
            "has a name that cannot stand in a test file", where=str(frames), remedy="rename it"
        ) from error


def _relative(path: Path, folder: Path) -> str:
    """Return a path as it is seen from a folder, with slashes, as every system reads it."""
    try:
        name = os.path.relpath(os.path.abspath(path), os.path.abspath(folder))
    except ValueError:  # another drive
        name = os.path.abspath(path)
    try:
        name.encode()
    except UnicodeEncodeError as error:
        raise TestFileError(
            "has a name that is no text", where=ascii(str(path)), remedy="rename it"
        ) from error
    return Path(name).as_posix()


def _quoted(text: str) -> str:
    """Return a text as a TOML string, whatever is in it."""
    return tomli_w.dumps({"x": text}).removeprefix("x = ").rstrip("\n")


def _comment(text: str, indent: str = "") -> list[str]:
    return [f"# {indent}{line}" for line in wrap(printable(text), 100)]


def _notes(notices: tuple[Notice, ...]) -> Iterator[str]:
    for notice in notices:
        yield from _comment(f"Note: {notice.text}")


def _heading() -> Iterator[str]:
    yield "# A test for tauten, drafted from what frames and load record hold."
    yield '# Fill in what is blank (""), check with "tauten inspect", then measure with "tauten run".'
    yield "# Names of files and folders count from the folder of this file. A # begins a comment."


def _specimen(record: Path) -> Iterator[str]:
    yield ""
    yield "[specimen]"
    yield f"label = {_quoted(printable(record.stem))}"
    yield 'material = ""               # a text for the report'
    yield "# The section before the test. A round coupon has, in place of width and thickness:"
    yield '# shape = "round"'
    yield '# diameter = "10 mm"'
    yield 'width = ""                  # the side that the camera sees, for example "12.51 mm"'
    yield 'thickness = ""              # for example "1.02 mm"'
    yield "# Standard uncertainties of these readings; the budget leaves out what is not given, and says so."
    yield '# width_uncertainty = "0.01 mm"'
    yield '# thickness_uncertainty = "0.01 mm"'


def _frames(seen: FramesSurvey, source: str) -> Iterator[str]:
    yield ""
    yield "[frames]"
    frames = seen.source
    rows, columns = frames.shape
    yield from _comment(
        f"{len(frames)} frames of {columns} × {rows} px with {frames.depth.bits} bits in use, "
        f"from {frames.names[0]} to {frames.names[-1]}."
    )
    yield from _notes(seen.notices)
    yield f"source = {_quoted(source)}"
    taken = next((name for name in _CLOCKS if name in seen.clocks), None)
    if taken is None:
        yield from _comment("The files do not say when they were taken; give the camera's rate,")
        yield 'rate = ""                   # for example "5 Hz"'
    else:
        clock = seen.clocks[taken]
        pace = f"{clock.rate_hz:.4g} frames per second over {clock.duration_s:.4g} s"
        yield from _comment(f"The clock is {_CLOCKS[taken]}: {pace}.")
        yield from _notes(clock.notices)
        for key, value in clock.keys.items():  # a video's times need none
            yield f"{key} = {_quoted(value)}"
    yield from _other_clocks(seen, taken)


def _other_clocks(seen: FramesSurvey, taken: str | None) -> Iterator[str]:
    yield "# or in its place one of these:"
    for name, clock in seen.clocks.items():
        if name != taken:
            keys = (
                ", ".join(f"{key} = {_quoted(value)}" for key, value in clock.keys.items()) or "none of them"
            )
            yield from _comment(f"{keys}: would be {clock.rate_hz:.4g} frames per second", "  ")
    if taken is not None:
        yield '#   rate = "5 Hz"'
    yield '#   times = "frames.csv", a table with a column "time (s)" and one row per frame'


def _record(read: RecordSurvey, source: str) -> Iterator[str]:
    yield ""
    yield "[load_record]"
    yield from _comment(f"{read.rows} rows, {read.in_words()}.")
    yield from _notes(read.notices)
    yield "# Its columns, by number, header and range:"
    for column in read.columns[:_MOST_COLUMNS]:
        yield from _comment(_column_in_words(column), "  ")
    if len(read.columns) > _MOST_COLUMNS:
        yield f"#   and {len(read.columns) - _MOST_COLUMNS} more"
    yield f"source = {_quoted(source)}"
    if read.sheet is not None:
        yield f"# sheet = {_quoted(printable(read.sheet))}"
    if len(read.segments) > 1:
        yield "# Time starts anew within the record. These are its segments; say which one is the test:"
        for number, segment in enumerate(read.segments[:_MOST_COLUMNS], start=1):
            yield (
                f"#   {number}: rows {segment.first_row} to {segment.last_row}, "
                f"{segment.start_s:.4g} s to {segment.end_s:.4g} s"
            )
        yield 'segment = ""'
    yield from _columns(read)
    yield "# Take off the mean force before loading, if the machine was not zeroed:"
    yield "# tare = true"
    yield "# Relative standard uncertainty of the force, from the load cell's calibration:"
    yield '# force_uncertainty = "0.25 %"'


def _column_in_words(column: ColumnSurvey) -> str:
    header = printable(column.header)[:_LONGEST_HEADER]
    unit = f", in {printable(column.unit)[:20]}" if column.unit else ", no unit"
    gone = f", {column.missing} rows without a number" if column.missing else ""
    if column.low != column.low:
        return f"{column.number}: {header}{unit}, no numbers"
    if column.clock == "times of day":
        times = f"{_time_of_day(column.low)} to {_time_of_day(column.high)}"
        return f"{column.number}: {header}, times of day, {times}{gone}"
    if column.clock:
        return (
            f"{column.number}: {header}, dates with times of day, over {column.high - column.low:.5g} s{gone}"
        )
    return f"{column.number}: {header}{unit}, {column.low:.5g} to {column.high:.5g}{gone}"


def _time_of_day(seconds: float) -> str:
    minutes, rest = divmod(seconds, 60)
    return f"{minutes // 60:02.0f}:{minutes % 60:02.0f}:{rest:06.3f}"


def _columns(read: RecordSurvey) -> Iterator[str]:
    """Write the columns that were told apart, and blanks where there is none or a choice."""
    unitless = []
    for quantity in ("time", "force"):
        found = read.candidates(quantity)
        if len(found) != 1:
            which = " or ".join(str(column.number) for column in found) or "one of those above"
            yield f"# Which column is the {quantity} cannot be told; give its header or number ({which}):"
            yield f'{quantity} = ""'
            continue
        yield f"{quantity} = {_named(found[0], read)}"
        instants = quantity == "time" and read.start_s == read.start_s  # dates and times of day need no unit
        if found[0].unit is None and not instants:
            unitless.append(quantity)
    for quantity in ("displacement", "extensometer"):
        found = tuple(column for column in read.candidates(quantity) if column.unit is not None)
        if len(found) == 1:
            yield f"{quantity} = {_named(found[0], read)}"
            if quantity == "extensometer" and measures(found[0].unit or "", "length"):
                yield 'extensometer_length = ""    # its gauge length, for example "50 mm"'
    if unitless:
        yield "# The headers do not say these units:"
    for quantity in unitless:
        yield f'units.{quantity} = ""           # for example "{"s" if quantity == "time" else "kN"}"'


def _named(column: ColumnSurvey, read: RecordSurvey) -> str:
    """Return a column's header if it says which one is meant, else its number."""
    header = column.header
    alike = sum(other.header.strip() == header.strip() for other in read.columns)
    plain = header.isprintable() and header.strip() and len(header) <= _LONGEST_HEADER
    return _quoted(header.strip()) if plain and alike == 1 else str(column.number)


def _ending() -> Iterator[str]:
    yield ""
    yield from _comment(
        "Everything else has a default: direction of the pull, gauge and scale are found in the pictures, "
        "the clocks are joined where loading starts. The README lists the keys; the usual ones are"
    )
    yield "# [gauge]"
    yield '# length = "50 mm"            # of the extensometer, in place of the whole coupon in view'
    yield "# [properties]"
    yield "# modulus = { strain = [0.0005, 0.0025] }"
    yield "# [sync]"
    yield '# offset = "3.4 s"            # machine time minus camera time, if no rest was filmed'
