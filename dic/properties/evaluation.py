"""From a curve to the sheet: every property with its uncertainty, or the reason why it is missing."""

from __future__ import annotations

from dataclasses import replace

from dic.properties.course import energy_entries, rate_entries
from dic.properties.cycles import cycle_entries
from dic.properties.elastic import elastic_entries
from dic.properties.hardening import hardening_entries
from dic.properties.plastics import plastics_entries
from dic.properties.result import Evaluation, Property
from dic.properties.sheet import Sheet
from dic.properties.strength import proof_entries, strength_entries
from dic.properties.yielding import yielding_entries
from dic.uncertainty import agrees, monte_carlo


def evaluate(sheet: Sheet) -> Evaluation:
    """Read the properties from a curve.

    Parameters
    ----------
    sheet
        The curve, and what its readings need to know beside it.

    Returns
    -------
    Evaluation
        The properties in the order of the sheet.  One that cannot be had is NaN with the reason in
        its notes; the others stand.

    Notes
    -----
    Contributions are combined as independent (JCGM 100:2008, 5.1.2).  Force calibration and section
    are common factors of every stress; they cancel in Poisson's ratio.  The clock's contribution is
    half the change that a shift by plus and minus one standard uncertainty makes.  The same budget is
    propagated by draws (JCGM 101:2008); where the linear interval differs from theirs, a note says so.
    """
    entries = [
        *elastic_entries(sheet),
        *proof_entries(sheet),
        *yielding_entries(sheet),
        *plastics_entries(sheet),
        *strength_entries(sheet),
        *hardening_entries(sheet),
        *energy_entries(sheet),
        *rate_entries(sheet),
        *cycle_entries(sheet),
    ]
    inputs = sheet.inputs()
    return Evaluation(
        {entry.name: _checked(entry.property(inputs)) for entry in entries},
        sheet.modulus_line(),
        sheet.notices(),
    )


def _checked(item: Property) -> Property:
    """Hold the interval of the budget against that of draws."""
    drawn = monte_carlo(item.value, item.contributions)
    if drawn is None:
        return item
    notes = item.notes
    if not agrees(item.value, item.standard_uncertainty, drawn):
        between = f"{drawn.low:.5g} to {drawn.high:.5g} {item.unit}".rstrip()
        notes += (
            "the interval by k takes all effects as linear and their sum as normal; by Monte Carlo the 95 % "
            f"interval is {between} (JCGM 101)",
        )
    return replace(
        item,
        notes=notes,
        interval_95=(drawn.low, drawn.high),
        draws_standard_deviation=drawn.standard_deviation,
    )
