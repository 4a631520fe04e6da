"""What a picture file says of itself: when it was taken, and for how long the shutter was open.

TIFF 6.0 (DateTime, tag 306) and Exif 2.32 (DateTimeOriginal, its sub-seconds, ExposureTime), the latter
in TIFF, JPEG and PNG.
"""

from __future__ import annotations

import logging
import math
import warnings
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from itertools import groupby
from pathlib import Path
from typing import Any

from dic.frames import instants
from dic.frames.page import Page

#: Tags that hold a stamp and the tags that hold its sub-seconds, the one nearest to the shutter first.
_STAMPS = ((36867, 37521), (36868, 37522), (306, 37520))
_EXIF, _EXPOSURE = 34665, 33434
#: What the TIFF library calls the tags of the Exif directory.
_NAMED = {
    "DateTimeOriginal": 36867,
    "DateTimeDigitized": 36868,
    "SubsecTime": 37520,
    "SubsecTimeOriginal": 37521,
    "SubsecTimeDigitized": 37522,
    "ExposureTime": _EXPOSURE,
}


@dataclass(frozen=True)
class Tags:
    """What is known of one picture.

    Attributes
    ----------
    taken
        Instants, ns, from DateTimeOriginal, DateTimeDigitized and DateTime; None where there is none.
    exposure_s
        Exposure time, s; None where it is not said.
    """

    taken: tuple[int | None, ...] = (None,) * len(_STAMPS)
    exposure_s: float | None = None


def read_tags(pages: Sequence[Page]) -> list[Tags]:
    """Read what picture files say of themselves; damaged or foreign tags count as absent.

    Parameters
    ----------
    pages
        The pictures, those of one file one behind the other.

    Returns
    -------
    list of Tags
        One per picture.
    """
    found: list[Tags] = []
    for path, group in groupby(pages, key=lambda page: page.path):
        found += _of_file(path, [page.index for page in group])
    return found


def _of_file(path: Path, indices: list[int]) -> Iterator[Tags]:
    try:
        with warnings.catch_warnings():
            warnings.simplefilter("ignore")
            tiff = path.suffix.lower() in (".tif", ".tiff", ".dng")
            said = _from_tiff(path, indices) if tiff else _from_still(path)
    except Exception:  # the decoders raise whatever their authors chose
        said = []
    for place in range(len(indices)):
        yield _understood(said[place]) if place < len(said) else Tags()


def _from_tiff(path: Path, indices: list[int]) -> list[dict[int, Any]]:
    import tifffile

    logging.getLogger("tifffile").addHandler(logging.NullHandler())
    pages = []
    with tifffile.TiffFile(path) as tiff:
        for index in indices:
            # A picture in a branch, as in DNG, has its tags at the first page.
            tags = tiff.pages[max(index, 0)].aspage().tags
            said = {code: tags.valueof(code) for pair in _STAMPS for code in pair}
            exif = tags.valueof(_EXIF)
            inner = exif if isinstance(exif, dict) else {}
            said |= {_NAMED[name]: value for name, value in inner.items() if name in _NAMED}
            said.setdefault(_EXPOSURE, tags.valueof(_EXPOSURE))
            pages.append(said)
    return pages


def _from_still(path: Path) -> list[dict[int, Any]]:
    from PIL import Image

    with Image.open(path, formats=["PNG", "JPEG"]) as picture:
        exif = picture.getexif()
        return [{**exif, **exif.get_ifd(_EXIF)}]


def _understood(said: dict[int, Any]) -> Tags:
    return Tags(
        tuple(_instant(said.get(stamp), said.get(below)) for stamp, below in _STAMPS),
        _exposure(said.get(_EXPOSURE)),
    )


def _instant(stamp: Any, below: Any) -> int | None:
    """Return a stamp with its sub-seconds, which are the digits behind the decimal point."""
    whole = instants.from_text(stamp) if isinstance(stamp, str) else None
    digits = str(below).strip(" \0") if isinstance(below, str | int) else ""
    if whole is None or not (digits.isascii() and digits.isdigit()) or whole % instants.SECOND:
        return whole
    return whole + instants.fraction(digits)


def _exposure(said: Any) -> float | None:
    try:
        value = said[0] / said[1] if isinstance(said, tuple) and len(said) == 2 else float(said)
    except (TypeError, ValueError, ArithmeticError):
        return None
    # An hour is no exposure of a frame in a test.
    return float(value) if math.isfinite(value) and 0 < value < 3600 else None
