"""Results as tables: the history for a spreadsheet, the properties for a terminal."""

from __future__ import annotations

from math import isfinite
from textwrap import wrap
from typing import TYPE_CHECKING

import numpy as np

from dic.quantities import for_people
from dic.rounding import COVERAGE_FACTOR, power_of_ten, uncertainty_alone, with_uncertainty

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence

    import pandas as pd

    from dic.measurement import Measurement
    from dic.properties.result import Property

#: From more properties on, symbols are easier to read than names.
_MANY = 3
#: Names that people use for the properties.
TITLES = {
    "youngs_modulus": "Young's modulus",
    "poissons_ratio": "Poisson's ratio",
    "shear_modulus": "Shear modulus",
    "bulk_modulus": "Bulk modulus",
    "lame_constant": "Lamé's first constant",
    "upper_yield": "Upper yield strength",
    "lower_yield": "Lower yield strength",
    "yield_point_extension": "Yield point extension",
    "yield_stress": "Yield stress",
    "strain_at_yield": "Strain at yield",
    "tensile_strength": "Tensile strength",
    "strain_at_maximum": "Strain at maximum force",
    "plastic_strain_at_maximum": "Plastic strain at maximum force",
    "strain_at_break": "Strain at break",
    "strain_hardening_exponent": "Strain hardening exponent",
    "strength_coefficient": "Strength coefficient",
    "plastic_strain_ratio": "Plastic strain ratio",
    "ramberg_osgood_exponent": "Ramberg-Osgood exponent",
    "strain_energy_to_yield": "Strain energy to yield",
    "strain_energy_to_break": "Strain energy to break",
    "strain_rate_elastic": "Strain rate, elastic part",
    "strain_rate_to_proof": "Strain rate up to proof stress",
}


def history_table(measurement: Measurement) -> pd.DataFrame:
    """Put the gauge readings and the stress at the same instants side by side, one row per frame.

    Parameters
    ----------
    measurement
        With gauge readings of n frames, and the stress at the same instants.

    Returns
    -------
    pandas.DataFrame
        n rows.  Times in s (``time_s`` on the camera's clock, ``machine_time_s`` on the machine's),
        force in N, stress in MPa, strains without unit; NaN where not measured, the reason in ``status``.
    """
    import pandas as pd

    history, curve = measurement.history, measurement.curve
    return pd.DataFrame(
        {
            "frame": history.frame,
            "time_s": history.time_s,
            "force_N": curve.force_N,
            "stress_MPa": curve.stress_MPa,
            "strain_axial": history.axial,
            "strain_transverse": history.transverse,
            "strain_shear": history.shear,
            "u_strain_axial": history.u_axial,
            "u_strain_transverse": history.u_transverse,
            "valid_fraction": history.valid_fraction,
            "status": list(history.status),
            # Further columns stand behind those that other programs may count on.
            "machine_time_s": curve.time_s,
            "strain_extensometer": history.extensometer,
            "strain_bending": history.bending,
            "u_strain_shear": history.u_shear,
            "u_strain_extensometer": history.u_extensometer,
            "shift_axial_px": history.shift_px[:, 0],
            "shift_transverse_px": history.shift_px[:, 1],
            "name": list(history.name),
            "hencky_axial": np.log1p(history.axial),
            "hencky_transverse": np.log1p(history.transverse),
            "stretch_axial": 1 + history.axial,
            "stretch_transverse": 1 + history.transverse,
            **_further(measurement),
        }
    )


def _further(measurement: Measurement) -> dict[str, object]:
    """Return the columns of a clip-on extensometer and of the named gauges."""
    columns: dict[str, object] = {}
    if measurement.clip_on is not None:
        columns["strain_clip_on"] = measurement.clip_on.strain
    for gauge in measurement.gauges:
        columns |= gauge.columns()
    return columns


def title_of(name: str) -> str:
    """Return the name that people use for a property, for example ``0.2 % proof stress``."""
    if name.startswith("proof_stress_"):
        return f"{name.removeprefix('proof_stress_').replace('_', '.')} % proof stress"
    return TITLES.get(name, name.replace("_", " ").capitalize())


def called(item: Property) -> str:
    """Return what people call a property; the strength by the direction of loading."""
    if item.name == "tensile_strength" and item.value < 0:
        return "Compressive strength"
    return title_of(item.name)


def found_in(properties: Mapping[str, Property]) -> list[Property]:
    """Return the properties that have a value, in the order of the sheet."""
    return [item for item in properties.values() if isfinite(item.value)]


def absent_in(properties: Mapping[str, Property]) -> list[tuple[str, list[Property]]]:
    """Return each reason for which properties are absent, and those that are absent for it."""
    reasons: dict[str, list[Property]] = {}
    for item in properties.values():
        if not isfinite(item.value):
            reasons.setdefault("; ".join(item.notes), []).append(item)
    return list(reasons.items())


def short_list(items: Sequence[Property]) -> str:
    """Name a few properties in plain words, many by their symbols."""
    if len(items) > _MANY:
        return ", ".join(item.symbol for item in items)
    return ", ".join(called(item) for item in items)


def shown_in(item: Property) -> tuple[float, str]:
    """Return the factor from a property's internal unit to the one that people read, and that unit."""
    value, unit = for_people(item.value, item.unit, item.name)
    # The uncertainty follows the value's unit, whatever its own size.
    return (value / item.value if item.value and isfinite(item.value) else 1.0), unit


def written_with(item: Property) -> tuple[float, str, int]:
    """Return `shown_in`, and the power of ten that all figures of a property are written with; 0 for none."""
    scale, unit = shown_in(item)
    return scale, unit, power_of_ten(item.value * scale, COVERAGE_FACTOR * item.standard_uncertainty * scale)


def stated(item: Property) -> tuple[str, str]:
    """Return a property as people read it.

    Returns
    -------
    tuple of str
        The value with its qualifier and its expanded uncertainty (k = 2), and the standard uncertainty
        alone.
    """
    scale, unit, power = written_with(item)
    standard = item.standard_uncertainty * scale
    expanded = with_uncertainty(item.value * scale, COVERAGE_FACTOR * standard, unit)
    return f"{item.qualifier} {expanded}".lstrip(), uncertainty_alone(standard, unit, power)


def properties_text(measurement: Measurement) -> str:
    """Write the properties and the warnings as plain text, for ``print``.

    Returns
    -------
    str
        A table with one property a line, why others are absent, the coverage factor, and each warning.
    """
    specimen = measurement.test.specimen
    heading = f"{specimen.label} ({specimen.material})" if specimen.material else specimen.label
    rows = [(called(item), item.symbol, stated(item)[0]) for item in found_in(measurement.properties)]
    widths = [max((len(row[column]) for row in rows), default=0) for column in (0, 1)]
    lines = [heading, ""]
    lines += [f"  {title:<{widths[0]}}  {symbol:<{widths[1]}}  {text}" for title, symbol, text in rows]
    for reason, items in absent_in(measurement.properties):
        lines += wrap(f"not determined: {short_list(items)}: {reason}", 96, subsequent_indent="    ")
    lines += ["", f"± is the expanded uncertainty, k = {COVERAGE_FACTOR:g} (about 95 %)."]
    for notice in measurement.notices:
        lines += wrap(f"Warning: {notice.text}", 96, subsequent_indent="         ")
    return "\n".join(lines)
