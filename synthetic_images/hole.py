"""A plate with a round hole under tension, in closed form."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from synthetic_images.motions import Displacement, Numbers, Pair

Floats = NDArray[np.float64]


@dataclass(frozen=True)
class HoledPlate:
    """An infinite elastic plate with a round hole, pulled along the picture's vertical; plane stress.

    Kirsch, *Zeitschrift des Vereins Deutscher Ingenieure* 42 (1898) 797; displacements as in Timoshenko &
    Goodier, *Theory of Elasticity*, plates with a circular hole [from memory; the tests hold them against
    the published stresses].

    Attributes
    ----------
    centre
        Of the hole, (x, y), px.
    radius
        Of the hole, px.
    strain
        Axial strain far from the hole.
    ratio
        Poisson's ratio.
    """

    centre: tuple[float, float]
    radius: float
    strain: float
    ratio: float = 0.3

    def displacement(self, X: Numbers, Y: Numbers) -> Pair:
        """Return u and v, px.  Inside the hole they shrink linearly to the centre, for what shows there."""
        x, y = np.asarray(X) - self.centre[0], np.asarray(Y) - self.centre[1]
        away = np.hypot(x, y)
        inside = np.minimum(away / self.radius, 1.0)
        r = np.maximum(away, self.radius) / self.radius
        twice = 2 * np.arctan2(x, y)  # angle from the pull
        c, s = np.cos(twice), np.sin(twice)
        kappa = (3 - self.ratio) / (1 + self.ratio)
        # σa/8G with σ = E·strain and G = E/2(1 + ν)
        size = self.strain * (1 + self.ratio) / 4 * self.radius
        radial = size * (r * (kappa - 1 + 2 * c) + 2 / r * (1 + (kappa + 1) * c - c / r**2)) * inside
        around = -size * (2 * r + 2 / r * (kappa - 1 + 1 / r**2)) * s * inside
        with np.errstate(invalid="ignore", divide="ignore"):
            sine, cosine = (np.where(away > 0, part / away, 0.0) for part in (x, y))
        return radial * sine + around * cosine, radial * cosine - around * sine

    def motion(self) -> Displacement:
        """Return the plate's motion."""
        return Displacement(self.displacement)

    def axial(self, X: Numbers, Y: Numbers) -> Floats:
        """Return the axial strain ∂v/∂y; NaN inside the hole.

        Hooke's law on Kirsch's stresses in axes along (y) and across (x) the pull.
        """
        x, y = np.asarray(X) - self.centre[0], np.asarray(Y) - self.centre[1]
        r, angle = np.hypot(x, y) / self.radius, np.arctan2(x, y)
        with np.errstate(divide="ignore"):
            two, four = 1 / r**2, 1 / r**4
        c, s = np.cos(2 * angle), np.sin(2 * angle)
        radial = (1 - two) / 2 + (1 - 4 * two + 3 * four) / 2 * c
        hoop = (1 + two) / 2 - (1 + 3 * four) / 2 * c
        shear = -(1 + 2 * two - 3 * four) / 2 * s
        middle, half = (radial + hoop) / 2, (radial - hoop) / 2
        turned = half * c - shear * s
        along, across = middle + turned, middle - turned
        return np.where(r >= 1, self.strain * (along - self.ratio * across), np.nan)
