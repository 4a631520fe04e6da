"""What every property of the sheet is read with: the curve, its zero, its elastic part, its clock."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from functools import cached_property
from math import copysign, hypot, nan, sqrt

import numpy as np
from numpy.typing import NDArray

from dic.errors import Notice
from dic.properties.fits import fit, scatter
from dic.properties.loading import Loading, Undetermined, loading_of, require_section
from dic.properties.modulus import Elastic, fit_elastic
from dic.properties.moments import fracture_of
from dic.properties.result import Curve, ModulusLine, Property
from dic.properties.systematic import off_axis, tried, window_choice
from dic.properties.zero import Zero, frames_at_rest, seating_slack, take_off_toe, zero_of
from dic.sync.record import Clock
from dic.testfile import Properties, Specimen
from dic.uncertainty import Contribution, Effect, Factor, Input, Line, bounded, budget_of, combine

Floats = NDArray[np.float64]

_TOWARDS = "motion towards the camera (give camera.stand_off and camera.out_of_plane, or camera.still_patch)"
_LENS = "lens distortion (give camera.board)"
_INTERPOLATION = "what is left of the interpolation's error, which too little motion shows here"
_AXIS = "the error of the axis, which was given (gauge.axis)"
_CLOCK = "the clocks, whose offset was given without an uncertainty (sync.offset)"


@dataclass(frozen=True)
class Reading:
    """What a property's own function knows; its name and symbol are added outside.

    `missing` names what is not included in the uncertainty.
    """

    value: float
    method: str
    contributions: dict[str, float]
    window: dict[str, tuple[float, float]]
    notes: tuple[str, ...] = ()
    qualifier: str = ""
    missing: tuple[str, ...] = ()


@dataclass(frozen=True)
class Entry:
    """One line of the sheet: name, the standard's symbol, unit, and how it is read."""

    name: str
    symbol: str
    unit: str
    read: Callable[[], Reading]

    def property(self, inputs: Mapping[str, Input] | None = None) -> Property:
        """Read it, or say why it is missing; `inputs` stand behind the sources in its budget."""
        try:
            reading = self.read()
        except (Undetermined, np.linalg.LinAlgError) as reason:
            return Property(
                self.name, self.symbol, nan, self.unit, nan, "not determined", notes=(str(reason),)
            )
        return Property(
            name=self.name,
            symbol=self.symbol,
            value=reading.value,
            unit=self.unit,
            standard_uncertainty=combine(reading.contributions),
            method=reading.method,
            window=reading.window,
            notes=reading.notes,
            contributions=reading.contributions,
            qualifier=reading.qualifier,
            budget=budget_of(reading.contributions, self.unit, inputs or {}, reading.missing),
        )


