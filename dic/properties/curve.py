"""Stress against strain at the instants of the frames, and the largest force of the record."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from dic.errors import ClockError
from dic.properties.result import Curve
from dic.strain.history import GaugeHistory
from dic.sync.force import force_at, force_noise, smoothed_force
from dic.sync.record import Clock, LoadRecord

Floats = NDArray[np.float64]

#: Force within this share of the peak counts as the peak's surroundings.
TOP = 0.02
#: Points from which a cubic term and the scatter can be told.
MIN_POINTS = 6


@dataclass(frozen=True)
class Peak:
    """The largest force of a record.

    Attributes
    ----------
    force, u_force
        Force and its standard uncertainty from noise, N; negative in compression.
    time_s
        When, on the machine's clock.
    at_end
        Whether the record ends before the force drops.
    """

    force: float
    u_force: float
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
    """
    force = force_at(record, clock, history.time_s)
    if not np.isfinite(force).any():
        raise ClockError(
            "no frame lies within the load record", where=str(record.path), remedy="correct sync.offset"
        )
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
    )


def peak_force(record: LoadRecord) -> Peak:
    """Find the largest force without mistaking noise for strength.

    The largest of many noisy samples is too large by two or three standard deviations.  Instead, a
    parabola is fitted to the samples around the peak (those within `TOP` of it and not beyond a drop,
    so one-sided where the coupon breaks at the peak), over the widest window that shows no need of a
    cubic term; its highest point within the window is the peak.

    Parameters
    ----------
    record
        The load record.  Where compression is the larger force, its peak is the most negative one.

    Returns
    -------
    Peak
        Force, standard uncertainty and time.
    """
    duration = float(record.time_s[-1] - record.time_s[0])
    smooth = smoothed_force(record, duration / 100)
    sign = 1.0 if smooth.max() >= -smooth.min() else -1.0
    time, force = record.time_s, sign * record.force_N
    noise = force_noise(record)
    top = int(np.argmax(sign * smooth))
    floor = sign * smooth[top] - max(TOP * sign * smooth[top], 6 * noise[top])
    below = np.flatnonzero(force < floor)
    first = int(below[below < top].max(initial=-1)) + 1
    last = int(below[below > top].min(initial=len(force))) - 1
    value, u, when = _highest(time, force, float(noise[top]), (first, top, last))
    return Peak(sign * value, u, when, last == len(force) - 1)


def _highest(
    time: Floats, force: Floats, noise: float, run: tuple[int, int, int]
) -> tuple[float, float, float]:
    """Return value, standard uncertainty and time of the parabola's highest point."""
    first, top, last = run
    half = max(top - first, last - top)
    while half > 0:
        here = slice(max(first, top - half), min(last, top + half) + 1)
        found = _parabola_top(time[here], force[here], noise)
        if found is not None:
            return found
        half //= 2
    return float(force[top]), noise, float(time[top])


def _parabola_top(time: Floats, force: Floats, noise: float) -> tuple[float, float, float] | None:
    """Return the highest point of a parabola; None where it needs a cubic term, or points are too few.

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
    place = np.vander([best], 4)[0]
    u = float(np.sqrt(place @ covariance @ place))
    return float(np.polyval(parabola, best)), u, middle + float(best) * width
