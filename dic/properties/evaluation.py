"""From a curve to the sheet: every property with its uncertainty, or the reason why it is missing."""

from __future__ import annotations

from dataclasses import replace

from dic.properties.course import energy_entries, rate_entries
from dic.properties.cycles import cycle_entries
from dic.properties.elastic import elastic_entries
from dic.properties.hardening import hardening_entries
from dic.properties.result import Curve, Evaluation, Property
from dic.properties.sheet import Sheet
from dic.properties.strength import proof_entries, strength_entries
from dic.properties.yielding import yielding_entries
from dic.sync.record import Clock
from dic.testfile import Properties, Specimen
from dic.uncertainty import budget_of

#: How a note begins that names what an uncertainty lacks.
NOT_INCLUDED = "not included: "


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
        The properties in the order of the sheet.  One that cannot be had is NaN with the reason in
        its notes; the others stand.

    Notes
    -----
    Contributions are combined as independent (JCGM 100:2008, 5.1.2).  Force calibration and section
    are common factors of every stress; they cancel in Poisson's ratio.  The clock's contribution is
    half the change that a shift by plus and minus one standard uncertainty makes.
    """
    sheet = Sheet(curve, specimen, force_uncertainty, clock, section)
    entries = [
        *elastic_entries(sheet),
        *proof_entries(sheet),
        *yielding_entries(sheet),
        *strength_entries(sheet),
        *hardening_entries(sheet),
        *energy_entries(sheet),
        *rate_entries(sheet),
        *cycle_entries(sheet),
    ]
    return Evaluation(
        {entry.name: _with_budget(entry.property(), sheet) for entry in entries},
        sheet.modulus_line(),
        sheet.notices(),
    )


def _with_budget(item: Property, sheet: Sheet) -> Property:
    """Add the table of contributions; what the notes say is not included stands in it too."""
    missing = tuple(note.removeprefix(NOT_INCLUDED) for note in item.notes if note.startswith(NOT_INCLUDED))
    return replace(item, budget=budget_of(item.contributions, item.unit, sheet.inputs(), missing))
