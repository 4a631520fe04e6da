"""The found coupon as lines over the photograph."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy import ndimage

from dic.pattern.coupon import Coupon
from dic.pattern.outline import Floats, Mask, axes, centre

#: Smaller gaps in the texture are not drawn as holes, px² of area.
LEAST_HOLE_PX2 = 50


@dataclass(frozen=True)
class Sketch:
    """Lines in the reference picture, each of shape (n, 2), columns x and y, px.

    Attributes
    ----------
    edges
        The long edges as far as they were seen.
    ends
        The ends of the parallel section that lie in the picture.
    holes
        Outlines of holes and gaps.
    """

    edges: tuple[Floats, ...]
    ends: tuple[Floats, ...]
    holes: tuple[Floats, ...]


def sketch(coupon: Coupon) -> Sketch:
    """Turn what was found of the coupon into lines in the picture."""
    shape = coupon.mask.shape
    axial, transverse = axes(coupon.axis_angle_deg)

    def place(along: Floats, across: Floats) -> Floats:
        return np.asarray(centre(shape) + along[:, None] * axial + across[:, None] * transverse)

    reach = float(np.hypot(*shape)) / 2
    profile = coupon.profile
    edges, ends = [], []
    for side, edge in zip((profile.left, profile.right), coupon.edges, strict=True):
        seen = np.isfinite(side)
        if seen.sum() > 1:
            edges.append(place(profile.along[seen], side[seen]))
        elif edge is not None:
            along = np.array([-reach, reach])
            edges.append(place(along, edge.at(along)))
    left, right = coupon.edges
    for end in coupon.parallel:
        if np.isfinite(end):
            across = [edge.at(end) if edge else sign * reach for edge, sign in ((left, -1), (right, 1))]
            ends.append(place(np.array([end, end]), np.array(across)))
    return Sketch(tuple(edges), tuple(ends), tuple(_outlines(coupon.holes)))


def _outlines(holes: Mask) -> list[Floats]:
    """Return the outlines of holes that are large enough to be seen."""
    from skimage.measure import find_contours

    labels, count = ndimage.label(holes)
    sizes = np.bincount(labels.ravel(), minlength=count + 1)[1:]
    kept: NDArray[np.bool_] = np.isin(labels, np.flatnonzero(sizes >= LEAST_HOLE_PX2) + 1)
    # find_contours counts rows before columns, and the pad moves all by one.
    return [line[:, ::-1] - 1.0 for line in find_contours(np.pad(kept, 1).astype(float), 0.5)]
