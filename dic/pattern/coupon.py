"""Where the coupon is in the reference picture: textured area, axis, width."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy import ndimage

from dic.errors import PatternError
from dic.pattern.edges import Edges, Mask, between, long_edges, outline_direction

#: Texture is judged over this many px: wider than a gap between speckles, narrower than a coupon.
TEXTURE_WINDOW_PX = 15
#: The textured area's grey scatter must exceed the background's this many times to count as found.
LEAST_CONTRAST = 3.0
#: ... and the background's is not taken for less than the texture's over this: dust is no texture.
MOST_CONTRAST = 16.0
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
        True on the textured area, shape (rows, columns).
    axis_angle_deg
        Angle of the pull from the picture's vertical, deg, clockwise as seen.
    axis_method
        How the axis was found.
    width_px
        Distance between the two long edges, px; NaN where they are not both in view.
    speckle_px
        Mean size of the speckles, px.
    edges
        Left and right long edge; None where it is not in view.
    clarity
        How clearly the outline has one direction, see `dic.pattern.edges.outline_direction`.
    """

    mask: Mask
    axis_angle_deg: float
    axis_method: str
    width_px: float
    speckle_px: float
    edges: Edges
    clarity: float


def find_coupon(
    image: NDArray[np.generic], axis_angle_deg: float | None = None, region: Mask | None = None
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

    Returns
    -------
    Coupon
        Textured area inside the region, axis and width.

    Raises
    ------
    PatternError
        If no textured area stands out and no region is given, if the region lies beside the coupon, or
        if the axis is not given and the coupon's edges do not tell it.
    """
    grey = image.astype(np.float32)
    area = textured_area(grey, region)
    # A hole's rim has every direction, and is no edge of the coupon.
    whole = ndimage.binary_fill_holes(area)
    direction, clarity = outline_direction(whole)
    if axis_angle_deg is None:
        angle, edges = _found_axis(grey, whole, direction, clarity)
        method = f"from {sum(edge is not None for edge in edges)} edges"
    else:
        angle, edges = long_edges(grey, whole, float(axis_angle_deg), turn=False)
        method = "given"
    area &= between(area.shape, angle, edges, EDGE_MARGIN_PX)
    if region is not None:
        area &= region
    if not area.any():
        raise PatternError(
            "holds nothing of the coupon's textured area", where="gauge.region", remedy="move or enlarge it"
        )
    return Coupon(
        mask=area,
        axis_angle_deg=(angle + 90.0) % 180.0 - 90.0,
        axis_method=method,
        width_px=_width(edges),
        speckle_px=speckle_size(grey, area),
        edges=edges,
        clarity=clarity,
    )


def _found_axis(
    grey: NDArray[np.float32], whole: Mask, direction: float, clarity: float
) -> tuple[float, Edges]:
    """Turn the outline's direction into that of the coupon's straight edges, or refuse to guess."""
    if clarity < LEAST_CLARITY:
        raise PatternError(
            "the direction of the pull cannot be told, because "
            + ("no side is longer than the others" if clarity else "no edge of the coupon is in view"),
            where="gauge.axis",
            remedy=_GIVE_AXIS,
        )
    angle, edges = long_edges(grey, whole, direction, turn=True)
    if edges == (None, None) or not np.isfinite(angle):
        raise PatternError(
            "the direction of the pull cannot be told, because the coupon's long edges are not straight "
            "and clear before their background",
            where="gauge.axis",
            remedy=_GIVE_AXIS,
        )
    return angle, edges


def _width(edges: Edges) -> float:
    """Return the distance between the edges at the middle of what is seen of them, px."""
    left, right = edges
    if left is None or right is None:
        return float("nan")
    middle = (left.along + right.along) / 2
    wide = (right.offset + right.slope * middle) - (left.offset + left.slope * middle)
    return wide * float(np.cos(np.arctan((left.slope + right.slope) / 2)))


def textured_area(grey: NDArray[np.float32], region: Mask | None = None) -> Mask:
    """Return the largest connected area whose grey scatters much more than the background.

    Where a region is given, the area that fills most of it, or all of it if none stands out.

    Raises
    ------
    PatternError
        If the picture is uniform, or if nothing stands out from the rest and no region is given.
    """
    scatter = ndimage.uniform_filter(grey * grey, TEXTURE_WINDOW_PX)
    scatter -= ndimage.uniform_filter(grey, TEXTURE_WINDOW_PX) ** 2
    np.sqrt(np.maximum(scatter, 0.0, out=scatter), out=scatter)
    if not scatter.max() > 0:
        raise PatternError("the reference picture has one grey value everywhere", remedy="check the camera")
    low, high = np.percentile(scatter, [0.5, 99.5])
    low = max(low, high / MOST_CONTRAST)
    if high < LEAST_CONTRAST * low:
        # Either texture everywhere or nowhere.
        if region is None and not _is_speckle(grey):
            raise PatternError(
                "no textured area stands out in the reference picture",
                remedy="spray a finer, stronger pattern, light it better, or give gauge.region",
            )
        return np.ones(grey.shape, bool)
    labels, _ = ndimage.label(_without_gaps(scatter > np.sqrt(low * high)))
    sizes = np.bincount(labels[region] if region is not None else labels.ravel(), minlength=2)[1:]
    if not sizes.any():
        if region is not None:
            return region.copy()
        raise PatternError("no textured area found in the reference picture", remedy="give gauge.region")
    return np.asarray(labels == np.argmax(sizes) + 1)


def _without_gaps(textured: Mask) -> Mask:
    """Close gaps between speckles, and take back what a window half on the coupon adds."""
    half = TEXTURE_WINDOW_PX // 2
    # Outside the picture counts as plain, so that a narrow strip of background at the rim is no gap.
    rim = 2 * half
    plain = ndimage.binary_opening(~np.pad(textured, rim), iterations=half)
    plain = ndimage.binary_dilation(plain[rim:-rim, rim:-rim], iterations=half)
    return np.asarray(~plain)


def _is_speckle(grey: NDArray[np.float32]) -> bool:
    """Tell texture from plain noise: neighbouring pixels of a pattern resemble each other."""
    centred = grey - grey.mean()
    alike = (centred[:, 1:] * centred[:, :-1]).mean() / (centred**2).mean()
    return bool(alike > 0.5)


def speckle_size(grey: NDArray[np.float32], mask: Mask) -> float:
    """Return the mean speckle size, px: width at half height of the autocorrelation's peak.

    Common practice, no published source.
    """
    top, left = (int(np.searchsorted(np.cumsum(n := mask.sum(axis)), n.sum() / 2)) for axis in (1, 0))
    half = 64
    patch = grey[max(top - half, 0) : top + half, max(left - half, 0) : left + half]
    spectrum = np.abs(np.fft.rfft2(patch - patch.mean(), s=(4 * half, 4 * half))) ** 2
    peak = np.fft.irfft2(spectrum)
    widths = []
    for line in (peak[0, : 2 * half], peak[: 2 * half, 0]):
        below = int(np.argmax(line < line[0] / 2))
        if below == 0:
            continue
        share = (line[below - 1] - line[0] / 2) / (line[below - 1] - line[below])
        widths.append(2 * (below - 1 + share))
    return float(np.mean(widths)) if widths else float("nan")
