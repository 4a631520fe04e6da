"""The coupon's two long edges along their length, its parallel section, and the direction they give."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import TypeVar

import numpy as np
from numpy.typing import NDArray

from dic.pattern.boundary import best_blur
from dic.pattern.outline import Floats, Mask, axes, centre, rough_sides
from dic.pattern.trace import STATION_PX, Trace

#: An edge counts if so many stations, and this share of all that were seen, lie on one line.
LEAST_STATIONS, LEAST_SHARE = 4, 0.3
#: Stations further than this off a line are not on its straight part, px: over a gauge that ends there,
#: the mean width is then wrong by less than 0.1 % of 200 px.
STRAIGHT_PX = 0.6
#: ... or further than this many times their scatter.
STRAIGHT_SIGMAS = 4.0
#: An edge is looked for up to this slope against the axis known so far.
STEEPEST = 0.1
#: What the model of the edge leaves unsaid (clutter that is not alike all along, patterns that are not) moves
#: an edge by so much, px, and by something else after so many px along it: measured on varied scenes.
MODEL_PX, MODEL_LENGTH_PX = 0.1, 100.0
#: The parallel section is the narrow one: stations wider than the narrowest by this share are not of it.
WIDER = 0.04
#: The axis counts as settled below this step, deg: no strain feels it.
SETTLED_DEG = 0.006
#: ... or below this share of its own standard uncertainty, which is large on short edges.
SETTLED_SHARE = 0.3
MOST_ROUNDS = 8
#: An axis that still swings by more than this many standard uncertainties after all rounds is none.
SWING_SIGMAS = 2.0
#: Smaller steps are halved: which rays lie on the line changes with it, and the angle could swing.
GENTLE_DEG = 0.05
#: The edge is looked for so far about the mask's outline, then about what was found of it, px.
WIDE_PX, NARROW_PX = 9.0, 4.0
#: Blur of a sharp lens, px, from which the search starts: pixel, interpolation and half a px of rim.
SHARP_PX = 0.85


#: One place along the axis or many, px.
Along = TypeVar("Along", float, Floats)


@dataclass(frozen=True)
class Edge:
    """The straight part of a long edge in coupon axes, counted from the picture's middle.

    Attributes
    ----------
    offset
        Across the coupon at the picture's middle, px.
    slope
        Change of the offset per px along the axis.
    along
        Middle of the straight part, counted along the axis, px.
    u_offset
        Standard uncertainty of the edge's place at that middle, px.
    u_slope
        Standard uncertainty of the slope.
    """

    offset: float
    slope: float
    along: float
    u_offset: float = 0.0
    u_slope: float = 0.0

    def at(self, along: Along) -> Along:
        """Return the offset at a place along the axis, px."""
        return self.offset + self.slope * along

    @property
    def weight(self) -> float:
        """What the slope's word counts: the reciprocal square of its uncertainty."""
        return 1 / max(self.u_slope, 1e-6) ** 2


#: The edge to the left and the one to the right of the coupon, as seen with its axis upright.
Edges = tuple[Edge | None, Edge | None]


@dataclass(frozen=True)
class Profile:
    """Both edges along the coupon, in its axes, counted from the picture's middle.

    Attributes
    ----------
    along
        Stations along the axis, px, shape (n,).
    left, right
        Offsets of the edges across, px, shape (n,); NaN where an edge was not found.
    """

    along: Floats
    left: Floats
    right: Floats

    @property
    def width(self) -> Floats:
        """Width at the stations, px; NaN where an edge was not found."""
        return np.asarray(self.right - self.left)

    @classmethod
    def nowhere(cls) -> Profile:
        """Return a profile without stations."""
        return cls(np.empty(0), np.empty(0), np.empty(0))


