"""From a curve to the sheet: every property with its uncertainty, or the reason why it is missing."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from math import nan

import numpy as np
from numpy.typing import NDArray

from dic.properties.doubts import GOOD_SLOPE, missing_uncertainties
from dic.properties.hooke import shear_modulus
from dic.properties.loading import MIN_FRAMES, Loading, Undetermined, loading_of
from dic.properties.modulus import LARGEST_YIELD_STRAIN, Elastic, fit_elastic
from dic.properties.proof import crossing
from dic.properties.result import Curve, Evaluation, ModulusLine, Property
from dic.sync.record import Clock
from dic.testfile import Properties, Specimen
from dic.uncertainty import Line, combine, few_readings, straight_line

Floats = NDArray[np.float64]

_OPTICS = (
    "not included: false strain from motion towards the camera and from lens distortion, what is left of the "
    "interpolation's bias, and the error of the axis"
)


def evaluate(
    curve: Curve, specimen: Specimen, force_uncertainty: float | None, clock: Clock, section: Properties
) -> Evaluation:
    """Read the properties from a curve.

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

    Returns
    -------
    Evaluation
        The properties in the order of the sheet: Young's modulus, Poisson's ratio, shear modulus, one
        proof stress per offset, tensile strength.  One that cannot be had is NaN with the reason in
        its notes; the others stand.

    Notes
    -----
    Contributions are combined as independent (JCGM 100:2008, 5.1.2).  Force calibration and section
    are common factors of every stress; they cancel in Poisson's ratio.  The clock's contribution is
    half the change that a shift by plus and minus one standard uncertainty makes.
    """
    common = {"force calibration": force_uncertainty, "section": specimen.area_uncertainty}
    gaps = {
        "force calibration": ["load_record.force_uncertainty"] if force_uncertainty is None else [],
        "section": missing_uncertainties(specimen),
    }
    sheet = _Sheet(curve, clock, common, gaps, section)
    proofs = [(f"{100 * offset:g}", sheet.proof(offset)) for offset in section.proof]
    entries = [
        ("youngs_modulus", "E", "MPa", sheet.youngs_modulus),
        ("poissons_ratio", "ν", "", sheet.poissons_ratio),
        ("shear_modulus", "G", "MPa", sheet.shear_modulus),
        *((f"proof_stress_{at.replace('.', '_')}", f"Rp{at}", "MPa", read) for at, read in proofs),
        ("tensile_strength", "Rm", "MPa", sheet.tensile_strength),
    ]
    properties = {name: _entry(name, symbol, unit, read) for name, symbol, unit, read in entries}
    return Evaluation(properties, sheet.modulus_line())


@dataclass(frozen=True)
class _Reading:
    """What a property's own function knows; its name and symbol are added outside."""

    value: float
    method: str
    contributions: dict[str, float]
    window: dict[str, tuple[float, float]]
    notes: tuple[str, ...] = ()


def _entry(name: str, symbol: str, unit: str, read: Callable[[], _Reading]) -> Property:
    try:
        reading = read()
    except Undetermined as reason:
        return Property(name, symbol, nan, unit, nan, "not determined", notes=(str(reason),))
    return Property(
        name=name,
        symbol=symbol,
        value=reading.value,
        unit=unit,
        standard_uncertainty=combine(reading.contributions),
        method=reading.method,
        window=reading.window,
        notes=reading.notes,
        contributions=reading.contributions,
    )


