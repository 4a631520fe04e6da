"""What the commands put on the screen: progress and short tables."""

from __future__ import annotations

from collections.abc import Iterable, Iterator
from contextlib import contextmanager
from typing import TYPE_CHECKING

from rich.console import Console
from rich.markup import escape
from rich.progress import BarColumn, MofNCompleteColumn, Progress, TextColumn, TimeRemainingColumn
from rich.table import Table

from dic.errors import printable
from dic.quantities import for_people
from dic.rounding import COVERAGE_FACTOR
from dic.store.tables import absent_in, called, found_in, short_list, stated

if TYPE_CHECKING:
    from dic.measurement import Measurement
    from dic.pipeline import Progress as Report
    from synthetic_images.comparison import Compared

console = Console(highlight=False)


@contextmanager
def frames_progress(what: str) -> Iterator[Report]:
    """Show a bar with frames per second and time left; yields the function to call after each frame."""
    columns = (
        TextColumn("{task.description:<9}"),
        BarColumn(),
        MofNCompleteColumn(),
        TextColumn("{task.fields[pace]:>12}"),
        TimeRemainingColumn(),
    )
    with Progress(*columns, console=console) as bar:
        # shown from the first frame on: an input that is refused has no progress
        task = bar.add_task(what, total=None, pace="", visible=False)

        def report(done: int, total: int) -> None:
            speed = bar.tasks[task].finished_speed or bar.tasks[task].speed
            bar.update(
                task, visible=True, completed=done, total=total, pace=f"{speed:.1f} frames/s" if speed else ""
            )

        yield report


def _plain(text: str) -> str:
    """Return a stranger's text so that it neither steers the terminal nor counts as markup."""
    return escape(printable(text))


def show_measurement(measurement: Measurement) -> None:
    """Print the properties, the warnings and where the report lies."""
    table = Table(title=_plain(measurement.test.specimen.label), title_justify="left")
    table.add_column("property")
    for heading in ("symbol", f"value (k = {COVERAGE_FACTOR:g})"):
        table.add_column(heading, no_wrap=True)
    for item in found_in(measurement.properties):
        table.add_row(called(item), item.symbol, stated(item)[0])
    console.print(table)
    for item in found_in(measurement.properties):
        if item.qualifier:
            console.print(f"{item.qualifier}: {called(item)}: {_plain(item.notes[0])}")
    for reason, items in absent_in(measurement.properties):
        console.print(f"not determined: {short_list(items)}: {_plain(reason)}")
    for notice in measurement.notices:
        console.print(f"warning: {_plain(notice.text)}")
    console.print(f"report: {_plain(str(measurement.folder / 'report.html'))}", soft_wrap=True)


def show_comparison(rows: Iterable[Compared]) -> None:
    """Print measured beside true values, and whether the stated interval holds the truth."""
    table = Table(title="measured beside true", title_justify="left")
    table.add_column("property")
    for heading in (f"measured (k = {COVERAGE_FACTOR:g})", "true", "off by", "truth inside"):
        table.add_column(heading, justify="right", no_wrap=True)
    for row in rows:
        value, unit = for_people(row.true, row.item.unit, row.item.name)
        table.add_row(
            called(row.item),
            stated(row.item)[0],
            f"{value:.6g} {unit}".rstrip(),
            f"{row.off_percent:+.3f} %",
            "yes" if row.inside else "NO",
        )
    console.print(table)
