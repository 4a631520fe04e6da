"""How straight the coupon was pulled: bending in the picture's plane and what goes with it.

Everything is read off one field, the *rate*: by how much each subset moves per unit of the gauge's mean
axial strain, a straight line through the frames of the elastic part.  What stands still drops out of it,
and so does the reference picture's noise.
"""

from __future__ import annotations

from dataclasses import dataclass, field, replace
from math import isfinite, nan
from typing import Any, NamedTuple

import numpy as np
from numpy.typing import NDArray
from scipy.stats import linregress

from dic.strain.causes import OBSERVED, Causes, explain
from dic.strain.history import GaugeHistory
from dic.strain.rates import Rates, Stations, mirrored, read_stations

Floats = NDArray[np.float64]

#: Frames in the elastic part below which no straight line through them says how sure it is.
LEAST_FRAMES = 4
#: Frames that are read at the most, evenly spread; more would take seconds and add little.
MOST_FRAMES = 300
#: Motion along the axis, px, from which its direction means something.
LEAST_MOTION_PX = 0.5
#: Standard uncertainty of the coupon's axis, deg, where nothing states it: what finding it is good to
#: (`tests/pattern`).
U_AXIS_DEG = 0.1
#: Usual limits of percent bending, by standard: ASTM D3039 and ASTM E606 [both from memory].  Standards
#: that say how to measure alignment and leave the limit to others have none.
LIMITS: dict[str, float | None] = {
    "ASTM D3039": 0.10,
    "ASTM E606": 0.05,
    "ASTM E1012": None,
    "ISO 23788": None,
}
WITHIN, BEYOND, UNTOLD = "within", "beyond", "cannot be told"

#: Terms of the polynomials through the rates, as powers of (along, across).
ALONG = ((0, 0), (1, 0), (0, 1), (2, 0), (1, 1), (0, 2), (2, 1), (0, 3), (3, 0))
ACROSS = ((0, 0), (1, 0), (0, 1), (2, 0), (1, 1), (0, 2), (3, 0), (1, 2))


class Estimate(NamedTuple):
    """A value with its standard uncertainty."""

    value: float = float("nan")
    u: float = float("nan")


UNKNOWN = Estimate()
NO_CAUSES = Causes()


