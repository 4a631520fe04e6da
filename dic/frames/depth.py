"""The depth in use, found from the values: what the camera's own full scale is."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from dic.frames.page import Page

#: Depths that cameras have; 8 bits are sometimes stored in 16 as they are.
DEPTHS = (8, 10, 12, 14, 16)
#: Low bits that may be empty because a camera's 14, 12, 10 or 8 bits were put at the upper end of 16.
EMPTY = (2, 4, 6, 8)


@dataclass(frozen=True)
class Depth:
    """How the camera's bits lie in the stored values.

    Attributes
    ----------
    bits
        Depth in use.
    full_scale
        Stored value of a saturated pixel.
    """

    bits: int
    full_scale: float


def depth_in_use(page: Page, pictures: Iterable[NDArray[np.integer]]) -> Depth:
    """Find the depth from some pictures' stored values.

    Parameters
    ----------
    page
        One of the pages, for what the file can hold.
    pictures
        Stored values; more of them show more of the range.

    Returns
    -------
    Depth
        Where the file says its own largest value, or holds 8 bits, that; else the smallest usual
        depth that holds all values, or, where the low bits are empty, the depth of the others.
    """
    if page.top == 255 or page.kind == "white is zero":
        return Depth(page.top.bit_length(), float(page.top))
    brightest, seen = 0, 0
    for stored in pictures:
        brightest = max(brightest, int(stored.max()))
        seen |= int(np.bitwise_or.reduce(stored, axis=None))
    if page.top < 65535:  # video may go beyond its white
        top = page.top if brightest <= page.top else 2 ** page.top.bit_length() - 1
        return Depth(top.bit_length(), float(top))
    empty = (seen & -seen).bit_length() - 1 if seen else 0
    shift = max((count for count in EMPTY if count <= empty), default=0)
    if shift:
        return Depth(16 - shift, float(65535 >> shift << shift))
    bits = next(bits for bits in DEPTHS if brightest < 2**bits)
    return Depth(bits, float(2**bits - 1))
