"""Where the coupon is in the reference picture: textured area, long edges, axis, width."""

from __future__ import annotations

import itertools
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy import ndimage
from skimage import filters, measure, morphology

from dic.errors import PatternError

Mask = NDArray[np.bool_]

#: Texture is judged over this many px: wider than a gap between speckles, narrower than a coupon.
TEXTURE_WINDOW_PX = 15
#: The textured area's grey scatter must exceed the background's this many times to count as found.
LEAST_CONTRAST = 3.0
#: Stretches of an edge that are located one by one and then joined by a straight line.
STRETCHES = 24
#: Pixels that straddle the edge show background too; so much is kept clear of it.
EDGE_MARGIN_PX = 2.0


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
    """

    mask: Mask
    axis_angle_deg: float
    axis_method: str
    width_px: float
    speckle_px: float


def find_coupon(image: NDArray[np.generic], axis_angle_deg: float | None = None) -> Coupon:
    """Find the speckled coupon in the reference picture.

    Parameters
    ----------
    image
        Grey values, shape (rows, columns).
    axis_angle_deg
        The axis where it is given; None to find it from the coupon's long edges.

    Returns
    -------
    Coupon
        Textured area, axis and width.

    Raises
    ------
    PatternError
        If no textured area stands out.
    """
    grey = image.astype(np.float32)
    mask = textured_area(grey)
    given = axis_angle_deg is not None
    angle = float(axis_angle_deg) if axis_angle_deg is not None else _long_direction(mask)
    edges = [_edge_line(grey, mask, angle, side) for side in (-1, 1)]
    sound = [edge for edge in edges if edge is not None]
    if sound and not given:
        angle += float(np.degrees(np.arctan(np.mean([slope for _, slope in sound]))))
    width = float("nan")
    if len(sound) == 2:
        (left, tilt_left), (right, tilt_right) = sound
        width = (right - left) * float(np.cos(np.arctan((tilt_left + tilt_right) / 2)))
        mask &= _between(mask.shape, angle, left + EDGE_MARGIN_PX, right - EDGE_MARGIN_PX)
    method = "given" if given else f"from {len(sound)} edges" if sound else "from the textured area's shape"
    return Coupon(mask, (angle + 90.0) % 180.0 - 90.0, method, width, speckle_size(grey, mask))


def textured_area(grey: NDArray[np.float32]) -> Mask:
    """Return the largest connected area whose grey scatters much more than the background.

    Raises
    ------
    PatternError
        If the picture is uniform, or if nothing stands out from the rest.
    """
    mean = ndimage.uniform_filter(grey, TEXTURE_WINDOW_PX)
    square = ndimage.uniform_filter(grey * grey, TEXTURE_WINDOW_PX)
    scatter = np.sqrt(np.maximum(square - mean * mean, 0.0))
    if not scatter.max() > 0:
        raise PatternError("the reference picture has one grey value everywhere", remedy="check the camera")
    # On a log scale speckle and background are two humps of like width, which Otsu's threshold needs.
    level = np.log(scatter + 1e-3 * scatter.max())
    textured = level > filters.threshold_otsu(level)
    inner, outer = np.median(scatter[textured]), np.median(scatter[~textured])
    if inner < LEAST_CONTRAST * outer:
        # Either texture everywhere or nowhere: the whole picture counts if it has strong edges of its own.
        if not _is_speckle(grey):
            raise PatternError(
                "no textured area stands out in the reference picture",
                remedy="spray a finer, stronger pattern, light it better, or give gauge.region",
            )
        return np.ones(grey.shape, bool)
    # A window half on the coupon already looks textured: take back that half window.
    textured = ndimage.binary_closing(textured, iterations=TEXTURE_WINDOW_PX // 2)
    textured = ndimage.binary_erosion(textured, iterations=TEXTURE_WINDOW_PX // 2, border_value=1)
    textured = morphology.remove_small_holes(textured, max_size=TEXTURE_WINDOW_PX**2)
    labels = measure.label(textured)
    if labels.max() == 0:
        raise PatternError("no textured area found in the reference picture", remedy="give gauge.region")
    largest = int(np.argmax(np.bincount(labels.ravel())[1:])) + 1
    return np.asarray(labels == largest)


def _is_speckle(grey: NDArray[np.float32]) -> bool:
    """Tell texture from plain noise: neighbouring pixels of a pattern resemble each other."""
    centred = grey - grey.mean()
    alike = (centred[:, 1:] * centred[:, :-1]).mean() / (centred**2).mean()
    return bool(alike > 0.5)


def _long_direction(mask: Mask) -> float:
    """Return the direction of the textured area's longer side, deg from vertical, clockwise."""
    shape = measure.regionprops(mask.astype(np.uint8))[0]
    # scikit-image counts the angle from the row axis, counter-clockwise as seen.
    return float(-np.degrees(shape.orientation))


