"""Measured values beside the true ones of a virtual test."""

from __future__ import annotations

import json
from collections.abc import Iterable
from dataclasses import dataclass
from pathlib import Path

from dic.properties.result import Property


@dataclass(frozen=True)
class Compared:
    """One property beside its true value, in the property's own unit."""

    item: Property
    true: float

    @property
    def off_percent(self) -> float:
        """Relative error, percent."""
        return 100 * (self.item.value - self.true) / self.true

    @property
    def inside(self) -> bool:
        """Whether the stated interval, k = 2, holds the truth."""
        return abs(self.item.value - self.true) <= 2 * self.item.standard_uncertainty


def compare(measured: Iterable[Property], truth: Path) -> list[Compared]:
    """Hold measured properties against a virtual test's ``truth.json``; left out is what has no truth."""
    known = json.loads(truth.read_text(encoding="utf-8"))["properties"]
    pairs = [(item, known.get(item.name, {}).get("value")) for item in measured]
    return [Compared(item, true) for item, true in pairs if true is not None]
