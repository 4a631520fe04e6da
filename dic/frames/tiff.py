"""TIFF files, also big ones and DNG: strips or tiles, one picture or many."""

from __future__ import annotations

import logging
from collections.abc import Iterator
from math import prod
from pathlib import Path
from typing import Any

import numpy as np
import tifffile
from numpy.typing import NDArray

from dic.errors import FrameError
from dic.frames.page import MOSAICS, MOST_BYTES, MOST_PAGES, Page, checked, not_grey, too_many, wrong_depth

# What is wrong with a file is said once, by the error that names it.
logging.getLogger("tifffile").addHandler(logging.NullHandler())

#: Compressions that are read: none, LZW, deflate under its two numbers, PackBits.
_COMPRESSIONS = {1, 5, 8, 32946, 32773}
_WHITE_IS_ZERO, _BLACK_IS_ZERO, _RGB, _CFA = 0, 1, 2, 32803
_CFA_PATTERN, _CFA_SIZE = 33422, 33421
#: DNG puts the full picture into a branch, and a small view of it in front.
_MOST_BRANCHES = 16


def tiff_pages(path: Path) -> list[Page]:
    """List the full-size pictures of a TIFF file."""
    found: list[Page] = []
    with tifffile.TiffFile(path) as tiff:
        try:
            for index, page in enumerate(tiff.pages):
                if index >= MOST_PAGES:
                    raise too_many(path)
                if isinstance(page, tifffile.TiffPage) and not page.is_reduced:
                    found.append(_page(path, index, page))
            if not found:
                found = [_page(path, -1 - k, page) for k, page in enumerate(_branches(tiff))][:1]
        except Exception as error:
            if not found:
                raise
            # The chain of pages is broken here; those before it are sound.
            said = error.what if isinstance(error, FrameError) else " ".join(str(error).split())[:120]
            found.append(Page(path, len(found), damage=f"the file is damaged from here on ({said})"))
    return found


def tiff_read(page: Page) -> NDArray[Any]:
    """Read a page's stored values, shape (rows, columns) or (rows, columns, channels)."""
    with tifffile.TiffFile(page.path) as tiff:
        one: Any
        if page.index < 0:
            one = next(branch for k, branch in enumerate(_branches(tiff)) if k == -1 - page.index)
        else:
            one = tiff.pages[page.index]
        if _page(page.path, page.index, one).shape != page.shape:
            raise ValueError("its size changed")
        values = np.asarray(one.asarray(maxworkers=1))
        return np.moveaxis(values, 0, -1) if _planes_first(one) else values


def _branches(tiff: tifffile.TiffFile) -> Iterator[tifffile.TiffPage]:
    """Yield the full-size pictures in the branches of the first page."""
    pages = tiff.pages.first.pages
    for page in list(pages)[:_MOST_BRANCHES] if pages is not None else ():
        if isinstance(page, tifffile.TiffPage) and not page.is_reduced:
            yield page


def _page(path: Path, index: int, page: tifffile.TiffPage) -> Page:
    colour = page.photometric == _RGB
    kind = "colour" if colour else _single_channel(path, page)
    bits = page.bitspersample
    if not isinstance(bits, int) or not 8 <= bits <= 16 or page.sampleformat != 1:
        many = " and ".join(map(str, bits)) if isinstance(bits, tuple) else bits
        raise wrong_depth(path, f"{many}-bit{'' if page.sampleformat == 1 else ' signed or floating'}")
    wanted = 3 if colour else 1
    if page.imagedepth != 1 or page.samplesperpixel < wanted:
        raise not_grey(path, f"{page.samplesperpixel} channels, {page.imagedepth} layers")
    extra = page.samplesperpixel - wanted
    if extra > 1:
        raise not_grey(path, f"{page.samplesperpixel} channels")
    found = checked(
        Page(path, index, (page.imagelength, page.imagewidth), 2**bits - 1, kind, alpha=extra == 1)
    )
    _check_storage(path, page)
    return found


def _single_channel(path: Path, page: tifffile.TiffPage) -> str:
    """Tell what one value per pixel means."""
    if page.photometric == _BLACK_IS_ZERO:
        return "grey"
    if page.photometric == _WHITE_IS_ZERO:
        return "white is zero"
    if page.photometric == _CFA:
        pattern, size = (page.tags.valueof(tag) for tag in (_CFA_PATTERN, _CFA_SIZE))
        sites = "".join("RGB"[site] if site < 3 else "?" for site in bytes(pattern or b""))
        if sites in MOSAICS and (size is None or tuple(size) == (2, 2)):
            return sites
        raise not_grey(path, "its mosaic is not one of " + ", ".join(MOSAICS))
    # A palette's numbers are no brightness, and decoders would hand them out like grey values.
    try:
        colours = tifffile.PHOTOMETRIC(page.photometric).name.lower()
    except ValueError:
        colours = f"photometric interpretation {page.photometric}"
    raise not_grey(path, f"its colours are {colours}")


def _check_storage(path: Path, page: tifffile.TiffPage) -> None:
    """Refuse what would be decoded to something absurd, or filled up where the file holds nothing."""
    if page.compression not in _COMPRESSIONS:
        raise FrameError(
            f"is compressed in a way that is not read ({int(page.compression)})",
            where=str(path),
            remedy="save frames without compression, or as LZW, deflate or PackBits",
        )
    size = path.stat().st_size
    ends = [o + n for o, n in zip(page.dataoffsets, page.databytecounts, strict=False)]
    if len(ends) != prod(page.chunked) or len(page.dataoffsets) != len(page.databytecounts):
        raise ValueError("it lists fewer strips or tiles than the picture has")
    if not all(page.databytecounts) or not all(page.dataoffsets):
        raise ValueError("a strip or tile is empty")
    if max(ends) > size:
        raise ValueError(f"it ends after {size} bytes where {max(ends)} are needed")
    chunk = prod(page.chunks) * (1 if page.bitspersample == 8 else 2)
    if chunk > MOST_BYTES:
        raise ValueError(f"it claims strips or tiles of {page.chunks} values")
    # No compression makes noise twice as long.
    if max(page.databytecounts) > 2 * chunk + 65536:
        raise ValueError("a strip or tile is far longer than its values")


def _planes_first(page: tifffile.TiffPage) -> bool:
    """Whether each channel is stored as a picture of its own."""
    return bool(page.samplesperpixel > 1 and page.planarconfig == 2)
