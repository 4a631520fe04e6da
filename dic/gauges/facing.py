"""The part of a round bar that faces the camera."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from dic.errors import Notice
from dic.pattern import Coupon, axes, centre

#: Share of the radius to either side of the axis that counts as facing: there the surface is turned away by
#: asin(0.5) = 30° at the most, and its pattern appears no narrower than cos 30° = 87 %.
FACING_SHARE = 0.5


def facing(coupon: Coupon, shape: str, automatic: bool) -> tuple[NDArray[np.bool_], tuple[Notice, ...]]:
    """Return the part of the textured area in which subsets may lie.

    On a round bar of radius R the surface at a distance t from the axis is turned away from the camera by
    asin(t/R).  Towards the edges the pattern is squeezed, the surface comes nearer to the camera or goes
    away as the bar contracts, and light glances; only the band |t| ≤ R/2 is used.

    Parameters
    ----------
    coupon
        As found.
    shape
        ``"flat"`` or ``"round"``.
    automatic
        Whether the gauge region is left to the program; one that is given stays as it is.

    Returns
    -------
    mask
        Shape (rows, columns).
    notices
        That a round bar's edges are not both in view, so that the band is not known.
    """
    left, right = coupon.edges
    if shape != "round" or not automatic:
        return coupon.mask, ()
    if left is None or right is None:
        return coupon.mask, (
            Notice(
                "round_bar_edges",
                "The bar's edges are not both in view, so its middle, which faces the camera, is not known; "
                "give gauge.region, half the diameter wide.",
            ),
        )
    axial, transverse = axes(coupon.axis_angle_deg)
    rows, columns = coupon.mask.shape
    middle = centre(coupon.mask.shape)
    y, x = np.arange(rows)[:, None] - middle[1], np.arange(columns) - middle[0]
    along = x * axial[0] + y * axial[1]
    across = x * transverse[0] + y * transverse[1]
    offsets = [edge.at(along) for edge in (left, right)]
    away = np.abs(across - (offsets[0] + offsets[1]) / 2)
    return coupon.mask & (away <= FACING_SHARE * (offsets[1] - offsets[0]) / 2), ()