@dataclass(frozen=True)
class Found:
    """What the long edges tell.

    Attributes
    ----------
    angle_deg
        The axis; NaN if it did not settle.
    edges
        Left and right one; None where there is no straight edge in view.
    profile
        Both edges along the length.
    parallel
        From where to where the edges are straight, px along the axis; None where there is no edge.
    blur, u_blur
        Sigma of the blur at the edges and its standard uncertainty, px: lens, pixel and interpolation.
    blur_shift
        By how much an edge moves inwards per px of blur.
    """

    angle_deg: float
    edges: Edges
    profile: Profile
    parallel: tuple[float, float] | None = None
    blur: float = float("nan")
    u_blur: float = float("nan")
    blur_shift: float = 0.0

    def turn_deg(self) -> float:
        """Return by how much the edges that are known stand off the axis, clockwise, deg."""
        sound = [edge for edge in self.edges if edge is not None]
        weights = [edge.weight for edge in sound]
        return float(np.degrees(np.arctan(np.average([edge.slope for edge in sound], weights=weights))))

    def u_angle_deg(self) -> float:
        """Return the standard uncertainty of the axis that the edges give, deg."""
        weights = [edge.weight for edge in self.edges if edge is not None]
        return float(np.degrees(1 / np.sqrt(sum(weights)))) if weights else float("nan")

    def upright(self) -> Found:
        """Return the same with the axis between −90° and 90°; half a turn exchanges left and right."""
        if -90 <= self.angle_deg < 90 or not np.isfinite(self.angle_deg):
            return self
        left, right = (
            None if edge is None else replace(edge, offset=-edge.offset, along=-edge.along)
            for edge in reversed(self.edges)
        )
        shown, section = self.profile, self.parallel
        return replace(
            self,
            angle_deg=(self.angle_deg + 90) % 180 - 90,
            edges=(left, right),
            profile=Profile(-shown.along[::-1], -shown.right[::-1], -shown.left[::-1]),
            parallel=None if section is None else (-section[1], -section[0]),
        )


def long_edges(grey: NDArray[np.float32], mask: Mask, angle_deg: float, *, turn: bool) -> Found:
    """Locate the edges to the left and to the right of a mask.

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
    """
    sides: list[Floats] = list(rough_sides(mask, angle_deg))
    blur, u_blur, shift = SHARP_PX, float("nan"), 0.0
    for done in range(MOST_ROUNDS):
        traces = [
            Trace.along(grey, points, angle_deg, side, WIDE_PX if done == 0 else NARROW_PX)
            for points, side in zip(sides, (-1, 1), strict=True)
        ]
        stations = [None if trace is None else trace.stations(blur) for trace in traces]
        found = _straight(stations, angle_deg)
        if done == 2 and found.edges != (None, None):
            blur, u_blur, shift = _blur(traces, found.edges, blur)
            stations = [None if trace is None else trace.stations(blur) for trace in traces]
            found = _straight(stations, angle_deg)
        if found.edges == (None, None):
            return found
        found = replace(found, blur=blur, u_blur=u_blur, blur_shift=shift)
        step = found.turn_deg()
        if done >= 2 and (not turn or abs(step) < max(SETTLED_DEG, SETTLED_SHARE * found.u_angle_deg())):
            return _centred(grey, found, turn)
        sides = [
            points if place is None else _in_picture(grey.shape, angle_deg, *place)
            for points, place in zip(sides, stations, strict=True)
        ]
        if turn:
            angle_deg += step if abs(step) > GENTLE_DEG else step / 2
    swings = abs(step) > SWING_SIGMAS * found.u_angle_deg()
    return replace(found, angle_deg=float("nan")) if swings else _centred(grey, found, turn)


def between(
    shape: tuple[int, ...], angle_deg: float, edges: Edges, margin: float, along: tuple[float, float] | None
) -> Mask:
    """Mark the pixels at least `margin` px inside the edges that are known, and between two places along."""
    axial, transverse = axes(angle_deg)
    y = np.arange(shape[0], dtype=np.float32)[:, None] - np.float32((shape[0] - 1) / 2)
    x = np.arange(shape[1], dtype=np.float32) - np.float32((shape[1] - 1) / 2)
    inside = np.ones(shape, bool)
    for edge, side in zip(edges, (-1, 1), strict=True):
        if edge is not None:
            # across − slope·along ≤ offset − margin, taken apart into its parts in x and y
            right, down = (side * (transverse - edge.slope * axial)).astype(np.float32)
            inside &= x * right + y * down <= side * edge.offset - margin
    if along is not None:
        place = x * np.float32(axial[0]) + y * np.float32(axial[1])
        inside &= (place >= along[0]) & (place <= along[1])
    return inside


