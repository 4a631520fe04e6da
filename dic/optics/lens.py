"""Lens distortion and camera tilt, applied to coordinates: where a subset is, and where it has gone.

Pictures are never warped.  Distortion is Brown and Conrady's model (Brown 1971, Photogrammetric
Engineering 37, 855–866) with the coefficients in OpenCV's order; tilt is a plane seen in perspective.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from dic.correlation.matching import Match

Floats = NDArray[np.float64]
#: Coordinates of any number type and shape.
Places = NDArray[np.floating | np.integer] | float

#: Newton's steps that undo the distortion; a lens that needs more folds the picture.
MOST_STEPS = 30
#: Steps end below this, in focal lengths: 1e-9 px for a focal length of 10 000 px.
SMALL = 1e-13


@dataclass(frozen=True)
class Lens:
    """What turns picture coordinates into those of a straight, square view of the coupon's plane.

    Attributes
    ----------
    focal, centre
        Focal length and principal point, along x and y, px.
    coefficients
        k1, k2, p1, p2, k3.
    plane
        Homography from an ideal camera's coordinates (in focal lengths) to straight px, shape (3, 3).
    """

    focal: tuple[float, float]
    centre: tuple[float, float]
    coefficients: tuple[float, float, float, float, float]
    plane: Floats

    @classmethod
    def level(
        cls,
        focal: tuple[float, float],
        centre: tuple[float, float],
        coefficients: tuple[float, float, float, float, float],
    ) -> Lens:
        """Return the lens of a camera that looks straight at the coupon."""
        plane = np.array([[focal[0], 0.0, centre[0]], [0.0, focal[1], centre[1]], [0.0, 0.0, 1.0]])
        return cls(focal, centre, coefficients, plane)

    def settled(self, middle: Floats, axial: Floats) -> Lens:
        """Return this lens with the coordinates that straight px have no preference for.

        A place, the direction of an axis there, and the area of a pixel there stay as they are in the
        picture, so that gauge and axis need no turning.

        Parameters
        ----------
        middle, axial
            The place x, y (px) and the axis' unit vector.
        """
        moved, slopes = self.straight(*middle)
        turned = slopes @ axial
        cosine, sine = (np.array([axial @ turned, axial[0] * turned[1] - axial[1] * turned[0]])) / (
            np.linalg.norm(turned)
        )
        turn = np.array([[cosine, sine], [-sine, cosine]]) / np.sqrt(abs(np.linalg.det(slopes)))
        similar = np.eye(3)
        similar[:2, :2] = turn
        similar[:2, 2] = middle - turn @ moved
        return replace(self, plane=similar @ self.plane)

    def straight(self, x: Places, y: Places) -> tuple[Floats, Floats]:
        """Return straight coordinates and their slopes.

        Parameters
        ----------
        x, y
            Picture coordinates, px, any shape.

        Returns
        -------
        places, slopes
            Shapes (..., 2) and (..., 2, 2), px and px/px; NaN where the picture cannot show a point.
        """
        x, y = np.broadcast_arrays(np.asarray(x, float), np.asarray(y, float))
        seen = np.stack([(x - self.centre[0]) / self.focal[0], (y - self.centre[1]) / self.focal[1]], axis=-1)
        ideal, bent = self._undistorted(seen)
        top = ideal @ self.plane[:2, :2].T + self.plane[:2, 2]
        depth = (ideal @ self.plane[2, :2] + self.plane[2, 2])[..., None]
        places = top / depth
        fall = places[..., :, None] * self.plane[2, :2]
        slopes = (self.plane[:2, :2] - fall) / depth[..., None] @ np.linalg.inv(bent)
        return places, slopes / np.array(self.focal)

    def _undistorted(self, seen: Floats) -> tuple[Floats, Floats]:
        """Return ideal coordinates and the distortion's slopes there, by Newton's method."""
        ideal = seen.copy()
        for _ in range(MOST_STEPS):
            value, slopes = distorted(ideal, self.coefficients)
            step = np.linalg.solve(slopes, (seen - value)[..., None])[..., 0]
            ideal = ideal + step
            if not np.nanmax(np.abs(step), initial=0.0) > SMALL:
                break
        value, slopes = distorted(ideal, self.coefficients)
        wrong = ~(np.abs(value - seen).max(axis=-1) < 1e-9) | ~(np.linalg.det(slopes) > 0)
        return np.where(wrong[..., None], np.nan, ideal), np.where(wrong[..., None, None], np.eye(2), slopes)

    def shows(self, shape: tuple[int, ...]) -> bool:
        """Tell whether the model holds in all of a picture of so many rows and columns."""
        x, y = np.meshgrid(np.linspace(0, shape[1] - 1, 25), np.linspace(0, shape[0] - 1, 25))
        places, slopes = self.straight(x, y)
        return bool(np.isfinite(places).all() and (np.linalg.det(slopes) > 0).all())

    def straighten(self, match: Match, x: Places, y: Places) -> Match:
        """Return a match with displacements and their slopes in straight coordinates.

        Parameters
        ----------
        match
            As found in the picture.
        x, y
            The subsets' centres in the reference picture, px, shape (n,).

        Returns
        -------
        Match
            Affine; `Match.in_picture` keeps the motion as matched, which the interpolation's periodic
            error belongs to.
        """
        seen = match.affine
        before, here = self.straight(x, y)
        after, there = self.straight(x + seen[:, 0], y + seen[:, 3])
        gradient = seen[:, [[1, 2], [4, 5]]] + np.eye(2)
        straight = there @ gradient @ np.linalg.inv(here) - np.eye(2)
        moved = after - before
        parts = [moved[:, :1], straight[:, 0], moved[:, 1:], straight[:, 1]]
        return replace(match, parameters=np.concatenate(parts, axis=1), in_picture=seen)

    def displaced(self, x: Places, y: Places, u: Floats, v: Floats) -> tuple[Floats, Floats]:
        """Return displacements in straight coordinates, px, from those in the picture, of like shape."""
        moved = self.straight(x + u, y + v)[0] - self.straight(x, y)[0]
        return moved[..., 0], moved[..., 1]


def distorted(ideal: Floats, coefficients: tuple[float, float, float, float, float]) -> tuple[Floats, Floats]:
    """Return where a lens shows ideal points, and the slopes of that.

    Parameters
    ----------
    ideal
        Points in focal lengths from the principal point, shape (..., 2).
    coefficients
        k1, k2, p1, p2, k3.

    Returns
    -------
    places, slopes
        Shapes (..., 2) and (..., 2, 2).
    """
    k1, k2, p1, p2, k3 = coefficients
    a, b = ideal[..., 0], ideal[..., 1]
    square = a * a + b * b
    radial = 1 + square * (k1 + square * (k2 + square * k3))
    rise = k1 + square * (2 * k2 + 3 * square * k3)
    places = np.stack(
        [
            a * radial + 2 * p1 * a * b + p2 * (square + 2 * a * a),
            b * radial + p1 * (square + 2 * b * b) + 2 * p2 * a * b,
        ],
        axis=-1,
    )
    mixed = 2 * a * b * rise + 2 * p1 * a + 2 * p2 * b
    rows = [
        np.stack([radial + 2 * a * a * rise + 2 * p1 * b + 6 * p2 * a, mixed], axis=-1),
        np.stack([mixed, radial + 2 * b * b * rise + 6 * p1 * b + 2 * p2 * a], axis=-1),
    ]
    return places, np.stack(rows, axis=-2)
