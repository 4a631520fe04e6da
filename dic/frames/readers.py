"""One picture file at a time: how many pages, how large, and their grey values as stored.

A new format is one more `Reader` in `READERS`.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from dic.errors import FrameError

Grey = NDArray[np.uint8] | NDArray[np.uint16]

#: No camera for this job has more; a header that claims more is damaged.
MOST_PIXELS = 300_000_000


@dataclass(frozen=True)
class Page:
    """One picture inside a file: size and type as its header says them."""

    path: Path
    index: int
    shape: tuple[int, ...]
    dtype: np.dtype[Any]


@dataclass(frozen=True)
class Reader:
    """How one kind of file is listed and read."""

    pages: Callable[[Path], list[Page]]
    read: Callable[[Page], NDArray[Any]]


def _tiff_pages(path: Path) -> list[Page]:
    import tifffile

    with tifffile.TiffFile(path) as tiff:
        return [
            Page(path, index, tuple(page.shape), np.dtype(page.dtype))
            for index, page in enumerate(tiff.pages)
            if page.dtype is not None
        ]


def _tiff_read(page: Page) -> NDArray[Any]:
    import tifffile

    with tifffile.TiffFile(page.path) as tiff:
        return np.asarray(tiff.pages[page.index].asarray())


_PNG_TYPES: dict[str, np.dtype[Any]] = {
    "L": np.dtype(np.uint8),
    "I;16": np.dtype(np.uint16),
    "I": np.dtype(np.int32),
}


def _png_pages(path: Path) -> list[Page]:
    from PIL import Image

    with Image.open(path, formats=["PNG"]) as picture:
        width, height = picture.size
        bands = len(picture.getbands())
        shape = (height, width) if bands == 1 else (height, width, bands)
        return [Page(path, 0, shape, _PNG_TYPES.get(picture.mode, np.dtype(np.uint8)))]


def _png_read(page: Page) -> NDArray[Any]:
    from PIL import Image

    with Image.open(page.path, formats=["PNG"]) as picture:
        return np.asarray(picture)


READERS = {
    ".tif": Reader(_tiff_pages, _tiff_read),
    ".tiff": Reader(_tiff_pages, _tiff_read),
    ".png": Reader(_png_pages, _png_read),
}


def list_pages(path: Path) -> list[Page]:
    """List the pictures of a file without reading their grey values.

    Raises
    ------
    FrameError
        If the file cannot be read, claims an absurd size, or is not a grey picture of 8 to 16 bits.
    """
    try:
        pages = READERS[path.suffix.lower()].pages(path)
        if not pages:
            raise ValueError("it holds no picture")
    except Exception as error:  # the decoders raise whatever their authors chose
        raise _unreadable(path, error) from error
    for page in pages:
        if len(page.shape) != 2:
            raise FrameError(
                f"is not a grey picture (its shape is {page.shape})",
                where=str(path),
                remedy="save frames as single-channel grey",
            )
        if page.dtype not in (np.uint8, np.uint16):
            raise FrameError(
                f"holds {page.dtype} values", where=str(path), remedy="save frames as 8 or 16 bits"
            )
        if not 0 < page.shape[0] * page.shape[1] <= MOST_PIXELS:
            raise FrameError(
                f"claims {page.shape[1]} × {page.shape[0]} px", where=str(path), remedy="the file is damaged"
            )
    return pages


def read_page(page: Page) -> Grey:
    """Read one picture's grey values as stored, shape (rows, columns).

    Raises
    ------
    FrameError
        If the file is damaged.
    """
    try:
        grey = READERS[page.path.suffix.lower()].read(page)
    except Exception as error:  # as above
        raise _unreadable(page.path, error) from error
    if grey.shape != page.shape or grey.dtype != page.dtype:
        raise FrameError("changed while it was being read", where=str(page.path), remedy="copy it anew")
    return grey


def _unreadable(path: Path, error: Exception) -> FrameError:
    said = " ".join(str(error).split())[:120] or type(error).__name__
    return FrameError(
        f"cannot be read as a picture ({said})", where=str(path), remedy="export the frame anew"
    )
