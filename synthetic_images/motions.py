"""Motions: maps from material (reference) coordinates X, Y to displaced coordinates x, y, in px.

x runs to the right, y down.  The coupon's axis makes `axis_angle_deg` with the vertical, clockwise
as seen; its unit vector is (−sin, cos), the transverse one (cos, sin).
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Protocol

import numpy as np
from numba import njit
from numpy.typing import NDArray

Floats = NDArray[np.float64]
Numbers = Floats | float
Pair = tuple[Floats, Floats]

#: The inverse of a motion without closed form is iterated to this, px.
INVERSE_TOLERANCE = 1e-10
_MAX_ITERATIONS = 500
_NO_INVERSE = "the motion has no inverse that could be found; its gradients are too large"


class Motion(Protocol):
    """A map of the plane with its inverse."""

    def __call__(self, X: Numbers, Y: Numbers) -> Pair:
        """Return where the material points X, Y have gone, px."""
        ...

    def inverse(self, x: Numbers, y: Numbers) -> Pair:
        """Return which material points have come to x, y, px."""
        ...


@dataclass(frozen=True)
class Affine:
    """x = centre + shift + F (X − centre).

    Attributes
    ----------
    gradient
        F, rows ((xX, xY), (yX, yY)), dimensionless.
    centre, shift
        (x, y), px.
    """

    gradient: tuple[tuple[float, float], tuple[float, float]] = ((1.0, 0.0), (0.0, 1.0))
    centre: tuple[float, float] = (0.0, 0.0)
    shift: tuple[float, float] = (0.0, 0.0)

    def __call__(self, X: Numbers, Y: Numbers) -> Pair:
        """Return the displaced coordinates, px."""
        (a, b), (c, d) = self.gradient
        X, Y = np.asarray(X) - self.centre[0], np.asarray(Y) - self.centre[1]
        return (
            a * X + b * Y + (self.centre[0] + self.shift[0]),
            c * X + d * Y + (self.centre[1] + self.shift[1]),
        )

    def inverse(self, x: Numbers, y: Numbers) -> Pair:
        """Return the material coordinates, px, in closed form."""
        return self._back(
            np.asarray(x) - (self.centre[0] + self.shift[0]),
            np.asarray(y) - (self.centre[1] + self.shift[1]),
            self.centre,
        )

    def _back(self, dx: Floats, dy: Floats, origin: tuple[float, float] = (0.0, 0.0)) -> Pair:
        """Turn a difference in space into one in the material, counted from an origin."""
        (a, b), (c, d) = self.gradient
        size = a * d - b * c
        return (
            (d / size) * dx - (b / size) * dy + origin[0],
            (a / size) * dy - (c / size) * dx + origin[1],
        )


def rigid(dx: float, dy: float) -> Affine:
    """Return a translation by dx, dy, px."""
    return Affine(shift=(dx, dy))


def rotation(angle_deg: float, centre: tuple[float, float] = (0.0, 0.0)) -> Affine:
    """Return a rotation about a centre (px), clockwise as seen."""
    c, s = _cos_sin(angle_deg)
    return Affine(((c, -s), (s, c)), centre)


def homogeneous(
    axial: float,
    transverse: float,
    shear: float = 0.0,
    *,
    axis_angle_deg: float = 0.0,
    centre: tuple[float, float] = (0.0, 0.0),
    shift: tuple[float, float] = (0.0, 0.0),
) -> Affine:
    """Return a homogeneous strain in coupon axes about a centre.

    Parameters
    ----------
    axial, transverse
        Engineering strains, dimensionless.
    shear
        Engineering shear angle, shared equally between the two axes (no rotation for small shear).
    axis_angle_deg
        Angle of the coupon's axis from the vertical, clockwise as seen.
    centre, shift
        The centre and where it goes, px.
    """
    c, s = _cos_sin(axis_angle_deg)
    turn = np.array([[c, -s], [s, c]])
    stretch = np.array([[1 + transverse, shear / 2], [shear / 2, 1 + axial]])
    (a, b), (d, e) = (turn @ stretch @ turn.T).tolist()
    return Affine(((a, b), (d, e)), centre, shift)


@dataclass(frozen=True)
class Bending:
    """A homogeneous strain plus pure bending in the picture's plane.

    With a along the coupon and t across it, from the centre, bending adds the displacements
    κ·a·t along and −κ·(a² + ν·t²)/2 across: axial strain κ·t, transverse strain −ν·κ·t, no shear
    (Saint-Venant's solution; Timoshenko & Goodier, *Theory of Elasticity*, pure bending of bars).

    Attributes
    ----------
    straight
        The homogeneous part.
    axis_angle_deg
        Angle of the coupon's axis from the vertical, clockwise as seen.
    curvature
        κ, 1/px.
    contraction
        ν, transverse contraction per axial strain.
    """

    straight: Affine
    axis_angle_deg: float
    curvature: float
    contraction: float

    def __call__(self, X: Numbers, Y: Numbers) -> Pair:
        """Return the displaced coordinates, px."""
        x, y = self.straight(X, Y)
        c, s = _cos_sin(self.axis_angle_deg)
        X, Y = np.asarray(X) - self.straight.centre[0], np.asarray(Y) - self.straight.centre[1]
        along, across = c * Y - s * X, c * X + s * Y
        u_along = self.curvature * along * across
        u_across = -self.curvature / 2 * (along**2 + self.contraction * across**2)
        return x + (c * u_across - s * u_along), y + (s * u_across + c * u_along)

    def inverse(self, x: Numbers, y: Numbers) -> Pair:
        """Return the material coordinates, px, to `INVERSE_TOLERANCE`.

        Raises
        ------
        ValueError
            If the bend is so sharp that no inverse is found.
        """
        X, Y = self.straight.inverse(x, y)
        X, Y = (np.array(np.broadcast_to(side, np.broadcast_shapes(X.shape, Y.shape))) for side in (X, Y))
        c, s = _cos_sin(self.axis_angle_deg)
        turn = np.array([[c, s], [-s, c]])  # to (across, along)
        gradient = turn @ np.array(self.straight.gradient) @ turn.T
        inside = _unbend(
            X.reshape(-1),
            Y.reshape(-1),
            self.straight.centre,
            (c, s),
            np.linalg.inv(gradient),
            self.curvature,
            self.contraction,
        )
        if not inside:
            raise ValueError(_NO_INVERSE)
        return X, Y


@dataclass(frozen=True)
class Sinusoid:
    """Displacement that varies as a sine: amplitude·sin(2π·s/wavelength + phase).

    Attributes
    ----------
    amplitude, wavelength
        In px.
    wave_deg
        Direction in which s is counted; from the vertical, clockwise as seen.
    along_deg
        Direction of the displacement; equal to `wave_deg` for a longitudinal wave.
    phase
        In radians.
    """

    amplitude: float
    wavelength: float
    wave_deg: float = 0.0
    along_deg: float = 0.0
    phase: float = 0.0

    def __post_init__(self) -> None:
        if abs(self.amplitude) * 2 * np.pi >= self.wavelength:
            raise ValueError("a sinusoid as steep as this folds the picture; lower amplitude / wavelength")

    def __call__(self, X: Numbers, Y: Numbers) -> Pair:
        """Return the displaced coordinates, px."""
        c, s = _cos_sin(self.wave_deg)
        place = c * np.asarray(Y) - s * np.asarray(X)
        size = self.amplitude * np.sin(2 * np.pi / self.wavelength * place + self.phase)
        c, s = _cos_sin(self.along_deg)
        return X - s * size, Y + c * size

    def inverse(self, x: Numbers, y: Numbers) -> Pair:
        """Return the material coordinates, px, to `INVERSE_TOLERANCE`."""
        return _solve(self, Affine(), x, y)


@dataclass(frozen=True)
class Displacement:
    """Any displacement field, given as a function.

    Attributes
    ----------
    field
        Called with X, Y (px), returns the displacements u, v (px).  Its gradients must stay below
        1, or the inverse is not found.
    """

    field: Callable[[Floats, Floats], Pair]

    def __call__(self, X: Numbers, Y: Numbers) -> Pair:
        """Return the displaced coordinates, px."""
        X, Y = np.asarray(X, dtype=float), np.asarray(Y, dtype=float)
        u, v = self.field(X, Y)
        return X + u, Y + v

    def inverse(self, x: Numbers, y: Numbers) -> Pair:
        """Return the material coordinates, px, to `INVERSE_TOLERANCE`."""
        return _solve(self, Affine(), x, y)


def _solve(motion: Motion, like: Affine, x: Numbers, y: Numbers) -> Pair:
    """Invert a motion by Newton steps with the constant gradient of a similar one.

    Raises
    ------
    ValueError
        If the steps do not die out, because the motion is too far from `like` or folds.
    """
    x, y = np.asarray(x, dtype=float), np.asarray(y, dtype=float)
    X, Y = like.inverse(x, y)
    for _ in range(_MAX_ITERATIONS):
        x_now, y_now = motion(X, Y)
        dX, dY = like._back(x - x_now, y - y_now)
        X, Y = X + dX, Y + dY
        step = max(np.abs(dX).max(initial=0.0), np.abs(dY).max(initial=0.0))
        if step < INVERSE_TOLERANCE:
            return X, Y
        if not np.isfinite(step):
            break
    raise ValueError(_NO_INVERSE)


def _cos_sin(angle_deg: float) -> tuple[float, float]:
    # Exact at whole quarter turns, where cos and sin of the rounded radians are not.
    quarter, rest = divmod(angle_deg, 90.0)
    c, s = float(np.cos(np.radians(rest))), float(np.sin(np.radians(rest)))
    turned: list[tuple[float, float]] = [(c, s), (-s, c), (-c, -s), (s, -c)]
    return turned[int(quarter) % 4]


# No fast-math here: the same seed must give the same bytes on every processor.
@njit(nogil=True, cache=True)
def _unbend(X, Y, centre, cos_sin, back, curvature, contraction):  # type: ignore[no-untyped-def]  # Numba finds the types
    """Take bending out of points whose homogeneous part has been undone, in place.

    The straight motion S and the bow b give x = S(X) + b(X); with X' the inverse of S at x, that is
    X = X' − F⁻¹·b(X), a contraction because bending is slight.  Point by point, since as whole
    arrays the same steps took four times as long as the texture.
    """
    c, s = cos_sin
    for k in range(X.size):
        x, y = X[k] - centre[0], Y[k] - centre[1]
        across0, along0 = c * x + s * y, c * y - s * x
        across, along = across0, along0
        step = np.inf
        for _ in range(_MAX_ITERATIONS):
            u_along = curvature * along * across
            u_across = -curvature / 2 * (along * along + contraction * across * across)
            new_across = across0 - (back[0, 0] * u_across + back[0, 1] * u_along)
            new_along = along0 - (back[1, 0] * u_across + back[1, 1] * u_along)
            step = abs(new_across - across) + abs(new_along - along)
            across, along = new_across, new_along
            if step < INVERSE_TOLERANCE or not step < 1e9:
                break
        if not step < INVERSE_TOLERANCE:
            return False
        X[k] = centre[0] + c * across - s * along
        Y[k] = centre[1] + s * across + c * along
    return True
