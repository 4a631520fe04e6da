"""How well the picture can be tracked: figures and warnings."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from dic.errors import Notice
from dic.pattern.coupon import Coupon

#: Share of clipped pixels from which the pattern is harmed.  Common practice, no published source.
MOST_SATURATED = 0.01
#: Speckles each way that a subset should hold (iDICs Good Practices Guide, doi 10.32720/idics/gpg.ed1).
LEAST_SPECKLES = 3.0


def picture_quality(
    image: NDArray[np.floating | np.integer], coupon: Coupon, full_scale: float
) -> dict[str, float]:
    """Return figures of the textured area: speckle size, grey range, share of clipped pixels."""
    grey = image[coupon.mask].astype(float)
    low, high = np.percentile(grey, [5, 95])
    return {
        "speckle_px": coupon.speckle_px,
        "grey_range_percent": float(100 * (high - low) / full_scale),
        "saturated_fraction": float(np.mean(grey >= full_scale)),
    }


#: Below this clarity of the outline its sides are less than three times its ends, and which is which may
#: be mistaken.
CLEAR_OUTLINE = 0.5
#: Long edges that differ by more than this are no two sides of a straight strip, deg.
MOST_TAPER_DEG = 0.5
#: From these standard uncertainties on, width and axis are said to be unsure: 0.5 % of a length; 0.5° turns
#: strain by (1+ν)·sin² = 1e-4 of itself.
MOST_U_WIDTH, MOST_U_AXIS_DEG = 0.005, 0.5


def axis_doubts(coupon: Coupon) -> list[Notice]:
    """Return a warning for each way in which axis or width may be wrong without anybody noticing."""
    found, given = [], coupon.axis_method == "given"
    left, right = coupon.edges
    if left is None or right is None:
        seen = sum(edge is not None for edge in coupon.edges)
        found.append(
            Notice(
                "edges_not_seen",
                f"{seen} of the coupon's two long edges {'was' if seen == 1 else 'were'} found, so the scale "
                "in mm per px is unknown unless camera.scale gives it"
                + ("." if given else ", and the direction of the pull is less sure; gauge.axis can give it."),
            )
        )
    elif (taper := abs(np.degrees(np.arctan(left.slope) - np.arctan(right.slope)))) > MOST_TAPER_DEG:
        found.append(
            Notice(
                "edges_not_parallel",
                f"The coupon's long edges differ in direction by {taper:.1f}°; if it is no straight "
                "strip, give gauge.axis, and camera.scale where lengths matter.",
            )
        )
    if (share := coupon.u_width_px / coupon.width_px) > MOST_U_WIDTH:
        found.append(
            Notice(
                "width_unsure",
                f"The coupon's width in the picture is known to {100 * share:.1f} % only "
                "(standard uncertainty), so lengths and the scale in mm per px are no better; focus on "
                "the coupon's edges, or give camera.scale.",
            )
        )
    if not given and coupon.u_axis_deg > MOST_U_AXIS_DEG:
        found.append(
            Notice(
                "axis_unsure",
                f"The direction of the pull is known to {coupon.u_axis_deg:.1f}° only (standard "
                "uncertainty), because the edges in view are short or unclear; give gauge.axis if it is "
                "known better.",
            )
        )
    if not given and coupon.clarity < CLEAR_OUTLINE:
        found.append(
            Notice(
                "axis_ambiguous",
                "The textured area ends inside the picture and is not much longer than wide; its longer "
                f"sides, at {coupon.axis_angle_deg:.1f}° from the vertical, were taken for the coupon's "
                "edges; if that is wrong, give gauge.axis.",
            )
        )
    return found


def doubts(quality: dict[str, float], subset: int) -> list[Notice]:
    """Return a warning, with its remedy, for each figure outside common practice."""
    found = []
    speckle = quality["speckle_px"]
    if speckle < 2.5:
        found.append(
            Notice(
                "small_speckles",
                f"The speckles are about {speckle:.1f} px, too small for the camera to show without bias; "
                "spray coarser ones or move closer (3 to 5 px is good).",
            )
        )
    if subset < LEAST_SPECKLES * speckle:
        better = 2 * int(np.ceil(LEAST_SPECKLES * speckle / 2)) + 1
        found.append(
            Notice(
                "small_subset",
                f"A subset of {subset} px holds fewer than three speckles of {speckle:.1f} px; "
                f"set correlation.subset to {better} or more.",
            )
        )
    if quality["saturated_fraction"] > MOST_SATURATED:
        found.append(
            Notice(
                "saturated",
                f"{quality['saturated_fraction']:.0%} of the coupon's pixels are clipped; "
                "dim the light or shorten the exposure.",
            )
        )
    if quality["grey_range_percent"] < 15:
        found.append(
            Notice(
                "low_contrast",
                f"The pattern uses {quality['grey_range_percent']:.0f} % of the camera's grey range; "
                "more light or a stronger pattern lowers the noise in strain.",
            )
        )
    return found