def _centred(grey: NDArray[np.float32], found: Found, turn: bool) -> Found:
    """Move each line to where all its rays together find the edge likeliest, and the axis between them."""
    left, right = (
        None if edge is None else _likeliest(grey, found, edge, side, offset)
        for edge, side, offset in zip(
            found.edges, (-1, 1), (found.profile.left, found.profile.right), strict=True
        )
    )
    found = replace(found, edges=(left, right))
    if not turn:
        return found
    step = found.turn_deg()
    # So small a turn about the picture's middle changes slopes only.
    left, right = (
        None if edge is None else replace(edge, slope=edge.slope - float(np.tan(np.radians(step))))
        for edge in found.edges
    )
    return replace(found, angle_deg=found.angle_deg + step, edges=(left, right))


def _likeliest(grey: NDArray[np.float32], found: Found, edge: Edge, side: int, offset: Floats) -> Edge:
    """Return an edge where all its rays together find it; as it is where too little of it is seen.

    A station sees a few speckles only, and the likeliest place of so few is a little one-sided.
    """
    if found.parallel is None:
        return edge
    there = found.profile.along[np.isfinite(offset)]
    there = there[(there >= found.parallel[0]) & (there <= found.parallel[1])]
    if len(there) < 2:
        return edge
    axial, transverse = axes(found.angle_deg)
    there = np.linspace(there[0] - STATION_PX / 2, there[-1] + STATION_PX / 2, 3 * len(there))
    points = centre(grey.shape) + there[:, None] * axial + edge.at(there)[:, None] * transverse
    trace = Trace.along(grey, points, found.angle_deg, side, NARROW_PX)
    if trace is None:
        return edge
    inward, lean = trace.likeliest_line(found.blur)
    slope, place = edge.slope - side * lean, float(trace.place.mean())
    middle = edge.at(place) - side * inward
    return replace(edge, offset=middle - slope * place, slope=slope)


def _blur(traces: list[Trace | None], edges: Edges, start: float) -> tuple[float, float, float]:
    """Return the blur that fits both edges best, its uncertainty, and how far a px of it moves an edge."""
    said, shifts = [], []
    for trace, edge in zip(traces, edges, strict=True):
        if trace is None or edge is None:
            continue
        # Where clutter has led the rays astray nothing can be learnt of the lens.
        said.append(trace.boundary.blurs(abs(trace.near - edge.at(trace.place)) < STRAIGHT_PX))
        low, high = (trace.stations(start * factor)[1] for factor in (0.95, 1.05))
        shifts.append(np.nanmedian(-trace.side * (high - low)) / (0.1 * start))
    blurs = np.concatenate(said)
    if not len(blurs):
        return start, float("nan"), 0.0
    blur, u_blur = best_blur(blurs)
    return blur, u_blur, float(np.nanmean(shifts))


def _in_picture(shape: tuple[int, ...], angle_deg: float, place: Floats, offset: Floats) -> Floats:
    """Return stations as points in the picture, those that cannot be told bridged."""
    axial, transverse = axes(angle_deg)
    known = np.isfinite(offset)
    if known.sum() < 2:
        return np.empty((0, 2))
    # Stations stand in the middle of their rays; without half a station more the trace would shrink.
    place = np.concatenate([[place[0] - STATION_PX / 2], place, [place[-1] + STATION_PX / 2]])
    offset = np.concatenate([offset[:1], offset, offset[-1:]])
    known = np.isfinite(offset)
    bridged = np.interp(place, place[known], offset[known])
    return np.asarray(centre(shape) + place[:, None] * axial + bridged[:, None] * transverse)


def _straight(stations: list[tuple[Floats, Floats] | None], angle_deg: float) -> Found:
    """Put both edges onto common stations, find the parallel section, and lay lines through it."""
    profile = _profile(stations)
    if not len(profile.along):
        return Found(angle_deg, (None, None), profile)
    wanted = _narrow(profile)
    lines = [_line(profile.along, offset, wanted) for offset in (profile.left, profile.right)]
    on = [
        np.zeros(len(profile.along), bool) if line is None else _on_line(line, profile.along, offset)
        for line, offset in zip(lines, (profile.left, profile.right), strict=True)
    ]
    if all(line is None for line in lines):
        return Found(angle_deg, (None, None), profile)
    both = [mark for mark, line in zip(on, lines, strict=True) if line is not None]
    seen = [
        np.isfinite(offset)
        for offset, line in zip((profile.left, profile.right), lines, strict=True)
        if line is not None
    ]
    # Fillets are alike on both sides; where one edge alone is off its line, it is clutter or a notch.
    agree, known = np.logical_or.reduce(both), np.logical_and.reduce(seen)
    if not (agree & known).any():
        agree, known = (np.logical_or.reduce(marks) for marks in (both, seen))
    first, last = _longest(np.where(agree, 1.0, np.where(known, -1.5, -0.1)))
    half = STATION_PX / 2
    lo, hi = profile.along[first] - half, profile.along[last] + half
    # Where the edges stay straight as far as they are seen, the section goes on to the picture's rim.
    parallel = (
        -np.inf if first <= np.flatnonzero(known)[0] else float(lo),
        np.inf if last >= np.flatnonzero(known)[-1] else float(hi),
    )
    section = np.zeros(len(profile.along), bool)
    section[first : last + 1] = True
    left, right = (
        None if line is None else _fit(profile.along, offset, mark & section)
        for line, offset, mark in zip(lines, (profile.left, profile.right), on, strict=True)
    )
    return Found(angle_deg, (left, right), profile, parallel)


