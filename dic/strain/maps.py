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


def strain_map(u: Floats, v: Floats, window: int, step: int, axes: tuple[Floats, Floats]) -> StrainMap:
    """Fit planes to displacements over square windows and turn their slopes into strain.

    Parameters
    ----------
    u, v
        Displacements along x and y, px, shape (ny, nx); NaN where a subset was not measured.
    window
        Odd number of subsets across the window.
    step
        Pitch of the subsets, px.
    axes
        Unit vectors (x, y) along and across the coupon.

    Returns
    -------
    StrainMap
        NaN where fewer than half of a window's subsets are valid or where its own subset is not.
        At edges the fit is one-sided: it uses the subsets that there are.
    """
    gradient = local_gradient(u, v, window, step)
    return StrainMap(*engineering(gradient, *axes))


def local_gradient(u: Floats, v: Floats, window: int, step: int) -> Floats:
    """Return the least-squares displacement gradient around every subset, shape (ny, nx, 2, 2)."""
    valid = np.isfinite(u) & np.isfinite(v)
    offset = (np.arange(window) - window // 2).astype(float)
    weight = valid.astype(float)

    def total(values: Floats, x_power: int, y_power: int) -> Floats:
        rows = ndimage.correlate1d(values, offset**x_power, axis=1, mode="constant")
        return np.asarray(ndimage.correlate1d(rows, offset**y_power, axis=0, mode="constant"))

    n, sx, sy = total(weight, 0, 0), total(weight, 1, 0), total(weight, 0, 1)
    sxx, sxy, syy = total(weight, 2, 0), total(weight, 1, 1), total(weight, 0, 2)
    normal = np.stack([n, sx, sy, sx, sxx, sxy, sy, sxy, syy], axis=-1).reshape(*n.shape, 3, 3)
    sums = []
    for component in (u, v):
        filled = np.where(valid, component, 0.0)
        sums.append(np.stack([total(filled, 0, 0), total(filled, 1, 0), total(filled, 0, 1)], axis=-1))
    gradient = np.full((*n.shape, 2, 2), np.nan)
    # A determinant in units of n³ tells whether the points span a plane rather than a line.
    enough = valid & (n >= LEAST_SHARE * window**2)
    enough &= np.linalg.det(normal) > 1e-6 * np.maximum(n, 1.0) ** 3
    for row, right in enumerate(sums):
        plane = np.linalg.solve(normal[enough], right[enough][..., None])[..., 0]
        gradient[enough, row] = plane[:, 1:] / step
    return gradient
