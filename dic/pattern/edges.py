"""The coupon's long edges as straight lines, and the direction that they give."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy import ndimage
from scipy.stats import theilslopes

Floats = NDArray[np.float64]
Mask = NDArray[np.bool_]

#: The mask's outline is smoothed by this sigma before its directions are summed up, px.
OUTLINE_SIGMA_PX = 4.0
#: Rays across an edge reach so far beyond and behind its rough place, px.
OUTWARD_PX, INWARD_PX = 12.0, 16.0
#: More rays than this add time but no accuracy that a strain could feel.
MOST_RAYS = 600
#: Samples along a ray, px.
PITCH_PX = 0.5
#: Rays that share one estimate of the background beside them.
BLOCK = 32
#: Plain background that a ray must cross before it meets the coupon, px.
LEAST_BACKGROUND_PX = 2.0
#: Over this depth behind its first sign the pattern's full contrast is reached, px: a sharp lens' blur.
RISE_PX = 5.0
#: What exceeds the background's scatter this many times is not background.
CLEAR_SIGMAS = 6.0
#: Rays further than this off the line met a speckle as dark as the background, or dust.
STRAIGHT_PX = 0.5
#: An edge is looked for up to this slope against the axis known so far.
STEEPEST = 0.1
#: An edge counts if so many rays, and this share of all that met the coupon, lie on one line.
LEAST_RAYS, LEAST_SHARE = 30, 0.3
#: The angle counts as settled below this step times the number of rounds, deg: on a short edge it swings by
#: a few hundredths, which no strain feels.
SETTLED_DEG = 0.01
MOST_ROUNDS = 8
#: Smaller steps are halved: which rays lie on the line changes with it, and the angle could swing.
GENTLE_DEG = 0.2


@dataclass(frozen=True)
class Edge:
    """A long edge in coupon axes, counted from the picture's middle.

    Attributes
    ----------
    offset
        Across the coupon at the picture's middle, px.
    slope
        Change of the offset per px along the axis.
    along
        Middle of what is seen of the edge, counted along the axis, px.
    weight
        Reciprocal square of the slope's uncertainty, up to a factor common to both edges.
    """

    offset: float
    slope: float
    along: float
    weight: float


#: The edge to the left and the one to the right of the coupon, as seen with its axis upright.
Edges = tuple[Edge | None, Edge | None]


def axes(angle_deg: float) -> tuple[Floats, Floats]:
    """Return unit vectors (x, y) along the pull and across it for an axis angle.

    At 0° the axial vector points up the picture (0, −1) and the transverse one to the right (1, 0).
    """
    a = np.radians(angle_deg)
    return np.array([np.sin(a), -np.cos(a)]), np.array([np.cos(a), np.sin(a)])


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


def long_edges(grey: NDArray[np.float32], mask: Mask, angle_deg: float, *, turn: bool) -> tuple[float, Edges]:
    """Locate the edges to the left and to the right of a mask as straight lines.

    Parameters
    ----------
    grey
        Grey values, shape (rows, columns).
    mask
        The textured area without holes, shape (rows, columns).
    angle_deg
        Axis angle to start from.
    turn
        Whether the axis may turn until it agrees with the edges.

    Returns
    -------
    angle_deg
        The axis; NaN if it did not settle.
    edges
        Left and right one; None where there is no straight edge in view.
    """
    outline = np.nonzero(mask ^ ndimage.binary_erosion(mask, border_value=1))
    for done in range(1, MOST_ROUNDS + 1):
        edges = _edge(grey, outline, angle_deg, -1), _edge(grey, outline, angle_deg, 1)
        sound = [edge for edge in edges if edge is not None]
        if not turn or not sound:
            return angle_deg, edges
        slope = np.average([edge.slope for edge in sound], weights=[edge.weight for edge in sound])
        step = float(np.degrees(np.arctan(slope)))
        if abs(step) < SETTLED_DEG * done:
            return angle_deg, edges
        angle_deg += step if abs(step) > GENTLE_DEG else step / 2
    return float("nan"), edges


def between(shape: tuple[int, ...], angle_deg: float, edges: Edges, margin: float) -> Mask:
    """Mark the pixels that lie at least `margin` px inside the edges that are known."""
    axial, transverse = axes(angle_deg)
    y = np.arange(shape[0], dtype=np.float32)[:, None] - np.float32((shape[0] - 1) / 2)
    x = np.arange(shape[1], dtype=np.float32) - np.float32((shape[1] - 1) / 2)
    inside = np.ones(shape, bool)
    for edge, side in zip(edges, (-1, 1), strict=True):
        if edge is not None:
            # across − slope·along ≤ offset − margin, taken apart into its parts in x and y
            right, down = (side * (transverse - edge.slope * axial)).astype(np.float32)
            inside &= x * right + y * down <= side * edge.offset - margin
    return inside


def _edge(
    grey: NDArray[np.float32], outline: tuple[NDArray[np.intp], ...], angle_deg: float, side: int
) -> Edge | None:
    """Locate one edge: where rays from outside meet the pattern, joined by a straight line."""
    axial, transverse = axes(angle_deg)
    middle = np.array([grey.shape[1] - 1, grey.shape[0] - 1]) / 2.0
    rough = _rough_edge(outline, middle, axial, transverse, side)
    if rough is None:
        return None
    along, near = rough
    depth = np.arange(-OUTWARD_PX, INWARD_PX, PITCH_PX)
    across = near[:, None] - side * depth
    x = middle[0] + along[:, None] * axial[0] + across * transverse[0]
    y = middle[1] + along[:, None] * axial[1] + across * transverse[1]
    rays = ndimage.map_coordinates(grey, [y, x], order=1, mode="constant", cval=np.nan)
    met = _first_contact(rays, depth)
    found = np.isfinite(met)
    if found.sum() < LEAST_RAYS:
        return None
    return _straight(along[found], near[found] - side * met[found])


def _rough_edge(
    outline: tuple[NDArray[np.intp], ...], middle: Floats, axial: Floats, transverse: Floats, side: int
) -> tuple[Floats, Floats] | None:
    """Return where rays should start: positions along, and the outline's outermost offset near them."""
    y, x = outline[0] - middle[1], outline[1] - middle[0]
    along, across = x * axial[0] + y * axial[1], x * transverse[0] + y * transverse[1]
    # Outline on the other half belongs to the other edge, or to an end.
    if len(along) < LEAST_RAYS:
        return None
    half = (np.min(across) + np.max(across)) / 2
    place = np.floor((along - along.min()) / 8).astype(int)
    outer = np.full(place.max() + 1, -np.inf)
    np.maximum.at(outer, place, side * across)
    bins = np.flatnonzero(outer > side * half)
    if len(bins) < 4:
        return None
    at, offset = along.min() + 8 * bins + 4, side * outer[bins]
    slope, start, _, _ = theilslopes(offset, at)
    pitch = max(1.0, np.ptp(along) / MOST_RAYS)
    rays = np.arange(along.min(), along.max() + pitch / 2, pitch)
    return rays, start + slope * rays


