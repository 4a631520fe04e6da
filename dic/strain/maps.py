"""Local strain: a polynomial through the displacements around every subset."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import asdict, dataclass
from enum import IntEnum
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy import ndimage

from dic.strain.fits import covariances, normals, slopes
from dic.strain.tensors import engineering, line

Floats = NDArray[np.float64]

#: Share of a window's subsets that must be valid; below it a fit leans on too few points.
LEAST_SHARE = 0.5
#: Least eigenvalue of the normal equations per point, in half windows: below it the points do not span
#: the polynomial.  Half a window gives 0.07 for a plane and 0.003 for degree 2, a line of points 0.
LEAST_SPAN = 1e-4
#: Sigma of the Gaussian weighting, in windows: the outermost subsets then weigh 14 % of the middle one.
GAUSSIAN = 0.25

_COUNTS = ("window", "step", "subset", "degree")


class MapFlag(IntEnum):
    """How one point of the strain maps came about; the last two leave NaN."""

    FULL = 0
    ONE_SIDED = 1
    TOO_FEW = 2
    NO_SUBSET = 3


#: What each flag means, for people.
MEANING = {
    MapFlag.FULL: "every subset of the window was measured",
    MapFlag.ONE_SIDED: "fitted to part of the window, at an edge, a hole or a lost subset",
    MapFlag.TOO_FEW: "too few subsets in the window",
    MapFlag.NO_SUBSET: "no subset, or it was not measured",
}


@dataclass(frozen=True)
class Window:
    """The local fit.

    Attributes
    ----------
    window
        Odd number of subsets across the square window.
    step, subset
        Pitch and side of the subsets, px.
    degree
        Of the polynomial, 1 or 2.  Over a full window both give the same slopes; one-sided fits of
        degree 2 follow steep strain and scatter more.
    weighting
        ``"even"``, or ``"gaussian"`` with a sigma of `GAUSSIAN` windows.
    shape
        Shape function of the subsets, ``"affine"`` or ``"quadratic"``.
    """

    window: int
    step: int
    subset: int
    degree: int = 1
    weighting: str = "even"
    shape: str = "affine"

    @property
    def size_px(self) -> int:
        """Size of the virtual strain gauge, px."""
        return gauge_size(self.window, self.step, self.subset)

    def attributes(self) -> dict[str, Any]:
        """Return what a reader of the stored fields needs to form the same window again."""
        return {f"map_{name}": value for name, value in asdict(self).items()}

    @classmethod
    def from_attributes(cls, attributes: Mapping[str, Any]) -> Window:
        """Return the window of stored fields."""
        window, step, subset, degree = (int(attributes[f"map_{name}"]) for name in _COUNTS)
        weighting, shape = (str(attributes[f"map_{name}"]) for name in ("weighting", "shape"))
        return cls(window, step, subset, degree, weighting, shape)

    def overlap(self) -> Floats:
        """Return the correlation of two subsets' displacements by their distance in rows and columns.

        A displacement is the value at the middle of a polynomial fitted to the subset's pixels: a
        weighted sum of their noise.  Over texture that is even all over the subset the weights follow
        from the shape function alone, and two subsets share the products of theirs where they overlap.
        """
        offset = np.arange(self.subset) - self.subset // 2
        basis = _polynomials(offset / max(self.subset // 2, 1), 2 if self.shape == "quadratic" else 1)
        weights = np.linalg.pinv(basis.reshape(-1, basis.shape[2]))[0].reshape(self.subset, self.subset)
        shifts = np.arange(min(self.window, -(-self.subset // self.step))) * self.step
        end = self.subset
        shared = [[(weights[r:, c:] * weights[: end - r, : end - c]).sum() for c in shifts] for r in shifts]
        return np.array(shared) / shared[0][0]


@dataclass(frozen=True)
class StrainMap:
    """Strain on the grid of subsets, arrays of shape (ny, nx), NaN where unknown.

    Attributes
    ----------
    gradient
        Displacement gradient, shape (ny, nx, 2, 2).
    axial, transverse, shear
        Engineering strains in coupon axes.
    u_axial
        Standard uncertainty of the axial strain from the subsets' scatter.
    flag
        Values of `MapFlag`.
    """

    gradient: Floats
    axial: Floats
    transverse: Floats
    shear: Floats
    u_axial: Floats
    flag: NDArray[np.uint8]


def gauge_size(window: int, step: int, subset: int) -> int:
    """Return the size of the maps' virtual strain gauge, px: (window − 1)·step + subset.

    iDICs, A Good Practices Guide for Digital Image Correlation, doi 10.32720/idics/gpg.ed1.
    """
    return (window - 1) * step + subset


class StrainMapper:
    """Fits polynomials to displacements over square windows and turns their slopes into strain.

    What depends only on where subsets are valid is kept until that changes.

    Parameters
    ----------
    window
        The local fit.
    axes
        Unit vectors (x, y) along and across the coupon.
    unbending
        Slopes of picture coordinates in straight ones at the subsets, shape (ny, nx, 2, 2), where
        displacements are given in straight coordinates; None where the picture's are straight.
    """

    def __init__(self, window: Window, axes: tuple[Floats, Floats], unbending: Floats | None = None) -> None:
        self.window, self.axes, self._unbending = window, axes, unbending
        self._half = window.window // 2
        offset = np.arange(-self._half, self._half + 1) / max(self._half, 1)
        self._taper = np.ones(window.window)
        if window.weighting == "gaussian":
            self._taper = np.exp(-0.5 * (offset * self._half / (GAUSSIAN * window.window)) ** 2)
        self._basis = _polynomials(offset, window.degree)
        self._weight = np.outer(self._taper, self._taper)
        self._unit = 1.0 / (max(self._half, 1) * window.step)  # slopes per half window → per px
        # Over a full window the slope is the sum of values times distance, whatever the degree.
        self._tilt = self._taper * offset / (self._taper.sum() * (self._taper * offset**2).sum()) * self._unit
        self._overlap = window.overlap()
        self._valid: NDArray[np.bool_] | None = None

    def strain(self, u: Floats, v: Floats, sigma_u: Floats, sigma_v: Floats) -> StrainMap:
        """Return the strains of one frame.

        Parameters
        ----------
        u, v
            Displacements along x and y, px, shape (ny, nx); NaN where not measured.
        sigma_u, sigma_v
            Their standard uncertainties, px.

        Returns
        -------
        StrainMap
            NaN where fewer than half of a window's subsets are valid or where its own subset is not.
            At edges and holes the fit is one-sided: it uses the subsets that there are.
        """
        gradient = self.gradient(u, v)
        axial, transverse, shear = engineering(gradient, *self.axes)
        a, (moved_x, moved_y) = self.axes[0], line(gradient, self.axes[0])
        gain = self.spread @ [a[0] ** 2, 2 * a[0] * a[1], a[1] ** 2]
        variance = moved_x**2 * self._mean_square(sigma_u) + moved_y**2 * self._mean_square(sigma_v)
        u_axial = np.sqrt(variance * gain) / (1.0 + axial)
        return StrainMap(gradient, axial, transverse, shear, u_axial, self.flag)

    def gradient(self, u: Floats, v: Floats) -> Floats:
        """Return the least-squares displacement gradient around every subset, shape (ny, nx, 2, 2)."""
        valid = np.isfinite(u) & np.isfinite(v)
        self.prepare(valid)
        field = np.stack([np.where(valid, component, 0.0) for component in (u, v)])
        gradient = np.full((*valid.shape, 2, 2), np.nan)
        full = self.flag == MapFlag.FULL
        for row, component in enumerate(field):
            for column, (down, across) in enumerate(((self._taper, self._tilt), (self._tilt, self._taper))):
                slope = ndimage.correlate1d(component, across, axis=1, mode="constant")
                slope = ndimage.correlate1d(slope, down, axis=0, mode="constant")
                gradient[..., row, column][full] = slope[full]
        if len(self._part[0]):
            padded = np.pad(field, ((0, 0), (self._half,) * 2, (self._half,) * 2))
            gradient[self._part] = slopes(padded, *self._windows, self._solving)
        return gradient if self._unbending is None else gradient @ self._unbending

    def covariance(self, sigma_u: Floats, sigma_v: Floats) -> tuple[Floats, Floats]:
        """Return the covariances of (uₓ, u_y) and of (vₓ, v_y), shapes (ny, nx, 2, 2).

        `prepare` or `gradient` has said before where subsets are valid.
        """
        scale = self.spread[..., [[0, 1], [1, 2]]]
        first, second = (self._mean_square(sigma)[..., None, None] * scale for sigma in (sigma_u, sigma_v))
        return first, second

    def prepare(self, valid: NDArray[np.bool_]) -> None:
        """Work out what depends on where subsets are valid, shape (ny, nx), unless it is known already.

        Sets `flag`, values of `MapFlag`, and `spread`, the slopes' variance along x, covariance and
        variance along y for displacements that scatter by 1 px, shape (ny, nx, 3).
        """
        if self._valid is not None and np.array_equal(valid, self._valid):
            return
        size, half = self.window.window, self._half
        padded = np.pad(valid.astype(float), half)
        self._share = ndimage.uniform_filter(valid.astype(float), size, mode="constant")
        count = np.rint(self._share * size**2)
        part = np.nonzero(valid & (count < size**2) & (count >= LEAST_SHARE * size**2))
        # As they come, the indices lie in strides, for which the kernel would be compiled once more.
        normal = normals(padded, *map(np.ascontiguousarray, part), self._basis, self._weight)
        total = np.maximum(normal[:, :1, :1], 1e-300)  # the first term is the constant
        spans = np.linalg.eigvalsh(normal / total)[:, 0] >= LEAST_SPAN
        part, normal = (part[0][spans], part[1][spans]), normal[spans]
        self._part, self._windows = part, (padded, *part, self._basis, self._weight)
        self._solving = np.ascontiguousarray(np.linalg.inv(normal)[:, 1:3] * self._unit)
        self.flag = np.full(valid.shape, MapFlag.NO_SUBSET, np.uint8)
        self.flag[valid] = MapFlag.TOO_FEW
        self.flag[part] = MapFlag.ONE_SIDED
        self.flag[valid & (count == size**2)] = MapFlag.FULL
        self.spread = np.full((*valid.shape, 3), np.nan)
        self.spread[self.flag == MapFlag.FULL] = self._full_spread()
        self.spread[part] = covariances(*self._windows, self._solving, self._overlap)
        self._valid = valid

    def _full_spread(self) -> Floats:
        """Return what `spread` says of a full window, shape (3,)."""
        corner = np.zeros(1, np.int64)
        where = np.ones_like(self._weight), corner, corner, self._basis, self._weight
        solving = np.ascontiguousarray(np.linalg.inv(normals(*where))[:, 1:3] * self._unit)
        return np.asarray(covariances(*where, solving, self._overlap)[0])

    def _mean_square(self, sigma: Floats) -> Floats:
        """Return the mean variance of the valid subsets in each window, px²."""
        valid = self.flag != MapFlag.NO_SUBSET
        mean = ndimage.uniform_filter(np.where(valid, sigma, 0.0) ** 2, self.window.window, mode="constant")
        return np.divide(mean, self._share, out=np.full_like(mean, np.nan), where=valid)


def _polynomials(offset: Floats, degree: int) -> Floats:
    """Return 1, x, y (and x², xy, y²) at the points of a square, shape (n, n, 3 or 6)."""
    y, x = np.meshgrid(offset, offset, indexing="ij")
    terms = [np.ones_like(x), x, y] + ([x * x, x * y, y * y] if degree == 2 else [])
    return np.stack(terms, axis=-1)