@dataclass(frozen=True)
class Alignment:
    """How straight the coupon was pulled in the elastic part; shares are per mean axial strain.

    Attributes
    ----------
    reason
        Why nothing could be determined; empty where it could.
    frames
        Frames in the elastic part.
    bending
        (ε_edge − ε_mean)/ε_mean of the whole gauge at the edge on the side of the transverse axis.
    bending_change
        That at the gauge's end on the side of the axial axis, less that at its middle.
    largest
        Largest size of bending in the gauge, at one of its ends.
    bending_low, bending_high
        Bending in the lower and the upper half of the elastic part.
    per_force
        Bending strain at the edge per force, 1/N.
    along
        Axial strain at the gauge's end on the side of the axial axis, less that at its middle.
    shear
        Shear per axial strain.
    motion_deg
        Direction in which the gauge moves, from its axis, deg, clockwise as seen.
    turning, turning_ends
        Rotation of the gauge's middle and of its two ends (against and on the side of the axial axis) per
        mean axial strain, rad, clockwise as seen.
    causes
        What the patterns point to.
    limit, limit_source
        Largest bending that is allowed, None where nobody says so, and who says so.
    stations
        Axial strain across the width, station by station.
    sides, ends
        Contrast maps on the subsets' grid: local axial strain less its mirror image, left against right and
        end against end, half the difference per mean strain, shape (ny, nx).
    columns, rows
        Places of that grid in the reference picture, px.
    """

    reason: str = ""
    frames: int = 0
    bending: Estimate = UNKNOWN
    bending_change: Estimate = UNKNOWN
    largest: Estimate = UNKNOWN
    bending_low: Estimate = UNKNOWN
    bending_high: Estimate = UNKNOWN
    per_force: Estimate = UNKNOWN
    along: Estimate = UNKNOWN
    shear: Estimate = UNKNOWN
    motion_deg: Estimate = UNKNOWN
    turning: Estimate = UNKNOWN
    turning_ends: tuple[Estimate, Estimate] = (UNKNOWN, UNKNOWN)
    causes: Causes = NO_CAUSES
    limit: float | None = None
    limit_source: str = ""
    stations: Stations = field(default_factory=Stations)
    sides: Floats = field(default_factory=lambda: np.full((0, 0), np.nan))
    ends: Floats = field(default_factory=lambda: np.full((0, 0), np.nan))
    columns: Floats = field(default_factory=lambda: np.empty(0))
    rows: Floats = field(default_factory=lambda: np.empty(0))

    def figures(self) -> dict[str, Any]:
        """Return everything in plain types, shares in percent, angles in degrees per percent of strain."""
        turn = np.rad2deg(1.0) / 100
        named = {
            "bending_percent": (self.bending, 100.0),
            "bending_largest_percent": (self.largest, 100.0),
            "bending_change_percent": (self.bending_change, 100.0),
            "bending_lower_half_percent": (self.bending_low, 100.0),
            "bending_upper_half_percent": (self.bending_high, 100.0),
            "bending_strain_per_N": (self.per_force, 1.0),
            "uniformity_percent": (self.along, 100.0),
            "shear_percent": (self.shear, 100.0),
            "motion_angle_deg": (self.motion_deg, 1.0),
            "turning_per_percent_deg": (self.turning, turn),
            "turning_near_end_per_percent_deg": (self.turning_ends[0], turn),
            "turning_far_end_per_percent_deg": (self.turning_ends[1], turn),
        }
        content: dict[str, Any] = {}
        for name, (estimate, factor) in named.items():
            content[name] = factor * estimate.value
            content[f"u_{name}"] = factor * estimate.u
        # The older two are sizes; their signs stand in the stations and the turning.
        content["bending_percent"], content["shear_percent"] = (
            abs(content[name]) for name in ("bending_percent", "shear_percent")
        )
        return content | {
            "limit_percent": 100 * self.limit if self.limit is not None else None,
            "limit_source": self.limit_source,
            "verdict": self.verdict,
            "causes_found": list(self.causes.found),
            "causes_possible": list(self.causes.possible),
            "frames": self.frames,
            "reason": self.reason,
            "stations": self.stations.rows(),
            "not_seen": "bending through the thickness",
        }

    @property
    def verdict(self) -> str:
        """Whether the largest bending keeps the limit, k = 2; empty where there is no limit."""
        value, spread = self.largest.value, 2 * self.largest.u
        if self.limit is None:
            return ""
        if not np.isfinite([value, spread]).all():
            return UNTOLD
        if value + spread <= self.limit:
            return WITHIN
        return BEYOND if value - spread > self.limit else UNTOLD


def elastic_part(history: GaugeHistory, low: float, high: float) -> NDArray[np.bool_]:
    """Return the frames whose mean strain lies in the modulus' window, before it is left for good.

    Frames after fracture, when the halves have sprung back, may lie in the window again.
    """
    size = np.abs(history.axial)
    beyond = size > max(abs(low), abs(high))
    before = np.arange(len(history)) < (int(np.argmax(beyond)) if beyond.any() else len(history))
    return np.asarray(before & (history.axial >= low) & (history.axial <= high))


