"""Speed: the kernel, a tracked sequence, a whole run from disk; ratios against an independent tracker.

Times on shared machines are noisy: each is the best of several, and the ratios alternate within one run.
"""

from __future__ import annotations

import os
import subprocess
import sys
import tempfile
import time
from collections.abc import Callable
from pathlib import Path
from typing import Any

import cv2
import numba
import numpy as np
import tifffile
from numpy.typing import NDArray
from scenes import Settings, clean, grid_on, noisy, reference_of, rigid, start_at
from table import Bench

from dic.correlation import Prefilter, Tracker
from dic.correlation.matching import match_frame
from synthetic_images import homogeneous

SHAPE = (1000, 1000)
BIG = (2048, 2448)
BEST = Settings()
#: Strain between the frames of the sequence, and rigid motion, px.
PULL, DRIFT = 4e-4, 0.21


def best_of(what: Callable[[], Any], times: int = 7) -> float:
    """Return the shortest of several times, s."""
    found = []
    for _ in range(times):
        begin = time.perf_counter()
        what()
        found.append(time.perf_counter() - begin)
    return min(found)


def motion_at(k: int, shape: tuple[int, int]) -> Any:
    middle = ((shape[1] - 1) / 2, (shape[0] - 1) / 2)
    return homogeneous(PULL * k, -0.3 * PULL * k, centre=middle, shift=(0.1 * DRIFT * k, -DRIFT * k))


def compilation() -> float:
    """Return how much longer a first small match takes with an empty cache than with a full one, s."""
    code = (
        "import numpy as n; from dic.correlation import *\n"
        "image, at = n.random.rand(99, 99) * 255, n.array([49])\n"
        "r = prepare_reference(image, at, at, subset=31, settings=Settings())\n"
        "match_frame(r, spline_image(image, 'twofold', 0.5), n.zeros((1, 6)))"
    )
    with tempfile.TemporaryDirectory() as cache:
        took = []
        for _ in range(2):
            begin = time.perf_counter()
            environment = {**os.environ, "NUMBA_CACHE_DIR": cache}
            subprocess.run([sys.executable, "-c", code], check=True, env=environment)
            took.append(time.perf_counter() - begin)
    return took[0] - took[1]


def kernel(bench: Bench) -> None:
    """Time the matching alone and a tracked sequence on one core; then the gain from a second core."""
    still = noisy(clean("sharp", rigid(0, 0), SHAPE), 0)
    frames = [noisy(clean("sharp", motion_at(k, SHAPE), SHAPE), k + 1) for k in range(10)]
    grid = grid_on(SHAPE, step=12)
    reference = reference_of(still, grid, BEST)
    prefilter = Prefilter(SHAPE, BEST.kind, BEST.smoothing)
    spline, start = prefilter(frames[3]), start_at(reference, motion_at(3, SHAPE))
    threads = numba.get_num_threads()

    bench.add("compilation at the first use, once per machine", compilation(), "s")

    def match() -> Any:
        return match_frame(reference, spline, start)

    numba.set_num_threads(1)
    pixels = float(match().iterations.sum()) * grid.subset**2
    one = best_of(match)
    bench.add("matching, one core: time per pixel and iteration", 1e9 * one / pixels, "ns", high=3.0)
    rates, iterations = [], []
    for _ in range(3):
        tracker = Tracker(reference, grid.neighbours())
        for k, frame in enumerate(frames):
            begin = time.perf_counter()
            found = tracker.follow(frame)
            if k > 2:
                rates.append(len(reference.x) / (time.perf_counter() - begin))
                iterations.append(found.iterations.mean())
    bench.add("tracked sequence, one core, filtering included", max(rates), "subsets/s", low=100_000)
    bench.add("iterations per subset in it", float(np.mean(iterations)), high=2.2)
    filtering = best_of(lambda: prefilter(frames[3]))
    bench.add("filtering, one core: time per pixel", 1e9 * filtering / np.prod(SHAPE), "ns")
    if threads > 1:
        ratios = []
        for _ in range(9):
            numba.set_num_threads(1)
            single = best_of(match, 2)
            numba.set_num_threads(2)
            ratios.append(single / best_of(match, 2))
        bench.add("matching: 2 threads against 1 (median of 9 pairs)", float(np.median(ratios)), low=1.85)
    numba.set_num_threads(threads)


