"""`tauten render`: make a virtual test from a scenario."""

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
    from rich.console import Console
    from rich.progress import BarColumn, MofNCompleteColumn, Progress, TextColumn, TimeRemainingColumn

    from synthetic_images import load_scenario
    from synthetic_images import render as render_files

    described = load_scenario(scenario)
    columns = (TextColumn("rendering"), BarColumn(), MofNCompleteColumn(), TimeRemainingColumn())
    console = Console(stderr=True)
    with Progress(*columns, console=console) as bar:
        task = bar.add_task("rendering", total=described.camera.frames)
        test = render_files(described, out, lambda done, total: bar.update(task, completed=done, total=total))
    typer.echo(f"{test}\nThe truth behind it: {test.parent / 'truth.json'}")
