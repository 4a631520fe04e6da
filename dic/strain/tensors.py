"""Strain measures from displacement gradients, turned into coupon axes.

A gradient has shape (..., 2, 2): [[∂u/∂x, ∂u/∂y], [∂v/∂x, ∂v/∂y]].
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]


def engineering(
    gradient: Floats, axial: Floats, transverse: Floats
) -> tuple[NDArray[np.float64], NDArray[np.float64], NDArray[np.float64]]:
    """Return what gauges glued along and across the coupon would read.

    Parameters
    ----------
    gradient
        Displacement gradient, shape (..., 2, 2).
    axial, transverse
        Unit vectors (x, y) of the coupon axes in the reference picture.

    Returns
    -------
    axial, transverse, shear
        Change of length per length of material lines along and across, and the change of the right
        angle between them (rad), shape (...).

    Notes
    -----
    Stretches of material lines, √(a·FᵀF·a) − 1, are free of rigid rotation whatever its size;
    ∂u/∂y alone is not.
    """
    (ax, ay), (tx, ty) = line(gradient, axial), line(gradient, transverse)
    length_a, length_t = np.hypot(ax, ay), np.hypot(tx, ty)
    angle = np.arcsin(np.clip((ax * tx + ay * ty) / (length_a * length_t), -1.0, 1.0))
    return length_a - 1.0, length_t - 1.0, angle


def line(gradient: Floats, direction: Floats) -> tuple[Floats, Floats]:
    """Return x and y of a material line of length 1 in some direction after the deformation."""
    x, y = direction
    return (
        x + gradient[..., 0, 0] * x + gradient[..., 0, 1] * y,
        y + gradient[..., 1, 0] * x + gradient[..., 1, 1] * y,
    )


#: Strain of a principal stretch λ in each measure.
MEASURES: dict[str, Callable[[Floats], Floats]] = {
    "engineering": lambda stretch: stretch - 1.0,
    "green_lagrange": lambda stretch: (stretch**2 - 1.0) / 2.0,
    "hencky": np.log,
}


def components(gradient: Floats, measure: str, axial: Floats, transverse: Floats) -> dict[str, Floats]:
    """Return all that a strain measure says of displacement gradients.

    Parameters
    ----------
    gradient
        Displacement gradient, shape (..., 2, 2).
    measure
        A key of `MEASURES`.
    axial, transverse
        Unit vectors (x, y) of the coupon axes in the reference picture.

    Returns
    -------
    dict
        Arrays of shape (...).  ``axial`` and ``transverse``, and ``shear``: for engineering strain the
        change of the right angle between the axes (rad), else twice the tensor's mixed component, which
        is the same for small strain.  ``principal_first`` ≥ ``principal_second``, and the first one's
        direction ``principal_angle_deg`` in the reference picture, from the vertical, clockwise as seen.
        ``maximum_shear``, the largest shear of all pairs of perpendicular directions.  ``rotation_deg``,
        clockwise as seen.

    Notes
    -----
    From the right stretch U of F = R·U, closed form in two dimensions.  Green–Lagrange: (U² − 1)/2;
    Hencky: ln U; engineering: U − 1 for principal values, and what glued gauges read along the axes
    (Malvern, *Introduction to the Mechanics of a Continuous Medium*, 1969, chapter 4 [from memory]).
    """
    (xx, xy), (yx, yy) = (line(gradient, direction) for direction in np.eye(2))  # F's columns
    first, mixed, second = xx**2 + xy**2, xx * yx + xy * yy, yx**2 + yy**2
    mean, radius = (first + second) / 2, np.hypot((first - second) / 2, mixed)
    stretches = np.sqrt(mean + radius), np.sqrt(np.maximum(mean - radius, 0.0))
    direction = np.arctan2(2 * mixed, first - second) / 2  # from x to y, which is clockwise as seen
    larger, smaller = (MEASURES[measure](stretch) for stretch in stretches)
    if measure == "engineering":
        along, across, shear = engineering(gradient, axial, transverse)
        maximum = np.arcsin(radius / mean)
    else:
        parts = [
            (direction_cosine(direction, one), direction_cosine(direction, other))
            for one, other in ((axial, axial), (transverse, transverse), (axial, transverse))
        ]
        along, across, half = (
            larger * one[0] * other[0] + smaller * one[1] * other[1] for one, other in parts
        )
        shear, maximum = 2 * half, larger - smaller
    return {
        "axial": along,
        "transverse": across,
        "shear": shear,
        "principal_first": larger,
        "principal_second": smaller,
        "principal_angle_deg": half_turn(np.rad2deg(direction) + 90.0),
        "maximum_shear": maximum,
        "rotation_deg": np.rad2deg(np.arctan2(xy - yx, xx + yy)),
    }


def direction_cosine(direction: Floats, axis: Floats) -> tuple[Floats, Floats]:
    """Return an axis' share along a principal direction (rad, from x to y) and along the other one."""
    c, s = np.cos(direction), np.sin(direction)
    return c * axis[0] + s * axis[1], c * axis[1] - s * axis[0]


def half_turn(angle_deg: Floats) -> Floats:
    """Return the angle of an undirected line between −90° and 90°."""
    return (angle_deg + 90.0) % 180.0 - 90.0
