"""The command ``tauten``: registers the commands and turns errors into exit statuses."""

from __future__ import annotations

import sys
from io import TextIOWrapper

import typer

from dic.errors import InputError
from dic_cli import demo, inspect, new, render, run

app = typer.Typer(
    name="tauten",
    help="Strain, modulus, Poisson's ratio and proof stress from camera frames of a speckled coupon "
    "and the testing machine's load record.",
    no_args_is_help=True,
    add_completion=False,
    pretty_exceptions_enable=False,
)
app.command()(demo.demo)
app.command()(new.new)
app.command()(inspect.inspect)
app.command()(run.run)
app.command()(render.render)


def main() -> None:
    """Run the command line: 0 done, 2 the input is at fault, 1 anything else."""
    if isinstance(sys.stdout, TextIOWrapper):  # not every terminal or file has a ν or a ×
        sys.stdout.reconfigure(errors="replace")
    try:
        app()
    except InputError as error:
        print(f"tauten: {error}", file=sys.stderr)
        sys.exit(2)


if __name__ == "__main__":
    main()
