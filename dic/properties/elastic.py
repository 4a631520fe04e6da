"""The elastic constants of the sheet."""

from __future__ import annotations

from collections.abc import Callable
from functools import cache
from math import copysign

import numpy as np
from numpy.typing import NDArray

from dic.properties.doubts import GOOD_SLOPE
from dic.properties.fits import WORDS
from dic.properties.hooke import bulk_modulus, lame_constant, shear_modulus
from dic.properties.loading import Loading, Undetermined
from dic.properties.sheet import Entry, Reading, Sheet
from dic.uncertainty import Contribution, Effect, combine, line_with_errors_in_both

Floats = NDArray[np.float64]
#: A constant from E and ν.
Law = Callable[[float, float], float]


def elastic_entries(sheet: Sheet) -> list[Entry]:
    """List the elastic constants."""

    @cache
    def ratio() -> Reading:
        return _poissons_ratio(sheet)

    def volumetric(law: Law, formula: str) -> Callable[[], Reading]:
        return lambda: _volumetric(sheet, ratio(), law, formula)

    return [
        Entry("youngs_modulus", "E", "MPa", lambda: _youngs_modulus(sheet)),
        Entry("poissons_ratio", "ν", "", ratio),
        Entry("shear_modulus", "G", "MPa", lambda: _shear_modulus(sheet, ratio().value)),
        Entry("bulk_modulus", "K", "MPa", volumetric(bulk_modulus, "E / (3(1 - 2ν))")),
        Entry("lame_constant", "λ", "MPa", volumetric(lame_constant, "Eν / ((1 + ν)(1 - 2ν))")),
    ]


def _youngs_modulus(sheet: Sheet) -> Reading:
    elastic, line = sheet.elastic, sheet.elastic.line
    relative = line.relative_error
    frames = elastic.window.frames
    rows = sheet.loading.rows[[frames.start, frames.stop - 1]]
    quality = [
        f"relative standard error of the slope {100 * relative:.2g} %, "
        f"r² = {line.r_squared:.6f}, {elastic.window.count} frames ({rows[0]} to {rows[1]})"
    ]
    if relative > GOOD_SLOPE:
        quality.append(f"the slope scatters by more than the {100 * GOOD_SLOPE:g} % of ISO 6892-1")
    value = elastic.modulus

    def modulus(loading: Loading) -> float:
        return 1 / sheet.line(loading).slope

    statistics = {
        **sheet.of_lines(sheet.loading.strain, sheet.loading.u_strain, value / line.slope),
        **sheet.shifted(modulus),
    }
    return Reading(
        value,
        f"{WORDS[elastic.window.kind]}, {elastic.rule}",
        statistics | sheet.of_stress(value),
        sheet.window(),
        (*quality, *elastic.notes),
        missing=(*sheet.left_out(), *sheet.left_out_of_strain()),
    )


def _poissons_ratio(sheet: Sheet) -> Reading:
    """Read ν from both slopes; it changes as the slope of εt + ν·εa, in which the force's noise cancels."""
    elastic, loading = sheet.elastic, sheet.loading

    def ratio(loading: Loading) -> float:
        return -sheet.line(loading, "transverse").slope / sheet.line(loading).slope

    value = ratio(loading)
    own = sheet.of_lines(
        loading.transverse + value * loading.strain,
        np.hypot(loading.u_transverse, value * loading.u_strain),
        elastic.modulus,
    )
    return Reading(
        value,
        f"slopes of transverse and axial strain against the same force (ASTM E132), {elastic.rule}",
        {**own, **sheet.shifted(ratio)},
        sheet.window(),
        (*_against_axial(sheet, value, own["scatter"]), *elastic.notes),
        missing=sheet.left_out_of_strain(),
    )


def _against_axial(sheet: Sheet, value: float, noise: float) -> tuple[str, ...]:
    """Cross-check ν by the slope of transverse against axial strain, which needs neither force nor clock."""
    if sheet.elastic.window.kind != "regression":
        return ()
    loading, here = sheet.loading, sheet.elastic.window.frames
    there = np.isfinite(loading.transverse[here])
    parts = (loading.strain, loading.transverse, loading.u_strain, loading.u_transverse)
    x, y, u_x, u_y = (part[here][there] for part in parts)
    known = (u_x, u_y) if np.all(u_x + u_y > 0) else (0.0, 1.0)
    line = line_with_errors_in_both(x, y, *known)
    told = f"against the axial strain the slope gives {-line.slope:.4g}"
    if abs(-line.slope - value) > 2 * np.hypot(noise, line.u_slope):
        return (f"{told}, farther off than the scatter of both explains: look at the clocks and residuals",)
    return (f"{told} (cross-check)",)


def _shear_modulus(sheet: Sheet, ratio: float) -> Reading:
    if ratio <= -1:
        raise Undetermined(f"no isotropic solid has a Poisson's ratio of {ratio:.3g}")
    return _isotropic(sheet, shear_modulus, "E / (2(1 + ν))")


def _volumetric(sheet: Sheet, ratio: Reading, law: Law, formula: str) -> Reading:
    """Read a constant that has no bound where the material keeps its volume."""
    if not -1 < ratio.value < 0.5:
        raise Undetermined(
            f"no isotropic solid with a bulk modulus has a Poisson's ratio of {ratio.value:.3g}"
        )
    if ratio.value + 2 * combine(ratio.contributions) >= 0.5:
        raise Undetermined(
            f"Poisson's ratio, {ratio.value:.3g}, cannot be told from 0.5, where this constant has no bound"
        )
    return _isotropic(sheet, law, formula)


def _isotropic(sheet: Sheet, law: Law, formula: str) -> Reading:
    """Read a constant from E and ν.

    Both come from the slopes of two strains on one stress.  Weighed by the constant's derivatives by
    these slopes, the strains make one whose slope changes as the constant does: so the correlation of
    E and ν is in it.
    """
    loading = sheet.loading

    def of_slopes(axial: float, across: float) -> float:
        return law(1 / axial, -across / axial)

    def value_of(loading: Loading) -> float:
        return of_slopes(sheet.line(loading).slope, sheet.line(loading, "transverse").slope)

    axial, across = sheet.line(loading).slope, sheet.line(loading, "transverse").slope
    step = 1e-6 * axial
    by_axial = (of_slopes(axial + step, across) - of_slopes(axial - step, across)) / (2 * step)
    by_across = (of_slopes(axial, across + step) - of_slopes(axial, across - step)) / (2 * step)
    own = sheet.of_lines(
        by_axial * loading.strain + by_across * loading.transverse,
        np.hypot(by_axial * loading.u_strain, by_across * loading.u_transverse),
    )
    value = of_slopes(axial, across)

    def bent(u: float) -> Contribution:
        # Where the volume hardly changes, these constants bend strongly with the slope across.
        moved = abs(u / by_across)
        bend = (of_slopes(axial, across + moved) + of_slopes(axial, across - moved)) / 2 - value
        within = isinstance(u, Contribution) and u.effects[0].bounded
        return Contribution(u, (Effect(u, bend * copysign(1.0, value), within),))

    statistics = {source: bent(u) for source, u in own.items()} | sheet.shifted(value_of)
    return Reading(
        value,
        f"{formula}, for an isotropic material",
        statistics | sheet.of_stress(value),
        sheet.window(),
        ("the correlation of E and ν is included", *sheet.elastic.notes),
        missing=(*sheet.left_out(), *sheet.left_out_of_strain()),
    )
