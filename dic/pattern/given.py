"""What is said of the coupon instead of found: edges, mask, holes, parallel section."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from dic.errors import TestFileError
from dic.pattern.edges import Edge, Edges
from dic.pattern.outline import Mask, axes, centre

Floats = NDArray[np.float64]
#: A line by two of its points, x and y of each, px.
Line = tuple[float, float, float, float]

#: Edges by hand lie this well, px (standard uncertainty): nobody clicks better than a pixel.
BY_HAND_PX = 0.5


@dataclass(frozen=True)
class Given:
    """What the user says of the coupon in the reference picture, px.

    Attributes
    ----------
    edges
        Both long edges, two points each; None to find them.
    mask
        True where the coupon is, shape (rows, columns); None to find it.
    holes
        Centre and radius of round holes, x, y, radius.
    parallel
        Two points between which the coupon is parallel; None to find it.
    """

    edges: tuple[Line, Line] | None = None
    mask: Mask | None = None
    holes: tuple[tuple[float, float, float], ...] = ()
    parallel: Line | None = None

    def check(self, shape: tuple[int, ...]) -> None:
        """Refuse what does not fit a picture of this shape.

        Raises
        ------
        TestFileError
            One sentence with the coordinates and what would fit.
        """
        size = f"the picture is {shape[1]} px wide and {shape[0]} px high"
        for number, line in enumerate(self.edges or (), start=1):
            _inside(line, shape, f"edge {number}", "coupon.edges", size)
        if self.parallel is not None:
            _inside(self.parallel, shape, "the parallel section", "coupon.parallel", size)
        for number, (x, y, radius) in enumerate(self.holes, start=1):
            near = -radius < x < shape[1] - 1 + radius and -radius < y < shape[0] - 1 + radius
            if not (radius > 0 and near):
                raise TestFileError(
                    f"hole {number}, radius {radius:g} px about x {x:g}, y {y:g} px, is not in the picture",
                    where="coupon.holes",
                    remedy=f"{size}; a hole is [x, y, radius]",
                )
        if self.mask is not None:
            _check_mask(self.mask, shape)
        if self.edges is not None:
            _check_crossing(self.edges, shape)

    def axis_deg(self) -> float | None:
        """Return the direction half way between both edges, deg from the vertical; None without edges."""
        if self.edges is None:
            return None
        first, second = (_ray(line)[1] for line in self.edges)
        x, y = first + (second if first @ second > 0 else -second)
        return float((np.degrees(np.arctan2(x, -y)) + 90.0) % 180.0 - 90.0)

    def lines(self, shape: tuple[int, ...], angle_deg: float) -> Edges:
        """Return the given edges in coupon axes; none where they are to be found."""
        if self.edges is None:
            return None, None
        found = sorted((_edge(line, shape, angle_deg) for line in self.edges), key=lambda one: one.offset)
        return found[0], found[1]

    def section(self, shape: tuple[int, ...], angle_deg: float) -> tuple[float, float] | None:
        """Return from where to where along the axis the parallel section goes; None where not given."""
        if self.parallel is None:
            return None
        places = (np.reshape(self.parallel, (2, 2)) - centre(shape)) @ axes(angle_deg)[0]
        return float(places.min()), float(places.max())

    def pierced(self, shape: tuple[int, ...], margin: float) -> Mask:
        """Mark the given holes and so much around them."""
        y, x = np.arange(shape[0])[:, None], np.arange(shape[1])
        marked = np.zeros(shape, bool)
        for hole_x, hole_y, radius in self.holes:
            marked |= (x - hole_x) ** 2 + (y - hole_y) ** 2 < (radius + margin) ** 2
        return marked


#: Everything is to be found.
NOTHING_GIVEN = Given()


def rectangle(
    shape: tuple[int, ...], sides: tuple[float, float, float, float], what: str, where: str
) -> Mask:
    """Mark a rectangle of the test file, x, y, width, height in px, in a picture of this shape.

    Raises
    ------
    TestFileError
        If it is not inside the picture.
    """
    x, y, width, height = sides
    if not (
        width > 0 and height > 0 and x >= 0 and x + width <= shape[1] and y >= 0 and y + height <= shape[0]
    ):
        raise TestFileError(
            f"{what} x {x:g} to {x + width:g}, y {y:g} to {y + height:g} px is not inside the picture",
            where=where,
            remedy=f"the picture is {shape[1]} px wide and {shape[0]} px high",
        )
    mask = np.zeros(shape, bool)
    mask[round(y) : round(y + height), round(x) : round(x + width)] = True
    return mask


def _check_mask(mask: Mask, shape: tuple[int, ...]) -> None:
    if mask.shape != shape:
        raise TestFileError(
            f"the mask is {mask.shape[1]} px wide and {mask.shape[0]} px high",
            where="coupon.mask",
            remedy=f"it must be as large as the frames, {shape[1]} by {shape[0]} px",
        )
    if not mask.any():
        raise TestFileError(
            "the mask leaves nothing of the picture, because it is black everywhere",
            where="coupon.mask",
            remedy="make the coupon white (more than half of the grey scale)",
        )


def _check_crossing(edges: tuple[Line, Line], shape: tuple[int, ...]) -> None:
    (a, along), (b, beside) = (_ray(line) for line in edges)
    steep = along[0] * beside[1] - along[1] * beside[0]
    if abs(steep) < 1e-9:
        if abs(along[0] * (b - a)[1] - along[1] * (b - a)[0]) < 1:
            raise TestFileError(
                "both edges are the same line", where="coupon.edges", remedy="give one edge on each side"
            )
        return
    x, y = a + along * float((b[0] - a[0]) * beside[1] - (b[1] - a[1]) * beside[0]) / steep
    if 0 <= x < shape[1] and 0 <= y < shape[0]:
        raise TestFileError(
            f"the two edges cross inside the picture, at x {x:.0f}, y {y:.0f} px",
            where="coupon.edges",
            remedy="give two points [x1, y1, x2, y2] on each long side of the coupon",
        )


def _ray(line: Line) -> tuple[Floats, Floats]:
    start, end = np.reshape(np.asarray(line, dtype=float), (2, 2))
    return start, (end - start) / np.hypot(*(end - start))


def _edge(line: Line, shape: tuple[int, ...], angle_deg: float) -> Edge:
    axial, transverse = axes(angle_deg)
    points = np.reshape(line, (2, 2)) - centre(shape)
    along, across = points @ axial, points @ transverse
    apart = along[1] - along[0]
    slope = (across[1] - across[0]) / apart if abs(apart) > 1e-9 else np.inf
    if not abs(slope) < 1:
        raise TestFileError(
            "the edges run across the pull rather than along it",
            where="coupon.edges and gauge.axis",
            remedy="give the two long sides, or correct the axis",
        )
    middle = float(along.mean())
    return Edge(
        float(across.mean() - slope * middle),
        float(slope),
        middle,
        BY_HAND_PX / np.sqrt(2),
        float(BY_HAND_PX * np.sqrt(2) / abs(apart)),
    )


def _inside(line: Line, shape: tuple[int, ...], what: str, where: str, size: str) -> None:
    x1, y1, x2, y2 = line
    within = all(0 <= x <= shape[1] - 1 for x in (x1, x2)) and all(0 <= y <= shape[0] - 1 for y in (y1, y2))
    if not within:
        raise TestFileError(
            f"{what}, from x {x1:g}, y {y1:g} to x {x2:g}, y {y2:g} px, is not inside the picture",
            where=where,
            remedy=size,
        )
    if np.hypot(x2 - x1, y2 - y1) < 2:
        raise TestFileError(
            f"{what} has its two points at the same place, x {x1:g}, y {y1:g} px",
            where=where,
            remedy="give points that are far apart",
        )
