"""The coupon's width between its long edges, in every frame: a diameter gauge that needs no speckle.

Rays cross each edge where its material points lie in the frame.  The area under the step from
background to coupon, divided by the step, is where the edge stands; an area does not change with the
edge's place between two pixels, nor with the lens' blur (moment-preserving edges, Tabatabai and
Mitchell 1984, doi 10.1109/TPAMI.1984.4767502 [from memory]).  A pattern on the coupon makes each place
of the edge uncertain, but moves with it, so that it hardly enters the change of width.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy import ndimage

from dic.pattern import Coupon, axes
from dic.strain import Region

Floats = NDArray[np.float64]

#: Rays stand one px apart along the edge; so many share one stored width.
BLOCK = 16
#: The edge is first looked for this far to either side of where the motion puts it, px ...
SEARCH_PX = 10.0
#: ... then weighed over this much to either side: a lens' blur fits in, and little noise.
ZONE_PX = 4.0
#: Beyond the zone so much gives the grey of background and of coupon, px.
LEVEL_PX = 4.0
#: Samples along a ray, px.
PITCH_PX = 0.5
#: Sides are told apart only where their grey differs by this many times the noise.
LEAST_STEP = 10.0


@dataclass(frozen=True)
class Widths:
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

    def __init__(self, image: NDArray[np.floating], coupon: Coupon, region: Region) -> None:
        left, right = coupon.edges
        if left is None or right is None:
            raise ValueError("both edges are needed")
        axial, transverse = axes(coupon.axis_angle_deg)
        middle = np.array([image.shape[1] - 1, image.shape[0] - 1]) / 2.0
        start = float((region.centre - middle) @ axial)
        blocks = max(int(region.length // BLOCK), 1)
        self.along = (np.arange(blocks) - (blocks - 1) / 2) * BLOCK
        rays = start + (self.along[:, None] + np.arange(BLOCK) - (BLOCK - 1) / 2).ravel()
        self._axial, self._transverse = axial, transverse
        self._edges = [
            middle + rays[:, None] * axial + (edge.offset + edge.slope * rays)[:, None] * transverse
            for edge in (left, right)
        ]
        self._centre = region.centre
        self.reference = self.measure(image, np.zeros((2, 3)))

    @property
    def range_px(self) -> tuple[float, float]:
        """From and to where both edges are clear in the reference, along the axis from the region's middle."""
        seen = self.along[np.isfinite(self.reference.px)]
        if not seen.size:
            return 0.0, 0.0
        return float(seen[0]) - BLOCK / 2, float(seen[-1]) + BLOCK / 2

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

    def measure(self, frame: NDArray[np.floating], motion: Floats) -> Widths:
        """Measure the width in one frame.

        Parameters
        ----------
        frame
            Grey values, shape (rows, columns).
        motion
            Displacement and gradient of the coupon about the region's centre, u and then v: value, slope
            along x, slope along y, shape (2, 3).
        """
        deformation = np.eye(2) + motion[:, 1:]
        direction = deformation @ self._axial
        direction /= np.linalg.norm(direction)
        # Across the coupon as it stands now, so that its turning is no widening.
        across = np.array([-direction[1], direction[0]])
        grey = np.asarray(frame, np.float32)
        places, spreads = [], []
        for edge, side in zip(self._edges, (-1.0, 1.0), strict=True):
            there = self._centre + motion[:, 0] + (edge - self._centre) @ deformation.T
            shift = self._shift(grey, there, side * across, SEARCH_PX)[0]
            blocks = np.repeat(_line_through(self.along, shift), BLOCK)
            fine, spread = self._shift(
                grey, there + (side * blocks)[:, None] * across, side * across, ZONE_PX
            )
            whole = (there @ across).reshape(-1, BLOCK).mean(axis=1)
            places.append(whole + side * (blocks[::BLOCK] + fine))
            spreads.append(spread)
        return Widths(places[1] - places[0], np.hypot(*spreads))

    @staticmethod
    def _shift(grey: NDArray[np.float32], at: Floats, outward: Floats, zone: float) -> tuple[Floats, Floats]:
        """Return how far outside the expected places the edge stands, block by block, and u per grey level."""
        reach = zone + LEVEL_PX
        depth = np.arange(-reach + PITCH_PX / 2, reach, PITCH_PX)
        x = at[:, :1] + depth * outward[0]
        y = at[:, 1:] + depth * outward[1]
        rays = ndimage.map_coordinates(grey, [y, x], order=1, mode="constant", cval=np.nan)
        profile = rays.reshape(-1, BLOCK, len(depth)).mean(axis=1)
        whole = profile[np.isfinite(profile).all(axis=1)]
        if not len(whole):
            nowhere = np.full(len(profile), np.nan)
            return nowhere, nowhere
        inner, outer = depth < -zone, depth > zone
        inside, outside = float(whole[:, inner].mean()), float(whole[:, outer].mean())
        step = inside - outside
        share = (profile[:, np.abs(depth) < zone] - outside) / (step if step else np.nan)
        shift = share.sum(axis=1) * PITCH_PX - zone
        # Grey noise of the zone, and of the two levels; rays one px apart share no pixel.
        variance = (2 * zone + zone**2 / LEVEL_PX * 2) / BLOCK
        return shift, np.full(len(shift), np.sqrt(variance) / abs(step) if step else np.nan)


def _line_through(along: Floats, shift: Floats) -> Floats:
    """Return a straight line through the blocks' shifts, for finding the edge again."""
    there = np.isfinite(shift)
    if there.sum() < 2:
        return np.full(len(along), shift[there].mean() if there.any() else 0.0)
    return np.polynomial.Polynomial.fit(along[there], shift[there], 1)(along)


def clear(widths: Widths, noise_grey: float) -> Widths:
    """Return the widths, NaN where the coupon does not stand out from its background."""
    # The step's share of the uncertainty is known from its size: variance / u² gives it back.
    least = np.sqrt((2 * ZONE_PX + ZONE_PX**2 / LEVEL_PX * 2) / BLOCK * 2) / (LEAST_STEP * noise_grey)
    faint = ~(widths.u_per_grey < least)
    return Widths(np.where(faint, np.nan, widths.px), np.where(faint, np.nan, widths.u_per_grey))


def mean_motion(places: Floats, moved: Floats, centre: Floats) -> Floats:
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
