"""Camera against clip-on extensometer: slope and offset, their difference, and what limits it would keep.

An indication, not a calibration: the two are different gauges at different places of the coupon, and
neither one's own calibration takes part.
"""

from __future__ import annotations

from dataclasses import dataclass, field, replace
from math import hypot, isfinite, nan, sqrt

import numpy as np
from numpy.typing import NDArray

from dic.comparison.attached import attached
from dic.comparison.limits import Verdict, joint_factor, verdicts
from dic.errors import Notice
from dic.properties.result import Curve, Property
from dic.strain.history import GaugeHistory
from dic.sync.contact import contact_strain_at
from dic.sync.record import Clock, LoadRecord
from dic.uncertainty import combine, few_readings, line_with_errors_in_both

Floats = NDArray[np.float64]
Mask = NDArray[np.bool_]

#: Frames that a line has to hold.
LEAST_FRAMES = 5
#: A line needs at least this many standard uncertainties of strain from end to end.
LEAST_RANGE = 10.0
#: Stations of strain at which the difference is judged, as many as a calibration has at least; frames
#: between two of them are averaged.
STATIONS = 10
#: Points that scatter by more than this many times their uncertainty do not lie on a straight line.
CROOKED = 2.0
#: A slope farther from 1 than this is said aloud.
NOTABLE_SLOPE = 0.01
#: Smallest standard uncertainty of a reading, so that virtual tests without noise have weights too.
_LEAST_U = 1e-12

METHOD = (
    "straight line of clip-on on camera strain with the uncertainty of both at every frame (York and others, "
    "American Journal of Physics 72, 2004, 367); both averaged over the time between frames"
)


@dataclass(frozen=True)
class Agreement:
    """The line clip-on strain = offset + slope × camera strain over some of the frames.

    Attributes
    ----------
    slope, u_slope, offset, u_offset
        The line and its standard uncertainties; NaN where it could not be had.
    correlation
        Correlation coefficient of slope and offset, from scatter.
    frames
        How many frames it was fitted to.
    strain
        Camera strains between which they lie.
    contributions
        Standard uncertainties by source, of ``slope`` and of ``offset``.
    note
        Why there is none, or what to think of; empty where nothing is to be said.
    """

    slope: float = nan
    u_slope: float = nan
    offset: float = nan
    u_offset: float = nan
    correlation: float = nan
    frames: int = 0
    strain: tuple[float, float] = (nan, nan)
    contributions: dict[str, dict[str, float]] = field(default_factory=dict)
    note: str = ""


@dataclass(frozen=True)
class ClipOn:
    """What the comparison gave.

    Attributes
    ----------
    strain, u_strain
        Clip-on strain at the frames, as recorded, and its standard uncertainty from its own scatter;
        shape (n,), NaN outside the record.
    used
        Frames that are compared, shape (n,).
    difference, u_difference
        Clip-on less camera, both counted from the reference frames, and its standard uncertainty, clock
        included; shape (n,), NaN where not compared.
    whole, window
        The line over all frames compared, and over those of the modulus window.
    station_strain, station_difference, u_station
        Means over the frames between ten stations of strain, shape (m,).
    coverage_factor
        With which all stations' intervals hold together.
    classes
        Whether the difference would keep the limits of extensometer classes.
    gauge_length_mm
        Gauge length of the clip-on; NaN where not given.
    used_until_s
        Machine time of the last frame compared; NaN where there is none.
    ended
        Why the clip-on was no longer used before the largest force; empty where it was.
    notes
        What was assumed or left out, a sentence each.
    """

    strain: Floats
    u_strain: Floats
    used: Mask
    difference: Floats
    u_difference: Floats
    whole: Agreement
    window: Agreement
    station_strain: Floats
    station_difference: Floats
    u_station: Floats
    coverage_factor: float
    classes: tuple[Verdict, ...]
    gauge_length_mm: float
    used_until_s: float
    ended: str
    notes: tuple[str, ...]


