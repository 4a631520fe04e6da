"""Figures with their targets, as a table, as JSON, as plots."""

from __future__ import annotations

import json
from collections.abc import Callable
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

from rich.console import Console
from rich.table import Table


@dataclass(frozen=True)
class Figure:
    """One measured figure; `low` and `high` bound what is wanted, None where there is no such bound."""

    what: str
    value: float
    unit: str = ""
    low: float | None = None
    high: float | None = None

    @property
    def target(self) -> str:
        if self.low is not None and self.high is not None:
            return f"{self.low:g} to {self.high:g}"
        if self.high is not None:
            return f"≤ {self.high:g}"
        return f"≥ {self.low:g}" if self.low is not None else ""

    @property
    def met(self) -> str:
        if self.low is None and self.high is None:
            return ""
        above = self.low is None or self.value >= self.low
        below = self.high is None or self.value <= self.high
        return "yes" if above and below else "NO"


@dataclass
class Bench:
    """What a benchmark gives: figures, and curves to draw as (title, x label, y label, {name: (x, y)})."""

    figures: list[Figure] = field(default_factory=list)
    curves: list[tuple[str, str, str, dict[str, tuple[Any, Any]]]] = field(default_factory=list)

    def add(
        self, what: str, value: float, unit: str = "", *, low: float | None = None, high: float | None = None
    ) -> None:
        self.figures.append(Figure(what, float(value), unit, low, high))


def show(name: str, bench: Bench) -> None:
    table = Table(title=name, title_justify="left")
    table.add_column("figure")
    for heading in ("measured", "target", "met"):
        table.add_column(heading, justify="right")
    for one in bench.figures:
        table.add_row(one.what, f"{one.value:.4g} {one.unit}".rstrip(), one.target, one.met)
    Console(width=118).print(table)


def write_json(path: Path, results: dict[str, Bench]) -> None:
    content = {
        name: [{**vars(one), "met": one.met} for one in bench.figures] for name, bench in results.items()
    }
    path.write_text(json.dumps(content, indent=1, ensure_ascii=False) + "\n", encoding="utf-8")


def draw(path: Path, results: dict[str, Bench]) -> None:
    from matplotlib.figure import Figure as Sheet

    curves = [curve for bench in results.values() for curve in bench.curves]
    if not curves:
        return
    sheet = Sheet(figsize=(7, 3.2 * len(curves)), layout="constrained")
    for axes, (title, across, up, lines) in zip(
        sheet.subplots(len(curves), squeeze=False)[:, 0], curves, strict=True
    ):
        for (label, (x, y)), style in zip(
            lines.items(), ["o-", "s--", "^:", "d-.", "v-", "x--"] * 3, strict=False
        ):
            axes.plot(x, y, style, ms=3, lw=1, label=label)
        axes.set(title=title, xlabel=across, ylabel=up)
        axes.legend(fontsize=7)
        axes.grid(alpha=0.3)
    sheet.savefig(path, dpi=110)


Run = Callable[[], Bench]
