"""Peak memory against the number of frames, and the share of a run that reading takes.

Frames are 5-megapixel 8-bit TIFFs, uncompressed.  They are eight different pictures under many names
(hard links), so they come from the file cache, as frames do that were copied just before; neighbours
always differ but for the first ones, at rest.  Each run is a process of its own.
"""

from __future__ import annotations

import json
import os
import subprocess
import sys
import tempfile
from pathlib import Path
from typing import Any

import tifffile
from scenes import clean, noisy
from speed import BIG, ENDS, EVERYWHERE, PULL, motion_at, write_record, write_test_file
from table import Bench

FEW, MANY = 50, 500
#: Pictures, and frames that show the first of them, at rest.
PICTURES, REST = 8, 5

#: What a child does: the run, with a clock on everything that reads pictures.
_CHILD = """
import json, resource, sys, threading, time
from pathlib import Path
from dic import sequence
from dic.frames import FrameSource
from dic.pipeline import measure

spent = {"decoding": 0.0, "waiting": 0.0, "hashing": 0.0}
read, ahead, hashed = FrameSource.__getitem__, sequence._read_ahead, FrameSource.sha256

def timed_read(source, index):
    begin = time.perf_counter()
    try:
        return read(source, index)
    finally:
        took = time.perf_counter() - begin
        spent["decoding"] += took
        if threading.current_thread() is threading.main_thread():
            spent["waiting"] += took

def timed_ahead(*arguments):
    frames = ahead(*arguments)
    while True:
        begin = time.perf_counter()
        try:
            frame = next(frames)
        except StopIteration:
            return
        finally:
            spent["waiting"] += time.perf_counter() - begin
        yield frame

def timed_hash(source):
    begin = time.perf_counter()
    try:
        return hashed(source)
    finally:
        spent["hashing"] += time.perf_counter() - begin

FrameSource.__getitem__, sequence._read_ahead, FrameSource.sha256 = timed_read, timed_ahead, timed_hash
begin = time.perf_counter()
measure(Path(sys.argv[1]), Path(sys.argv[2]))
spent["run"] = time.perf_counter() - begin
# The kernel's own mark of this process: what getrusage says may still be the parent's.
status = Path("/proc/self/status")
if status.exists():
    line = next(line for line in status.read_text().splitlines() if line.startswith("VmHWM"))
    peak = int(line.split()[1]) / 1024
else:
    peak = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / (2**20 if sys.platform == "darwin" else 1024)
print(json.dumps({**spent, "peak": peak}))
"""


def write_tests(folder: Path) -> None:
    """Write the pictures once, and tests of few and of many frames that show them."""
    for k in range(PICTURES + 1):
        # Two different exposures at rest, so that the frames are those of a camera with noise.
        picture = noisy(clean("sharp", motion_at(max(k - 1, 0), BIG), BIG), k)
        tifffile.imwrite(folder / f"picture{k}.tif", picture, photometric="minisblack")
    for count in (FEW, MANY):
        _write_test(folder, folder / str(count), count)


def _write_test(pictures: Path, folder: Path, count: int) -> None:
    (folder / "frames").mkdir(parents=True)
    there_and_back = [*range(2, PICTURES + 1), *range(PICTURES - 1, 0, -1)]
    strain = []
    for k in range(count):
        which = k % 2 if k < REST + 1 else there_and_back[(k - REST - 1) % len(there_and_back)]
        os.link(pictures / f"picture{which}.tif", folder / "frames" / f"f{k:04d}.tif")
        strain.append(PULL * max(which - 1, 0))
    write_record(folder, strain)


def run_test(folder: Path, correlation: str, gauge: str) -> dict[str, Any]:
    """Measure a test in a process of its own; times in s, peak memory in MiB."""
    test = write_test_file(folder, correlation, gauge)
    with tempfile.TemporaryDirectory() as out:
        command = [sys.executable, "-c", _CHILD, str(test), f"{out}/results"]
        said = subprocess.run(command, check=True, capture_output=True, text=True).stdout
    return dict(json.loads(said.splitlines()[-1]))


def run() -> Bench:
    bench = Bench()
    with tempfile.TemporaryDirectory() as place:
        folder = Path(place)
        write_tests(folder)
        for name, correlation, gauge in (ENDS, EVERYWHERE):
            run_test(folder / str(FEW), correlation, gauge)  # compiles, and fills the file cache
            found = {count: run_test(folder / str(count), correlation, gauge) for count in (FEW, MANY)}
            for count, one in found.items():
                bench.add(f"{name}: peak memory, {count} frames", one["peak"], "MiB")
            ratio = found[MANY]["peak"] / found[FEW]["peak"]
            bench.add(f"{name}: {MANY} frames against {FEW}", ratio, "×", low=0.95, high=1.05)
            whole = found[MANY]
            bench.add(f"{name}: run of {MANY} frames", whole["run"], "s")
            for part, what in (
                ("waiting", "standing still for a frame"),
                ("decoding", "all decoding, most of it beside the matching"),
            ):
                bench.add(f"{name}: {what}, share of the run", whole[part] / whole["run"], high=0.25)
            bench.add(f"{name}: hashing beside it, share of the run", whole["hashing"] / whole["run"])
    return bench