def compare(
    record: LoadRecord,
    clock: Clock,
    history: GaugeHistory,
    curve: Curve,
    modulus: Property,
    *,
    reference: slice,
    length_mm: float | None,
) -> ClipOn | None:
    """Compare the camera's axial strain with the clip-on extensometer's.

    Parameters
    ----------
    record, clock
        The load record with its extensometer column, and the frames' place in it.
    history, curve
        Camera strain with its uncertainty, n frames.
    modulus
        Young's modulus, for the window that it was read in.
    reference
        Frames that the camera's strain counts from.
    length_mm
        Gauge length of the clip-on; None where not given.

    Returns
    -------
    ClipOn or None
        None where the record has no extensometer column.

    Notes
    -----
    The camera's uncertainty is its grey noise; of it, what the reference frames contribute is common to
    all frames and enters the offset.  The clock's contribution is half the change that a shift by plus
    and minus one standard uncertainty makes.
    """
    if record.extensometer is None:
        return None
    bench = _Bench(record, clock, history, curve, reference)
    used, ended, notes = bench.frames()
    difference, u_difference, u_zero, counted = bench.difference(used)
    stations = bench.stations(used, difference, u_zero)
    strain, size, u = stations
    known = bool(len(strain)) and bool(np.isfinite(u).all())
    window = modulus.window.get("time_s", (nan, nan))
    return ClipOn(
        strain=bench.contact,
        u_strain=bench.u_contact,
        used=used,
        difference=difference,
        u_difference=u_difference,
        whole=bench.agreement(used),
        window=bench.agreement(used & (curve.time_s >= window[0]) & (curve.time_s <= window[1])),
        station_strain=strain,
        station_difference=size,
        u_station=u,
        coverage_factor=joint_factor(len(strain)),
        classes=tuple(verdicts(strain, size, u, length_mm)) if known else (),
        gauge_length_mm=nan if length_mm is None else length_mm,
        used_until_s=float(curve.time_s[used][-1]) if used.any() else nan,
        ended=ended,
        notes=(*notes, *counted, *_left_out(length_mm)),
    )


def _left_out(length_mm: float | None) -> list[str]:
    notes = [
        "an indication, not a calibration: both gauges' own calibrations are left out, and so is the false "
        "strain from motion towards the camera",
        "the clip-on sees the coupon between its edges, the camera the gauge region: where strain is uneven, "
        "both may be right",
    ]
    if length_mm is None:
        notes.append(
            "ISO 9513's limits in µm need load_record.extensometer_length; without it only their relative "
            "parts are judged, from a fifth of the largest strain up"
        )
    return notes


