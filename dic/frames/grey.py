"""Grey values from colour pictures and mosaics: red + 2 green + blue, by four, at every pixel.

One rule for both, so that a camera's mosaic and its colour pictures read alike.  Green counts twice
because a mosaic has twice as many green sites (Bayer, US patent 3971065).  The weights are fixed, so
that grey stays a linear function of light: no gamma, no rescaling, and a grey scene keeps its values.

In a mosaic the binomial weights (1 2 1)⊗(1 2 1)/16 around a pixel fall to red, green and blue as
1/4, 1/2 and 1/4 whatever the pixel's own colour, and each colour's lie evenly about it: the picture is
smoothed, but neither shifted nor patterned by its sites.
"""

from __future__ import annotations

from typing import Any

import cv2
import numpy as np
from numpy.typing import NDArray

from dic.frames.page import Page

Grey = NDArray[np.uint8] | NDArray[np.uint16] | NDArray[np.float32]

_BINOMIAL = np.array([0.25, 0.5, 0.25], np.float32)


def to_grey(page: Page, stored: NDArray[Any]) -> Grey:
    """Return grey values, shape (rows, columns), larger where there was more light.

    Parameters
    ----------
    page
        What the values are.
    stored
        Values as stored, shape (rows, columns) or (rows, columns, 3).

    Returns
    -------
    ndarray
        As stored, or float32 where values were weighted; the sums of 16-bit values are exact in it.
    """
    if page.kind == "grey":
        return stored
    if page.kind == "white is zero":
        return np.subtract(page.top, stored, dtype=stored.dtype)
    if page.kind == "colour":
        grey = stored[..., 1].astype(np.float32)
        grey *= 2
        grey += stored[..., 0]
        grey += stored[..., 2]
        grey *= 0.25
        return grey
    # Mirrored about the outermost pixel, so that sites keep their colours beyond the border.
    return np.asarray(
        cv2.sepFilter2D(stored, cv2.CV_32F, _BINOMIAL, _BINOMIAL, borderType=cv2.BORDER_REFLECT_101),
        np.float32,
    )
