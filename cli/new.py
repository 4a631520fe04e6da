"""``tauten new``: draft a test file from frames and load record."""

from __future__ import annotations

from pathlib import Path
from typing import Annotated

import typer


def new(
    frames: Annotated[
        Path, typer.Argument(help='Folder or file of frames, or a pattern in quotes: "frames/cam_*.tif".')
    ],
    load_record: Annotated[Path, typer.Argument(help="The testing machine's record.")],
    out: Annotated[Path, typer.Option(help="The test file to write.")] = Path("test.toml"),
) -> None:
    """Look at frames and load record, and write a commented test file with what was found."""
    from dic.drafting import write_draft

    blanks = write_draft(frames, load_record, out)
    typer.echo(f"{out} is written. Fill in {', '.join(blanks)}; then: tauten inspect {out}")