def axes(angle_deg: float) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Return unit vectors (x, y) along the pull and across it for an axis angle.

    At 0° the axial vector points up the picture (0, −1) and the transverse one to the right (1, 0).
    """
    a = np.radians(angle_deg)
    return np.array([np.sin(a), -np.cos(a)]), np.array([np.cos(a), np.sin(a)])


def _edge_line(
    grey: NDArray[np.float32], mask: Mask, angle_deg: float, side: int
) -> tuple[float, float] | None:
    """Locate one long edge as a line in coupon axes: offset across (px) and slope, or None.

    Along lines parallel to the axis the grey scatters on the coupon and does not beside it; the edge
    is where that scatter passes half of the coupon's, found for each stretch of the length.
    """
    axial, transverse = axes(angle_deg)
    rows, columns = np.nonzero(mask)
    centre = np.array([grey.shape[1] - 1, grey.shape[0] - 1]) / 2.0
    along = (columns - centre[0]) * axial[0] + (rows - centre[1]) * axial[1]
    across = (columns - centre[0]) * transverse[0] + (rows - centre[1]) * transverse[1]
    reach = 2 * TEXTURE_WINDOW_PX
    near = side * np.percentile(side * across, 98)
    t = np.arange(near - reach, near + reach + 1, 0.5)
    positions, offsets = [], []
    ends = np.linspace(np.percentile(along, 2), np.percentile(along, 98), STRETCHES + 1)
    for first, last in itertools.pairwise(ends):
        s = np.arange(first, last)
        x = centre[0] + s[:, None] * axial[0] + t[None, :] * transverse[0]
        y = centre[1] + s[:, None] * axial[1] + t[None, :] * transverse[1]
        if x.min() < 0 or y.min() < 0 or x.max() > grey.shape[1] - 1 or y.max() > grey.shape[0] - 1:
            continue
        strip = ndimage.map_coordinates(grey, [y, x], order=1)
        where = _half_crossing(strip.std(axis=0)[:: -side or 1], t[:: -side or 1])
        if where is not None:
            positions.append((first + last) / 2)
            offsets.append(where)
    if len(positions) < STRETCHES // 4:
        return None
    return _robust_line(np.array(positions), np.array(offsets))


def _between(shape: tuple[int, ...], angle_deg: float, left: float, right: float) -> Mask:
    """Mark the pixels whose coordinate across the coupon lies between two offsets from the middle."""
    _, transverse = axes(angle_deg)
    rows, columns = np.ogrid[: shape[0], : shape[1]]
    across = (columns - (shape[1] - 1) / 2) * transverse[0] + (rows - (shape[0] - 1) / 2) * transverse[1]
    return np.asarray((across >= left) & (across <= right))


def _half_crossing(scatter: NDArray[np.float64], t: NDArray[np.float64]) -> float | None:
    """Return where the scatter, coming from outside, first passes half of its inner level."""
    inner = np.median(scatter[-len(scatter) // 3 :])
    outer = np.min(scatter[: len(scatter) // 3])
    if inner < LEAST_CONTRAST * outer:
        return None
    level = (inner + outer) / 2
    first = int(np.argmax(scatter > level))
    if first == 0:
        return None
    share = (level - scatter[first - 1]) / (scatter[first] - scatter[first - 1])
    return float(t[first - 1] + share * (t[first] - t[first - 1]))


def _robust_line(position: NDArray[np.float64], offset: NDArray[np.float64]) -> tuple[float, float]:
    """Return offset at the middle and slope by Theil–Sen, which a few bad stretches do not move."""
    from scipy.stats import theilslopes

    fit = theilslopes(offset, position)
    return float(fit.intercept), float(fit.slope)


def speckle_size(grey: NDArray[np.float32], mask: Mask) -> float:
    """Return the mean speckle size, px: width at half height of the autocorrelation's peak.

    Common practice, no published source.
    """
    rows, columns = np.nonzero(mask)
    top, left = int(np.median(rows)), int(np.median(columns))
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