class Sheet:
    """The readings of one curve.

    Parameters
    ----------
    curve
        Stress and strain at the frames.
    specimen
        The coupon, for the uncertainty of its section.
    force_uncertainty
        Relative standard uncertainty of the force (its calibration), or None if not given.
    clock
        For the uncertainty of its offset.
    section
        Windows and offsets.
    force_bounded
        Whether the force's error lies anywhere within bounds, as a class says, rather than normally
        distributed.
    """

    def __init__(
        self,
        curve: Curve,
        specimen: Specimen,
        force_uncertainty: float | None,
        clock: Clock,
        section: Properties,
        *,
        force_bounded: bool = False,
    ) -> None:
        self.curve, self.clock, self.section = curve, clock, section
        #: Relative uncertainties that all stresses share.
        self.common = {"force calibration": force_uncertainty, "section": specimen.area_uncertainty}
        #: How they enter a stress, force over section.
        self.factors = {
            "force calibration": (Factor(force_uncertainty or 0.0, 1, force_bounded),),
            "section": tuple(Factor(u, -power, digit) for u, power, digit in specimen.side_errors),
        }
        #: The keys that each of them lacks.
        self.gaps = {
            "force calibration": ["load_record.force_uncertainty"] if force_uncertainty is None else [],
            "section": specimen.unstated,
        }
        self._zero: Zero | None = None
        self._reason: Undetermined | None = None
        self._elastic: Elastic | None = None
        self._lines: dict[tuple[Loading, str], Line] = {}
        try:
            self.require_load()
            self._zero = zero_of(loading_of(curve), section.preload_stress(curve.area_mm2))
            self._zero, self._elastic = take_off_toe(
                self._zero, self._lay, section.toe, clock.offset_standard_uncertainty_s
            )
        except Undetermined as reason:
            self._reason = reason

    def _lay(self, loading: Loading) -> Elastic:
        return fit_elastic(loading, self.section.modulus, self.section.modulus_source)

    def require_load(self) -> None:
        """Raise unless the record shows a load, and the coupon has a section that bears it."""
        require_section(self.curve)
        if not np.isfinite(self.curve.peak_force_N):
            raise Undetermined("the force of the load record never rises above its noise")

    @property
    def zero(self) -> Zero:
        """Where strain counts from; it may be known without an elastic part."""
        if self._zero is None:
            raise self._reason or Undetermined("the zero of strain is not known")
        return self._zero

    @property
    def loading(self) -> Loading:
        """Frames up to the largest force, strains counted from the zero."""
        return self.zero.loading

    @cached_property
    def whole(self) -> Loading:
        """All frames of the test that were measured up to the fracture, strains counted from the zero."""
        zero, whole = self.zero, loading_of(self.curve, whole=True)
        end = int(np.searchsorted(whole.time_s, self.last_time_s, side="right"))
        return whole.part(slice(0, end)).counted_from(zero.strain, zero.transverse)

    @cached_property
    def last_time_s(self) -> float:
        """Return when the coupon breaks, or the test ends."""
        try:
            return fracture_of(self.curve).time_s
        except Undetermined:
            return float(self.curve.time_s[-1])

    @property
    def elastic(self) -> Elastic:
        """The elastic part, or the reason why there is none."""
        if self._elastic is None:
            raise self._reason or Undetermined("no elastic part was found")
        return self._elastic

    def notices(self) -> tuple[Notice, ...]:
        """Return what people should know about the zero."""
        if self._zero is None:
            return ()
        if self._elastic is None:
            return self._zero.notices
        travel = self.curve.displacement_mm
        at_frames = None if travel is None else travel[self.loading.rows]
        return self._zero.notices + seating_slack(self.loading, self._elastic, at_frames)

    def modulus_line(self) -> ModulusLine:
        """Return the line in strains as they were measured."""
        if self._elastic is None:
            return ModulusLine(nan, nan, nan, nan)
        elastic, sign, zero = self._elastic, self.loading.sign, self.zero.strain
        low, high = bounds(sign * (self.loading.strain[elastic.window.frames] + zero))
        intercept = -sign * (elastic.line.intercept + zero) * elastic.modulus
        return ModulusLine(elastic.modulus, intercept, low, high)

    def line(self, loading: Loading, name: str = "strain") -> Line:
        """Lay the line of ``strain`` or ``transverse`` over stress as the elastic part does."""
        # Most properties ask for the same few lines.
        if (loading, name) not in self._lines:
            strain, u = getattr(loading, name), getattr(loading, f"u_{name}")
            self._lines[loading, name] = fit(loading, strain, u, self.elastic.window)
        return self._lines[loading, name]

    def of_stress(self, value: float) -> dict[str, float]:
        """Return the contributions of the factors that all stresses share."""
        return {
            source: Contribution(abs(value) * u, factors=self.factors[source])
            for source, u in self.common.items()
            if u is not None
        }

    def inputs(self) -> dict[str, Input]:
        """Return what stands behind the sources of uncertainty that all properties share."""
        factor, section = self.common["force calibration"], self.common["section"]
        area, towards = self.curve.area_mm2, self.curve.u_towards
        found = {
            "force calibration": None if factor is None else Input(1.0, "", factor),
            "section": None if section is None else Input(area, "mm²", area * section),
            "clock": Input(self.clock.offset_s, "s", self.clock.offset_standard_uncertainty_s),
            "axis angle": Input(0.0, "deg", self.curve.u_axis_deg),
            "motion towards the camera": None if towards is None else Input(0.0, "", towards),
        }
        return {source: given for source, given in found.items() if given is not None}

    def left_out(self) -> tuple[str, ...]:
        """Say what a stress' uncertainty lacks."""
        return tuple(
            f"{source}, whose uncertainty is not wholly given ({', '.join(keys)} missing)"
            for source, keys in self.gaps.items()
            if keys
        )

    def left_out_of_strain(self) -> tuple[str, ...]:
        """Say what the uncertainty of a reading against strain lacks."""
        known = (self.curve.u_towards is not None, self.curve.straightened)
        lacking = [text for text, there in zip((_TOWARDS, _LENS), known, strict=True) if not there]
        told = [f"false strain from {one}" for one in lacking]
        told += [] if self._waves else [_INTERPOLATION]
        told += [] if np.isfinite(self.curve.u_axis_deg) else [_AXIS]
        told += [] if self.clock.offset_standard_uncertainty_s > 0 else [_CLOCK]
        return tuple(told)

    def shifted(self, read: Callable[[Loading], float]) -> dict[str, float]:
        """Return the contributions of what shifts strain and stress together in all frames."""
        here = read(self.loading)
        towards = self._with_motion(read, here)
        return {
            "clock": self._with_clock(read, here),
            **({} if towards is None else {"motion towards the camera": bounded(towards)}),
            **self._of_camera(read, here),
        }

    def _with_motion(self, read: Callable[[Loading], float], here: float) -> float | None:
        """Return how far false strain from motion towards the camera moves a reading; None where unknown.

        When the coupon moved is not known, so all of it is laid where it does most harm: it grows over the
        elastic part and then stays.
        """
        if not self._stretched:
            return None
        moved = np.abs([tried(read, one) - here for one in self._stretched])
        return float(np.nanmax(moved)) if np.isfinite(moved).any() else nan

    @cached_property
    def _stretched(self) -> tuple[Loading, ...]:
        """The loading with the false strain of either sign, none where it is not known."""
        u = self.curve.u_towards
        if not u:
            return ()
        frames = self.elastic.window.frames
        grown = np.interp(
            np.arange(len(self.loading.strain)),
            [frames.start, max(frames.stop - 1, frames.start + 1)],
            [0, 1],
        )
        return tuple(self.loading.stretched(one, one) for one in (u * grown, -u * grown))

    def _of_camera(self, read: Callable[[Loading], float], here: float) -> dict[str, float]:
        """Return the contributions of the camera's errors that all frames share."""
        found: dict[str, float] = {}
        if self._off_axis is not None:
            off = tried(read, self._off_axis) - here
            # The reading has the error already, and the truth lies on its other side.
            lacking = -off / sqrt(3) * copysign(1.0, here)
            found["axis angle"] = Contribution(abs(off), (Effect(0.0, lacking),))
        if self._waves:
            found["interpolation"] = hypot(*(tried(read, wave) - here for wave in self._waves))
        if self._off_edges is not None:
            found["pattern on the edges"] = abs(tried(read, self._off_edges) - here)
        return found

    @cached_property
    def _off_axis(self) -> Loading | None:
        """The loading along an axis that is off; None where its uncertainty is not known."""
        u = self.curve.u_axis_deg
        return off_axis(self.loading, u) if np.isfinite(u) else None

    @cached_property
    def _waves(self) -> tuple[Loading, ...]:
        """The loading with what may be left of the interpolation's periodic error, its waves one by one."""
        axial, transverse = self.curve.left_axial, self.curve.left_transverse
        if axial is None or transverse is None:
            return ()
        rows = self.loading.rows
        waves = zip(axial[rows].T, transverse[rows].T, strict=True)
        return tuple(self.loading.stretched(*wave) for wave in waves if np.isfinite(wave).all())

    @cached_property
    def _off_edges(self) -> Loading | None:
        """The loading with what the pattern on the edges may do to the width; None where nothing is known."""
        across = self.curve.left_edges
        return None if across is None else self.loading.stretched(0.0, across[self.loading.rows])

    def of_lines(self, strain: Floats, u_strain: Floats, by: float = 1.0) -> dict[str, float]:
        """Return what the scatter and the choice of the window do to a constant read from slopes.

        Parameters
        ----------
        strain, u_strain
            Both strains, weighed by the constant's derivatives by their slopes on stress, with its
            standard uncertainty, shape (n,): its slope changes as the constant does, so what both slopes
            have in common is in it.
        by
            What the changes of that slope are multiplied by.
        """
        given = (self.loading, strain, u_strain, self.elastic.window)
        found: dict[str, float] = {"scatter": abs(by) * scatter(*given)}
        # A window that was asked for is no choice.
        if self.section.modulus == "auto":
            found["window choice"] = bounded(abs(by) * window_choice(*given))
        return found

    def _with_clock(self, read: Callable[[Loading], float], here: float) -> float:
        """Return how far the clock's standard uncertainty moves a reading.

        A reading that is not to be had with the clock moved says nothing; the other side then stands
        for both.
        """
        moved = tuple(_moved(read, here, sides) for sides in self._later)
        return Contribution(hypot(*(one.linear for one in moved)), moved)

    @cached_property
    def _later(self) -> tuple[tuple[Loading, Loading], ...]:
        """The loading with offset and drift of the clock moved either way, those that are exact left out."""
        clock, loading = self.clock, self.loading
        offset = np.full(len(loading.time_s), clock.offset_standard_uncertainty_s)
        drift = clock.drift_standard_uncertainty * (loading.time_s - self._start_s)
        return tuple((loading.later(by), loading.later(-by)) for by in (offset, drift) if by.any())

    @property
    def _start_s(self) -> float:
        """When loading starts: the instant at which the clock's offset has its uncertainty."""
        loading = self.loading
        return float(loading.time_s[min(frames_at_rest(loading), len(loading.time_s) - 1)])

    def u_clock_at(self, time_s: float) -> float:
        """Return the standard uncertainty of the frames' place in the record at an instant, s."""
        clock = self.clock
        drift = clock.drift_standard_uncertainty
        return hypot(clock.offset_standard_uncertainty_s, drift * (time_s - self._start_s) if drift else 0.0)

    def window(self) -> dict[str, tuple[float, float]]:
        """Return the elastic window in strain, stress and time."""
        return self.window_of(self.elastic.window.frames)

    def window_of(self, frames: slice) -> dict[str, tuple[float, float]]:
        """Return the bounds of some frames in strain, stress and time."""
        return window_of(self.loading.part(frames))


def _moved(read: Callable[[Loading], float], here: float, sides: tuple[Loading, Loading]) -> Effect:
    """Return the parabola through a reading and those on both sides, or what one side alone shows."""
    values = [tried(read, side) for side in sides]
    if np.isfinite(values).all():
        # Only its bend has a sign that matters: either side is as likely as the other.
        bend = (values[0] + values[1]) / 2 - here
        return Effect(abs(values[0] - values[1]) / 2, bend * copysign(1.0, here))
    return Effect(float(np.nanmax(np.abs(np.array(values) - here))) if np.isfinite(values).any() else nan)


def window_of(loading: Loading) -> dict[str, tuple[float, float]]:
    """Return the bounds of all frames in strain, stress and time."""
    return {
        "strain": bounds(loading.sign * loading.strain),
        "stress_MPa": bounds(loading.sign * loading.stress),
        "time_s": bounds(loading.time_s),
    }


def bounds(values: Floats) -> tuple[float, float]:
    """Return the smallest and the largest value."""
    return float(np.min(values)), float(np.max(values))
