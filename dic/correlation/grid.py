"""Where the subsets sit in the reference picture."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy import ndimage

#: Share of a subset's pixels that must lie on the coupon: a smaller part leans to one side.
LEAST_COVERED = 0.6


@dataclass(frozen=True)
class Grid:
    """A rectangular grid of square subsets.

    Attributes
    ----------
    columns, rows
        Columns and rows of the subset centres in the picture, px, shapes (nx,) and (ny,).
    inside
        Which of them are followed, shape (ny, nx).
    subset, step
        Side of a subset and pitch of the grid, px.
    """

    columns: NDArray[np.int64]
    rows: NDArray[np.int64]
    inside: NDArray[np.bool_]
    subset: int
    step: int

    @property
    def shape(self) -> tuple[int, int]:
        """Rows and columns of the grid."""
        return len(self.rows), len(self.columns)

    @property
    def half(self) -> int:
        """Pixels on either side of a subset's centre."""
        return self.subset // 2

    @property
    def x(self) -> NDArray[np.int64]:
        """Columns of the inside subsets' centres, shape (n,)."""
        return np.broadcast_to(self.columns, self.shape)[self.inside]

    @property
    def y(self) -> NDArray[np.int64]:
        """Rows of the inside subsets' centres, shape (n,)."""
        return np.broadcast_to(self.rows[:, None], self.shape)[self.inside]

    def neighbours(self) -> NDArray[np.int64]:
        """Return the numbers of each inside subset's eight neighbours, −1 where there is none, (n, 8)."""
        numbers = np.full((self.shape[0] + 2, self.shape[1] + 2), -1)
        numbers[1:-1, 1:-1][self.inside] = np.arange(int(self.inside.sum()))
        row, column = np.nonzero(self.inside)
        around = [(r, c) for r in (0, 1, 2) for c in (0, 1, 2) if (r, c) != (1, 1)]
        return np.stack([numbers[row + r, column + c] for r, c in around], axis=1)


def lay_grid(mask: NDArray[np.bool_], subset: int, step: int) -> Grid:
    """Lay subsets over the textured area.

    Parameters
    ----------
    mask
        True on the coupon's textured area, shape (rows, columns).
    subset
        Side of a subset, px; an even one is taken one larger, so that it has a centre.
    step
        Pitch, px.

    Returns
    -------
    Grid
        Centred in the bounding box of the mask.  A subset counts as inside if its centre and at least
        `LEAST_COVERED` of its pixels are on the mask and all of it in the picture.  Empty (0 × 0)
        where there is none.
    """
    half = subset // 2
    side = 2 * half + 1
    covered = ndimage.uniform_filter(mask.astype(np.float32), side, mode="constant")
    fits = mask & (covered >= LEAST_COVERED - 1e-4)
    for axis in (0, 1):
        rim = np.arange(mask.shape[axis])
        inner = (rim >= half) & (rim < mask.shape[axis] - half)
        fits &= inner[:, None] if axis == 0 else inner[None, :]
    rows, columns = np.flatnonzero(fits.any(axis=1)), np.flatnonzero(fits.any(axis=0))
    if not len(rows):
        empty = np.empty(0, np.int64)
        return Grid(empty, empty, np.empty((0, 0), bool), side, step)
    y, x = _spread(rows[0], rows[-1], step), _spread(columns[0], columns[-1], step)
    if not fits[np.ix_(y, x)].any():
        # Hardly larger than a subset, with the only places that fit between the grid's.
        best = np.unravel_index(np.argmax(np.where(fits, covered, 0.0)), fits.shape)
        y, x = (
            np.arange(lines[0] + (at - lines[0]) % step, lines[-1] + 1, step)
            for lines, at in zip((rows, columns), best, strict=True)
        )
    return Grid(x, y, fits[np.ix_(y, x)], side, step)


def _spread(first: int, last: int, step: int) -> NDArray[np.int64]:
    """Return positions at the given pitch, what is left over shared between both ends."""
    spare = (last - first) % step
    return np.arange(first + spare // 2, last + 1, step, dtype=np.int64)