class _Sheet:
    """The readings of one curve.

    `common` holds relative uncertainties that all stresses share, `gaps` the keys that each lacks.
    """

    def __init__(
        self,
        curve: Curve,
        clock: Clock,
        common: dict[str, float | None],
        gaps: dict[str, list[str]],
        section: Properties,
    ) -> None:
        self.curve, self.clock, self.common, self.gaps = curve, clock, common, gaps
        self.loading = loading_of(curve)
        self._elastic: Elastic | Undetermined
        try:
            self._require_load()
            self._elastic = fit_elastic(self.loading, section.modulus)
        except Undetermined as reason:
            self._elastic = reason

    def _require_load(self) -> None:
        if not np.isfinite(self.curve.peak_force_N):
            raise Undetermined("the force of the load record never rises above its noise")

    @property
    def elastic(self) -> Elastic:
        if isinstance(self._elastic, Undetermined):
            raise self._elastic
        return self._elastic

    def modulus_line(self) -> ModulusLine:
        if isinstance(self._elastic, Undetermined):
            return ModulusLine(nan, nan, nan, nan)
        elastic, sign = self._elastic, self.loading.sign
        low, high = _range(sign * self.loading.strain[elastic.window])
        intercept = -sign * elastic.line.intercept * elastic.modulus
        return ModulusLine(elastic.modulus, intercept, low, high)

    def youngs_modulus(self) -> _Reading:
        elastic, line = self.elastic, self.elastic.line
        relative = line.u_slope / line.slope
        quality = [
            f"relative standard error of the slope {100 * relative:.2g} %, "
            f"r² = {line.r_squared:.6f}, {line.n} frames"
        ]
        if relative > GOOD_SLOPE:
            quality.append(f"the slope scatters by more than the {100 * GOOD_SLOPE:g} % of ISO 6892-1")
        value = elastic.modulus
        shifts = self._with_clock(lambda loading: 1 / _slope(loading, loading.strain, elastic.window).slope)
        statistics = {"scatter": value * relative * few_readings(line.n - 2), "clock": shifts}
        return _Reading(
            value,
            f"least-squares line of strain on stress, {elastic.rule}",
            statistics | self._of_stress(value),
            self._window(),
            (*quality, *elastic.notes, *self._left_out(), *self._left_out_of_strain()),
        )

    def poissons_ratio(self) -> _Reading:
        """Read ν from both slopes; its scatter is that of εt + ν·εa, in which the force's noise cancels."""
        elastic = self.elastic

        def ratio(loading: Loading) -> float:
            axial = _slope(loading, loading.strain, elastic.window)
            across = _slope(loading, loading.transverse, elastic.window)
            return -across.slope / axial.slope

        value = ratio(self.loading)
        rest = _slope(self.loading, self.loading.transverse + value * self.loading.strain, elastic.window)
        scatter = rest.u_slope * elastic.modulus * few_readings(rest.n - 2)
        return _Reading(
            value,
            f"slopes of transverse and axial strain against the same force (ASTM E132), {elastic.rule}",
            {"scatter": scatter, "clock": self._with_clock(ratio)},
            self._window(),
            (*elastic.notes, *self._left_out_of_strain()),
        )

    def shear_modulus(self) -> _Reading:
        """Read G; 1/2G is the slope of εa - εt on stress, so its scatter holds the correlation of E and ν."""
        elastic, ratio = self.elastic, self.poissons_ratio().value
        if ratio <= -1:
            raise Undetermined(f"no isotropic solid has a Poisson's ratio of {ratio:.3g}")
        value = shear_modulus(elastic.modulus, ratio)

        def difference(loading: Loading) -> Line:
            return _slope(loading, loading.strain - loading.transverse, elastic.window)

        line = difference(self.loading)
        statistics = {
            "scatter": value * line.u_slope / line.slope * few_readings(line.n - 2),
            "clock": self._with_clock(lambda loading: 0.5 / difference(loading).slope),
        }
        return _Reading(
            value,
            "E / 2(1 + ν), for an isotropic material",
            statistics | self._of_stress(value),
            self._window(),
            (
                "the correlation of E and ν is included",
                *elastic.notes,
                *self._left_out(),
                *self._left_out_of_strain(),
            ),
        )

    def proof(self, offset: float) -> Callable[[], _Reading]:
        """Return the reading of the proof stress at an offset."""

        def read() -> _Reading:
            if not offset > 0:
                raise Undetermined("an offset has to be larger than zero")
            elastic, sign = self.elastic, self.loading.sign
            found = crossing(self.loading, elastic.line, elastic.window.stop, offset)

            def shifted(loading: Loading) -> float:
                line = _slope(loading, loading.strain, elastic.window)
                return crossing(loading, line, elastic.window.stop, offset).stress

            statistics = {
                "scatter of the curve": found.u_curve,
                "modulus line": found.u_line * few_readings(elastic.line.n - 2),
                "clock": self._with_clock(shifted),
            }
            bends = "the curve bends all along, as no metal's does: an offset point, not a yield point"
            gradual = found.stress / elastic.modulus > LARGEST_YIELD_STRAIN
            return _Reading(
                sign * found.stress,
                f"modulus line shifted by {100 * offset:g} % strain from its own zero (ISO 6892-1)",
                statistics | self._of_stress(found.stress),
                {"strain": _range(sign * np.array([found.low, found.high]))},
                (
                    *([bends] if gradual else []),
                    *elastic.notes,
                    *self._left_out(),
                    *self._left_out_of_strain(),
                ),
            )

        return read

    def tensile_strength(self) -> _Reading:
        self._require_load()
        curve = self.curve
        value = curve.peak_force_N / curve.area_mm2
        notes = []
        if curve.peak_at_end:
            notes.append("the record ends before the force drops: the coupon may bear more")
        if curve.spikes_s:
            notes.append(_spikes(curve.spikes_s))
        statistics = {
            "scatter": curve.u_peak_force_N / curve.area_mm2,
            "fracture between two samples": curve.u_peak_between_N / curve.area_mm2,
        }
        return _Reading(
            value,
            "largest force of the record, by a parabola through its noise, over the original section"
            + (" (ISO 6892-1)" if value > 0 else ""),
            statistics | self._of_stress(value),
            {"time_s": (curve.peak_time_s, curve.peak_time_s)},
            (*notes, *self._left_out()),
        )

    def _of_stress(self, value: float) -> dict[str, float]:
        """Return the contributions of the factors that all stresses share."""
        return {source: abs(value) * u for source, u in self.common.items() if u is not None}

    def _left_out(self) -> tuple[str, ...]:
        return tuple(
            f"not included: {source}, whose uncertainty is not wholly given ({', '.join(keys)} missing)"
            for source, keys in self.gaps.items()
            if keys
        )

    def _left_out_of_strain(self) -> tuple[str, ...]:
        if self.clock.offset_standard_uncertainty_s > 0:
            return (_OPTICS,)
        return (
            "not included: the clocks, whose offset was given without an uncertainty (sync.offset)",
            _OPTICS,
        )

    def _with_clock(self, read: Callable[[Loading], float]) -> float:
        """Return how far the clock's standard uncertainty moves a reading."""
        u = self.clock.offset_standard_uncertainty_s
        return abs(read(self.loading.later(u)) - read(self.loading.later(-u))) / 2

    def _window(self) -> dict[str, tuple[float, float]]:
        here, loading = self.elastic.window, self.loading
        return {
            "strain": _range(loading.sign * loading.strain[here]),
            "stress_MPa": _range(loading.sign * loading.stress[here]),
            "time_s": _range(loading.time_s[here]),
        }


def _spikes(times_s: tuple[float, ...]) -> str:
    count = "1 sample" if len(times_s) == 1 else f"{len(times_s)} samples"
    return (
        f"left out: {count} of the force far off those before and after (at {times_s[0]:.5g} s of the "
        "machine's clock" + (", and later)" if len(times_s) > 1 else ")")
    )


def _slope(loading: Loading, strain: Floats, window: slice) -> Line:
    """Fit a strain on stress over the frames of a window in which it was measured."""
    stress, strain = loading.stress[window], strain[window]
    there = np.isfinite(strain)
    if there.sum() < MIN_FRAMES:
        raise Undetermined(
            f"the transverse strain was measured in {there.sum()} frames of the window, "
            f"{MIN_FRAMES} are needed"
        )
    return straight_line(stress[there], strain[there])


def _range(values: Floats) -> tuple[float, float]:
    return float(np.min(values)), float(np.max(values))
