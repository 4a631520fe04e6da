"""An inspection on the screen, and as JSON."""

from __future__ import annotations

import json
from collections.abc import Iterable, Sequence
from dataclasses import asdict
from math import isfinite
from typing import TYPE_CHECKING, Any

from rich.table import Table
from rich.text import Text

from dic.errors import listed, printable
from dic_cli.screen import console

if TYPE_CHECKING:
    from dic.inspection import Inspection
    from dic.inspection.seen import FramesSeen, RecordSeen


def as_json(found: Inspection) -> str:
    """Return an inspection as one JSON document; what is not a number is null."""
    return json.dumps(_plain(asdict(found)), indent=1, allow_nan=False)


def _plain(value: Any) -> Any:
    if isinstance(value, dict):
        return {key: _plain(item) for key, item in value.items()}
    if isinstance(value, list | tuple):
        return [_plain(item) for item in value]
    return None if isinstance(value, float) and not isfinite(value) else value


def show_inspection(found: Inspection) -> None:
    """Print what was seen as tables, then what is assumed and every doubt."""
    if found.frames is not None:
        _show("frames", _frame_rows(found.frames))
        _show_exposures(found.frames)
    if found.record is not None:
        _show("load record", _record_rows(found.record))
        _show_columns(found.record)
    console.print(Text(f"on one clock: {printable(found.overlap)}"))
    _list("assumed, because the test file does not say otherwise", found.assumed)
    _list("warnings", [notice.text for notice in found.warnings])
    if not found.errors:
        console.print(Text(f"\nNothing stands in the way of: tauten run {printable(found.test_file)}"))


def _list(title: str, sentences: Sequence[str]) -> None:
    if sentences:
        console.print(f"\n[italic]{title}[/italic]")
        table = Table.grid(padding=(0, 1))
        for sentence in sentences:
            table.add_row("•", Text(printable(sentence)))
        console.print(table)


def _show(title: str, rows: Iterable[tuple[str, str]]) -> None:
    table = Table(title=title, title_justify="left", show_header=False)
    for name, value in rows:
        table.add_row(name, Text(printable(value)))
    console.print(table)


def _frame_rows(seen: FramesSeen) -> Iterable[tuple[str, str]]:
    yield "frames", f"{seen.count}, from {seen.first} to {seen.last}"
    yield "size", f"{seen.columns} × {seen.rows} px"
    yield "depth", f"{seen.depth_bits} bits in use, full scale {seen.full_scale:g}"
    yield "clock", seen.clock
    if isfinite(seen.interval_s):
        yield "times", f"{seen.first_s:.4g} s to {seen.last_s:.4g} s"
        yield "interval", _intervals(seen)
        yield "gaps in time", _some([f"{one} to {other}" for one, other in seen.gaps])
    yield "doubles", _some(seen.doubles)
    yield "unreadable", _some(list(seen.unreadable))
    yield "brightness drift", f"{seen.brightness_drift:.1%} at the most"


def _record_rows(seen: RecordSeen) -> Iterable[tuple[str, str]]:
    yield "file", seen.file
    yield "written as", seen.written
    yield "columns", _some(seen.headers, 12)
    yield "rows", str(seen.rows)
    if isfinite(seen.interval_s):
        yield "times", f"{seen.first_s:.6g} s to {seen.last_s:.6g} s"
        yield "interval", _intervals(seen)


def _intervals(seen: FramesSeen | RecordSeen) -> str:
    if seen.longest_s - seen.shortest_s < 1e-3 * seen.interval_s:
        return f"{seen.interval_s:.4g} s"
    return f"{seen.interval_s:.4g} s, from {seen.shortest_s:.4g} s to {seen.longest_s:.4g} s"


def _some(names: Sequence[str], most: int = 3) -> str:
    return listed(names, most) or "none"


def _show_exposures(seen: FramesSeen) -> None:
    table = Table(title="exposure, whole picture", title_justify="left")
    for heading in ("frame", "dark (5 %)", "median", "bright (95 %)", "clipped", "finest detail (px)"):
        table.add_column(heading, justify="left" if heading == "frame" else "right")
    for one in seen.exposures:
        values = f"{one.dark:.0f}", f"{one.median:.0f}", f"{one.bright:.0f}"
        table.add_row(Text(printable(one.frame)), *values, f"{one.clipped:.2%}", f"{one.detail_px:.1f}")
    console.print(table)


def _show_columns(seen: RecordSeen) -> None:
    table = Table(title="columns", title_justify="left")
    for heading in ("quantity", "column", "lowest", "highest"):
        table.add_column(heading, justify="left" if heading in ("quantity", "column") else "right")
    for one in seen.columns:
        unit = "" if one.unit == "1" else f" {one.unit}"
        low, high = (f"{value:.5g}{unit}" for value in (one.low, one.high))
        table.add_row(one.quantity, Text(printable(one.header)), low, high)
    console.print(table)
