"""True stress and strain, and the laws of hardening fitted to them."""

from __future__ import annotations

from math import exp

import numpy as np
from numpy.typing import ArrayLike, NDArray

from dic.properties.loading import MIN_FRAMES, Loading, Undetermined, passage
from dic.properties.sheet import Entry, Reading, Sheet
from dic.uncertainty import Line, few_readings, line_with_errors_in_both

Floats = NDArray[np.float64]

#: Strains of ISO 10275 for n [from memory]: 10 % to 20 %, cut at the largest force; where the largest force
#: comes before `LEAST`, from 2 % on.
USUAL = (0.10, 0.20)
EARLY = 0.02
LEAST = 0.12
#: A narrower range of strain says nothing about a power law.
NARROWEST = 0.01
#: Plastic strains between which Ramberg and Osgood's exponent is fitted.
RAMBERG_OSGOOD = (0.0002, 0.01)
#: Standard deviations of the elastic part's strain from which on a plastic strain counts.
NOISE = 5


def true_curve(loading: Loading, assumed: str = "constant volume") -> tuple[Floats, Floats]:
    """Return true stress and true (logarithmic) strain up to the largest force.

    Parameters
    ----------
    loading
        Frames; both results are counted positive along the loading.
    assumed
        ``"constant volume"``, σ(1 + ε), or ``"transverse strain"``: the thickness contracts as the
        measured width does, σ/(1 + εt)².

    Returns
    -------
    tuple
        True stress, MPa, and true strain, shape (n,).
    """
    sign = loading.sign
    strain = sign * np.log1p(sign * loading.strain)
    if assumed == "transverse strain":
        return loading.stress / (1 + sign * loading.transverse) ** 2, strain
    return loading.stress * (1 + sign * loading.strain), strain


def hardening_entries(sheet: Sheet) -> list[Entry]:
    """List the exponents and coefficients of hardening."""
    return [
        Entry("strain_hardening_exponent", "n", "", lambda: _hollomon(sheet, exponent=True)),
        Entry("strength_coefficient", "C", "MPa", lambda: _hollomon(sheet, exponent=False)),
        Entry("plastic_strain_ratio", "r", "", lambda: _plastic_strain_ratio(sheet)),
        Entry("ramberg_osgood_exponent", "N", "", lambda: _ramberg_osgood(sheet)),
    ]


def _range(sheet: Sheet) -> slice:
    """Return the frames of uniform strain that hardening is read from."""
    strain, wanted = sheet.loading.strain, sheet.section.hardening
    top = float(strain.max(initial=0.0))
    low, high = (USUAL if top >= LEAST else (EARLY, top)) if wanted == "auto" else wanted
    high = min(high, top)
    frames = passage(strain, low, high)
    if high - low < NARROWEST:
        raise Undetermined(
            f"the largest force comes at a strain of {100 * top:.3g} %; read from {100 * low:g} % on, "
            "that is too narrow for hardening"
        )
    if frames.stop - frames.start < MIN_FRAMES:
        raise Undetermined(
            f"{frames.stop - frames.start} frames lie between strains {low:g} and {high:.3g} of hardening, "
            f"{MIN_FRAMES} are needed"
        )
    return frames


def _line(x: Floats, y: Floats, u_x: ArrayLike, u_y: ArrayLike) -> Line:
    try:
        return line_with_errors_in_both(x, y, u_x, u_y)
    except ValueError as error:
        raise Undetermined("the stress does not grow with the plastic strain") from error


