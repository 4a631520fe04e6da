"""What an inspection finds, as plain figures and words."""

from __future__ import annotations

from dataclasses import dataclass

from dic.errors import Notice


@dataclass(frozen=True)
class Exposure:
    """How one frame is exposed, over the whole picture.

    Attributes
    ----------
    frame
        Its name.
    dark, median, bright
        Grey values below which 5, 50 and 95 % of the pixels lie.
    clipped
        Share of pixels at the full scale.
    detail_px
        Size of the finest detail, px: standard deviation of the grey values over the root mean square of
        their slope.  It grows when focus is lost or motion blurs.
    """

    frame: str
    dark: float
    median: float
    bright: float
    clipped: float
    detail_px: float


@dataclass(frozen=True)
class FramesSeen:
    """The frames.

    Attributes
    ----------
    count, rows, columns
        How many, and the size of each, px.
    depth_bits, full_scale
        Depth in use, and the grey value of a saturated pixel.
    first, last
        Names of the first and the last frame.
    first_s, last_s, interval_s, shortest_s, longest_s
        Camera time of both, and the usual, shortest and longest interval, s.
    clock
        Where the times come from, in words.
    gaps
        Pairs of frames with more time between them than usual.
    doubles
        Frames whose pixels are those of the frame before.
    unreadable
        Why frames cannot be read, by name.
    exposures
        Exposure of the first, middle and last frame that can be read.
    brightness_drift
        Largest change of the mean grey value from the first frame's, as a share of it.
    """

    count: int
    rows: int
    columns: int
    depth_bits: int
    full_scale: float
    first: str
    last: str
    first_s: float
    last_s: float
    interval_s: float
    shortest_s: float
    longest_s: float
    clock: str
    gaps: tuple[tuple[str, str], ...]
    doubles: tuple[str, ...]
    unreadable: dict[str, str]
    exposures: tuple[Exposure, ...]
    brightness_drift: float


@dataclass(frozen=True)
class ColumnSeen:
    """One column of the load record: what it is taken for, header with unit, and range in `unit`."""

    quantity: str
    header: str
    low: float
    high: float
    unit: str


@dataclass(frozen=True)
class RecordSeen:
    """The load record.

    Attributes
    ----------
    file
        Its path.
    rows
        Rows of data.
    first_s, last_s, interval_s, shortest_s, longest_s
        Machine time of the first and last row, and the usual, shortest and longest interval, s.
    columns
        The columns that are used.
    written
        How the file is written, in words.
    headers
        The headers of all columns.
    """

    file: str
    rows: int
    first_s: float
    last_s: float
    interval_s: float
    shortest_s: float
    longest_s: float
    columns: tuple[ColumnSeen, ...]
    written: str
    headers: tuple[str, ...]


@dataclass(frozen=True)
class Inspection:
    """Everything that was seen.

    Attributes
    ----------
    test_file
        Path of the test file.
    frames, record
        What the inputs hold; None where one cannot be read.
    overlap
        How frames and record lie on one clock, in words.
    assumed
        What a run will assume because the test file does not say it, a sentence each.
    errors
        What keeps a test from being run, a sentence each.
    warnings
        Doubts with their remedies.
    """

    test_file: str
    frames: FramesSeen | None
    record: RecordSeen | None
    overlap: str
    assumed: tuple[str, ...]
    errors: tuple[str, ...]
    warnings: tuple[Notice, ...]