def against_flow(bench: Bench) -> None:
    """Hold tracking against pyramidal Lucas–Kanade (Bouguet 2001, cv2.calcOpticalFlowPyrLK).

    Both follow the same points in the same frames with the same window on one thread; Lucas–Kanade from
    frame to frame would add its errors up, so it too starts from the first frame each time.
    """
    grid = grid_on(SHAPE, step=10)
    still = noisy(clean("sharp", rigid(0, 0), SHAPE), 0)
    reference = reference_of(still, grid, BEST)
    points = np.stack([reference.x, reference.y], axis=1).astype(np.float32)
    tracker, threads = Tracker(reference, grid.neighbours()), numba.get_num_threads()
    numba.set_num_threads(1)
    cv2.setNumThreads(1)
    seconds: list[list[float]] = []
    errors: list[list[NDArray[np.float64]]] = []
    for k in range(12):
        motion = rigid(0.13 * k, 0.07 * k)
        frame = noisy(clean("sharp", motion, SHAPE), 50 + k)
        begin = time.perf_counter()
        ours = tracker.follow(frame).u
        between = time.perf_counter()
        theirs, _, _ = cv2.calcOpticalFlowPyrLK(still, frame, points, None, winSize=(31, 31), maxLevel=2)
        end = time.perf_counter()
        if k > 2:  # the first frames have no prediction yet
            seconds.append([between - begin, end - between])
            errors.append([ours - 0.13 * k, theirs[:, 0] - points[:, 0] - 0.13 * k])
    numba.set_num_threads(threads)
    cv2.setNumThreads(-1)
    ratio = float(np.median([theirs / ours for ours, theirs in seconds]))
    found = np.array(errors)  # frames, ours and theirs, points
    scatter, bias = found.std(axis=2).mean(axis=0), np.ptp(found.mean(axis=2), axis=0)
    total = np.sqrt((found**2).mean(axis=(0, 2)))
    bench.add("throughput against pyramidal Lucas–Kanade, 31 px, 3 levels", ratio, "×", low=3)
    bench.add("its random error, px", scatter[1], "px")
    bench.add("random error against it", scatter[0] / scatter[1], "×", high=1 / 3)
    bench.add("bias against it, peak to peak", bias[0] / bias[1], "×", high=1 / 5)
    bench.add("root mean square error against it, bias included", total[0] / total[1], "×")


def write_frames(folder: Path, frames: int) -> None:
    """Write a run of 5-megapixel frames: a few pictures, pulled and let go again and again."""
    pictures = [noisy(clean("sharp", motion_at(k, BIG), BIG), k) for k in range(8)]
    (folder / "frames").mkdir()
    order = [*range(8), *range(6, 0, -1)]
    strain = []
    for k in range(frames):
        which = 0 if k < 4 else order[(k - 4) % len(order)]
        tifffile.imwrite(folder / "frames" / f"f{k:04d}.tif", pictures[which], photometric="minisblack")
        strain.append(PULL * which)
    write_record(folder, strain)


def write_record(folder: Path, strain: list[float]) -> None:
    """Write the load record of frames that were taken at 5 Hz at these strains."""
    time_s = np.arange(0, len(strain) / 5, 0.02)
    force = 70_000 * 20 * np.interp(time_s, np.arange(len(strain)) / 5, strain)
    table = np.column_stack([time_s, force])
    np.savetxt(folder / "machine.csv", table, delimiter=",", header="Time (s),Force (N)", comments="")


def write_test_file(folder: Path, correlation: str, gauge: str) -> Path:
    """Write the test file beside its load record, with further keys of two sections."""
    test = folder / "test.toml"
    test.write_text(
        '[specimen]\nwidth = "10 mm"\nthickness = "2 mm"\n[frames]\nsource = "frames"\nrate = "5 Hz"\n'
        '[load_record]\nsource = "machine.csv"\ntime = "Time"\nforce = "Force"\n'
        f'[camera]\nscale = "0.005 mm/px"\n[correlation]\n{correlation}\n'
        f'[gauge]\naxis = "vertical"\nregion = [40, 40, 2368, 1968]\n{gauge}\n[sync]\noffset = "0 s"\n'
    )
    return test


#: What is measured where, as keys of the sections on correlation and gauge.
EVERYWHERE = ("full field, about 20,000 subsets", "step = 15", "")
ENDS = ("gauge bands only, at most 400 subsets", "step = 44", 'subsets = "ends"')


def whole_run(bench: Bench) -> None:
    """Time runs from disk, with a subset everywhere and in the gauge's end bands only."""
    from dic.frames import open_frames
    from dic.pipeline import measure, read_gauges
    from dic.preparation import set_up
    from dic.testfile import load

    with tempfile.TemporaryDirectory() as place:
        folder, count = Path(place), 60
        write_frames(folder, count)
        for (name, correlation, gauge), low in ((EVERYWHERE, 10), (ENDS, 60)):
            test = load(write_test_file(folder, correlation, gauge))
            source = open_frames(test.frames, folder)
            setup = set_up(test, source)
            stamps: list[float] = []
            (folder / name).mkdir()
            read_gauges(test, setup, folder / name, lambda *_, s=stamps: s.append(time.perf_counter()))
            rate = (len(stamps) - 6) / (stamps[-1] - stamps[5])
            reading = best_of(lambda s=source: s[7], 9)
            bench.add(f"{name}: subsets", float(setup.grid.inside.sum()))
            bench.add(f"{name}: 5 megapixels from disk, all stages per frame", rate, "frames/s", low=low)
            share = 100 * reading * rate
            bench.add(f"{name}: reading's share, were it not ahead of the work", share, "%", high=25.0)
        begin = time.perf_counter()
        measure(test, folder / "whole")
        bench.add(
            f"the same as a whole run of {count} frames, set-up and report included",
            count / (time.perf_counter() - begin),
            "frames/s",
        )


def run() -> Bench:
    bench = Bench()
    kernel(bench)
    against_flow(bench)
    whole_run(bench)
    return bench
