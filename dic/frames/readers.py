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

#: No camera for this job has more, and a picture takes about 30 bytes per px until it is prepared.
MOST_PIXELS = 100_000_000


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

    found = []
    with tifffile.TiffFile(path) as tiff:
        for index, page in enumerate(tiff.pages):
            if not isinstance(page, tifffile.TiffPage) or page.dtype is None:
                continue
            # A palette's numbers are no brightness, and decoders would hand them out like grey values.
            if page.photometric != tifffile.PHOTOMETRIC.MINISBLACK:
                raise _not_grey(
                    path, f"its colours are {tifffile.PHOTOMETRIC(page.photometric).name.lower()}"
                )
            if not 8 <= page.bitspersample <= 16:
                raise _wrong_depth(path, f"{page.bitspersample}-bit")
            found.append(Page(path, index, tuple(page.shape), np.dtype(page.dtype)))
    return found


def _tiff_read(page: Page) -> NDArray[Any]:
    import tifffile

    with tifffile.TiffFile(page.path) as tiff:
        return np.asarray(tiff.pages[page.index].asarray())


#: Pillow's modes of grey pictures.
_PNG_TYPES: dict[str, np.dtype[Any]] = {
    "L": np.dtype(np.uint8),
    "I;16": np.dtype(np.uint16),
}


def _png_pages(path: Path) -> list[Page]:
    from PIL import Image

    with Image.open(path, formats=["PNG"]) as picture:
        width, height = picture.size
        if picture.mode == "1":
            raise _wrong_depth(path, "1-bit")
        if picture.mode not in _PNG_TYPES:
            raise _not_grey(path, f"its colours are {picture.mode}")
        return [Page(path, 0, (height, width), _PNG_TYPES[picture.mode])]


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
    except FrameError:
        raise
    except Exception as error:  # the decoders raise whatever their authors chose
        raise _unreadable(path, error) from error
    for page in pages:
        if len(page.shape) != 2:
            raise _not_grey(path, f"its shape is {page.shape}")
        if page.dtype not in (np.uint8, np.uint16):
            raise _wrong_depth(path, str(page.dtype))
        if not 0 < page.shape[0] * page.shape[1] <= MOST_PIXELS:
            raise FrameError(
                f"claims {page.shape[1]} × {page.shape[0]} px, and {MOST_PIXELS // 1_000_000} million px are "
                "the most that is read",
                where=str(path),
                remedy="crop it to the coupon, or export it anew if it is damaged",
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


def _not_grey(path: Path, found: str) -> FrameError:
    return FrameError(
        f"is not a grey picture ({found})",
        where=str(path),
        remedy="save frames as single-channel grey with black as zero",
    )


def _wrong_depth(path: Path, found: str) -> FrameError:
    return FrameError(
        f"holds {found} values", where=str(path), remedy="save frames as 8 to 16 bits, whole numbers"
    )


def _unreadable(path: Path, error: Exception) -> FrameError:
    said = " ".join(str(error).split())[:120] or type(error).__name__
    return FrameError(
        f"cannot be read as a picture ({said})", where=str(path), remedy="export the frame anew"
    )