class _Bench:
    """Both strains at the frames."""

    def __init__(
        self, record: LoadRecord, clock: Clock, history: GaugeHistory, curve: Curve, reference: slice
    ) -> None:
        self.record, self.clock, self.camera_time = record, clock, history.time_s
        self.time, self.reference = curve.time_s, reference
        self.camera, self.u_camera = curve.axial, np.maximum(curve.u_axial, _LEAST_U)
        self.contact, u_contact = contact_strain_at(record, clock, history.time_s)
        self.u_contact = np.maximum(u_contact, _LEAST_U)
        there = np.isfinite(self.camera) & np.isfinite(self.u_camera) & np.isfinite(self.contact)
        before_peak = curve.time_s <= curve.peak_time_s if isfinite(curve.peak_time_s) else True
        self.common: Mask = there & before_peak
        # All frames carry the noise of the same reference, a mean of so many frames.
        self.common_share = sqrt(1 / (1 + len(range(*reference.indices(len(self.time))))))

    def frames(self) -> tuple[Mask, str, list[str]]:
        """Return the frames to compare, what ended them, and notes."""
        notes = ["compared up to the largest force: after it strain concentrates in one place"]
        rows = np.flatnonzero(self.common)
        used = np.zeros(len(self.time), bool)
        if not rows.size:
            return used, "", ["no frame has a reading of both"]
        noise = float(np.median(np.hypot(self.u_camera, self.u_contact)[rows]))
        on = attached(self.camera[rows], self.contact[rows], noise)
        used[rows[: on.frames]] = True
        notes += [
            f"the clip-on's reading jumps at {self.time[rows[slip + 1]]:.4g} s and goes on following: its "
            "edges may have slipped"
            for slip in on.slips
        ]
        return used, on.end, notes

    def difference(self, used: Mask) -> tuple[Floats, Floats, float, list[str]]:
        """Return clip-on less camera from the reference on, its u, the u of its zero, and notes."""
        raw = np.where(used, self.contact - self.camera, np.nan)
        rest = np.zeros(len(used), bool)
        rest[self.reference] = True
        rest &= used
        notes = []
        if not rest.any():
            rest = used & (np.cumsum(used) <= 3)
            notes.append(
                "no reference frame has a clip-on reading: both count from the first frames compared"
            )
        count = int(rest.sum())
        zero = float(raw[rest].mean()) if count else nan
        u_zero = float(np.sqrt(np.mean(self.u_contact[rest] ** 2) / count)) if count else nan
        u = np.hypot(np.hypot(self.u_camera, self.u_contact), np.hypot(u_zero, self._of_clock(used)))
        return raw - zero, np.where(used, u, np.nan), u_zero, notes

    def _of_clock(self, used: Mask) -> Floats:
        """Return the strain that passes in the clock's standard uncertainty, frame by frame."""
        rate = np.zeros(len(used))
        if used.sum() > 1:
            rate[used] = np.gradient(self.camera[used], self.time[used])
        return np.abs(rate) * self.clock.offset_standard_uncertainty_s

    def stations(self, used: Mask, difference: Floats, u_zero: float) -> tuple[Floats, Floats, Floats]:
        """Return mean strain, difference and its u between evenly spaced strains."""
        if used.sum() < LEAST_FRAMES:
            return np.empty(0), np.empty(0), np.empty(0)
        strain = self.camera[used]
        edges = np.linspace(strain.min(), strain.max(), STATIONS + 1)
        place = np.clip(np.digitize(strain, edges) - 1, 0, STATIONS - 1)
        rows, clock = np.flatnonzero(used), self._of_clock(used)
        found = []
        for station in range(STATIONS):
            here = rows[place == station]
            if not here.size:
                continue
            shared = self.u_camera[here] * self.common_share
            own = self.u_camera[here] ** 2 - shared**2 + self.u_contact[here] ** 2
            # What scatters more than its noise says is believed to be noise too.
            seen = np.var(difference[here], ddof=1) if here.size > 3 else 0.0
            scatter = sqrt(max(float(own.mean()), float(seen)) / here.size)
            u = hypot(scatter, float(shared.mean()), float(clock[here].mean()), u_zero)
            found.append((float(self.contact[here].mean()), float(difference[here].mean()), u))
        strains, differences, spread = np.array(found).T
        # The strain that a relative limit refers to counts from the same zero as the difference.
        zero = float((self.contact - self.camera - difference)[used][0])
        return strains - zero, differences, spread

    def agreement(self, used: Mask) -> Agreement:
        """Fit the line over some frames."""
        count = int(used.sum())
        if count < LEAST_FRAMES:
            return Agreement(frames=count, note=f"{count} frames in common, {LEAST_FRAMES} are needed")
        x, u_x, y, u_y = (part[used] for part in (self.camera, self.u_camera, self.contact, self.u_contact))
        ends = float(x.min()), float(x.max())
        if np.ptp(x) < LEAST_RANGE * float(np.median(np.hypot(u_x, u_y))):
            return Agreement(frames=count, strain=ends, note="the strain hardly rises above its noise")
        try:
            line = line_with_errors_in_both(x, y, u_x, u_y, scaled=False)
        except ValueError as error:
            return Agreement(frames=count, strain=ends, note=str(error))
        # Where the points scatter more than stated, the scatter is believed, few points the less.
        more = max(1.0, line.misfit * few_readings(count - 2))
        clock_slope, clock_offset = self._clock_on_line(used)
        parts = {
            "slope": {"scatter": more * line.u_slope, "clock": clock_slope},
            "offset": {
                "scatter": more * line.u_intercept,
                "clock": clock_offset,
                "reference frames": abs(line.slope) * self.common_share * float(np.median(u_x)),
            },
        }
        crooked = line.misfit > CROOKED
        return Agreement(
            slope=line.slope,
            u_slope=combine(parts["slope"]),
            offset=line.intercept,
            u_offset=combine(parts["offset"]),
            correlation=line.correlation,
            frames=count,
            strain=ends,
            contributions=parts,
            note=f"the points scatter about the line by {line.misfit:.2g} times their uncertainty: see the "
            "difference against strain"
            if crooked
            else "",
        )

    def _clock_on_line(self, used: Mask) -> tuple[float, float]:
        """Return how far the clock's standard uncertainty moves slope and offset."""
        u = self.clock.offset_standard_uncertainty_s
        if u == 0:
            return 0.0, 0.0
        lines = []
        for shift in (-u, u):
            moved = replace(self.clock, offset_s=self.clock.offset_s + shift)
            contact, spread = contact_strain_at(self.record, moved, self.camera_time)
            here = used & np.isfinite(contact)
            if here.sum() < LEAST_FRAMES:
                return nan, nan
            lines.append(
                line_with_errors_in_both(
                    self.camera[here], contact[here], self.u_camera[here], np.maximum(spread[here], _LEAST_U)
                )
            )
        first, last = lines
        return abs(last.slope - first.slope) / 2, abs(last.intercept - first.intercept) / 2


def doubts(found: ClipOn | None) -> list[Notice]:
    """Return a warning, with its remedy, where the two gauges disagree or the clip-on came off."""
    notices: list[Notice] = []
    if found is None:
        return notices
    if found.ended:
        until = (
            f"only the frames up to {found.used_until_s:.4g} s were compared"
            if isfinite(found.used_until_s)
            else "no frame was compared"
        )
        notices.append(
            Notice("clip_on_ended", f"The clip-on extensometer ends early ({found.ended}); {until}.")
        )
    slope, u = found.whole.slope, found.whole.u_slope
    if not isfinite(slope):
        reason = found.whole.note or "no line"
        notices.append(
            Notice("clip_on_not_compared", f"Camera and clip-on extensometer cannot be compared: {reason}.")
        )
    elif abs(slope - 1) > max(NOTABLE_SLOPE, 2 * u):
        notices.append(
            Notice(
                "clip_on_differs",
                f"The clip-on extensometer reads {100 * (slope - 1):+.2g} % of strain against the camera; "
                "check its unit, gauge length and seat, the gauge region, and bending.",
            )
        )
    return notices
