"""Accuracy and speed with their targets: ``python tests/benchmarks NAME [--json FILE] [--plot FILE]``.

NAME is one of the benchmarks below, or ``all``.
"""

from __future__ import annotations

from pathlib import Path
from typing import Annotated

import typer
from table import Bench, show, write_json

NAMES = (
    "accuracy", "alignment", "clock", "coverage", "fuzz", "gauge", "gauges", "hole", "memory", "optics",
    "pose", "properties", "resolution", "speed",
)  # fmt: skip
#: A module called `coverage` would stand in the way of the package that numba looks for.
MODULES = {"coverage": "interval_coverage"}


def main(
    name: Annotated[str, typer.Argument(help="One of " + ", ".join(NAMES) + ", or all.")],
    json: Annotated[Path | None, typer.Option(help="Write figures and targets as JSON.")] = None,
    plot: Annotated[Path | None, typer.Option(help="Draw the curves behind the figures (PNG).")] = None,
    tests: Annotated[int, typer.Option(help="With coverage: how many tests.")] = 200,
    first: Annotated[int, typer.Option(help="With coverage: the first one's seed.")] = 0,
    drawn: Annotated[bool, typer.Option(help="With coverage: drawn readings, no pictures.")] = False,
    rows: Annotated[Path | None, typer.Option(help="With coverage: what each test gave, as JSON.")] = None,
) -> None:
    """Run benchmarks and print a table with the target beside each figure."""
    from importlib import import_module

    if name not in (*NAMES, "all"):
        raise typer.BadParameter(f"choose from {', '.join(NAMES)}, all")
    wanted = NAMES if name == "all" else (name,)
    results: dict[str, Bench] = {}
    for one in wanted:
        asked = {"tests": tests, "first": first, "drawn": drawn, "rows": rows}
        further = asked if one == "coverage" else {}
        results[one] = import_module(MODULES.get(one, one)).run(**further)
        show(one, results[one])
    if json is not None:
        write_json(json, results)
    if plot is not None:
        from table import draw

        draw(plot, results)


if __name__ == "__main__":
    typer.run(main)
