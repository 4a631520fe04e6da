"""One picture file at a time: how many pages, how large, and their grey values.

A new format is one more `Reader` in `READERS`.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from dic.errors import FrameError
from dic.frames.grey import Grey, to_grey
from dic.frames.page import Page, unreadable
from dic.frames.stills import pgm_pages, pgm_read, pillow_pages, pillow_read, png_pages, png_read
from dic.frames.tiff import tiff_pages, tiff_read
from dic.frames.video import CONTAINERS, Film

__all__ = ["READERS", "Grey", "Page", "Reader", "list_pages", "read_page", "read_stored"]


@dataclass(frozen=True)
class Reader:
    """How one kind of file is listed and read; `lossy` where compression changes grey values."""

    pages: Callable[[Path], list[Page]]
    read: Callable[[Page], NDArray[Any]]
    lossy: bool = False
    video: bool = False


_TIFF = Reader(tiff_pages, tiff_read)
_JPEG = Reader(pillow_pages("JPEG"), pillow_read("JPEG"), lossy=True)
_VIDEO = Reader(
    lambda path: Film(path).pages(), lambda page: page.film.read(page.index), lossy=True, video=True
)

#: By ending; of two pictures with one name, the one whose ending comes first here is taken.
READERS = {
    ".tif": _TIFF,
    ".tiff": _TIFF,
    ".dng": _TIFF,
    ".png": Reader(png_pages, png_read),
    ".bmp": Reader(pillow_pages("BMP"), pillow_read("BMP")),
    ".pgm": Reader(pgm_pages, pgm_read),
    ".jpg": _JPEG,
    ".jpeg": _JPEG,
    **dict.fromkeys(CONTAINERS, _VIDEO),
}


def reader_of(path: Path) -> Reader:
    """Return the reader for a file's ending."""
    return READERS[path.suffix.lower()]


def list_pages(path: Path) -> list[Page]:
    """List the pictures of a file without reading their values.

    Raises
    ------
    FrameError
        If the file cannot be read, claims an absurd size, or holds other than grey, RGB or mosaic
        pictures of 8 to 16 bits.
    """
    try:
        pages = reader_of(path).pages(path)
        if not pages:
            raise ValueError("it holds no picture")
    except FrameError:
        raise
    except Exception as error:  # the decoders raise whatever their authors chose
        raise unreadable(path, error) from error
    # A video knows by itself what its compression keeps.
    return pages if reader_of(path).video else [replace(page, lossy=reader_of(path).lossy) for page in pages]


def read_stored(page: Page) -> NDArray[np.integer]:
    """Read one picture's values as stored, shape (rows, columns), or (rows, columns, 3) for colour.

    Raises
    ------
    FrameError
        If the picture is damaged.
    """
    if page.damage:
        raise FrameError(page.damage, where=str(page.path), remedy=page.remedy)
    try:
        values = reader_of(page.path).read(page)
    except FrameError:
        raise
    except Exception as error:  # as above
        raise unreadable(page.path, error) from error
    if values.ndim == 3:
        values = values[..., :3] if page.channels == 3 else values[..., 0]
    if values.shape != page.shape + (3,) * (page.channels == 3) or values.dtype != page.stored:
        raise FrameError("is not what its header says", where=str(page.path), remedy="export the frame anew")
    return values


def read_page(page: Page) -> Grey:
    """Read one picture's grey values, shape (rows, columns); see `dic.frames.grey` for colour.

    Raises
    ------
    FrameError
        If the picture is damaged.
    """
    return to_grey(page, read_stored(page))
