"""Where the subsets sit in the reference picture."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy import ndimage


@dataclass(frozen=True)
class Grid:
    """A rectangular grid of square subsets.

    Attributes
    ----------
    x, y
        Columns and rows of the subset centres, px, shapes (nx,) and (ny,).
    inside
        Which of them lie wholly on the coupon's textured area, shape (ny, nx).
    subset, step
        Side of a subset and pitch of the grid, px.
    """

    x: NDArray[np.int64]
    y: NDArray[np.int64]
    inside: NDArray[np.bool_]
    subset: int
    step: int

    @property
    def shape(self) -> tuple[int, int]:
        """Rows and columns of the grid."""
        return len(self.y), len(self.x)

    @property
    def half(self) -> int:
        """Pixels on either side of a subset's centre."""
        return self.subset // 2

    def centres(self) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
        """Return x and y of every subset, shape (ny, nx)."""
        x, y = np.meshgrid(self.x.astype(float), self.y.astype(float))
        return x, y


def lay_grid(mask: NDArray[np.bool_], subset: int, step: int) -> Grid:
    """Lay subsets over the textured area.

    Parameters
    ----------
    mask
        True on the coupon's textured area, shape (rows, columns).
    subset
        Odd side of a subset, px.
    step
        Pitch, px.

    Returns
    -------
    Grid
        Centred in the bounding box of the mask; only subsets wholly on the mask count as inside.
        Empty (0 × 0) where the mask holds none.
    """
    half = subset // 2
    box = np.ones(subset, bool)
    fits = ndimage.binary_erosion(mask, box[:, None])
    fits = ndimage.binary_erosion(fits, box[None, :])
    rows, columns = np.flatnonzero(fits.any(axis=1)), np.flatnonzero(fits.any(axis=0))
    if not len(rows):
        empty = np.empty(0, np.int64)
        return Grid(empty, empty, np.empty((0, 0), bool), 2 * half + 1, step)
    y, x = _spread(rows[0], rows[-1], step), _spread(columns[0], columns[-1], step)
    return Grid(x, y, fits[np.ix_(y, x)], 2 * half + 1, step)


def _spread(first: int, last: int, step: int) -> NDArray[np.int64]:
    """Return positions at the given pitch, what is left over shared between both ends."""
    spare = (last - first) % step
    return np.arange(first + spare // 2, last + 1, step, dtype=np.int64)
