"""What is known of one picture before it is read, and the limits that hold for every format."""

from __future__ import annotations

from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

import numpy as np

from dic.errors import FrameError

#: No camera for this job has more, and a picture takes about 30 bytes per px until it is prepared.
MOST_PIXELS = 100_000_000
#: Largest decoded picture, bytes: some decoders hold three copies of it.
MOST_BYTES = 200_000_000
#: Most pictures in one file: a day at one a second.
MOST_PAGES = 100_000

#: Colours of the four sites of a mosaic, row by row from the upper left.
MOSAICS = ("RGGB", "BGGR", "GRBG", "GBRG")


@dataclass(frozen=True)
class Page:
    """One picture inside a file, as its header says.

    Attributes
    ----------
    path, index
        The file, and the picture's place in it.
    shape
        Rows and columns.
    top
        Largest value that the file can hold, for video the value of white.
    kind
        What the values are: ``"grey"``, ``"white is zero"``, ``"colour"``, or one of `MOSAICS`.
    alpha
        Whether there is a transparency channel, which is not read.
    time_s
        The file's own time of the picture, s; None where it has none.
    film
        The opened video, for its pages.
    lossy
        Whether compression may have changed the values.
    damage, remedy
        Why the picture cannot be used, and what to do; empty where nothing is known against it.
    """

    path: Path
    index: int = 0
    shape: tuple[int, int] = (0, 0)
    top: int = 0
    kind: str = "grey"
    alpha: bool = False
    time_s: float | None = None
    film: Any = field(default=None, compare=False, repr=False)
    lossy: bool = False
    damage: str = ""
    remedy: str = "export the frame anew"

    @property
    def channels(self) -> int:
        """Stored values per pixel, transparency not counted."""
        return 3 if self.kind == "colour" else 1

    @property
    def stored(self) -> np.dtype[Any]:
        """Type of the stored values."""
        return np.dtype(np.uint8 if self.top <= 255 else np.uint16)

    @property
    def dtype(self) -> np.dtype[Any]:
        """Type of the grey values: as stored, or float32, which holds the weighted sums exactly."""
        return self.stored if self.kind in ("grey", "white is zero") else np.dtype(np.float32)

    def size(self) -> str:
        """Return size and depth for people."""
        rows, columns = self.shape
        return f"{columns} × {rows} px, {self.top.bit_length()}-bit {self.kind}"


def checked(page: Page) -> Page:
    """Return the page if its size is one that is read.

    Raises
    ------
    FrameError
        If it is empty or absurdly large.
    """
    rows, columns = page.shape
    stored = rows * columns * (page.channels + page.alpha) * page.stored.itemsize
    if not (rows > 0 and columns > 0):
        raise FrameError("holds an empty picture", where=str(page.path), remedy="export the frame anew")
    if rows * columns > MOST_PIXELS or stored > MOST_BYTES:
        raise FrameError(
            f"claims {columns} × {rows} px, and {MOST_PIXELS // 1_000_000} million px or "
            f"{MOST_BYTES // 1_000_000} MB are the most that is read",
            where=str(page.path),
            remedy="crop it to the coupon, or export it anew if it is damaged",
        )
    return page


def too_many(path: Path) -> FrameError:
    """Return the error for a file with more pictures than is read."""
    return FrameError(
        f"holds more than {MOST_PAGES} pictures", where=str(path), remedy="split it, or thin it out"
    )


def not_grey(path: Path, found: str) -> FrameError:
    """Return the error for values that are no brightness."""
    return FrameError(
        f"holds neither grey nor RGB values ({found})",
        where=str(path),
        remedy="save frames as grey or RGB",
    )


def wrong_depth(path: Path, found: str) -> FrameError:
    """Return the error for values that are no whole numbers of 8 to 16 bits."""
    return FrameError(
        f"holds {found} values", where=str(path), remedy="save frames as 8 to 16 bits, whole numbers"
    )


def unreadable(path: Path, error: Exception) -> FrameError:
    """Return the error for what a decoder raised."""
    said = " ".join(str(error).split())[:120] or type(error).__name__
    return FrameError(
        f"cannot be read as a picture ({said})", where=str(path), remedy="export the frame anew"
    )
