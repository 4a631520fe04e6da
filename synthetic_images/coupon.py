"""A textured coupon before a plain background, as a scene for the camera."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.special import ndtr

from synthetic_images.motions import Motion, _cos_sin
from synthetic_images.textures import Texture

Floats = NDArray[np.float64]


@dataclass(frozen=True)
class Coupon:
    """A straight strip, endless along its axis, that carries a texture and moves.

    Attributes
    ----------
    texture
        Texture on the strip.
    motion
        Where the strip's points are now.
    centre
        A point on the strip's middle line, material coordinates (X, Y), px.
    width
        Width before the test, px.
    axis_angle_deg
        Angle of the axis from the vertical, clockwise as seen.
    background
        Reflectance beside the strip.
    edge
        Sigma of the strip's soft rim, px: a sharp lens, as for the dots.
    """

    texture: Texture
    motion: Motion
    centre: tuple[float, float]
    width: float
    axis_angle_deg: float = 0.0
    background: float = 0.1
    edge: float = 0.5

    def __call__(self, x: Floats, y: Floats) -> Floats:
        """Return the reflectance at picture coordinates x, y, px."""
        X, Y = np.broadcast_arrays(*self.motion.inverse(x, y))
        c, s = _cos_sin(self.axis_angle_deg)
        across = c * (X - self.centre[0]) + s * (Y - self.centre[1])
        depth = (self.width / 2 - np.abs(across)) / self.edge
        # Beyond six sigmas the rim's profile is 0 or 1 to 1e-9.
        on = depth > -6
        value = np.full(depth.shape, self.background)
        value[on] = self.texture(X[on], Y[on])
        rim = on & (depth < 6)
        value[rim] = self.background + (value[rim] - self.background) * ndtr(depth[rim])
        return value
