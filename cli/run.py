"""``tauten run``: measure one test."""

from __future__ import annotations

from pathlib import Path
from typing import Annotated

import typer


def run(
    test: Annotated[Path, typer.Argument(metavar="TEST.toml", help="Description of the test.")],
    out: Annotated[
        Path | None, typer.Option(help="Result folder (default: NAME-results beside the test file).")
    ] = None,
) -> None:
    """Measure one test: strain, modulus, Poisson's ratio, proof stress, maps and a report."""
    from dic.pipeline import default_folder, measure
    from dic_cli.screen import frames_progress, show_measurement

    folder = out if out is not None else default_folder(test)
    with frames_progress("tracking") as progress:
        measurement = measure(test, folder, progress)
    show_measurement(measurement)
