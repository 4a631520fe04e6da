"""A contact extensometer's strain at the instants of the frames."""

from __future__ import annotations

from dataclasses import replace
from math import sqrt

import numpy as np
from numpy.typing import NDArray

from dic.sync.force import force_and_noise_at
from dic.sync.record import Clock, LoadRecord

Floats = NDArray[np.float64]


def contact_strain_at(record: LoadRecord, clock: Clock, camera_time_s: Floats) -> tuple[Floats, Floats]:
    """Return the contact extensometer's strain at the frames, averaged over as much time as the force is.

    Parameters
    ----------
    record
        The load record, with its extensometer column.
    clock
        The machine's time of the frames.
    camera_time_s
        Times of the frames on the camera's clock, s, shape (n,).

    Returns
    -------
    strain, u
        Strain and its standard uncertainty from the column's own scatter and its smallest step, shape
        (n,) each; NaN outside the record and next to samples without a reading.
    """
    nothing = np.full(len(camera_time_s), np.nan)
    if record.extensometer is None:
        return nothing, nothing
    there = np.isfinite(record.extensometer)
    if there.sum() < 3:
        return nothing, nothing
    # The column takes the force's place, so that both are averaged alike.
    column = replace(record, time_s=record.time_s[there], force_N=record.extensometer[there])
    strain, noise = force_and_noise_at(column, clock, camera_time_s)
    at = clock.machine_time(camera_time_s)
    covered = np.interp(at, record.time_s, there.astype(float), left=0.0, right=0.0) == 1.0
    spread = np.hypot(noise, _resolution(column.force_N))
    return np.where(covered, strain, np.nan), np.where(covered, spread, np.nan)


def _resolution(values: Floats) -> float:
    """Return the standard uncertainty from reading in steps: a rectangular distribution one step wide."""
    steps = np.abs(np.diff(values))
    return float(steps[steps > 0].min(initial=np.inf)) / sqrt(12) if steps.any() else 0.0
