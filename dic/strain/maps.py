"""Local strain: a plane through the displacements around every subset."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy import ndimage

from dic.strain.tensors import engineering

Floats = NDArray[np.float64]

#: Share of a window's subsets that must be valid; below it a plane leans on too few points.
LEAST_SHARE = 0.5


@dataclass(frozen=True)
class StrainMap:
    """Engineering strains in coupon axes on the grid of subsets, shape (ny, nx); NaN where unknown."""

    axial: Floats
    transverse: Floats
    shear: Floats


def gauge_size(window: int, step: int, subset: int) -> int:
    """Return the size of the maps' virtual strain gauge, px: (window − 1)·step + subset.

    iDICs, A Good Practices Guide for Digital Image Correlation, doi 10.32720/idics/gpg.ed1.
    """
    return (window - 1) * step + subset


class StrainMapper:
    """Fits planes to displacements over square windows and turns their slopes into strain.

    What depends only on where subsets are valid is kept until that changes.

    Parameters
    ----------
    window
        Odd number of subsets across the window.
    step
        Pitch of the subsets, px.
    axes
        Unit vectors (x, y) along and across the coupon.
    """

    def __init__(self, window: int, step: int, axes: tuple[Floats, Floats]) -> None:
        self.window, self.step, self.axes = window, step, axes
        self._offset = (np.arange(window) - window // 2).astype(float)
        self._valid: NDArray[np.bool_] | None = None

    def strain(self, u: Floats, v: Floats) -> StrainMap:
        """Return the strains of displacements along x and y, px, shape (ny, nx); NaN where not measured.

        NaN where fewer than half of a window's subsets are valid or where its own subset is not.  At
        edges the fit is one-sided: it uses the subsets that there are.
        """
        return StrainMap(*engineering(self.gradient(u, v), *self.axes))

    def gradient(self, u: Floats, v: Floats) -> Floats:
        """Return the least-squares displacement gradient around every subset, shape (ny, nx, 2, 2)."""
        valid = np.isfinite(u) & np.isfinite(v)
        if self._valid is None or not np.array_equal(valid, self._valid):
            self._valid = valid
            self._slopes, self._enough = self._normal(valid.astype(float))
        gradient = np.full((*valid.shape, 2, 2), np.nan)
        for row, component in enumerate((u, v)):
            sums = self._moments(np.where(valid, component, 0.0))
            gradient[self._enough, row] = np.einsum("nij,nj->ni", self._slopes, sums[self._enough])
        return gradient

    def _sums(self, values: Floats, power: int, axis: int) -> Floats:
        return np.asarray(ndimage.correlate1d(values, self._offset**power, axis=axis, mode="constant"))

    def _moments(self, values: Floats) -> Floats:
        """Return the window's sums of the values and of the values times x and y, shape (ny, nx, 3)."""
        plain, tilted = self._sums(values, 0, 1), self._sums(values, 1, 1)
        return np.stack([self._sums(plain, 0, 0), self._sums(tilted, 0, 0), self._sums(plain, 1, 0)], axis=-1)

    def _normal(self, weight: Floats) -> tuple[Floats, NDArray[np.bool_]]:
        """Return what turns moments into slopes, shape (m, 2, 3), and where it is determined."""
        across = [self._sums(weight, power, 1) for power in (0, 1, 2)]
        n, sx, sxx = (self._sums(one, 0, 0) for one in across)
        sy, sxy, syy = self._sums(across[0], 1, 0), self._sums(across[1], 1, 0), self._sums(across[0], 2, 0)
        normal = np.stack([n, sx, sy, sx, sxx, sxy, sy, sxy, syy], axis=-1).reshape(*n.shape, 3, 3)
        # A determinant in units of n³ tells whether the points span a plane rather than a line.
        enough = (weight > 0) & (n >= LEAST_SHARE * self.window**2)
        enough &= np.linalg.det(normal) > 1e-6 * np.maximum(n, 1.0) ** 3
        return np.linalg.inv(normal[enough])[:, 1:] / self.step, enough
