"""``tauten inspect``: what the inputs hold and what will be assumed."""

from __future__ import annotations

from pathlib import Path
from typing import Annotated

import typer


def inspect(
    test: Annotated[Path, typer.Argument(metavar="TEST.toml", help="Description of the test.")],
    json: Annotated[bool, typer.Option("--json", help="Print one JSON document instead of tables.")] = False,
) -> None:
    """Read everything that a test names, say what was understood, and compute nothing."""
    from dic.inspection import inspect as look
    from dic_cli.inspected import as_json, show_inspection
    from dic_cli.screen import frames_progress

    if json:
        found = look(test)
        typer.echo(as_json(found))
    else:
        with frames_progress("reading") as progress:
            found = look(test, progress)
        show_inspection(found)
    for error in found.errors:
        typer.echo(f"tauten: {error}", err=True)
    if found.errors:
        raise typer.Exit(2)
