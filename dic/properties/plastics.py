"""The yield point of plastics, which lies at larger strains than that of metals."""

from __future__ import annotations

from functools import cache

from dic.properties.peak import Top, highest_around
from dic.properties.sheet import Entry, Reading, Sheet
from dic.properties.strength import strain_when
from dic.properties.yielding import first_fall, force_and_strain


def plastics_entries(sheet: Sheet) -> list[Entry]:
    """List stress and strain at the yield point of ISO 527-1; nothing without the preset for plastics.

    It is the first maximum of the stress after which the coupon stretches on; symbols and definition
    [from memory].
    """
    if sheet.section.preset != "plastics":
        return []

    @cache
    def found() -> Top:
        return _yield_point(sheet)

    return [
        Entry("yield_stress", "σY", "MPa", lambda: _stress(sheet, found())),
        Entry("strain_at_yield", "εY", "", lambda: _strain(sheet, found())),
    ]


def _yield_point(sheet: Sheet) -> Top:
    dense, strain = force_and_strain(sheet)
    top = first_fall(dense, strain)
    # Plastics yield gradually: the samples after the maximum tell its height as well as those before.
    return highest_around(dense.time_s, dense.force_N, dense.noise_N, top, float(dense.force_N[top]))[0]


def _stress(sheet: Sheet, top: Top) -> Reading:
    area = sheet.curve.area_mm2
    value = top.value / area
    return Reading(
        sheet.loading.sign * value,
        "first maximum of the stress after which the coupon stretches on (ISO 527-1)",
        {"scatter": top.u_value / area} | sheet.of_stress(value),
        {"time_s": (top.time, top.time)},
        missing=sheet.left_out(),
    )


def _strain(sheet: Sheet, top: Top) -> Reading:
    method = "strain at the first maximum of the stress (ISO 527-1)"
    return strain_when(sheet, top.time, top.u_time, "the yield point", method)
