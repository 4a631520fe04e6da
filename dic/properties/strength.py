"""Proof stresses and the strength."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace

import numpy as np

from dic.properties.loading import Loading, Undetermined
from dic.properties.modulus import LARGEST_YIELD_STRAIN
from dic.properties.moments import fracture_of, strain_at
from dic.properties.proof import crossing
from dic.properties.sheet import Entry, Reading, Sheet, bounds
from dic.uncertainty import few_readings


def proof_entries(sheet: Sheet) -> list[Entry]:
    """List one proof stress per offset."""
    named = [(f"{100 * offset:g}", _proof(sheet, offset)) for offset in sheet.section.proof]
    return [Entry(f"proof_stress_{at.replace('.', '_')}", f"Rp{at}", "MPa", read) for at, read in named]


def strength_entries(sheet: Sheet) -> list[Entry]:
    """List the strength, and the strains at the largest force and at break."""
    return [
        Entry("tensile_strength", "Rm", "MPa", lambda: _strength(sheet)),
        Entry("strain_at_maximum", "Agt", "", lambda: _at_maximum(sheet)),
        Entry("plastic_strain_at_maximum", "Ag", "", lambda: _plastic_at_maximum(sheet)),
        Entry("strain_at_break", "At", "", lambda: _at_break(sheet)),
    ]


def _proof(sheet: Sheet, offset: float) -> Callable[[], Reading]:
    """Return the reading of the proof stress at an offset."""

    def read() -> Reading:
        if not offset > 0:
            raise Undetermined("an offset has to be larger than zero")
        elastic, loading = sheet.elastic, sheet.loading
        found = crossing(loading, elastic.line, elastic.end, offset)

        def shifted(loading: Loading) -> float:
            return crossing(loading, sheet.line(loading), elastic.end, offset).stress

        statistics = {
            "scatter of the curve": found.u_curve,
            "modulus line": found.u_line * few_readings(elastic.line.n - 2),
            **sheet.shifted(shifted),
        }
        bends = "the curve bends all along, as no metal's does: an offset point, not a yield point"
        gradual = found.stress / elastic.modulus > LARGEST_YIELD_STRAIN
        return Reading(
            loading.sign * found.stress,
            f"modulus line shifted by {100 * offset:g} % strain from its own zero (ISO 6892-1)",
            statistics | sheet.of_stress(found.stress),
            {"strain": bounds(loading.sign * np.array([found.low, found.high]))},
            (*([bends] if gradual else []), *elastic.notes),
            missing=(*sheet.left_out(), *sheet.left_out_of_strain()),
        )

    return read


def _strength(sheet: Sheet) -> Reading:
    sheet.require_load()
    curve = sheet.curve
    value = curve.peak_force_N / curve.area_mm2
    notes = [*_unbroken(sheet)]
    if curve.spikes_s:
        notes.append(_spikes(curve.spikes_s))
    statistics = {
        "scatter": curve.u_peak_force_N / curve.area_mm2,
        "fracture between two samples": curve.u_peak_between_N / curve.area_mm2,
    }
    return Reading(
        value,
        "largest force of the record, by a parabola through its noise, over the original section"
        + (" (ISO 6892-1)" if value > 0 else ""),
        statistics | sheet.of_stress(value),
        {"time_s": (curve.peak_time_s, curve.peak_time_s)},
        tuple(notes),
        missing=sheet.left_out(),
        qualifier=_at_least(sheet),
    )


def strain_when(
    sheet: Sheet,
    time_s: float,
    u_time_s: float,
    what: str,
    method: str,
    notes: tuple[str, ...] = (),
    qualifier: str = "",
) -> Reading:
    """Read the strain at an instant of the record, at which `what` happens."""
    found = strain_at(sheet.whole, time_s, what)
    return Reading(
        sheet.loading.sign * found.strain,
        method,
        found.contributions(u_time_s, sheet.u_clock_at(time_s)),
        {"time_s": (time_s, time_s)},
        (*notes, *found.notes),
        qualifier,
        missing=sheet.left_out_of_strain(),
    )


def _at_maximum(sheet: Sheet) -> Reading:
    sheet.require_load()
    curve = sheet.curve
    method = "strain at the largest force of the record (ISO 6892-1)"
    return strain_when(
        sheet, curve.peak_time_s, curve.u_peak_time_s, "the largest force", method, _unbroken(sheet),
        _at_least(sheet),
    )  # fmt: skip


def _plastic_at_maximum(sheet: Sheet) -> Reading:
    total, strength, elastic = _at_maximum(sheet), _strength(sheet), sheet.elastic
    share = abs(strength.value) / elastic.modulus
    slope = elastic.line.u_slope / elastic.line.slope * few_readings(elastic.line.n - 2)
    return replace(
        total,
        value=total.value - strength.value / elastic.modulus,
        method="strain at the largest force less its elastic part, Rm/E (ISO 6892-1)",
        contributions=total.contributions | {"modulus": share * slope},
    )


def _at_break(sheet: Sheet) -> Reading:
    sheet.require_load()
    broken = fracture_of(sheet.curve)
    method = "mean strain of the gauge when the force falls away (ISO 6892-1)"
    neck = "beyond the largest force strain gathers in a neck, and its mean depends on the gauge's length"
    return strain_when(sheet, broken.time_s, broken.u_time_s, "the fracture", method, (neck,))


def _unbroken(sheet: Sheet) -> tuple[str, ...]:
    told = "the record ends before the force drops: the coupon may bear more"
    return (told,) if sheet.curve.peak_at_end else ()


def _at_least(sheet: Sheet) -> str:
    return "at least" if sheet.curve.peak_at_end else ""


def _spikes(times_s: tuple[float, ...]) -> str:
    count = "1 sample" if len(times_s) == 1 else f"{len(times_s)} samples"
    return (
        f"left out: {count} of the force far off those before and after (at {times_s[0]:.5g} s of the "
        "machine's clock" + (", and later)" if len(times_s) > 1 else ")")
    )
