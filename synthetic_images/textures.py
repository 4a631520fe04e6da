"""Textures given by a formula, evaluated at material coordinates.

A texture is an object that is called with material coordinates X, Y (px, any shape, broadcast
against each other) and returns the reflectance there, 0 (black) to 1 (white).
"""

from __future__ import annotations

from typing import Protocol

import numpy as np
from numba import njit
from numpy.typing import ArrayLike, NDArray
from scipy.ndimage import map_coordinates, spline_filter
from scipy.special import chndtr, ndtr

from dic.errors import InputError

Floats = NDArray[np.float64]

#: A dot ends this many sigmas of its soft edge beyond its radius, where 3 ppm of its darkness are left.
_EDGE_SIGMAS = 4.5
#: Intervals of the table of a dot's profile; linear interpolation is then good to 2 ppm.
_PROFILE_STEPS = 2048
#: Side of a cell in the grid that finds the dots near a point, px: small, so that few dots reach each
#: cell (measured: 16 ns per point, against 21 ns with 4 px).
_CELL = 2.0
#: Entries in that grid, counted before they are allocated; about a gigabyte while it is made.
_MAX_ENTRIES = 20_000_000
#: Waves of a random-phase texture: enough that grey values at a point are close to Gaussian.
_WAVES = 64
#: Wave lengths of a random-phase texture spread by this factor to either side, so that it never repeats.
_WAVE_SPREAD = 1.25
#: A photograph fills this part of the grey scale; the rest is room for the spline's overshoot.
_PHOTO_RANGE = (0.08, 0.92)


class Texture(Protocol):
    """Reflectance at material coordinates."""

    def __call__(self, X: ArrayLike, Y: ArrayLike) -> Floats:
        """Return the reflectance, 0 to 1, at X, Y (px), in their common shape."""
        ...


class Dots:
    """Dark discs with soft edges, strewn at random on white, free to overlap.

    The centres are a Poisson process, so the discs form a Boolean model.  Each disc is a sharp one
    convolved with a Gaussian; where discs overlap, what each lets through is multiplied.  The mean
    reflectance is therefore ``1 - cover`` exactly, in expectation.

    Parameters
    ----------
    diameter
        Diameter of the discs, px.
    cover
        Share of the area that is dark, 0 to 1 (exclusive).
    edge
        Sigma of the Gaussian that blurs the edges, px.
    area
        (width, height), px: the realisation covers 0 <= X < width, 0 <= Y < height and repeats
        beyond.
    seed
        Seed of the one fixed realisation.

    Raises
    ------
    InputError
        If the realisation would not fit into memory.

    Notes
    -----
    A disc of radius r blurred by an isotropic Gaussian is, at distance d from its centre, the
    distribution function of a non-central chi-square variable with two degrees of freedom:
    ``P(chi2(2, d²/sigma²) <= r²/sigma²)``.  Boolean model: Chiu, Stoyan, Kendall & Mecke,
    *Stochastic Geometry and its Applications*, 3rd ed., ch. 3, doi 10.1002/9781118658222.
    """

    def __init__(
        self,
        diameter: float = 4.5,
        cover: float = 0.5,
        edge: float = 0.5,
        *,
        area: tuple[float, float] = (1024.0, 1024.0),
        seed: int = 0,
    ) -> None:
        radius = diameter / 2
        self._reach = radius + _EDGE_SIGMAS * edge
        # Whole cells, and never so few that a dot would meet its own repetition.
        cells = [max(int(np.ceil(side / _CELL)), int(3 * self._reach / _CELL) + 1) for side in area]
        self.area = (cells[0] * _CELL, cells[1] * _CELL)
        self._cells = (cells[0], cells[1])
        rng = np.random.default_rng(seed)
        density = -np.log1p(-cover) / (np.pi * radius**2)
        expected = density * self.area[0] * self.area[1]
        if expected * np.pi * (self._reach / _CELL + 1) ** 2 > _MAX_ENTRIES:
            raise InputError(
                "so many dots with edges so soft would not fit into memory",
                where="[texture]",
                remedy="take fewer, larger or sharper dots or a smaller picture",
            )
        count = rng.poisson(expected)
        self.centres = rng.random((count, 2)) * self.area
        self._starts, self._near = self._dots_near_cells()
        squares = np.linspace(0.0, self._reach**2, _PROFILE_STEPS + 1)
        self._clear = 1.0 - chndtr((radius / edge) ** 2, 2, squares / edge**2)
        self._clear[-1] = 1.0
        self._clear = np.append(self._clear, 1.0)  # the far side of the last interval, for the kernel

    def _dots_near_cells(self) -> tuple[NDArray[np.int64], Floats]:
        """Return, cell after cell, the dots that reach into it (as the cell sees them, unwrapped)."""
        home = np.floor(self.centres / _CELL).astype(np.int64)
        span = int(np.ceil(self._reach / _CELL))
        cells, dots = [], []
        for offset in np.ndindex(2 * span + 1, 2 * span + 1):
            cell = home + (np.array(offset) - span)
            gap = np.maximum(np.maximum(cell * _CELL - self.centres, self.centres - (cell + 1) * _CELL), 0)
            near = np.hypot(gap[:, 0], gap[:, 1]) < self._reach
            inside = np.mod(cell[near], self._cells)
            cells.append(inside[:, 1] * self._cells[0] + inside[:, 0])
            dots.append(self.centres[near] + (inside - cell[near]) * _CELL)
        cell = np.concatenate(cells)
        order = np.argsort(cell, kind="stable")
        counts = np.bincount(cell, minlength=self._cells[0] * self._cells[1])
        return np.concatenate([[0], np.cumsum(counts)]), np.concatenate(dots)[order]

    def __call__(self, X: ArrayLike, Y: ArrayLike) -> Floats:
        """Return the reflectance at X, Y; NaN where a coordinate is not finite."""
        X, Y = _flat(X), _flat(Y)
        shape = np.broadcast_shapes(X.shape, Y.shape)
        X, Y = (np.ascontiguousarray(np.broadcast_to(side, shape)).ravel() for side in (X, Y))
        out = np.empty(X.size)
        _dots_at(X, Y, self._starts, self._near, self._clear, self._cells, self._reach**2, out)
        return out.reshape(shape)


