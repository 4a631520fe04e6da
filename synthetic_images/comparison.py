"""Measured values beside the true ones of a virtual test."""

from __future__ import annotations

import json
from collections.abc import Iterable
from dataclasses import dataclass
from pathlib import Path

from dic.properties.result import Property
from dic.quantities import for_people
from dic.store.tables import stated, title_of


@dataclass(frozen=True)
class Compared:
    """One property: texts for people, the relative error in percent, and whether k = 2 holds the truth."""

    name: str
    title: str
    measured: str
    true: str
    off_percent: float
    inside: bool


def compare(measured: Iterable[Property], truth: Path) -> list[Compared]:
    """Hold measured properties against a virtual test's ``truth.json``; left out is what has no truth."""
    known = json.loads(truth.read_text(encoding="utf-8"))["properties"]
    rows = []
    for item in measured:
        true = known.get(item.name, {}).get("value")
        if true is None:
            continue
        value, unit = for_people(true, item.unit, item.name)
        error = item.value - true
        rows.append(
            Compared(
                name=item.name,
                title=title_of(item.name),
                measured=stated(item)[0],
                true=f"{value:.6g} {unit}".rstrip(),
                off_percent=100 * error / true,
                inside=abs(error) <= 2 * item.standard_uncertainty,
            )
        )
    return rows