def _hollomon(sheet: Sheet, *, exponent: bool) -> Reading:
    """Read n or the strength coefficient from ln σ = ln C + n ln ε (Hollomon 1945)."""
    frames = _range(sheet)

    def law(loading: Loading) -> Line:
        stress, strain = true_curve(loading.part(frames), sheet.section.true_stress)
        there = np.isfinite(stress) & (stress > 0) & (strain > 0)
        if there.sum() < MIN_FRAMES:
            raise Undetermined("the transverse strain was not measured in the range of hardening")
        return _line(np.log(strain[there]), np.log(stress[there]), 0.0, 1.0)

    line = law(sheet.loading)
    window, grow = sheet.window_of(frames), few_readings(line.n - 2)
    assumed = f"section by {sheet.section.true_stress}"
    notes, missing = (f"r² = {line.r_squared:.6f}, {line.n} frames",), sheet.left_out_of_strain()
    if exponent:
        return Reading(
            line.slope,
            f"slope of ln true stress on ln true strain (ISO 10275), {assumed}",
            {"scatter": line.u_slope * grow, **sheet.shifted(lambda one: law(one).slope)},
            window,
            notes,
            missing=missing,
        )
    value = exp(line.intercept)
    statistics = {
        "scatter": value * line.u_intercept * grow,
        **sheet.shifted(lambda one: exp(law(one).intercept)),
    }
    return Reading(
        value,
        f"true stress at a true strain of 1 by the power law of n (ISO 10275), {assumed}",
        statistics | sheet.of_stress(value),
        window,
        notes,
        missing=(*missing, *sheet.left_out()),
    )


def _plastic_strain_ratio(sheet: Sheet) -> Reading:
    """Read r from the slope m of plastic width on plastic length strain, r = -m/(1 + m)."""
    frames, elastic = _range(sheet), sheet.elastic
    axial, across = sheet.line(sheet.loading), sheet.line(sheet.loading, "transverse")
    part, sign = sheet.loading.part(frames), sheet.loading.sign
    stress, length = true_curve(part)
    width = sign * np.log1p(sign * part.transverse)
    there = np.isfinite(width)
    if there.sum() < MIN_FRAMES:
        raise Undetermined("the transverse strain was not measured in the range of hardening")
    length, width = (length - stress * axial.slope)[there], (width - stress * across.slope)[there]
    noise = (part.u_strain[there], part.u_transverse[there])
    line = _line(length, width, *(noise if np.all(sum(noise) > 0) else (0.0, 1.0)))
    if not -1 < line.slope < 0:
        raise Undetermined("the width does not contract as a plastic strain at constant volume would")
    return Reading(
        -line.slope / (1 + line.slope),
        "slope of plastic width on plastic length strain, true, at constant volume (ISO 10113)",
        {"scatter": line.u_slope / (1 + line.slope) ** 2 * few_readings(line.n - 2)},
        sheet.window_of(frames),
        elastic.notes,
        missing=sheet.left_out_of_strain(),
    )


def _ramberg_osgood(sheet: Sheet) -> Reading:
    """Read N of ε = σ/E + c σᴺ, by a line of ln plastic strain on ln stress, noise weighed."""
    elastic, loading = sheet.elastic, sheet.loading
    low = max(RAMBERG_OSGOOD[0], NOISE * elastic.line.residual_s)
    plastic = loading.strain - elastic.line.intercept - elastic.line.slope * loading.stress
    plastic[: elastic.end] = 0.0
    frames = passage(plastic, low, RAMBERG_OSGOOD[1])

    def law(loading: Loading, modulus: Line) -> Line:
        part = loading.part(frames)
        plastic = part.strain - modulus.intercept - modulus.slope * part.stress
        there = (plastic > low / 2) & (part.stress > 0)
        if there.sum() < MIN_FRAMES:
            raise Undetermined(
                f"{there.sum()} frames have plastic strains of {100 * low:.2g} % to "
                f"{100 * RAMBERG_OSGOOD[1]:g} %, {MIN_FRAMES} are needed"
            )
        plastic, stress = plastic[there], part.stress[there]
        scatter = max(elastic.line.residual_s, 1e-12) / plastic
        return _line(np.log(stress), np.log(plastic), 0.0, scatter)

    line = law(loading, elastic.line)
    if not line.slope > 1:
        raise Undetermined("the stress does not grow as a power of the plastic strain")
    return Reading(
        line.slope,
        "exponent of Ramberg and Osgood (NACA TN 902), line of ln plastic strain on ln stress",
        {
            "scatter": line.u_slope * few_readings(line.n - 2),
            "modulus line": abs(law(loading, elastic.line.steeper()).slope - line.slope),
            **sheet.shifted(lambda moved: law(moved, sheet.line(moved)).slope),
        },
        sheet.window_of(frames),
        (f"r² = {line.r_squared:.6f}, {line.n} frames", *elastic.notes),
        missing=sheet.left_out_of_strain(),
    )
