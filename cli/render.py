"""``tauten render``: make a virtual test from a scenario."""

from __future__ import annotations

from pathlib import Path
from typing import Annotated

import typer


def render(
    scenario: Annotated[
        Path, typer.Argument(help="A scenario (TOML), or the name of a shipped one: demo, gravel, elastomer.")
    ],
    out: Annotated[Path, typer.Argument(help="Folder to fill; new, empty or an earlier render.")],
) -> None:
    """Make a virtual test: frames, load record, test file and the truth behind them."""
    from dic_cli.screen import frames_progress
    from synthetic_images import load_scenario
    from synthetic_images import render as render_files

    described = load_scenario(scenario)
    with frames_progress("rendering") as progress:
        test = render_files(described, out, progress)
    typer.echo(f"{test}\nThe truth behind it: {test.with_name('truth.json')}")
