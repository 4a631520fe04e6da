"""Stress against strain at the instants of the frames."""

from __future__ import annotations

from math import nan

import numpy as np
from numpy.typing import NDArray

from dic.errors import ClockError
from dic.properties.peak import peak_force
from dic.properties.result import Curve, Dense
from dic.strain.history import GaugeHistory
from dic.sync.force import force_and_noise_at, wrong_sign
from dic.sync.record import Clock, LoadRecord

Floats = NDArray[np.float64]

#: Correlation of force and strain about zero below which one of them has the wrong sign; a turned column
#: comes near -1, noise near 0.
WRONG_SIGN = -0.5


def make_curve(
    history: GaugeHistory,
    record: LoadRecord,
    clock: Clock,
    area_mm2: float,
    exposure_s: float | None = None,
    u_axis_deg: float = nan,
) -> Curve:
    """Join the gauge readings with the force.

    Strain stays relative to the reference frame as it is: a strain at zero force shifts the modulus
    line and with it the proof stress construction, and no property depends on it.

    Parameters
    ----------
    history
        Gauge readings, n frames.
    record, clock
        The force and the frames' place in it.
    area_mm2
        Original cross-section S0, mm².
    exposure_s
        Exposure time of a frame, s, where it is known.
    u_axis_deg
        Standard uncertainty of the axis' direction, deg; NaN where unknown.

    Returns
    -------
    Curve
        One entry per frame, none dropped; force and stress are NaN outside the record, strains where
        the frame could not be measured.

    Raises
    ------
    ClockError
        If no frame lies within the record.
    LoadRecordError
        If the force has the wrong sign.
    """
    force, noise = force_and_noise_at(record, clock, history.time_s, exposure_s)
    if not np.isfinite(force).any():
        raise ClockError(
            "no frame lies within the load record", where=str(record.path), remedy="correct sync.offset"
        )
    _refuse_wrong_sign(force, history.axial, record)
    peak = peak_force(record)
    return Curve(
        time_s=clock.machine_time(history.time_s),
        force_N=force,
        stress_MPa=force / area_mm2,
        axial=history.axial,
        transverse=history.transverse,
        u_axial=history.u_axial,
        u_transverse=history.u_transverse,
        area_mm2=area_mm2,
        peak_force_N=peak.force,
        u_peak_force_N=peak.u_force,
        peak_time_s=peak.time_s,
        peak_at_end=peak.at_end,
        u_peak_between_N=peak.u_between,
        u_peak_time_s=peak.u_time_s,
        spikes_s=tuple(record.time_s[record.spikes].tolist()),
        u_stress_MPa=noise / area_mm2,
        displacement_mm=_travel(record, clock, history.time_s),
        dense=Dense(record.time_s, record.sound_N, record.noise_N),
        left_axial=history.left_axial,
        left_transverse=history.left_transverse,
        left_edges=history.left_edges,
        u_axis_deg=u_axis_deg,
    )


def _travel(record: LoadRecord, clock: Clock, camera_time_s: Floats) -> Floats | None:
    """Return the crosshead's travel at the instants of the frames, mm; None where it was not recorded."""
    if record.displacement_mm is None:
        return None
    at = clock.machine_time(camera_time_s)
    return np.interp(at, record.time_s, record.displacement_mm, left=np.nan, right=np.nan)


def _refuse_wrong_sign(force: Floats, axial: Floats, record: LoadRecord) -> None:
    """Raise if the coupon gets longer under pressure, or shorter under tension."""
    there = np.isfinite(force) & np.isfinite(axial)
    # Strain may count from a loaded frame; what matters is the way it goes.
    strain = axial[there] - np.median(axial[there][:3]) if there.any() else axial[there]
    force = force[there]
    size = float(np.sqrt(np.sum(force**2) * np.sum(strain**2)))
    if float(np.sum(force * strain)) < WRONG_SIGN * size:
        raise wrong_sign(record, longer=bool(np.sum(strain * np.abs(strain)) > 0))
