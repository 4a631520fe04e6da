"""The coupon's width between its long edges, in every frame: a diameter gauge that needs no speckle.

Rays cross each edge where its material points lie in the frame.  The area under the step from
background to coupon, divided by the step, is where the edge stands; an area does not change with the
edge's place between two pixels, nor with the lens' blur (moment-preserving edges, Tabatabai and
Mitchell 1984, doi 10.1109/TPAMI.1984.4767502 [from memory]).  A pattern on the coupon makes each place
of the edge uncertain, but moves with it, so that it hardly enters the change of width; where it does,
as on a bar whose rim squeezes it together, stations scatter by more than the grey noise.
"""

from __future__ import annotations

from dataclasses import dataclass
from math import hypot, sqrt
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray
from scipy import ndimage

from dic.pattern import Coupon, axes, centre, perpendicular
from dic.strain import Region

Floats = NDArray[np.float64]

#: Rays stand one px apart along the edge; so many share one stored width.
BLOCK = 16
#: The edge is first looked for this far to either side of where the motion puts it, px ...
SEARCH_PX = 10.0
#: ... then weighed over this much to either side: what a lens blurs, and little noise.
ZONE_PX = 2.25
#: The zone stays where the coupon's edge was found in the reference, unless the search says that it is off
#: by more than this, px: a pattern draws a rough search aside ...
FOUND_PX = 3.0
#: ... and later stays with the material, so with its pattern, unless the edge leaves it by more than this.
KEPT_PX = 0.5
#: The zone's ends fade over this much, so that a speckle on them does not come and go with a pixel's place.
FADE_PX = 2.0
#: Beyond the zone so much gives the grey of background and of coupon, px: the more, the less noise.
LEVEL_PX = 8.0
#: Samples along a ray, px.
PITCH_PX = 0.5
#: Pixels whose noise enters one ray's place: those of the zone, and those of the two levels; rays one px
#: apart share none.
NOISE_PX = 2 * ZONE_PX - FADE_PX / 3 + 2 * ZONE_PX**2 / LEVEL_PX
#: The share of them in the zone: the levels are common to all stations, whose scatter does not show theirs.
ZONE_SHARE = (2 * ZONE_PX - FADE_PX / 3) / NOISE_PX
#: The pattern's variance in zone and inner level over that in the zone; the background carries none of it.
PATTERN_LEVEL = (1 + ZONE_SHARE) / (2 * ZONE_SHARE)
#: With fewer stations their scatter tells nothing, and what a round bar's pattern does to one of them at a
#: strain of 0.6 % stands for it, px.
LEAST_STATIONS = 4
USUAL_PX = 0.1
#: A zone shrinks to this share at the least: the lens' blur must fit in.
LEAST_SCALE = 0.5
#: Sides are told apart only where their grey differs by this many times the noise.
LEAST_STEP = 3.0
#: A plain background's grey scatters along the edge by less than this share of the step to the coupon; what
#: moves past the zone of an uneven one looks like a change of width.  Sheets in uneven light stay below
#: 0.02, photographs of brick, grass and gravel above 0.1.
MOST_UNEVEN = 0.05


class Widths(NamedTuple):
    """The distance between the edges in one frame.

    Attributes
    ----------
    px
        At each station, px, shape (k,); NaN where an edge is not clear or not in view.
    u_per_grey
        Standard uncertainty of one station's width per grey level of noise, px.
    """

    px: Floats
    u_per_grey: Floats