def _first_contact(rays: Floats, depth: Floats) -> Floats:
    """Return at which depth each ray first meets the pattern, shape (n,); NaN where that cannot be told.

    A pixel half on the coupon shows half the contrast of the pattern behind it, so the edge is where a
    ray passes half of what it soon reaches.
    """
    background = np.where(depth < -2.0, rays, np.nan)
    met = np.full(len(rays), np.nan)
    rise, before = round(RISE_PX / PITCH_PX), round(LEAST_BACKGROUND_PX / PITCH_PX)
    for first in range(0, len(rays), BLOCK):
        some = slice(first, first + BLOCK)
        beside = background[some][np.isfinite(background[some])]
        if len(beside) < BLOCK:
            continue
        level = np.median(beside)
        scatter = 1.4826 * np.median(abs(beside - level))
        contrast = abs(rays[some] - level)
        full = np.nanpercentile(contrast[:, depth > RISE_PX], 75)
        clear = max(CLEAR_SIGMAS * scatter, 0.15 * full)
        for index, ray in enumerate(contrast, start=first):
            start = int(np.argmax(ray > clear))
            reached = ray[start : start + rise]
            if start < before or not np.isfinite(ray[start - before : start + rise]).all():
                continue
            half = reached.max() / 2
            if half < clear or 4 * half < full:
                continue
            here = start + int(np.argmax(reached >= half))
            met[index] = depth[here] - PITCH_PX * (ray[here] - half) / (ray[here] - ray[here - 1])
    return met


def _straight(along: Floats, across: Floats) -> Edge | None:
    """Return the line on which most of the points lie, or None if they follow none.

    A ray that meets a speckle as dark as the background passes on to the next one: many points lie
    inside the edge, all over, but only the edge lines them up.
    """
    slope, start = _most_crowded(along, across)
    for _ in range(3):
        on_line = abs(across - start - slope * along) < STRAIGHT_PX
        if on_line.sum() < max(LEAST_RAYS, LEAST_SHARE * len(along)):
            return None
        slope, start, _, _ = theilslopes(across[on_line], along[on_line])
    along = along[on_line]
    return Edge(float(start), float(slope), float(np.mean(along)), float(len(along) * np.var(along)))


def _most_crowded(along: Floats, across: Floats) -> tuple[float, float]:
    """Return slope and offset of the line with most points within `STRAIGHT_PX`, to that accuracy."""
    best = 0, 0.0, 0.0
    step = STRAIGHT_PX / max(float(np.ptp(along)), 1.0)
    for slope in np.arange(-STEEPEST, STEEPEST, step):
        offset = np.sort(across - slope * along)
        count = np.searchsorted(offset, offset + 2 * STRAIGHT_PX) - np.arange(len(offset))
        most = int(np.argmax(count))
        best = max(best, (int(count[most]), float(slope), float(offset[most]) + STRAIGHT_PX))
    return best[1], best[2]
