"""Scale: from what the test file gives, from two marks, from a board, or from the coupon's width."""

from __future__ import annotations

from dataclasses import dataclass
from itertools import combinations
from math import hypot, isfinite, nan, sqrt

import numpy as np
from numpy.typing import NDArray

from dic.errors import Notice, TestFileError
from dic.optics.lens import Lens
from dic.pattern import Coupon, axes
from dic.testfile import Camera, Marks, Specimen

Floats = NDArray[np.float64]

#: Relative standard uncertainty where none is given.  Common practice, no published source.
SUPPOSED = 0.005
#: A mark is read to this, px.
U_MARK_PX = 0.5
#: Standard uncertainties by which two scales may differ.
SIGMAS = 3.0


@dataclass(frozen=True)
class Scale:
    """Size of a pixel on the coupon.

    Attributes
    ----------
    mm
        mm per px, NaN where unknown.
    u_relative
        Its relative standard uncertainty.
    source
        The key, or the coupon's width, that it comes from.
    """

    mm: float = nan
    u_relative: float = nan
    source: str = "not known"


def settle_scale(
    camera: Camera,
    specimen: Specimen,
    coupon: Coupon,
    shape: tuple[int, ...],
    lens: Lens | None = None,
    board_mm: float = nan,
) -> tuple[Scale, tuple[Notice, ...]]:
    """Return the scale, the best known first, and whether another one contradicts it.

    Parameters
    ----------
    camera, specimen
        As the test file says.
    coupon
        As found in the picture.
    shape
        Rows and columns of the picture.
    lens
        Settled in the gauge's middle; None where the picture's coordinates are straight.
    board_mm
        Scale that a board in the coupon's plane gives, mm per px.

    Raises
    ------
    TestFileError
        If two scales of the test file contradict each other, or a mark is not in the picture.
    """
    given = []
    if camera.scale is not None:
        given.append(Scale(camera.scale, camera.scale_uncertainty or SUPPOSED, "camera.scale"))
    if camera.marks is not None:
        given.append(_from_marks(camera.marks, shape, lens))
    if isfinite(board_mm):
        given.append(Scale(board_mm, SUPPOSED, "camera.board.plane"))
    for one, other in combinations(given, 2):
        if contradict(one, other):
            raise TestFileError(
                f"{one.source} gives {one.mm:.5g} mm/px, {other.source} {other.mm:.5g} mm/px",
                where=one.source,
                remedy="correct one of them or leave it out",
            )
    wide = _from_width(specimen, coupon, shape, lens)
    best = min(given, key=lambda one: one.u_relative) if given else wide
    notices = []
    if given and isfinite(wide.mm) and contradict(best, wide):
        notices.append(
            Notice(
                "scale_contradicts_width",
                f"{best.source} gives {best.mm:.5g} mm/px, but the coupon's width of "
                f"{specimen.visible_width:g} mm measures {coupon.width_px:.1f} px in the picture, which is "
                f"{wide.mm:.5g} mm/px; strains do not depend on it, lengths in mm do.",
            )
        )
    return best, tuple(notices)


def contradict(one: Scale, other: Scale) -> bool:
    """Tell whether two scales differ by more than their uncertainties explain."""
    return abs(one.mm / other.mm - 1.0) > SIGMAS * hypot(one.u_relative, other.u_relative)


def _from_marks(marks: Marks, shape: tuple[int, ...], lens: Lens | None) -> Scale:
    for key, (x, y) in (("from", marks.start), ("to", marks.end)):
        if not (0 <= x <= shape[1] - 1 and 0 <= y <= shape[0] - 1):
            raise TestFileError(
                f"the mark x {x:g}, y {y:g} px is not in the picture",
                where=f"camera.marks.{key}",
                remedy=f"the picture is {shape[1]} px wide and {shape[0]} px high",
            )
    ends = np.array([marks.start, marks.end])
    if lens is not None:
        ends = lens.straight(*ends.T)[0]
    length = float(np.linalg.norm(ends[1] - ends[0]))
    if not length > 10 * U_MARK_PX:
        raise TestFileError(
            f"the marks lie only {length:.1f} px apart", where="camera.marks", remedy="take two farther apart"
        )
    u_distance = marks.uncertainty / marks.distance if marks.uncertainty else 0.0
    u = hypot(sqrt(2.0) * U_MARK_PX / length, u_distance)
    return Scale(marks.distance / length, u, "camera.marks")


def _from_width(specimen: Specimen, coupon: Coupon, shape: tuple[int, ...], lens: Lens | None) -> Scale:
    """Return the scale from the coupon's width, which is measured in the picture as it is."""
    width = coupon.width_px
    if not isfinite(width):
        return Scale()
    if lens is not None:
        y, x = np.nonzero(coupon.mask)
        middle = np.array([x.mean(), y.mean()])
        across = axes(coupon.axis_angle_deg)[1] * width / 2
        rims = np.clip([middle - across, middle + across], 0, np.array(shape[1::-1]) - 1)
        seen = np.linalg.norm(rims[1] - rims[0])
        width *= float(np.linalg.norm(np.diff(lens.straight(*rims.T)[0], axis=0)) / seen)
    own = specimen.width_uncertainty or specimen.diameter_uncertainty
    u = hypot(own / specimen.visible_width if own else SUPPOSED, np.nan_to_num(coupon.u_width_px) / width)
    return Scale(specimen.visible_width / width, float(u), "the coupon's width")