def _profile(stations: list[tuple[Floats, Floats] | None]) -> Profile:
    """Bring both edges' stations to common places along the axis."""
    known = [place for place in stations if place is not None]
    if not known:
        return Profile.nowhere()
    start = min(place[0] for place, _ in known)
    stop = max(place[-1] for place, _ in known)
    along = start + STATION_PX * np.arange(int((stop - start) / STATION_PX + 0.5) + 1)
    left, right = (
        np.full(len(along), np.nan) if one is None else np.interp(along, *one, left=np.nan, right=np.nan)
        for one in stations
    )
    return Profile(along, left, right)


def _narrow(profile: Profile) -> NDArray[np.bool_]:
    """Mark the stations of the narrow section, all of them where only one edge is in view."""
    width = profile.width
    if np.isfinite(width).sum() < LEAST_STATIONS:
        return np.ones(len(width), bool)
    narrow = width < (1 + WIDER) * np.nanpercentile(width, 20)
    return narrow if narrow.sum() >= LEAST_STATIONS else np.ones(len(width), bool)


def _line(along: Floats, offset: Floats, wanted: NDArray[np.bool_]) -> tuple[float, float, float] | None:
    """Return offset, slope and tolerance of the line on which most stations lie, or None."""
    use = wanted & np.isfinite(offset)
    if use.sum() < LEAST_STATIONS:
        return None
    slope, start = _most_crowded(along[use], offset[use])
    tolerance = STRAIGHT_PX
    for _ in range(4):
        on = use & (abs(offset - start - slope * along) < tolerance)
        if on.sum() < max(LEAST_STATIONS, LEAST_SHARE * use.sum()):
            return None
        slope, start = np.polyfit(along[on], offset[on], 1)
        scatter = 1.4826 * np.median(abs(offset[on] - start - slope * along[on]))
        tolerance = max(STRAIGHT_PX, min(STRAIGHT_SIGMAS * scatter, 3 * STRAIGHT_PX))
    return float(start), float(slope), float(tolerance)


def _on_line(line: tuple[float, float, float], along: Floats, offset: Floats) -> NDArray[np.bool_]:
    start, slope, tolerance = line
    return np.asarray(abs(offset - start - slope * along) < tolerance)


def _longest(score: Floats) -> tuple[int, int]:
    """Return first and last index of the run with the largest sum."""
    total = np.concatenate([[0.0], np.cumsum(score)])
    lowest = np.minimum.accumulate(total)
    last = int(np.argmax(total[1:] - lowest[:-1]))
    first = int(np.argmin(total[: last + 1]))
    return first, last


def _fit(along: Floats, offset: Floats, on: NDArray[np.bool_]) -> Edge | None:
    """Lay a least-squares line through the straight part; the stations' scatter tells how sure it is."""
    n = int(on.sum())
    if n < LEAST_STATIONS:
        return None
    there, here = along[on], offset[on]
    middle = float(there.mean())
    slope, level = np.polyfit(there - middle, here, 1)
    scatter = np.sqrt(np.sum((here - level - slope * (there - middle)) ** 2) / (n - 2))
    spread = np.sqrt(np.mean((there - middle) ** 2))
    u_model = MODEL_PX / np.sqrt(1 + np.ptp(there) / MODEL_LENGTH_PX)
    u_slope = np.hypot(scatter / np.sqrt(n), u_model) / spread
    u_offset = np.hypot(scatter / np.sqrt(n), MODEL_PX)
    return Edge(level - slope * middle, float(slope), middle, float(u_offset), float(u_slope))


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
