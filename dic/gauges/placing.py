"""From the test file's gauges to places on the coupon, or the reason why one does not fit there."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from skimage.measure import points_in_poly

from dic.errors import TestFileError
from dic.gauges.between import Between
from dic.gauges.probes import Ints, Probe, Spanning, Stretching, Subsets
from dic.gauges.silhouette import MOST_UNEVEN, Silhouette
from dic.pattern import axes, perpendicular
from dic.quantities import parse
from dic.strain import Region
from dic.testfile import NamedGauge, Place, in_px

Floats = NDArray[np.float64]

#: Columns of history.csv, which no gauge may be named after.
RESERVED = frozenset(
    [
        "frame", "time_s", "force_N", "stress_MPa", "strain_axial", "strain_transverse", "strain_shear",
        "u_strain_axial", "u_strain_transverse", "valid_fraction", "status", "machine_time_s",
        "strain_extensometer", "strain_bending", "u_strain_shear", "u_strain_extensometer",
        "shift_axial_px", "shift_transverse_px", "name", "strain_clip_on", "hencky_axial",
        "hencky_transverse", "stretch_axial", "stretch_transverse",
    ]
)  # fmt: skip
#: Where along the gauge region a transverse extensometer sits, if the test file does not say it.
STATIONS = (0.25, 0.5, 0.75)
#: A line has at most so many stations; more lie closer than their windows can tell apart.
MOST_ON_LINE = 200
#: Window of a line's local strain, in subsets.
LINE_WINDOW = 3
#: An area of which less carries subsets is said to be partly off the coupon; their centres stay half a
#: subset inside its rim, so that a small area on the coupon may have three quarters.
LEAST_SHARE = 0.7


@dataclass(frozen=True)
class Placed:
    """A gauge on the coupon.

    Attributes
    ----------
    name, kind
        As in the test file.
    probes
        What is read; empty for a width between the edges.
    labels
        Name of each probe's own column; empty where the gauge has one probe only, or is a line.
    outlines
        What to draw: polygons or lines in the reference picture, px, shape (k, 2) each.
    length_px
        Length that the strain refers to, px.
    places_px
        Places along a line, px from its start, shape (p,); empty for other kinds.
    between
        What is read of the edges; None for what is read from the pattern.
    note
        What was chosen for the user; empty where nothing was.
    """

    name: str
    kind: str
    probes: tuple[Probe, ...]
    labels: tuple[str, ...]
    outlines: tuple[Floats, ...]
    length_px: float
    places_px: tuple[float, ...] = ()
    between: Between | None = None
    note: str = ""

    @property
    def is_angle(self) -> bool:
        """Whether an angle is read, which does not change as the picture grows."""
        return any(isinstance(one, Stretching) and one.component == "shear" for one in self.probes)


def place_gauges(
    wanted: Mapping[str, NamedGauge],
    subsets: Subsets,
    region: Region,
    scale_mm: float,
    silhouette: Silhouette | None,
) -> list[Placed]:
    """Place the named gauges.

    Parameters
    ----------
    wanted
        As in the test file.
    subsets
        All subsets of the test.
    region
        The gauge region, for defaults and for places relative to the coupon.
    scale_mm
        mm per px, NaN where unknown.
    silhouette
        The coupon's edges; None where they are not in view.

    Returns
    -------
    list of Placed
        In the order of the test file.

    Raises
    ------
    TestFileError
        If a gauge reaches out of the picture, lies off the coupon, is shorter than two subsets, or has
        the name of another column.
    """
    placer = _Placer(subsets, region, scale_mm, silhouette)
    placed = [placer.place(name, gauge) for name, gauge in wanted.items()]
    taken = set(RESERVED)
    for gauge in placed:
        for column in [gauge.name, f"u_{gauge.name}", f"status_{gauge.name}", *_columns(gauge.labels)]:
            if column in taken:
                raise TestFileError(
                    f"the name '{column}' is taken by another column of history.csv",
                    where=f"gauges.{gauge.name}",
                    remedy="choose another name",
                )
            taken.add(column)
    return placed


def _columns(labels: tuple[str, ...]) -> list[str]:
    return [column for label in labels for column in (label, f"u_{label}")]


class _Placer:
    def __init__(
        self, subsets: Subsets, region: Region, scale_mm: float, silhouette: Silhouette | None
    ) -> None:
        self.subsets, self.region, self.scale_mm, self.silhouette = subsets, region, scale_mm, silhouette
        self.where = "gauges"

    def place(self, name: str, gauge: NamedGauge) -> Placed:
        self.where = f"gauges.{name}"
        make = {
            "extensometer": self.extensometer,
            "area": self.area,
            "transverse": self.across,
            "points": self.pair,
            "line": self.line,
            "edge_width": self.edge_width,
        }[gauge.kind]
        return make(name, gauge)

    def extensometer(self, name: str, gauge: NamedGauge) -> Placed:
        first, last, chosen = self._ends(gauge)
        width = self.px(gauge.width) if gauge.width is not None else self.region.width
        probe, outlines = self._spanning(first, last, width)
        length = float(np.linalg.norm(last - first))
        note = "the length was chosen so that a whole band lies on the coupon at either end" if chosen else ""
        return Placed(name, gauge.kind, (probe,), (), outlines, length, note=note)

    def _ends(self, gauge: NamedGauge) -> tuple[Floats, Floats, bool]:
        """Return both ends, and whether their distance was chosen here."""
        if gauge.start is not None and gauge.end is not None:
            return self.point(gauge.start), self.point(gauge.end), False
        centre = self.region.centre if gauge.centre is None else self.point(gauge.centre)
        direction = self.region.axial if gauge.angle is None else axes(gauge.angle)[0]
        if gauge.length is not None:
            length = self.px(gauge.length)
        else:
            width = self.region.width if gauge.width is None else self.px(gauge.width)
            length = self._room(centre, direction, width)
        return centre - direction * length / 2, centre + direction * length / 2, gauge.length is None

    def _room(self, centre: Floats, direction: Floats, width: float) -> float:
        """Return the length about a centre that leaves a band on the coupon at either end, px."""
        there = self.subsets.in_rectangle(centre, direction, 1e6, width)
        along = (self.subsets.places[there] - centre) @ direction
        if not len(along) or along.min() >= 0 or along.max() <= 0:
            raise self.off_coupon(centre)
        return 2 * float(min(-along.min(), along.max())) - self.subsets.size

    def _spanning(self, first: Floats, last: Floats, width: float) -> tuple[Spanning, tuple[Floats, ...]]:
        direction = (last - first) / max(float(np.linalg.norm(last - first)), 1e-9)
        self.inside_picture(np.stack([first, last]))
        self.long_enough(first, last)
        across, depth = perpendicular(direction), self.subsets.size
        bands: list[Ints] = []
        outlines = [np.stack([first, last])]
        for end in (first, last):
            band = self.subsets.in_rectangle(end, direction, depth, width)
            # A wide band may reach the coupon from far beside it, where the reading would be guesswork.
            away = np.linalg.norm(self.subsets.places[band] - end, axis=1)
            if not len(band) or away.min() > depth:
                raise self.off_coupon(end)
            bands.append(band)
            outlines.append(Region(end, depth, width, direction, across).corners())
        return Spanning(self.subsets, first, last, (bands[0], bands[1])), tuple(outlines)

    def area(self, name: str, gauge: NamedGauge) -> Placed:
        if gauge.region is not None:
            x, y, wide, high = gauge.region
            corners = np.array([[x, y], [x + wide, y], [x + wide, y + high], [x, y + high]], float)
        else:
            corners = self.region.corners() if gauge.points is None else np.array(gauge.points, float)
        if gauge.region is not None or gauge.points is not None:
            # The gauge region of a coupon that is askew has corners beyond the picture.
            self.inside_picture(corners)
        usable = self.subsets.reference.usable
        members = np.flatnonzero(points_in_poly(self.subsets.places, corners) & usable)
        if not len(members):
            raise self.off_coupon(corners.mean(axis=0))
        component = gauge.component or "axial"
        directions = {"axial": [self.region.axial], "transverse": [self.region.transverse]}
        lengths = [
            float(np.ptp(corners @ direction))
            for direction in directions.get(component, [self.region.axial, self.region.transverse])
        ]
        if min(lengths) < 2 * self.subsets.size or len(members) < 6:
            raise self.too_short(min(lengths))
        probe = Stretching(self.subsets, members, self.region.axial, self.region.transverse, component)
        share = len(members) * self.subsets.grid.step**2 / _polygon_area(corners)
        named = gauge.region is not None or gauge.points is not None
        note = f"about {100 * share:.0f} % of it carries subsets" if named and share < LEAST_SHARE else ""
        return Placed(name, gauge.kind, (probe,), (), (corners,), lengths[0], note=note)

    def across(self, name: str, gauge: NamedGauge) -> Placed:
        region = self.region
        width = 2.0 * self.subsets.size if gauge.width is None else self.px(gauge.width)
        probes: list[Probe] = []
        outlines: list[Floats] = []
        lengths: list[float] = []
        for station in STATIONS if gauge.stations is None else gauge.stations:
            along = self.px(station) if isinstance(station, str) else (station - 0.5) * region.length
            centre = region.centre + along * region.axial
            self.inside_picture(centre[None])
            if gauge.length is not None:
                length = self.px(gauge.length)
            else:
                length = self._room(centre, region.transverse, width)
            half = region.transverse * length / 2
            probe, drawn = self._spanning(centre - half, centre + half, width)
            probes.append(probe)
            outlines += drawn
            lengths.append(length)
        labels = tuple(f"{name}_{k + 1}" for k in range(len(probes))) if len(probes) > 1 else ()
        note = (
            "" if gauge.length is not None else "the length was chosen so that both bands lie on the coupon"
        )
        mean = float(np.mean(lengths))
        return Placed(name, gauge.kind, tuple(probes), labels, tuple(outlines), mean, note=note)

    def pair(self, name: str, gauge: NamedGauge) -> Placed:
        first, last, _ = self._ends(gauge)
        length = self.long_enough(first, last)
        bands = []
        for end in (first, last):
            self.inside_picture(end[None])
            away = np.linalg.norm(self.subsets.places - end, axis=1)
            away = np.where(self.subsets.reference.usable, away, np.inf)
            nearest = int(np.argmin(away))
            if not away[nearest] <= self.subsets.grid.step:
                raise self.off_coupon(end)
            bands.append(np.array([nearest]))
        probe = Spanning(self.subsets, first, last, (bands[0], bands[1]))
        return Placed(name, gauge.kind, (probe,), (), (np.stack([first, last]),), length)

    def line(self, name: str, gauge: NamedGauge) -> Placed:
        first, last, _ = self._ends(gauge)
        self.inside_picture(np.stack([first, last]))
        total = self.long_enough(first, last)
        direction = (last - first) / total
        across = perpendicular(direction)
        grid = self.subsets.grid
        window = LINE_WINDOW * grid.subset if gauge.length is None else self.px(gauge.length)
        window = min(max(window, 2.0 * grid.step), total)
        width = float(grid.subset) if gauge.width is None else self.px(gauge.width)
        count = int(min((total - window) // max(grid.step, 1) + 1, MOST_ON_LINE))
        places = np.linspace(window / 2, total - window / 2, count) if count > 1 else np.array([total / 2])
        probes: list[Probe] = []
        kept: list[float] = []
        for place in places:
            centre = first + place * direction
            # Subsets whose own pixels lie in the window, as far as the pitch allows.
            reach = max(window - grid.subset, 2.0 * grid.step)
            members = self.subsets.in_rectangle(centre, direction, reach, max(width, 1.5 * grid.step))
            if len(members) >= 3:
                probes.append(Stretching(self.subsets, members, direction, across))
                kept.append(float(place))
        if not probes:
            raise self.off_coupon((first + last) / 2)
        note = f"strain is formed over windows of {window:.0f} px"
        return Placed(
            name, gauge.kind, tuple(probes), (), (np.stack([first, last]),), total, tuple(kept), note=note
        )

    def edge_width(self, name: str, gauge: NamedGauge) -> Placed:
        if self.silhouette is None:
            raise TestFileError(
                "the coupon's long edges are not both in view",
                where=self.where,
                remedy="let the camera see the background on both sides, or use a transverse gauge",
            )
        if not self.silhouette.plain:
            raise TestFileError(
                f"the background beside the coupon is not plain: along its edges the grey scatters by "
                f"{100 * self.silhouette.uneven:.0f} % of the step to the coupon, and "
                f"{100 * MOST_UNEVEN:.0f} % is the most",
                where=self.where,
                remedy="hang a plain sheet behind the coupon, or use a transverse gauge",
            )
        low, high = self.silhouette.range_px
        middle = 0.0
        if gauge.centre is not None:
            middle = float((self.point(gauge.centre) - self.region.centre) @ self.region.axial)
        length = high - low if gauge.length is None else self.px(gauge.length)
        first, last = middle - length / 2, middle + length / 2
        if gauge.length is None:
            first, last = max(first, low), min(last, high)
        if first < low - 1 or last > high + 1:
            raise TestFileError(
                f"{first:.0f} px to {last:.0f} px along the axis is more than is seen of both edges",
                where=self.where,
                remedy=f"from the middle of the region, they are seen from {low:.0f} px to {high:.0f} px",
            )
        outlines, width = self.silhouette.outlines(first, last), self.silhouette.width_px(first, last)
        between = Between(self.silhouette, first, last)
        return Placed(name, gauge.kind, (), (), outlines, width, between=between)

    def px(self, size: float | str) -> float:
        """Return a length in px."""
        if not isinstance(size, str):
            return float(size)
        if (said := in_px(size)) is not None:
            return said
        if not np.isfinite(self.scale_mm):
            raise TestFileError(
                "the scale is unknown because the coupon's edges are not in view",
                where=self.where,
                remedy='give camera.scale, for example "0.021 mm/px", or write lengths in px',
            )
        return parse(size, "length") / self.scale_mm

    def point(self, place: Place) -> Floats:
        """Return a place in the reference picture."""
        first, second = place
        if isinstance(first, str) and isinstance(second, str):
            region = self.region
            return region.centre + self.px(first) * region.transverse + self.px(second) * region.axial
        return np.array([first, second], float)

    def inside_picture(self, points: Floats) -> None:
        rows, columns = self.subsets.reference.shape
        (left, top), (right, bottom) = points.min(axis=0), points.max(axis=0)
        if left < -0.5 or top < -0.5 or right > columns - 0.5 or bottom > rows - 0.5:
            raise TestFileError(
                f"reaches out of the picture: x {left:.0f} to {right:.0f}, y {top:.0f} to {bottom:.0f} px",
                where=self.where,
                remedy=f"the picture is {columns} px wide and {rows} px high",
            )

    def long_enough(self, first: Floats, last: Floats) -> float:
        length = float(np.linalg.norm(last - first))
        if length < 2 * self.subsets.size:
            raise self.too_short(length)
        return length

    def too_short(self, length: float) -> TestFileError:
        least = 2 * self.subsets.size
        return TestFileError(
            f"is {length:.0f} px long, shorter than two subsets",
            where=self.where,
            remedy=f"make it {least} px or longer, or lower correlation.subset",
        )

    def off_coupon(self, at: Floats) -> TestFileError:
        places = self.subsets.places[self.subsets.reference.usable]
        (left, top), (right, bottom) = places.min(axis=0), places.max(axis=0)
        return TestFileError(
            f"no subset lies at x {at[0]:.0f}, y {at[1]:.0f} px: that is off the speckled coupon",
            where=self.where,
            remedy=f"subsets lie from x {left:.0f} to {right:.0f} and y {top:.0f} to {bottom:.0f} px",
        )


def _polygon_area(corners: Floats) -> float:
    """Return the area inside a polygon, px² (Gauss' formula)."""
    x, y = corners.T
    return float(abs(x @ np.roll(y, -1) - y @ np.roll(x, -1)) / 2)
