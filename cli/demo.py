"""``tauten demo``: an invented test with known truth, rendered, measured and compared."""

from __future__ import annotations

from pathlib import Path
from typing import Annotated

import typer


def demo(
    out: Annotated[
        Path, typer.Argument(metavar="[OUT]", help="Folder for the example and its results.")
    ] = Path("tauten-demo"),
) -> None:
    """Render an invented tension test, measure it, and print measured beside true values."""
    from dic.pipeline import measure
    from dic_cli.screen import frames_progress, show_comparison, show_measurement
    from synthetic_images import compare, load_scenario, render, scenarios

    with frames_progress("rendering") as progress:
        test = render(load_scenario(scenarios()["demo"]), out / "test", progress)
    with frames_progress("tracking") as progress:
        measurement = measure(test, out / "results", progress)
    show_measurement(measurement)
    show_comparison(compare(measurement.properties.values(), test.with_name("truth.json")))
