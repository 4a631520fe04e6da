"""Stress against strain at the instants of the frames, and the largest force of the record."""

from __future__ import annotations

from dataclasses import dataclass
from math import hypot, nan, sqrt

import numpy as np
from numpy.typing import NDArray

from dic.errors import ClockError
from dic.properties.result import Curve
from dic.strain.history import GaugeHistory
from dic.sync.force import (
    force_at,
    force_noise,
    force_spikes,
    has_load,
    smoothed_force,
    without_spikes,
    wrong_sign,
)
from dic.sync.record import Clock, LoadRecord

Floats = NDArray[np.float64]

#: Force within this share of the peak counts as the peak's surroundings.
TOP = 0.02
#: Correlation of force and strain about zero below which one of them has the wrong sign; a turned column
#: comes near -1, noise near 0.
WRONG_SIGN = -0.5
#: Points from which a cubic term and the scatter can be told.
MIN_POINTS = 6


@dataclass(frozen=True)
class Peak:
    """The largest force of a record.

    Attributes
    ----------
    force, u_force
        Force and its standard uncertainty from noise, N; negative in compression, NaN without any load.
    u_between
        Standard uncertainty from a fracture between two samples, N.
    time_s
        When, on the machine's clock.
    at_end
        Whether the record ends before the force drops.
    """

    force: float
    u_force: float
    u_between: float
    time_s: float
    at_end: bool


def make_curve(history: GaugeHistory, record: LoadRecord, clock: Clock, area_mm2: float) -> Curve:
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
    force = force_at(record, clock, history.time_s)
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
        spikes_s=tuple(record.time_s[force_spikes(record)].tolist()),
    )


def _refuse_wrong_sign(force: Floats, axial: Floats, record: LoadRecord) -> None:
    """Raise if the coupon gets longer under pressure, or shorter under tension."""
    there = np.isfinite(force) & np.isfinite(axial)
    # Strain may count from a loaded frame; what matters is the way it goes.
    strain = axial[there] - np.median(axial[there][:3]) if there.any() else axial[there]
    force = force[there]
    size = float(np.sqrt(np.sum(force**2) * np.sum(strain**2)))
    if float(np.sum(force * strain)) < WRONG_SIGN * size:
        raise wrong_sign(record, longer=bool(np.sum(strain * np.abs(strain)) > 0))


def peak_force(record: LoadRecord) -> Peak:
    """Find the largest force without mistaking noise for strength.

    The largest of many noisy samples is too large by two or three standard deviations.  Instead, a
    parabola is fitted to the samples around the peak (those within `TOP` of it and not beyond a drop,
    so one-sided where the coupon breaks at the peak), over the widest window that shows no need of a
    cubic term; its highest point within the window is the peak.  Where the force still rises when the
    coupon breaks, it went on for up to one more sample; the parabola is followed for half of that, and
    the other half to either side is a rectangular distribution.  Spikes are bridged before
    (`dic.sync.force.force_spikes`).

    Parameters
    ----------
    record
        The load record.  Where compression prevails, its peak is the most negative one.

    Returns
    -------
    Peak
        Force, standard uncertainty and time.
    """
    time, noise = record.time_s, force_noise(record)
    if not has_load(record):
        return Peak(nan, nan, nan, float(time[-1]), at_end=True)
    smooth = smoothed_force(record, float(time[-1] - time[0]) / 100)
    # Squares rather than the larger extreme: a broken coupon's grips can swing far beyond zero.
    sign = 1.0 if np.sum(smooth * np.abs(smooth)) >= 0 else -1.0
    force = sign * without_spikes(record)
    top = int(np.argmax(sign * smooth))
    floor = sign * smooth[top] - max(TOP * sign * smooth[top], 6 * noise[top])
    below = np.flatnonzero(force < floor)
    first = int(below[below < top].max(initial=-1)) + 1
    last = int(below[below > top].min(initial=len(force))) - 1
    value, u, between, when = _highest(time, force, float(noise[top]), (first, top, last))
    return Peak(sign * value, u, between, when, last == len(force) - 1)


def _highest(
    time: Floats, force: Floats, noise: float, run: tuple[int, int, int]
) -> tuple[float, float, float, float]:
    """Return value, both standard uncertainties and time of the parabola's highest point."""
    first, top, last = run
    lasting = float(time[last + 1] - time[last]) if last + 1 < len(time) else 0.0
    half = max(top - first, last - top)
    while half > 0:
        here = slice(max(first, top - half), min(last, top + half) + 1)
        unseen = lasting if here.stop == last + 1 else 0.0
        found = _parabola_top(time[here], force[here], noise, unseen)
        if found is not None:
            return found
        half //= 2
    if top < last or top == 0 or lasting == 0:
        return float(force[top]), noise, 0.0, float(time[top])
    rise = max(float(force[top] - force[top - 1]), 0.0) * lasting / float(time[top] - time[top - 1])
    # One and a half times the last sample, less half the one before.
    return float(force[top]) + rise / 2, noise * hypot(1.5, 0.5), rise / sqrt(12), float(time[top])


def _parabola_top(
    time: Floats, force: Floats, noise: float, unseen: float
) -> tuple[float, float, float, float] | None:
    """Return the highest point of a parabola; None where it needs a cubic term, or points are too few.

    Where it rises up to a fracture, the highest point lies within the `unseen` seconds after the last one.

    The uncertainty is that of the cubic's value: what the missing term could add is part of it.
    """
    if len(time) < MIN_POINTS:
        return None
    # Centred and of unit size, so that the powers are well conditioned.
    middle, width = float(time.mean()), float(np.ptp(time))
    x = (time - middle) / width
    cubic = np.vander(x, 4)
    fit = np.linalg.lstsq(cubic, force, rcond=None)[0]
    scatter = np.sqrt(float(np.sum((force - cubic @ fit) ** 2)) / (len(x) - 4))
    covariance = np.linalg.inv(cubic.T @ cubic) * max(scatter, noise) ** 2
    if abs(fit[0]) > 2 * np.sqrt(covariance[0, 0]):
        return None
    parabola = np.polyfit(x, force, 2)
    candidates = [x[0], x[-1]]
    if parabola[0] < 0 and x[0] < -parabola[1] / (2 * parabola[0]) < x[-1]:
        candidates.append(-parabola[1] / (2 * parabola[0]))
    best = max(candidates, key=lambda at: float(np.polyval(parabola, at)))
    rise = float(np.polyval(np.polyder(parabola), best)) * unseen / width if best == x[-1] else 0.0
    at = best + unseen / width / 2 if rise > 0 else best
    place = np.vander([at], 4)[0]
    u = float(np.sqrt(place @ covariance @ place))
    return float(np.polyval(parabola, at)), u, max(rise, 0.0) / sqrt(12), middle + float(best) * width
