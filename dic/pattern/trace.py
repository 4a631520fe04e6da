"""Rays across one edge, and the places along it where they find the edge."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy import ndimage

from dic.pattern.boundary import Boundary, Reach, rays
from dic.pattern.outline import Floats, axes, centre

#: More rays than this add time but no accuracy that a strain could feel.
MOST_RAYS = 500
#: Rays over so many px along the edge give one place of it: longer than speckles, so that neighbouring
#: stations are independent, shorter than a fillet.
STATION_PX = 16.0
#: A station must be likelier than the ends of the search by so much; a flat likelihood says nothing.
LEAST_SAID = 12.0
#: Rays reach so far out of the coupon, the first for which the picture has room along most of the edge, px.
OUTWARD_PX = (16, 12, 9, 7)
#: Share of the rays for which there has to be room.
MOST_ROOM = 0.75
#: A shorter stretch of edge tells no direction, px; and a rough outline of fewer points no place.
LEAST_PX, LEAST_POINTS = 32.0, 8


@dataclass(frozen=True)
class Trace:
    """Rays across one edge.

    Attributes
    ----------
    place, near
        Where each ray stands along the axis, and where it meets the rough edge, px, shape (n,).
    side
        −1 for the left edge, 1 for the right one.
    boundary
        What the rays say.
    pitch
        Distance between rays, px.
    """

    place: Floats
    near: Floats
    side: int
    boundary: Boundary
    pitch: float

    @classmethod
    def along(
        cls, grey: NDArray[np.float32], points: Floats, angle_deg: float, side: int, span: float
    ) -> Trace | None:
        """Send rays across the edge that is roughly known from points; None where it is not in view."""
        axial, transverse = axes(angle_deg)
        middle = centre(grey.shape)
        if len(points) < LEAST_POINTS:
            return None
        there, across = (points - middle) @ axial, (points - middle) @ transverse
        order = np.argsort(there)
        there, across = there[order], across[order]
        pitch = max(1.0, float(np.ptp(there)) / MOST_RAYS)
        place = np.arange(there[0], there[-1] + pitch / 2, pitch)
        if len(place) < LEAST_PX / pitch:
            return None
        smooth = ndimage.median_filter(across, 9, mode="nearest") if len(across) > 9 else across
        near = ndimage.gaussian_filter1d(
            np.interp(place, there, smooth), STATION_PX / 2 / pitch, mode="nearest"
        )
        for outward in OUTWARD_PX:
            reach = Reach(outward, span)
            offset = near[:, None] - side * reach.depth
            x = middle[0] + place[:, None] * axial[0] + offset * transverse[0]
            y = middle[1] + place[:, None] * axial[1] + offset * transverse[1]
            samples = rays(grey, x, y)
            whole = np.isfinite(samples).all(axis=1)
            if whole.sum() > MOST_ROOM * _possible(samples):
                break
        if whole.sum() < 2 * LEAST_PX / pitch:
            return None
        return cls(place, near, side, Boundary(samples, reach, pitch), pitch)

    def likeliest_line(self, blur: float) -> tuple[float, float]:
        """Return how far inside its rough place all rays together find the edge, px, and at what slope."""
        table, tried = self.boundary.places(blur), self.boundary.reach.places
        from_middle = self.place - self.place.mean()
        half = float(from_middle[-1])
        row, step = np.arange(len(table)), tried[1] - tried[0]
        best: list[tuple[float, float]] = []
        leans = np.linspace(-1, 1, 9) / half
        for lean in leans:
            # A table moved by whole places would step; between two places it is read off a straight line.
            column = (tried + lean * from_middle[:, None] - tried[0]) / step
            low = np.clip(np.floor(column).astype(int), 0, len(tried) - 2)
            share = np.clip(column - low, 0, 1)
            said = table[row[:, None], low] * (1 - share) + table[row[:, None], low + 1] * share
            total = said.sum(axis=0)
            top = min(max(int(np.argmax(total)), 1), len(total) - 2)
            best.append((float(total[top]), _top(total[top - 1 : top + 2], tried[top - 1 : top + 2])))
        height = np.array([total for total, _ in best])
        top = min(max(int(np.argmax(height)), 1), len(leans) - 2)
        lean = _top(height[top - 1 : top + 2], leans[top - 1 : top + 2])
        return float(np.interp(lean, leans, [inward for _, inward in best])), float(lean)

    def stations(self, blur: float) -> tuple[Floats, Floats]:
        """Return places along the axis and the edge's offsets there; NaN where it cannot be told."""
        table, tried = self.boundary.places(blur), self.boundary.reach.places
        size = max(round(STATION_PX / self.pitch), 4)
        starts = np.arange(0, len(table) - size // 2, size)
        said = np.add.reduceat(table, starts, axis=0)
        count = np.diff([*starts, len(table)])
        whole = np.add.reduceat(self.boundary.whole.astype(int), starts)
        path = _path(said)
        place = np.add.reduceat(self.place, starts) / count
        near = np.add.reduceat(self.near, starts) / count
        offset = np.full(len(starts), np.nan)
        for row, column in enumerate(path):
            here = said[row]
            ends = max(here[0], here[-1])
            if (
                not 0 < column < len(tried) - 1
                or here[column] < ends + LEAST_SAID
                or whole[row] < count[row] / 2
            ):
                continue
            inward = _top(here[column - 1 : column + 2], tried[column - 1 : column + 2])
            offset[row] = near[row] - self.side * inward
        return place, offset


def _top(said: Floats, places: Floats) -> float:
    """Return the place of the top of a parabola through three neighbouring places."""
    bend = said[0] - 2 * said[1] + said[2]
    top = 0.5 * (said[0] - said[2]) / bend if bend < 0 else 0.0
    return float(places[1] + np.clip(top, -1, 1) * (places[1] - places[0]))


def _possible(samples: Floats) -> int:
    """Count the rays of which at least the coupon's half lies in the picture."""
    return int(np.isfinite(samples[:, samples.shape[1] // 2 :]).all(axis=1).sum())


def _path(said: Floats) -> NDArray[np.intp]:
    """Return the likeliest smooth course of the edge from station to station (Viterbi's recursion)."""
    step = np.arange(said.shape[1])
    # Neighbouring stations may differ by a quarter px for nothing, by two px for what one dust ray says.
    cost = 0.4 * (step[:, None] - step) ** 2
    best, came = said[0], np.zeros(said.shape, dtype=np.intp)
    for row in range(1, len(said)):
        total = best[None, :] - cost
        came[row] = total.argmax(axis=1)
        best = total.max(axis=1) + said[row]
    path = np.empty(len(said), dtype=np.intp)
    path[-1] = int(np.argmax(best))
    for row in range(len(said) - 1, 0, -1):
        path[row - 1] = came[row, path[row]]
    return path
