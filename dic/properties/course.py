"""What follows from the course of a test: energies under the curve, and rates of strain."""

from __future__ import annotations

from dataclasses import replace
from math import sqrt

import numpy as np
from numpy.typing import NDArray

from dic.properties.loading import MIN_FRAMES, Loading, Undetermined
from dic.properties.modulus import YIELD_OFFSET
from dic.properties.moments import fracture_of, strain_at
from dic.properties.proof import Crossing, crossing
from dic.properties.sheet import Entry, Reading, Sheet
from dic.uncertainty import Line, combine, few_readings, straight_line

Floats = NDArray[np.float64]

#: Strain rates of ISO 6892-1, method A, in 1/s, each with a tolerance of 20 % [from memory].
RANGES = (0.00007, 0.00025, 0.002, 0.0067)
TOLERANCE = 0.2


def energy_entries(sheet: Sheet) -> list[Entry]:
    """List the energies per volume."""
    return [
        Entry("strain_energy_to_yield", "Uy", "MJ/m³", lambda: _to_yield(sheet)),
        Entry("strain_energy_to_break", "Ub", "MJ/m³", lambda: _to_break(sheet)),
    ]


def rate_entries(sheet: Sheet) -> list[Entry]:
    """List the strain rates."""
    return [
        Entry("strain_rate_elastic", "ėe", "1/s", lambda: _elastic_rate(sheet)),
        Entry("strain_rate_to_proof", "ėp", "1/s", lambda: _rate_to_proof(sheet)),
    ]


def _to_yield(sheet: Sheet) -> Reading:
    elastic, loading = sheet.elastic, sheet.loading
    line = elastic.line

    def course(loading: Loading, line: Line) -> tuple[Crossing, Floats, Floats]:
        found = crossing(loading, line, elastic.end, YIELD_OFFSET)
        before = slice(0, int(np.argmax(loading.strain >= found.strain)))
        strain, stress = loading.strain[before], loading.stress[before]
        return found, np.append(strain, found.strain), np.append(stress, found.stress)

    def energy(loading: Loading, line: Line) -> float:
        _, strain, stress = course(loading, line)
        return float(np.trapezoid(stress, strain))

    found, strain, stress = course(loading, line)
    grow = few_readings(line.n - 2)
    contributions = {
        "modulus line": abs(energy(loading, line.steeper()) - energy(loading, line)) * grow,
        **sheet.shifted(lambda moved: energy(moved, sheet.line(moved))),
    }
    u_end = found.u_curve / elastic.modulus
    words = "area under the curve up to the 0.2 % proof stress"
    return _energy(sheet, strain, stress, u_end, words, contributions)


def _to_break(sheet: Sheet) -> Reading:
    sheet.require_load()
    whole, broken = sheet.whole, fracture_of(sheet.curve)
    end = strain_at(whole, broken.time_s, "the fracture")
    before = whole.time_s < broken.time_s
    contributions = end.contributions(broken.u_time_s, sheet.u_clock_at(broken.time_s))
    found = _energy(
        sheet,
        np.append(whole.strain[before], end.strain),
        np.append(whole.stress[before], whole.stress[before][-1]),
        combine(contributions),
        "area under the curve up to the fracture",
        {},
    )
    return replace(found, notes=end.notes)


def _energy(
    sheet: Sheet, strain: Floats, stress: Floats, u_end: float, words: str, others: dict[str, float]
) -> Reading:
    """Integrate stress over strain; the end's uncertainty in strain counts with the stress there."""
    value = float(np.trapezoid(stress, strain))
    steps = np.gradient(strain)
    noise = float(np.median(sheet.loading.u_stress)) * sqrt(float(steps @ steps))
    sign = sheet.loading.sign
    return Reading(
        value,
        f"{words}, per volume of the gauge",
        {"noise of the force": noise, "strain at the end": abs(float(stress[-1])) * u_end}
        | others
        | sheet.of_stress(value),
        {"strain": (0.0, sign * float(strain[-1]))},
        missing=(*sheet.left_out(), *sheet.left_out_of_strain()),
    )


def _elastic_rate(sheet: Sheet) -> Reading:
    return _rate(sheet, sheet.elastic.window.frames, "in the modulus' window")


def _rate_to_proof(sheet: Sheet) -> Reading:
    elastic, loading = sheet.elastic, sheet.loading
    found = crossing(loading, elastic.line, elastic.end, YIELD_OFFSET)
    end = int(np.argmax(loading.strain >= found.strain)) + 1
    return _rate(
        sheet, slice(elastic.end, end), "from the end of the modulus' window to the 0.2 % proof stress"
    )


def _rate(sheet: Sheet, frames: slice, where: str) -> Reading:
    loading = sheet.loading
    count = frames.stop - frames.start
    if count < MIN_FRAMES:
        raise Undetermined(f"{max(count, 0)} frames lie {where}, {MIN_FRAMES} are needed")
    line = straight_line(loading.time_s[frames], loading.strain[frames])
    return Reading(
        loading.sign * line.slope,
        f"slope of strain against time {where}",
        {"scatter": line.u_slope * few_readings(line.n - 2)},
        sheet.window_of(frames),
        (_range_of(line.slope),),
    )


def _range_of(rate: float) -> str:
    """Say in which of the standard's ranges a strain rate lies."""
    for number, middle in enumerate(RANGES, start=1):
        if abs(rate - middle) <= TOLERANCE * middle:
            return f"within range {number} of ISO 6892-1, method A ({_plainly(middle)} 1/s ± 20 %)"
    return (
        "in none of the ranges of ISO 6892-1, method A (" + ", ".join(_plainly(r) for r in RANGES) + " 1/s)"
    )


def _plainly(rate: float) -> str:
    """Write a rate without a power of ten."""
    return f"{rate:.5f}".rstrip("0")
