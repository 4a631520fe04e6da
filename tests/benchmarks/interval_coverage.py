"""Do the stated uncertainties hold?  Over 200 virtual tests, how often k = 2 intervals hold the truth.

``python tests/benchmarks coverage`` renders and tracks every test (some 20 min); ``--tests N`` takes N of
them and ``--first SEED`` others, ``--drawn`` takes drawn readings in place of pictures, ``--rows FILE``
keeps what each test gave.
"""

from __future__ import annotations

import json
from concurrent.futures import ProcessPoolExecutor
from pathlib import Path
from typing import Any

import numba
import numpy as np
from coverage_cases import NAMES, pictureless, with_pictures
from table import Bench

#: Median relative errors wanted.
MEDIAN = {"youngs_modulus": 0.001, "poissons_ratio": 0.004, "proof_stress_0_2": 0.002}


def run(*, tests: int = 200, first: int = 0, drawn: bool = False, rows: Path | None = None) -> Bench:
    """Evaluate the virtual tests with two workers, and count."""
    seeds = range(first, first + tests)
    found: list[dict[str, Any]] = []
    # A worker owns one core; the kernels' own threads would only get in each other's way.
    with ProcessPoolExecutor(2, initializer=numba.set_num_threads, initargs=(1,)) as pool:
        for done, one in enumerate(pool.map(_drawn if drawn else _seen, seeds), start=1):
            found += one
            if rows is not None and (done % 10 == 0 or done == tests):
                rows.write_text(json.dumps(found, indent=1, default=str), encoding="utf-8")
    return summary(found, tests)


def _drawn(seed: int) -> list[dict[str, Any]]:
    return _tried(pictureless, seed)


def _seen(seed: int) -> list[dict[str, Any]]:
    return _tried(with_pictures, seed)


def _tried(measure: Any, seed: int) -> list[dict[str, Any]]:
    """Return what a test gave; one that fails is counted as such and not left out in silence."""
    try:
        rows: list[dict[str, Any]] = measure(seed)
    except Exception as error:
        return [{"seed": seed, "failed": f"{type(error).__name__}: {error}"}]
    return rows


def summary(found: list[dict[str, Any]], tests: int) -> Bench:
    """Count how often the truth lies within k = 2, and how far off the values are."""
    bench = Bench()
    bench.add("tests", tests)
    bench.add("tests that failed", sum("failed" in row for row in found), high=0)
    for name in NAMES:
        rows = [row for row in found if row.get("property") == name]
        values = np.array([[row["value"], row["truth"], row["u"]] for row in rows], dtype=float)
        there = np.isfinite(values.reshape(-1, 3)).all(axis=1)
        value, truth, u = values[there].T
        bench.add(f"{name}: determined in", there.sum(), f"of {len(rows)}")
        ratio = np.abs(value - truth) / u
        bench.add(f"{name}: truth within k = 2", 100 * np.mean(ratio <= 2), "%", low=93, high=97)
        bench.add(f"{name}: root mean square of error / u", np.sqrt(np.mean(ratio**2)))
        wanted = MEDIAN.get(name)
        bench.add(
            f"{name}: median relative error", 100 * np.median(np.abs(value / truth - 1)), "%",
            high=None if wanted is None else 100 * wanted,
        )  # fmt: skip
    return bench