def frames_to_read(inside: NDArray[np.bool_]) -> NDArray[np.intp]:
    """Return the frames from which the rates are read, evenly spread; none where there are too few."""
    frames = np.flatnonzero(inside)
    if len(frames) < LEAST_FRAMES:
        return frames[:0]
    return frames[:: -(-len(frames) // MOST_FRAMES)]


def limit_of(limit: float | None, standard: str | None) -> tuple[float | None, str]:
    """Return the limit of percent bending in force and who says so."""
    if limit is not None:
        return limit, "the test file"
    usual = LIMITS[standard] if standard else None
    return usual, (standard or "") if usual is not None else ""


def find_alignment(
    history: GaugeHistory,
    force_N: Floats,
    inside: NDArray[np.bool_],
    rates: Rates | None,
    limit: tuple[float | None, str] = (None, ""),
    u_axis_deg: float = nan,
) -> Alignment:
    """Work out how straight the coupon was pulled.

    Parameters
    ----------
    history
        Gauge readings.
    force_N
        Force at the frames, N.
    inside
        Which frames belong to the elastic part.
    rates
        From `dic.strain.rates.gather_rates` over `frames_to_read`; None where there are none.
    limit
        From `limit_of`.
    u_axis_deg
        Standard uncertainty of the coupon's axis, deg; NaN where nothing states it.

    Returns
    -------
    Alignment
        With a reason in place of values where too little is known.
    """
    nothing = Alignment(frames=int(inside.sum()), limit=limit[0], limit_source=limit[1])
    if rates is None:
        return replace(nothing, reason=f"only {nothing.frames} frames lie in the elastic part")
    if not rates.enough:
        return replace(nothing, reason="the measured patches do not span the gauge's length and width")
    shape = _Shape(rates)
    u_axis_deg = u_axis_deg if isfinite(u_axis_deg) else U_AXIS_DEG
    motion = _motion(history, inside, shape.sagitta_px, u_axis_deg)
    observed, covariance = shape.observed(motion)
    ratio = -linregress(history.axial[inside], history.transverse[inside]).slope
    low, high = _halves(history, inside)
    growth = _slope(force_N[inside], history.bending[inside])
    return replace(
        nothing,
        bending=shape.estimate("bending"),
        bending_change=shape.estimate("change"),
        largest=shape.largest(),
        bending_low=low,
        bending_high=high,
        per_force=growth,
        along=shape.estimate("along"),
        shear=_slope(history.axial[inside], history.shear[inside]),
        motion_deg=motion,
        turning=shape.estimate("turning"),
        turning_ends=(shape.estimate("turning_near"), shape.estimate("turning_far")),
        causes=explain(observed, covariance, float(ratio)),
        stations=read_stations(rates),
        sides=mirrored(rates, across=True),
        ends=mirrored(rates, across=False),
        columns=rates.columns,
        rows=rates.rows,
    )


class _Shape:
    """Polynomials through the rates over the gauge, and the figures that are read off them."""

    def __init__(self, rates: Rates) -> None:
        length, width = rates.region.length / 2, rates.region.width / 2
        a, t = rates.along / length, rates.across / width
        fits = [
            rates.fit(moved, u, np.column_stack([a**i * t**j for i, j in powers]))
            for moved, u, powers in (
                (rates.moved_along, rates.u_along, ALONG),
                (rates.moved_across, rates.u_across, ACROSS),
            )
        ]
        self._values = [fit[0] for fit in fits]
        self._covariances = [fit[1] for fit in fits]
        mean = self._values[0][1] / length
        # Each figure as sums of coefficients: of the motion along, and of the motion across.
        rows: dict[str, tuple[dict[tuple[int, int], float], dict[tuple[int, int], float]]] = {
            "bending": ({(1, 1): 1 / length}, {}),
            "curved": ({}, {(2, 0): -2 * width / length**2}),
            "across": ({}, {(0, 2): 2 / width}),
            "change": ({(2, 1): 2 / length}, {}),
            "curved_change": ({}, {(3, 0): -6 * width / length**2}),
            "along": ({(2, 0): 2 / length}, {}),
            "along_across": ({}, {(1, 1): 1 / width}),
        }
        # Clockwise as seen is from the axial to the transverse axis.
        for name, end in (("turning", 0.0), ("turning_near", -1.0), ("turning_far", 1.0)):
            rows[name] = (
                {(0, 1): -0.5 / width, (1, 1): -0.5 * end / width, (2, 1): -0.5 * end**2 / width},
                {(1, 0): 0.5 / length, (2, 0): end / length, (3, 0): 1.5 * end**2 / length},
            )
        self._rows = {
            name: [
                np.array([said.get(power, 0.0) for power in powers]) / mean
                for said, powers in zip(parts, (ALONG, ACROSS), strict=True)
            ]
            for name, parts in rows.items()
        }

    def estimate(self, name: str) -> Estimate:
        value = sum(float(row @ part) for row, part in zip(self._rows[name], self._values, strict=True))
        return Estimate(value, float(np.sqrt(self._shared(name, name))))

    def _shared(self, one: str, other: str) -> float:
        """Return the covariance of two figures."""
        parts = zip(self._rows[one], self._covariances, self._rows[other], strict=True)
        return sum(float(left @ covariance @ right) for left, covariance, right in parts)

    @property
    def sagitta_px(self) -> float:
        """How far the axis bends from its chord over the gauge, per strain, px."""
        return abs(float(self._values[1][ACROSS.index((2, 0))]))

    def largest(self) -> Estimate:
        """Return the larger size of bending at the gauge's two ends."""
        middle, change = self.estimate("bending"), self.estimate("change")
        sign = 1.0 if middle.value * change.value >= 0 else -1.0
        variance = middle.u**2 + change.u**2 + 2 * sign * self._shared("bending", "change")
        return Estimate(abs(middle.value + sign * change.value), float(np.sqrt(max(variance, 0.0))))

    def observed(self, motion_deg: Estimate) -> tuple[Floats, Floats]:
        """Return the figures in the order of `causes.OBSERVED`, and their covariance."""
        names = OBSERVED[:-1]
        values = np.append([self.estimate(name).value for name in names], np.deg2rad(motion_deg.value))
        covariance = np.zeros((len(OBSERVED), len(OBSERVED)))
        covariance[:-1, :-1] = [[self._shared(one, other) for other in names] for one in names]
        covariance[-1, -1] = np.deg2rad(motion_deg.u) ** 2
        return values, covariance


def _motion(
    history: GaugeHistory, inside: NDArray[np.bool_], sagitta_px: float, u_axis_deg: float
) -> Estimate:
    """Return the direction in which the gauge moves, deg from its axis; NaN where it hardly moves.

    Where the axis bends to a C its points do not move alike; half the sagitta stays open.
    """
    along, across = history.shift_px[inside].T
    if not np.ptp(along) >= LEAST_MOTION_PX:
        return Estimate()
    line = linregress(along, across)
    open_slope = sagitta_px / 2 * np.ptp(history.axial[inside]) / np.ptp(along)
    u_slope = np.rad2deg(np.hypot(line.stderr, open_slope) / (1 + line.slope**2))
    return Estimate(float(np.rad2deg(np.arctan(line.slope))), float(np.hypot(u_slope, u_axis_deg)))


def _halves(history: GaugeHistory, inside: NDArray[np.bool_]) -> tuple[Estimate, Estimate]:
    """Return bending in the lower and the upper half of the elastic part."""
    strain = np.abs(history.axial)
    middle = (strain[inside].min() + strain[inside].max()) / 2
    low, high = inside & (strain <= middle), inside & (strain >= middle)
    lower, upper = (_slope(history.axial[half], history.bending[half]) for half in (low, high))
    return lower, upper


def _slope(x: Floats, y: Floats) -> Estimate:
    """Return the slope of a straight line with its standard error; NaN with too few points."""
    sound = np.isfinite(x) & np.isfinite(y)
    if sound.sum() < LEAST_FRAMES or not np.ptp(x[sound]) > 0:
        return Estimate()
    line = linregress(x[sound], y[sound])
    return Estimate(float(line.slope), float(line.stderr))
