"""What the gauges read in every frame: the product of the strain stage."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from dic.strain.aliasing import aliasing
from dic.strain.gauge import Reading
from dic.strain.periodic import HARMONICS, Periodic, determine

Floats = NDArray[np.float64]


@dataclass(frozen=True)
class GaugeHistory:
    """Gauge readings against time; one entry per frame, none dropped.

    Attributes
    ----------
    frame
        Frame numbers, shape (n,), counted from 0.
    name
        The frames' file (or page) names.
    time_s
        Time of each frame on the camera's clock, s.
    axial, transverse, shear
        Mean engineering strains of the gauge region in coupon axes, dimensionless; NaN where the
        frame could not be measured.  ``shear`` is the engineering shear angle.
    extensometer
        Strain between the two end bands, ΔL/L0.
    bending
        Axial strain at the region's right edge less that at its middle, from in-plane bending.
    u_axial, u_transverse, u_shear, u_extensometer
        Standard uncertainties from grey noise, overlap of subsets accounted for; of a width between edges
        from the pattern on them too.
    shift_px
        Mean motion of the gauge along the coupon axis and across it, px, shape (n, 2).
    valid_fraction
        Share of the region's subsets that were measured.
    periodic
        The interpolation's periodic error, and whether the strains were corrected for it.
    left_axial, left_transverse
        What may be left of that error's parts, and of the aliasing of this very pattern
        (`dic.strain.aliasing`), in the strains, one standard uncertainty each, the same error in all
        frames, shape (n, h + 2); None where unknown.
    left_edges
        As much for what the pattern on the edges leaves in the transverse strain, shape (n,); None where
        that is not read from the edges.
    status
        ``"ok"``, or the reason why the frame was not (or only partly) measured.
    """

    frame: NDArray[np.int64]
    name: tuple[str, ...]
    time_s: Floats
    axial: Floats
    transverse: Floats
    shear: Floats
    extensometer: Floats
    u_axial: Floats
    u_transverse: Floats
    u_shear: Floats
    u_extensometer: Floats
    shift_px: Floats
    valid_fraction: Floats
    status: tuple[str, ...]
    bending: Floats
    periodic: Periodic
    left_axial: Floats | None = None
    left_transverse: Floats | None = None
    left_edges: Floats | None = None

    def __len__(self) -> int:
        return len(self.frame)


def gather(
    readings: list[Reading],
    names: tuple[str, ...],
    time_s: Floats,
    *,
    correct: bool = True,
    averaged: range = range(1),
) -> GaugeHistory:
    """Put the frames' readings one below the other, corrected for the periodic error where it is known.

    Parameters
    ----------
    readings
        One per frame, in order.
    names, time_s
        The frames' names and camera times.
    correct
        Whether to take off the periodic error where the test determines it.
    averaged
        Frames that were averaged into the reference.

    Returns
    -------
    GaugeHistory
        Readings of all frames.
    """
    periodic = determine([reading.sums for reading in readings], correct)

    def column(key: str) -> Floats:
        return np.array([getattr(reading, key) for reading in readings], dtype=float)

    columns = {key: column(key) for key in ("bending", "shift_px", "valid_fraction")}
    motion = dict(zip(("axial", "transverse"), columns["shift_px"].T, strict=True))
    for key in ("axial", "transverse", "shear", "extensometer"):
        columns[key], columns[f"u_{key}"] = column(key), column(f"u_{key}")
        nowhere = np.full(len(HARMONICS), np.nan)
        response = np.array([reading.response.get(key, nowhere) for reading in readings])
        size, spread = periodic.correction(response)
        columns[key] = columns[key] - size
        if key in motion:
            own = aliasing(columns[f"u_{key}"], motion[key], columns["axial"], averaged)
            columns[f"left_{key}"] = np.column_stack([periodic.left(response), own])
        columns[f"u_{key}"] = np.hypot(columns[f"u_{key}"], spread)
    return GaugeHistory(
        frame=np.arange(len(readings)),
        name=names,
        time_s=time_s,
        status=tuple(reading.status for reading in readings),
        periodic=periodic,
        **columns,
    )
