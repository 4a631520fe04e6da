"""A textured coupon before a background, as a scene for the camera."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.special import ndtr

from synthetic_images.motions import Motion, _cos_sin
from synthetic_images.textures import Texture

Floats = NDArray[np.float64]


@dataclass(frozen=True)
class Waist:
    """Ends that widen along circular fillets, tangent to the parallel section.

    Attributes
    ----------
    parallel
        Length of the parallel section, px.
    radius
        Radius of the fillets, px.
    grip
        Width of the ends, px; at most the coupon's width and two radii.
    """

    parallel: float
    radius: float
    grip: float

    def depth(self, along: Floats, across: Floats, half: float) -> Floats:
        """Return how far points lie inside the outline, px; `half` is half the parallel section's width."""
        beyond = np.abs(along) - self.parallel / 2
        beside = np.abs(across)
        fillet = np.hypot(beyond, half + self.radius - beside) - self.radius
        # On the fillet the nearest point of the outline is on its circle; past it, on the grip's side.
        drop = half + self.radius - self.grip / 2
        ends = beyond > np.sqrt(max(self.radius**2 - drop**2, 0.0))
        return np.where(beyond <= 0, half - beside, np.where(ends, self.grip / 2 - beside, fillet))


@dataclass(frozen=True)
class Coupon:
    """A strip, endless along its axis, that carries a texture and moves.

    Attributes
    ----------
    texture
        Texture on the strip.
    motion
        Where the strip's points are now.
    centre
        A point on the strip's middle line, material coordinates (X, Y), px; the middle of a waisted
        coupon's parallel section.
    width
        Width before the test, px.
    axis_angle_deg
        Angle of the axis from the vertical, clockwise as seen.
    background
        Reflectance beside the strip, or a texture that stands still in the picture.
    edge
        Sigma of the strip's soft rim, px: a sharp lens, as for the dots.
    waist
        How the ends widen; None for a straight strip.
    holes
        Round holes, (X, Y, radius) in material coordinates, px.
    cylinder
        Whether this is a round bar of the width as its diameter, seen from far away: the material at an arc
        R·φ from its middle line stands R·sin φ beside it, and contracts around the bar as it does across.
    """

    texture: Texture
    motion: Motion
    centre: tuple[float, float]
    width: float
    axis_angle_deg: float = 0.0
    background: float | Texture = 0.1
    edge: float = 0.5
    waist: Waist | None = None
    holes: tuple[tuple[float, float, float], ...] = ()
    cylinder: bool = False

    def __call__(self, x: Floats, y: Floats) -> Floats:
        """Return the reflectance at picture coordinates x, y, px."""
        X, Y = np.broadcast_arrays(*self.motion.inverse(x, y))
        depth = self._depth(X, Y) / self.edge
        # Beyond six sigmas the rim's profile is 0 or 1 to 1e-9.
        on = depth > -6
        value = self._behind(x, y, depth.shape)
        rim = on & (depth < 6)
        behind = value[rim]
        value[on] = self.texture(*self._on_surface(X[on], Y[on]))
        value[rim] = behind + (value[rim] - behind) * ndtr(depth[rim])
        return value

    def _on_surface(self, X: Floats, Y: Floats) -> tuple[Floats, Floats]:
        """Return where on the texture material points lie that are seen at X, Y."""
        if not self.cylinder:
            return X, Y
        c, s = _cos_sin(self.axis_angle_deg)
        across = c * (X - self.centre[0]) + s * (Y - self.centre[1])
        radius = self.width / 2
        beyond = radius * np.arcsin(np.clip(across / radius, -1.0, 1.0)) - across
        return X + c * beyond, Y + s * beyond

    def _depth(self, X: Floats, Y: Floats) -> Floats:
        """Return how far material points lie inside the outline, px."""
        c, s = _cos_sin(self.axis_angle_deg)
        across = c * (X - self.centre[0]) + s * (Y - self.centre[1])
        if self.waist is None:
            depth = self.width / 2 - np.abs(across)
        else:
            along = c * (Y - self.centre[1]) - s * (X - self.centre[0])
            depth = self.waist.depth(along, across, self.width / 2)
        for hole_x, hole_y, radius in self.holes:
            depth = np.minimum(depth, np.hypot(X - hole_x, Y - hole_y) - radius)
        return depth

    def _behind(self, x: Floats, y: Floats, shape: tuple[int, ...]) -> Floats:
        if callable(self.background):
            return np.array(np.broadcast_to(self.background(x, y), shape))
        return np.full(shape, self.background)
