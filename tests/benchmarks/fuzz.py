"""Damaged and random inputs: each is refused in one sentence, or read; never a traceback, hang or flood."""

from __future__ import annotations

import json
import subprocess
import sys
from pathlib import Path

from fuzz_files import KINDS
from rich.console import Console
from rich.table import Table
from table import Bench

#: Cases in one process; a process that takes longer than the seconds after it hangs.
BATCH, PATIENCE_S = 50, 120
MOST_MIB = 1024
LEAST_CASES = 2000


def run() -> Bench:
    bench = Bench()
    table = Table(title="fuzz, by kind", title_justify="left")
    for heading in ("kind", "files", "good", "refused", "tracebacks", "crashes", "hangs", "peak MiB"):
        table.add_column(heading)
    total = dict.fromkeys(("files", "traceback", "crash", "hang"), 0)
    highest = 0.0
    for name, kind in KINDS.items():
        counts = dict.fromkeys(("good", "refused", "traceback", "crash", "hang"), 0)
        peak = 0.0
        first = 0
        while first < kind.cases:
            done, ending = _batch(name, first, min(BATCH, kind.cases - first))
            for one in done:
                counts[one["outcome"]] += 1
                peak = max(peak, one["peak"])
                if one["outcome"] == "traceback":
                    print(f"{name} {one['case']}: {one['said']}", file=sys.stderr)
            first += len(done)
            if ending:
                print(f"{name} {first}: {ending}", file=sys.stderr)
                counts[ending] += 1
                first += 1
        table.add_row(name, str(sum(counts.values())), *map(str, counts.values()), f"{peak:.0f}")
        total["files"] += sum(counts.values())
        for what in ("traceback", "crash", "hang"):
            total[what] += counts[what]
        highest = max(highest, peak)
    Console(width=118).print(table)
    bench.add("damaged and random files", total["files"], low=LEAST_CASES)
    bench.add("tracebacks", total["traceback"], high=0)
    bench.add("crashes", total["crash"], high=0)
    bench.add("hangs", total["hang"], high=0)
    bench.add("peak memory of a process", highest, "MiB", high=MOST_MIB)
    return bench


def _batch(name: str, first: int, count: int) -> tuple[list[dict[str, object]], str]:
    """Do some cases in a process of their own; what is missing at its end is named."""
    command = [sys.executable, str(Path(__file__).with_name("fuzz_files.py")), name, str(first), str(count)]
    ending = ""
    try:
        ran = subprocess.run(command, capture_output=True, text=True, timeout=PATIENCE_S)
        out, ending = ran.stdout, "crash" if ran.returncode else ""
    except subprocess.TimeoutExpired as error:
        out, ending = (error.stdout or b"").decode(), "hang"
    return [json.loads(line) for line in out.splitlines() if line.endswith("}")], ending