class Cosines:
    """Random-phase cosines: a smooth texture without edges, with one scale.

    Sixty-four plane waves of random direction and phase add to a nearly Gaussian field; its
    distribution function maps it onto 0 to 1, so all grey values are equally frequent.

    Parameters
    ----------
    feature
        Feature size, px: half the middle wave length, about the width of a dark or bright patch.
    seed
        Seed of the one fixed realisation; it never repeats and has no bounds.
    """

    def __init__(self, feature: float = 4.0, *, seed: int = 0) -> None:
        rng = np.random.default_rng(seed)
        length = 2 * feature * _WAVE_SPREAD ** rng.uniform(-1, 1, _WAVES)
        # One direction per equal share of the half circle: no seed gives a grain.
        angle = np.pi * (np.arange(_WAVES) + rng.random(_WAVES)) / _WAVES
        self._waves = np.column_stack(
            [
                2 * np.pi / length * np.cos(angle),
                2 * np.pi / length * np.sin(angle),
                rng.uniform(0, 2 * np.pi, _WAVES),
            ]
        )

    def __call__(self, X: ArrayLike, Y: ArrayLike) -> Floats:
        """Return the reflectance at X, Y."""
        X, Y = np.broadcast_arrays(_flat(X), _flat(Y))
        total = np.zeros(X.shape)
        for kx, ky, phase in self._waves:
            total += np.cos(kx * X + ky * Y + phase)
        return ndtr(np.sqrt(2.0 / _WAVES) * total)


class Photograph:
    """A photograph as texture: a quintic spline through its pixels, mirrored at the rim.

    Parameters
    ----------
    photo
        Grey picture, shape (rows, columns).
    magnification
        Camera pixels per pixel of the photograph; above 1 the photograph's own pixels vanish in
        the camera's.

    Notes
    -----
    B-splines with exact prefilter: Unser, Aldroubi & Eden, IEEE Trans. Signal Processing 41 (1993)
    821-833, doi 10.1109/78.193220.
    """

    def __init__(self, photo: NDArray[np.integer] | Floats, magnification: float = 2.0) -> None:
        grey = np.asarray(photo, dtype=float)
        low, high = _PHOTO_RANGE
        grey = low + (high - low) * (grey - grey.min()) / np.ptp(grey)
        self.magnification = magnification
        self.area = (magnification * (grey.shape[1] - 1), magnification * (grey.shape[0] - 1))
        self._coefficients = spline_filter(grey, order=5, mode="mirror")

    @classmethod
    def named(cls, name: str, magnification: float = 2.0) -> Photograph:
        """Load one of the photographs that come inside scikit-image's wheel.

        Parameters
        ----------
        name
            ``"gravel"``, ``"brick"`` or ``"grass"`` (real camera pictures, CC0).
        magnification
            Camera pixels per pixel of the photograph.
        """
        from skimage import data

        return cls(getattr(data, name)(), magnification)

    def __call__(self, X: ArrayLike, Y: ArrayLike) -> Floats:
        """Return the reflectance at X, Y."""
        X, Y = np.broadcast_arrays(_flat(X), _flat(Y))
        at = np.stack([Y.ravel(), X.ravel()]) / self.magnification
        value = map_coordinates(self._coefficients, at, order=5, mode="mirror", prefilter=False)
        return np.clip(value, 0.0, 1.0).reshape(X.shape)


def _flat(values: ArrayLike) -> Floats:
    return np.asarray(values, dtype=np.float64)


# No fast-math here: the same seed must give the same bytes on every processor.
@njit(nogil=True, cache=True)
def _dots_at(X, Y, starts, near, clear, cells, reach2, out):  # type: ignore[no-untyped-def]  # Numba finds the types
    """Multiply what the dots near each point let through; beyond its reach a dot is wholly clear."""
    width, height = cells[0] * _CELL, cells[1] * _CELL
    per_width, per_height, per_cell = 1 / width, 1 / height, 1 / _CELL
    per_square = _PROFILE_STEPS / reach2
    for k in range(X.size):
        x = X[k] - width * np.floor(X[k] * per_width)
        y = Y[k] - height * np.floor(Y[k] * per_height)
        # Rounding may put a point a hair beyond the rim; coordinates that are not finite end here too.
        if not (x >= -1 and y >= -1 and x <= width + 1 and y <= height + 1):
            out[k] = np.nan
            continue
        column = min(max(int(x * per_cell), 0), cells[0] - 1)
        cell = min(max(int(y * per_cell), 0), cells[1] - 1) * cells[0] + column
        value = 1.0
        # Unsigned indices and no branch on the distance: both spare a third of the time.
        for i in range(np.uint64(starts[cell]), np.uint64(starts[cell + 1])):
            dx = x - near[i, 0]
            dy = y - near[i, 1]
            place = min((dx * dx + dy * dy) * per_square, float(_PROFILE_STEPS))
            j = np.uint64(place)
            value *= clear[j] + (place - j) * (clear[j + np.uint64(1)] - clear[j])
        out[k] = value
