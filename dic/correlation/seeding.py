"""The whole-pixel motion of the coupon between two pictures, from nothing known."""

from __future__ import annotations

import cv2
import numpy as np
from numpy.typing import NDArray

from dic.correlation.grid import Grid
from dic.correlation.splines import Image

#: Side of the patch that is looked for: several speckles each way, and cheap.
PATCH_PX = 129


def whole_pixel_shift(reference: Image, frame: Image, grid: Grid) -> NDArray[np.float64]:
    """Find where the patch in the middle of the grid went.

    Parameters
    ----------
    reference, frame
        Smoothed pictures of one size, shape (rows, columns).
    grid
        The subsets; the patch lies around the one nearest their middle.

    Returns
    -------
    shift
        Along x and y, whole px.

    Notes
    -----
    Plain normalised cross-correlation over the whole frame (whitened phase correlation is biased
    on small windows); sub-pixel work is left to the matching.
    """
    all_x, all_y = (part[grid.inside] for part in grid.centres())
    middle = int(np.argmin((all_x - all_x.mean()) ** 2 + (all_y - all_y.mean()) ** 2))
    x, y = int(all_x[middle]), int(all_y[middle])
    # A third of the picture leaves a third of it on either side to move by.
    half = min(PATCH_PX, *(side // 3 for side in reference.shape)) // 2
    top = min(max(y - half, 0), reference.shape[0] - 2 * half - 1)
    left = min(max(x - half, 0), reference.shape[1] - 2 * half - 1)
    patch = reference[top : top + 2 * half + 1, left : left + 2 * half + 1]
    score = cv2.matchTemplate(frame, patch, cv2.TM_CCOEFF_NORMED)
    row, column = np.unravel_index(int(np.argmax(score)), score.shape)
    return np.array([float(column - left), float(row - top)])
