"""Where the coupon is in the reference picture: textured area, edges, axis, width, parallel section."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy import ndimage

from dic.errors import PatternError, TestFileError
from dic.pattern.edges import Edges, Found, Profile, between, long_edges
from dic.pattern.given import NOTHING_GIVEN, Given
from dic.pattern.outline import Mask, outline_direction
from dic.pattern.texture import missed, speckle_size, textured_area

#: Pixels that straddle the edge show background too; so much is kept clear of it.
EDGE_MARGIN_PX = 2.0
#: Clarity of the outline's direction below which it is not taken for the pull's: sides 1.5 times the ends.
LEAST_CLARITY = 0.2

_GIVE_AXIS = 'give gauge.axis, for example "vertical"'


@dataclass(frozen=True)
class Coupon:
    """The coupon as seen in the reference picture.

    Attributes
    ----------
    mask
        True where it can be tracked: textured, off edges and holes, shape (rows, columns).
    axis_angle_deg
        Angle of the pull from the picture's vertical, deg, clockwise as seen.
    axis_method
        How the axis was found.
    width_px
        Distance between the two long edges in the parallel section, px; NaN where they are not both in view.
    speckle_px
        Mean size of the speckles, px.
    edges
        Left and right long edge; None where it is not in view.
    clarity
        How clearly the outline has one direction, see `dic.pattern.outline.outline_direction`.
    u_width_px, u_axis_deg
        Standard uncertainties of width and axis; NaN where they are not found from the edges.
    profile
        Both edges along the length.
    parallel
        From where to where the coupon is parallel, px along the axis from the picture's middle; infinite
        where it runs on to the picture's rim.
    holes
        True in holes and gaps between the edges, shape (rows, columns).
    """

    mask: Mask
    axis_angle_deg: float
    axis_method: str
    width_px: float
    speckle_px: float
    edges: Edges
    clarity: float
    u_width_px: float
    u_axis_deg: float
    profile: Profile
    parallel: tuple[float, float]
    holes: Mask


def find_coupon(
    image: NDArray[np.generic],
    axis_angle_deg: float | None = None,
    region: Mask | None = None,
    given: Given = NOTHING_GIVEN,
) -> Coupon:
    """Find the speckled coupon in the reference picture.

    Parameters
    ----------
    image
        Grey values, shape (rows, columns).
    axis_angle_deg
        The axis where it is given; None to find it from the coupon's long edges.
    region
        True where the coupon is known to be, shape (rows, columns); None if that is not known.
    given
        What else is said of it in place of being looked for.

    Returns
    -------
    Coupon
        Textured area inside the region, or inside the parallel section where none is given, axis and width.

    Raises
    ------
    PatternError
        If no textured area stands out and no region is given, if the region lies beside the coupon, or
        if the axis is not given and the coupon's edges do not tell it.
    """
    given.check(image.shape)
    grey = image.astype(np.float32)
    area = _area(grey, region, given)
    # A hole's rim has every direction, and is no edge of the coupon.
    whole = ndimage.binary_fill_holes(area)
    direction, clarity = outline_direction(whole)
    found, method = _edges(grey, whole, axis_angle_deg, given, direction, clarity)
    parallel = given.section(grey.shape, found.angle_deg) or found.parallel or (-np.inf, np.inf)
    section = between(
        area.shape, found.angle_deg, found.edges, EDGE_MARGIN_PX, parallel if region is None else None
    )
    area &= ~given.pierced(area.shape, EDGE_MARGIN_PX)
    holes = section & whole & ~area
    textured = area.copy()
    area &= section
    if region is not None:
        area &= region
    if not area.any():
        raise _nothing_left(textured, region)
    width, u_width = _width(found)
    return Coupon(
        mask=area,
        axis_angle_deg=found.angle_deg,
        axis_method=method,
        width_px=width,
        speckle_px=speckle_size(grey, area),
        edges=found.edges,
        clarity=1.0 if given.edges is not None else clarity,
        u_width_px=u_width,
        u_axis_deg=float("nan") if axis_angle_deg is not None else found.u_angle_deg(),
        profile=found.profile,
        parallel=parallel,
        holes=holes,
    )


def _area(grey: NDArray[np.float32], region: Mask | None, given: Given) -> Mask:
    """Return where the coupon is: as given, or where the picture is textured."""
    if given.mask is not None:
        return given.mask.copy()
    angle = given.axis_deg()
    if angle is None:
        return textured_area(grey, region)
    strip = between(grey.shape, angle, given.lines(grey.shape, angle), 0.0, None)
    if not strip.any():
        raise TestFileError(
            "nothing lies between the two edges",
            where="coupon.edges",
            remedy="give one edge on each side of the coupon",
        )
    try:
        return textured_area(grey, strip if region is None else strip & region) & strip
    except PatternError as error:
        if region is not None or error.where != "gauge.region":
            raise
        # The strip stands in for a region that nobody gave.
        raise PatternError(error.what, where="coupon.edges", remedy=error.remedy) from error


def _edges(
    grey: NDArray[np.float32],
    whole: Mask,
    axis_angle_deg: float | None,
    given: Given,
    direction: float,
    clarity: float,
) -> tuple[Found, str]:
    """Return the edges and how the axis was had."""
    said = given.axis_deg()
    if said is not None:
        angle = said if axis_angle_deg is None else axis_angle_deg
        lines = Found(angle, given.lines(grey.shape, angle), Profile.nowhere())
        return lines.upright(), "from the edges given" if axis_angle_deg is None else "given"
    if axis_angle_deg is not None:
        return long_edges(grey, whole, float(axis_angle_deg), turn=False).upright(), "given"
    found = _found_axis(grey, whole, direction, clarity)
    return found.upright(), f"from {sum(edge is not None for edge in found.edges)} edges"


def _nothing_left(textured: Mask, region: Mask | None) -> PatternError:
    """Say where the coupon is, when nothing of it is left."""
    if textured.any():
        return missed(textured, "coupon" if region is None else "gauge.region")
    return PatternError(
        "mask and holes leave nothing of the coupon",
        where="coupon.mask and coupon.holes",
        remedy="make the mask larger or the holes smaller",
    )


def _found_axis(grey: NDArray[np.float32], whole: Mask, direction: float, clarity: float) -> Found:
    """Turn the outline's direction into that of the coupon's straight edges, or refuse to guess."""
    if clarity < LEAST_CLARITY:
        raise PatternError(
            "the direction of the pull cannot be told, because "
            + ("no side is longer than the others" if clarity else "no edge of the coupon is in view"),
            where="gauge.axis",
            remedy=_GIVE_AXIS,
        )
    found = long_edges(grey, whole, direction, turn=True)
    if found.edges == (None, None) or not np.isfinite(found.angle_deg):
        raise PatternError(
            "the direction of the pull cannot be told, because the coupon's long edges are not straight "
            "and clear before their background",
            where="gauge.axis",
            remedy=_GIVE_AXIS,
        )
    return found


def _width(found: Found) -> tuple[float, float]:
    """Return the distance between the edges at the middle of their straight part, and its uncertainty, px."""
    left, right = found.edges
    if left is None or right is None:
        return float("nan"), float("nan")
    middle = (left.along + right.along) / 2
    wide = right.at(middle) - left.at(middle)
    turned = float(np.cos(np.arctan((left.slope + right.slope) / 2)))
    # One blur moves both edges inwards alike.
    blur = 2 * found.blur_shift * (found.u_blur if np.isfinite(found.u_blur) else 0.0)
    return wide * turned, float(np.sqrt(left.u_offset**2 + right.u_offset**2 + blur**2))
