"""The rough outline of a mask in coupon axes: where its left and right side are, to a few px."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray
from scipy import ndimage

Floats = NDArray[np.float64]
Mask = NDArray[np.bool_]

#: The mask's outline is smoothed by this sigma before its directions are summed up, px.
OUTLINE_SIGMA_PX = 4.0
#: Pitch of the rough outline along the axis, px.
ROUGH_PX = 4.0


def axes(angle_deg: float) -> tuple[Floats, Floats]:
    """Return unit vectors (x, y) along the pull and across it for an axis angle.

    At 0° the axial vector points up the picture (0, −1) and the transverse one to the right (1, 0).
    """
    a = np.radians(angle_deg)
    axial = np.array([np.sin(a), -np.cos(a)])
    return axial, perpendicular(axial)


def perpendicular(direction: Floats) -> Floats:
    """Return the direction across another one, on that side of it on which `axes` has the transverse one."""
    return np.array([-direction[1], direction[0]])


def centre(shape: tuple[int, ...]) -> Floats:
    """Return the picture's middle (x, y), from which coupon axes count."""
    return np.array([shape[1] - 1, shape[0] - 1]) / 2.0


def outline_direction(mask: Mask) -> tuple[float, float]:
    """Return the direction that most of a mask's outline inside the picture has, and how clearly.

    Returns
    -------
    angle_deg
        Deg from the picture's vertical, clockwise as seen.
    clarity
        (sides − ends)/(sides + ends) by length: 1 for two sides that run out of the picture at both
        ends, 0.5 for an outline three times longer than wide; 0 where there is no outline.
    """
    soft = ndimage.gaussian_filter(mask.astype(np.float32), OUTLINE_SIGMA_PX, mode="nearest")
    down, right = ndimage.sobel(soft, 0, mode="nearest"), ndimage.sobel(soft, 1, mode="nearest")
    squares = [float(np.vdot(one, other)) for one, other in ((right, right), (down, down), (right, down))]
    total, difference, product = squares[0] + squares[1], squares[0] - squares[1], 2 * squares[2]
    clarity = np.hypot(difference, product) / total if total > 0 else 0.0
    return float(np.degrees(np.arctan2(product, difference)) / 2), float(clarity)


def rough_sides(mask: Mask, angle_deg: float) -> tuple[Floats, Floats]:
    """Return points on the mask's left and right side, shapes (n, 2), columns x and y, px.

    A side that runs out of the picture gives none.
    """
    axial, transverse = axes(angle_deg)
    middle = centre(mask.shape)
    reach = float(np.hypot(*mask.shape)) / 2
    across = np.arange(-reach, reach + 1)
    sides: tuple[list[Floats], list[Floats]] = [], []
    for along in np.arange(-reach, reach, ROUGH_PX):
        at = middle + along * axial + across[:, None] * transverse
        column, row = np.rint(at).astype(int).T
        seen = (column >= 0) & (row >= 0) & (column < mask.shape[1]) & (row < mask.shape[0])
        if not seen.any():
            continue
        inside = np.flatnonzero(seen)
        on = mask[row[seen], column[seen]]
        change = np.flatnonzero(np.diff(np.concatenate([[0], on.astype(np.int8), [0]])))
        if not len(change):
            continue
        starts, ends = change[::2], change[1::2] - 1
        longest = int(np.argmax(ends - starts))
        if starts[longest] > 0:
            sides[0].append(at[inside[starts[longest]]] - 0.5 * transverse)
        if ends[longest] < len(on) - 1:
            sides[1].append(at[inside[ends[longest]]] + 0.5 * transverse)
    left, right = (np.array(side).reshape(-1, 2) for side in sides)
    return left, right
