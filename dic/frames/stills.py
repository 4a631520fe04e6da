"""Single pictures other than TIFF: PNG, BMP, JPEG, PGM."""

from __future__ import annotations

import struct
from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from dic.frames.page import MOST_BYTES, Page, checked, not_grey, wrong_depth

#: A file larger than this times the largest picture holds something else.
_MOST_OVERHEAD = 2
_PNG_SIGNATURE = b"\x89PNG\r\n\x1a\n"
#: Colour types of PNG (ISO/IEC 15948, 11.2.2): what the values are, and whether there is alpha.
_PNG_KINDS = {0: ("grey", False), 2: ("colour", False), 4: ("grey", True), 6: ("colour", True)}
#: Pillow's modes that are read.
_PILLOW_KINDS = {"L": ("grey", False), "RGB": ("colour", False), "RGBA": ("colour", True)}
#: A PGM header is three numbers; comments may stand between them.
_PGM_HEADER = 4096


def _content(path: Path, most: int | None = None) -> bytes:
    if path.stat().st_size > _MOST_OVERHEAD * MOST_BYTES:
        raise ValueError("the file is far too large for one picture")
    with path.open("rb") as file:
        return file.read(-1 if most is None else most)


def png_pages(path: Path) -> list[Page]:
    """List the one picture of a PNG file."""
    start = _content(path, 33)
    if len(start) < 33 or start[:8] != _PNG_SIGNATURE or start[12:16] != b"IHDR":
        raise ValueError("it does not begin like a PNG")
    columns, rows, bits, colours = struct.unpack(">IIBB", start[16:26])
    if colours not in _PNG_KINDS:
        raise not_grey(path, "its colours are a palette" if colours == 3 else f"colour type {colours}")
    if bits not in (8, 16):
        raise wrong_depth(path, f"{bits}-bit")
    kind, alpha = _PNG_KINDS[colours]
    return [checked(Page(path, 0, (rows, columns), 2**bits - 1, kind, alpha))]


def png_read(page: Page) -> NDArray[Any]:
    """Read a PNG's stored values."""
    import imagecodecs

    return np.asarray(imagecodecs.png_decode(_content(page.path)))


def _pillow(path: Path, kind: str) -> Any:
    """Open a picture by the class of its format: the size is checked here, by the limit of all formats."""
    from PIL.BmpImagePlugin import BmpImageFile
    from PIL.JpegImagePlugin import JpegImageFile

    _content(path, 0)
    return {"BMP": BmpImageFile, "JPEG": JpegImageFile}[kind](path)


def pillow_pages(kind: str) -> Callable[[Path], list[Page]]:
    """Return the function that lists the one picture of a BMP or JPEG file."""

    def pages(path: Path) -> list[Page]:
        with _pillow(path, kind) as picture:
            columns, rows = picture.size
            if picture.mode == "1":
                raise wrong_depth(path, "1-bit")
            if picture.mode not in _PILLOW_KINDS:
                raise not_grey(path, "a palette" if picture.mode == "P" else picture.mode)
            colours, alpha = _PILLOW_KINDS[picture.mode]
            return [checked(Page(path, 0, (rows, columns), 255, colours, alpha))]

    return pages


def pillow_read(kind: str) -> Callable[[Page], NDArray[Any]]:
    """Return the function that reads a BMP's or JPEG's stored values."""

    def read(page: Page) -> NDArray[Any]:
        with _pillow(page.path, kind) as picture:
            if (picture.height, picture.width) != page.shape:
                raise ValueError("its size changed")
            return np.asarray(picture)

    return read


def _pgm_header(start: bytes) -> tuple[bytes, list[int], int]:
    """Return the format's two letters, width, height and largest value, and where the values begin."""
    words: list[bytes] = []
    at = 0
    while len(words) < 4:
        while start[at : at + 1].isspace():
            at += 1
        if start[at : at + 1] == b"#":
            end = start.find(b"\n", at)
            at = len(start) if end < 0 else end
            continue
        first = at
        while at < len(start) and not start[at : at + 1].isspace() and start[at : at + 1] != b"#":
            at += 1
        if at == first:
            raise ValueError("its header is cut off")
        words.append(start[first:at])
    if words[0] not in (b"P2", b"P5") or not all(word.isdigit() and len(word) < 10 for word in words[1:]):
        raise ValueError("it does not begin like a PGM")
    return words[0], [int(word) for word in words[1:]], at + 1


def pgm_pages(path: Path) -> list[Page]:
    """List the first picture of a PGM file, plain or raw."""
    _, (columns, rows, top), _ = _pgm_header(_content(path, _PGM_HEADER))
    if not 127 < top < 65536:
        raise wrong_depth(path, f"{top.bit_length()}-bit")
    return [checked(Page(path, 0, (rows, columns), top))]


def pgm_read(page: Page) -> NDArray[Any]:
    """Read a PGM's stored values."""
    content = _content(page.path)
    letters, _, first = _pgm_header(content[:_PGM_HEADER])
    count = page.shape[0] * page.shape[1]
    if letters == b"P5":
        kind = np.dtype(np.uint8 if page.top <= 255 else ">u2")
        if len(content) - first < count * kind.itemsize:
            raise ValueError("it ends before its last row")
        values = np.frombuffer(content, kind, count, first).astype(page.stored)
    else:
        values = _plain_values(content, first, count, page.stored)
    if values.max() > page.top:
        raise ValueError("a value is larger than its header says")
    return values.reshape(page.shape)


def _plain_values(text: bytes, at: int, count: int, kind: np.dtype[Any]) -> NDArray[Any]:
    """Read numbers written as text, a piece at a time, because as Python numbers they are bulky."""
    values = np.empty(count, kind)
    done = 0
    while done < count and at < len(text):
        end = at + 1_000_000
        while end < len(text) and not text[end : end + 1].isspace():
            end += 1
        numbers = np.array(text[at:end].split()[: count - done], dtype=np.uint32)
        if numbers.size and numbers.max() > np.iinfo(kind).max:
            raise ValueError("a value is larger than its header says")
        values[done : done + len(numbers)] = numbers
        done, at = done + len(numbers), end
    if done < count:
        raise ValueError("it ends before its last value")
    return values
