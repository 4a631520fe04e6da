"""The textured area, and the size of its speckles."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray
from scipy import ndimage

from dic.errors import PatternError
from dic.pattern.outline import Mask

#: Texture is judged over this many px: wider than a gap between speckles, narrower than a coupon.
TEXTURE_WINDOW_PX = 15
#: Grey that varies over more than this is light or a thing behind the coupon, not speckle, px (sigma).
FINE_PX = 3.0
#: The textured area's fine scatter must exceed the background's this many times to count as found.
LEAST_CONTRAST = 2.0
#: ... and the background's is not taken for less than the texture's over this: dust is no texture.
MOST_CONTRAST = 16.0
#: Neighbouring pixels of speckle that a lens shows resemble each other at least so much.
LEAST_ALIKE = 0.5

_NOTHING = "no textured area stands out in the reference picture"
_REMEDY = "spray a finer, stronger pattern, focus and light it better, or give gauge.region"


def textured_area(grey: NDArray[np.float32], region: Mask | None = None) -> Mask:
    """Return the largest connected area whose fine grey scatter is much larger than the background's.

    Where a region is given, the area that fills most of it, or all of it if none stands out.

    Raises
    ------
    PatternError
        If the picture is uniform, or if nothing stands out from the rest and no region is given.
    """
    scatter = _fine_scatter(grey)
    if not scatter.max() > 1e-3:
        raise PatternError("the reference picture has one grey value everywhere", remedy="check the camera")
    low, high = (float(value) for value in np.percentile(scatter, [0.5, 99.5]))
    low = max(low, high / MOST_CONTRAST)
    area = _largest(scatter > _threshold(scatter, low, high), region) if high > LEAST_CONTRAST * low else None
    if area is None or not _stands_out(scatter, area):
        # Either texture everywhere or nowhere.
        if region is None and not _is_speckle(grey):
            raise PatternError(_NOTHING, remedy=_REMEDY)
        if region is None:
            return np.ones(grey.shape, bool)
        elsewhere = _largest(scatter > _threshold(scatter, low, high), None)
        if area is None and elsewhere is not None and _stands_out(scatter, elsewhere):
            raise missed(elsewhere, "gauge.region")
        return region.copy()
    if region is None and not _is_speckle(grey, area):
        raise PatternError(_NOTHING, remedy=_REMEDY)
    return area


def missed(textured: Mask, where: str) -> PatternError:
    """Return the error that a region misses the textured area, and where that is."""
    y, x = np.nonzero(textured)
    return PatternError(
        "holds nothing of the coupon's textured area",
        where=where,
        remedy=f"move or enlarge it; the coupon lies in x {x.min()} to {x.max()}, y {y.min()} to {y.max()}",
    )


def _largest(textured: Mask, region: Mask | None) -> Mask | None:
    """Return the connected area that is largest (inside the region); None where there is none."""
    labels, _ = ndimage.label(_without_gaps(textured))
    sizes = np.bincount(labels[region] if region is not None else labels.ravel(), minlength=2)[1:]
    return np.asarray(labels == np.argmax(sizes) + 1) if sizes.any() else None


def _fine_scatter(grey: NDArray[np.float32]) -> NDArray[np.float32]:
    fine = grey - ndimage.gaussian_filter(grey, FINE_PX, mode="nearest")
    np.square(fine, out=fine)
    fine = ndimage.uniform_filter(fine, TEXTURE_WINDOW_PX)
    return np.asarray(np.sqrt(np.maximum(fine, 0.0, out=fine), out=fine))


def _threshold(scatter: NDArray[np.float32], low: float, high: float) -> float:
    """Return the scatter that best parts texture from background (Otsu, doi 10.1109/TSMC.1979.4310076)."""
    from skimage.filters import threshold_otsu

    stride = max(1, int(np.sqrt(scatter.size / 1e6)))
    few = np.clip(scatter[::stride, ::stride], low, high)
    return float(np.exp(threshold_otsu(np.log(few))))


def _stands_out(scatter: NDArray[np.float32], area: Mask) -> bool:
    """Tell a speckled area from a chance patch: beside a narrow strip all windows hold speckles, too."""
    if area.all():
        return False
    outside = float(np.percentile(scatter[~area], 20))
    return float(np.median(scatter[area])) > LEAST_CONTRAST * outside


def _without_gaps(textured: Mask) -> Mask:
    """Close gaps between speckles, and take back what a window half on the coupon adds."""
    half = TEXTURE_WINDOW_PX // 2
    # Outside the picture counts as plain, so that a narrow strip of background at the rim is no gap.
    rim = 2 * half
    plain = ndimage.binary_opening(~np.pad(textured, rim), iterations=half)
    plain = ndimage.binary_dilation(plain[rim:-rim, rim:-rim], iterations=half)
    # Bright patches of clutter hang on the coupon by a neck; coupons do not.
    return np.asarray(ndimage.binary_opening(np.pad(~plain, half, mode="edge"), iterations=half))[
        half:-half, half:-half
    ]


def _is_speckle(grey: NDArray[np.float32], area: Mask | None = None) -> bool:
    """Tell texture from plain noise: neighbouring pixels of a pattern resemble each other."""
    fine = grey - ndimage.gaussian_filter(grey, FINE_PX, mode="nearest")
    left, right = fine[:, :-1], fine[:, 1:]
    if area is not None:
        both = area[:, :-1] & area[:, 1:]
        left, right = left[both], right[both]
    # Taking off the mean over the neighbourhood lowers likeness: that of fine speckle by up to a half.
    alike = float((left * right).mean() / max(float((left * left).mean()), 1e-12))
    return alike > LEAST_ALIKE / 2


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
