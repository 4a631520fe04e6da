"""The clock fit over many invented tests: offset, drift, and whether a bare ramp is given false certainty.

Histories at reading level, no pictures: strain noise 3 µm/m (what 1 % grey noise leaves in a usual gauge),
force noise 1 % of the force at a strain of 0.001, where the fit of the beginning ends.  Frames at 5 Hz,
record at 100 Hz, steel-like rate 4e-4 1/s.  Loading starts at a random phase between frames and rows.
"""

from __future__ import annotations

import time
from pathlib import Path

import numpy as np
from table import Bench

from dic.sync import LoadRecord, fit_clock
from dic.testfile import Sync

SEEDS = 100
OFFSET = 3.37
RATE, E, AREA = 4e-4, 70e3, 25.0
STRAIN_NOISE = 3e-6
FORCE_NOISE = 0.01 * E * AREA * 0.001


def seen(seed, instants, course, *, drift=0.0, rows=(-1.0, None), frames=(0.0, None), spacing=(0.2, 0.01)):
    """Return a fit of a strain course over camera time: the clock, and the processor time that it took."""
    r = np.random.default_rng(seed)
    camera = np.arange(frames[0], frames[1] or instants, spacing[0])
    dense = np.arange(rows[0] + r.uniform(0, spacing[1]), rows[1] or instants + 1, spacing[1])
    phase = r.uniform(0, spacing[0])
    axial = course(camera - phase) + r.normal(0, STRAIN_NOISE, len(camera))
    force = E * AREA * course(dense - phase) + r.normal(0, FORCE_NOISE, len(dense))
    record = LoadRecord(Path("machine.csv"), OFFSET + (1 + drift) * dense, force)
    began = time.process_time()
    clock = fit_clock(camera, axial - axial[0], np.full(len(camera), STRAIN_NOISE), record, Sync())
    return clock, time.process_time() - began


def pull(at):
    """Return two seconds of rest, then a pull."""
    return RATE * np.clip(at - 2.0, 0, None)


def pull_and_release(at, span=600.0):
    """Return rest, a pull to 0.002, a long hold, an unloading and rest."""
    up = RATE * np.clip(at - 2.0, 0, 5.0)
    return up - RATE * np.clip(at - span, 0, 5.0)


def run() -> Bench:
    bench = Bench()
    found = [seen(seed, 12.0, pull)[0] for seed in range(SEEDS)]
    error = np.array([one.offset_s - OFFSET for one in found])
    stated = np.array([one.offset_standard_uncertainty_s for one in found])
    bench.add("offset after 2 s of rest: root mean square error", np.sqrt(np.mean(error**2)), "s", high=0.02)
    bench.add("… 95 % of the errors are below", np.quantile(np.abs(error), 0.95), "s", high=0.02)
    bench.add("… k = 2 holds the truth in", 100 * np.mean(np.abs(error) < 2 * stated), "%", low=93)
    found = [seen(seed, 608.0, pull_and_release, drift=8e-5)[0] for seed in range(SEEDS // 4)]
    drift = np.array([one.drift - 8e-5 for one in found])
    u = np.array([one.drift_standard_uncertainty for one in found])
    bench.add(
        "drift over 10 min with unloading: 95 % below", 1e6 * np.quantile(np.abs(drift), 0.95), "ppm", high=50
    )
    bench.add("… k = 2 holds the truth in", 100 * np.mean(np.abs(drift) < 2 * u), "%", low=90)
    for what, frames, rows in (
        ("bare ramp", (4.0, 14.0), (3.0, 15.0)),
        ("camera starts during loading", (4.0, 14.0), (-1.0, 15.0)),
        ("record starts during loading", (0.0, 14.0), (3.0, 15.0)),
    ):
        found = [seen(seed, 14.0, pull, frames=frames, rows=rows)[0] for seed in range(SEEDS)]
        held = [abs(c.offset_s - OFFSET) < 2 * c.offset_standard_uncertainty_s for c in found]
        bench.add(f"{what}: k = 2 holds the truth in", 100 * np.mean(held), "%", low=95)
        bench.add(
            "… median standard uncertainty", np.median([c.offset_standard_uncertainty_s for c in found]), "s"
        )
    _, seconds = seen(0, 1000.0, lambda at: pull(at / 10), spacing=(0.5, 0.01))
    bench.add("processor time for 100 000 rows and 2000 frames", seconds, "s", high=0.5)
    return bench