class Silhouette:
    """The coupon's two long edges, followed with the material along them.

    Parameters
    ----------
    image
        Reference picture, shape (rows, columns).
    coupon
        With both edges in view.
    region
        The gauge region; stations lie along it.
    """

    def __init__(self, image: NDArray[np.integer | np.floating], coupon: Coupon, region: Region) -> None:
        left, right = coupon.edges
        if left is None or right is None:
            raise ValueError("both edges are needed")
        axial, transverse = axes(coupon.axis_angle_deg)
        middle = centre(image.shape)
        start = float((region.centre - middle) @ axial)
        blocks = max(int(region.length // BLOCK), 1)
        self.along: Floats = np.asarray((np.arange(blocks) - (blocks - 1) / 2) * BLOCK, float)
        rays = start + (self.along[:, None] + np.arange(BLOCK) - (BLOCK - 1) / 2).ravel()
        self._axial, self._transverse = axial, transverse
        self._edges = [
            middle + rays[:, None] * axial + edge.at(rays)[:, None] * transverse for edge in (left, right)
        ]
        self._centre = region.centre
        still = np.zeros((2, 3))
        self._rest: list[_Laid] | None = None
        self._rest = self._laid(np.asarray(image, np.float32), still)
        self._first = [one.fine for one in self._rest]
        seen = np.isfinite(self._first[0].zone) & np.isfinite(self._first[1].zone)
        left_at, right_at = (side.placed(seen) for side in self._first)
        u = _of_both(self._first, seen)
        self.reference = Widths(right_at - left_at, np.full(blocks, u))

    @property
    def range_px(self) -> tuple[float, float]:
        """Where both edges are clear in the reference: from, to, along the axis from the region's middle."""
        seen = self.along[np.isfinite(self.reference.px)]
        if not seen.size:
            return 0.0, 0.0
        return float(seen[0]) - BLOCK / 2, float(seen[-1]) + BLOCK / 2

    @property
    def uneven(self) -> float:
        """Scatter of the background's grey along the edges, as a share of the step to the coupon."""
        return max(_scatter_of_background(side, self.along) for side in self._first)

    @property
    def plain(self) -> bool:
        """Whether the background is even enough for the width to be trusted."""
        return self.uneven <= MOST_UNEVEN

    def stations(self, first: float, last: float) -> NDArray[np.bool_]:
        """Return which stations lie between two places along the axis."""
        return (self.along >= first) & (self.along <= last)

    def width_px(self, first: float, last: float) -> float:
        """Return the mean width in the reference between two places, px."""
        here = self.reference.px[self.stations(first, last)]
        return float(here.mean()) if here.size else float("nan")

    def outlines(self, first: float, last: float) -> tuple[Floats, Floats]:
        """Return both edges between two places along the axis, as lines in the reference picture, px."""
        along = np.repeat(self.along, BLOCK)
        here = np.flatnonzero((along >= first - BLOCK / 2) & (along <= last + BLOCK / 2))[[0, -1]]
        left, right = (edge[here] for edge in self._edges)
        return left, right

    def measure(self, frame: NDArray[np.integer | np.floating], motion: Floats) -> Widths:
        """Measure the width in one frame.

        Parameters
        ----------
        frame
            Grey values, shape (rows, columns).
        motion
            Displacement and gradient of the coupon about the region's centre, u and then v: value, slope
            along x, slope along y, shape (2, 3).
        """
        sides = [one.fine for one in self._laid(np.asarray(frame, np.float32), motion)]
        seen = np.isfinite(sides[0].zone) & np.isfinite(sides[1].zone) & np.isfinite(self.reference.px)
        # What has left the view leaves the reference too, so that both have their grey from one pattern.
        now, first = ([side.placed(seen) for side in both] for both in (sides, self._first))
        change = (now[1] - first[1]) - (now[0] - first[0])
        u = _of_both(sides, seen)
        return Widths(np.where(seen, self.reference.px + change, np.nan), np.where(seen, u, np.nan))

    def _laid(self, grey: NDArray[np.float32], motion: Floats) -> list[_Laid]:
        """Lay rays across both edges, where the material's motion and a rough search put them."""
        deformation = np.eye(2) + motion[:, 1:]
        direction = deformation @ self._axial
        direction /= np.linalg.norm(direction)
        # Across the coupon as it stands now, so that its turning is no widening.
        across = perpendicular(direction)
        # Zones shrink with the coupon, so that they keep the same pattern.
        scale = max(float(across @ deformation @ self._transverse), LEAST_SCALE)
        laid = []
        for number, (edge, sign) in enumerate(zip(self._edges, (-1.0, 1.0), strict=True)):
            there = self._centre + motion[:, 0] + (edge - self._centre) @ deformation.T
            rough = _Side.along(grey, there, (sign, scale), across, SEARCH_PX)
            seen, still, kept = np.isfinite(rough.zone), np.zeros(len(self.along)), FOUND_PX
            expected = still
            if self._rest is not None:
                rest = self._rest[number]
                seen &= np.isfinite(rest.rough.zone)
                expected, still, kept = rest.rough.shift(seen), rest.shift, KEPT_PX
            off = _line_through(self.along, rough.shift(seen) - expected)
            shift = still + np.sign(off) * np.maximum(np.abs(off) - kept, 0.0)
            line = there + sign * scale * np.repeat(shift, BLOCK)[:, None] * across
            laid.append(_Laid(rough, shift, _Side.along(grey, line, (sign, scale), across, ZONE_PX)))
        return laid


@dataclass(frozen=True)
class _Side:
    """What rays across one edge saw, block by block, shape (k,); NaN where out of view.

    `base` is where the edge is expected, across the coupon; `zone`, `inner` and `outer` are mean greys
    around it, on the coupon and on the background; `sign` is +1 where outside is the right, and `scale` how
    long a px of the reference across the coupon is now.
    """

    base: Floats
    zone: Floats
    inner: Floats
    outer: Floats
    reach: float
    sign: float
    scale: float

    @classmethod
    def along(
        cls,
        grey: NDArray[np.float32],
        at: Floats,
        outwards: tuple[float, float],
        across: Floats,
        reach: float,
    ) -> _Side:
        sign, scale = outwards
        end = reach + FADE_PX / 2
        depth = np.arange(-end - LEVEL_PX + PITCH_PX / 2, end + LEVEL_PX, PITCH_PX)
        x = at[:, :1] + sign * scale * depth * across[0]
        y = at[:, 1:] + sign * scale * depth * across[1]
        rays = ndimage.map_coordinates(grey, [y, x], order=1, mode="constant", cval=np.nan)
        profile = rays.reshape(-1, BLOCK, len(depth)).mean(axis=1).astype(float)
        profile[~np.isfinite(profile).all(axis=1)] = np.nan
        weight = np.clip((end - np.abs(depth)) / FADE_PX, 0.0, 1.0)
        zone = profile @ weight / weight.sum()
        inner, outer = (profile[:, where].mean(axis=1) for where in (depth < -end, depth > end))
        base = (at @ across).reshape(-1, BLOCK).mean(axis=1)
        return cls(base, zone, inner, outer, reach, sign, scale)

    def step(self, seen: NDArray[np.bool_]) -> tuple[float, float]:
        """Return the grey of the background, and by how much the coupon's differs."""
        if not seen.any():
            return float("nan"), float("nan")
        outside = float(self.outer[seen].mean())
        return outside, float(self.inner[seen].mean()) - outside or float("nan")

    def shift(self, seen: NDArray[np.bool_]) -> Floats:
        """Return how far outside its expected place each block stands, in px of the reference."""
        outside, step = self.step(seen)
        return 2 * self.reach * ((self.zone - outside) / step) - self.reach

    def placed(self, seen: NDArray[np.bool_]) -> Floats:
        """Return where each block of the edge stands across the coupon, px."""
        return self.base + self.sign * self.scale * self.shift(seen)

    def u_per_grey(self, seen: NDArray[np.bool_]) -> float:
        """Return the standard uncertainty of one block's place per grey level of noise, px."""
        return sqrt(NOISE_PX * self.scale / BLOCK) / abs(self.step(seen)[1])


@dataclass(frozen=True)
class _Laid:
    """One edge: what a rough search saw, how far outside the material the zone was laid, what that saw."""

    rough: _Side
    shift: Floats
    fine: _Side


def _of_both(sides: list[_Side], seen: NDArray[np.bool_]) -> float:
    return hypot(*(side.u_per_grey(seen) for side in sides))


def _line_through(along: Floats, shift: Floats) -> Floats:
    """Return a straight line through the blocks' shifts, for finding the edge again."""
    there = np.isfinite(shift)
    if there.sum() < 2:
        return np.full(len(along), shift[there].mean() if there.any() else 0.0)
    return np.polynomial.Polynomial.fit(along[there], shift[there], 1)(along)


def _scatter_of_background(side: _Side, along: Floats) -> float:
    """Return by how much the outer grey leaves a straight line along one edge, per step; 0 if hardly seen."""
    seen = np.isfinite(side.outer)
    if seen.sum() < 4:
        return 0.0
    grey = side.outer[seen]
    left = grey - np.polynomial.Polynomial.fit(along[seen], grey, 1)(along[seen])
    return float(left.std(ddof=2)) / abs(side.step(seen)[1])


def clear(widths: Widths, noise_grey: float) -> Widths:
    """Return the widths, NaN where the coupon does not stand out from its background."""
    # Of two edges with a step of this size.
    faint = ~(widths.u_per_grey < sqrt(2 * NOISE_PX / BLOCK) / (LEAST_STEP * noise_grey))
    return Widths(np.where(faint, np.nan, widths.px), np.where(faint, np.nan, widths.u_per_grey))


def pattern_px(along: Floats, change: Floats, noise: Floats) -> float:
    """Return the standard uncertainty of the stations' mean from the pattern on the edges, px.

    The pattern draws each station's edges aside by its own speckles: stations 16 px apart share none.  So
    their scatter about a straight line (the coupon may taper) beyond the grey noise tells it.

    Parameters
    ----------
    along
        Places of the stations, px, shape (k,).
    change, noise
        Change of the width at each since the reference, NaN where lost, and its standard uncertainty from
        grey noise, px.
    """
    there = np.isfinite(change)
    count = int(there.sum())
    if count < LEAST_STATIONS:
        return USUAL_PX / sqrt(max(count, 1))
    scatter = change[there] - _line_through(along, change)[there]
    beyond = float(scatter @ scatter) / (count - 2) - ZONE_SHARE * float(np.mean(noise[there] ** 2))
    return sqrt(max(PATTERN_LEVEL * beyond, 0.0) / count)


def mean_motion(places: NDArray[np.integer | np.floating], moved: Floats, centre: Floats) -> Floats:
    """Return the affine motion of the measured subsets about a centre, shape (2, 3).

    Parameters
    ----------
    places, moved
        Centres and displacements, px, shape (m, 2).
    centre
        Where the value is wanted.
    """
    if len(places) < 3:
        return np.full((2, 3), np.nan)
    plane = np.column_stack([np.ones(len(places)), places - centre])
    return np.asarray(np.linalg.lstsq(plane, moved, rcond=None)[0].T)
