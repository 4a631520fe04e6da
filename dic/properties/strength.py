"""Proof stresses and the strength."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np

from dic.properties.loading import Loading, Undetermined
from dic.properties.modulus import LARGEST_YIELD_STRAIN
from dic.properties.proof import crossing
from dic.properties.sheet import Entry, Reading, Sheet, bounds
from dic.uncertainty import few_readings


def proof_entries(sheet: Sheet) -> list[Entry]:
    """List one proof stress per offset."""
    named = [(f"{100 * offset:g}", _proof(sheet, offset)) for offset in sheet.section.proof]
    return [Entry(f"proof_stress_{at.replace('.', '_')}", f"Rp{at}", "MPa", read) for at, read in named]


def strength_entries(sheet: Sheet) -> list[Entry]:
    """List the strength."""
    return [Entry("tensile_strength", "Rm", "MPa", lambda: _strength(sheet))]


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
            "clock": sheet.with_clock(shifted),
        }
        bends = "the curve bends all along, as no metal's does: an offset point, not a yield point"
        gradual = found.stress / elastic.modulus > LARGEST_YIELD_STRAIN
        return Reading(
            loading.sign * found.stress,
            f"modulus line shifted by {100 * offset:g} % strain from its own zero (ISO 6892-1)",
            statistics | sheet.of_stress(found.stress),
            {"strain": bounds(loading.sign * np.array([found.low, found.high]))},
            (
                *([bends] if gradual else []),
                *elastic.notes,
                *sheet.left_out(),
                *sheet.left_out_of_strain(),
            ),
        )

    return read


def _strength(sheet: Sheet) -> Reading:
    sheet.require_load()
    curve = sheet.curve
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
    return Reading(
        value,
        "largest force of the record, by a parabola through its noise, over the original section"
        + (" (ISO 6892-1)" if value > 0 else ""),
        statistics | sheet.of_stress(value),
        {"time_s": (curve.peak_time_s, curve.peak_time_s)},
        (*notes, *sheet.left_out()),
    )


def _spikes(times_s: tuple[float, ...]) -> str:
    count = "1 sample" if len(times_s) == 1 else f"{len(times_s)} samples"
    return (
        f"left out: {count} of the force far off those before and after (at {times_s[0]:.5g} s of the "
        "machine's clock" + (", and later)" if len(times_s) > 1 else ")")
    )
