"""The largest force of a record, without mistaking noise for strength."""

from __future__ import annotations

from dataclasses import dataclass
from math import hypot, nan, sqrt
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from dic.sync.force import has_load, smoothed_force
from dic.sync.record import LoadRecord

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
        Force and its standard uncertainty from noise, N; negative in compression, NaN without any load.
    u_between
        Standard uncertainty from a fracture between two samples, N.
    time_s, u_time_s
        When, on the machine's clock, and the standard uncertainty of that: a flat maximum lies nowhere
        in particular.
    at_end
        Whether the record ends before the force drops.
    """

    force: float
    u_force: float
    u_between: float
    time_s: float
    at_end: bool
    u_time_s: float = 0.0


class Top(NamedTuple):
    """The highest point of a run of samples, and its standard uncertainties."""

    value: float
    u_value: float
    u_between: float
    time: float
    u_time: float


def peak_force(record: LoadRecord) -> Peak:
    """Find the largest force without mistaking noise for strength.

    The largest of many noisy samples is too large by two or three standard deviations.  Instead, a
    parabola is fitted to the samples around the peak (those within `TOP` of it and not beyond a drop,
    so one-sided where the coupon breaks at the peak), over the widest window that shows no need of a
    cubic term; its highest point within the window is the peak.  Where the force still rises when the
    coupon breaks, it went on for up to one more sample; the parabola is followed for half of that, and
    the other half to either side is a rectangular distribution.  Spikes are bridged before
    (`LoadRecord.spikes`).

    Parameters
    ----------
    record
        The load record.  Where compression prevails, its peak is the most negative one.

    Returns
    -------
    Peak
        Force, standard uncertainty and time.
    """
    time, noise = record.time_s, record.noise_N
    if not has_load(record):
        return Peak(nan, nan, nan, float(time[-1]), at_end=True)
    smooth = smoothed_force(record, float(time[-1] - time[0]) / 100)
    # Squares rather than the larger extreme: a broken coupon's grips can swing far beyond zero.
    sign = 1.0 if np.sum(smooth * np.abs(smooth)) >= 0 else -1.0
    force = sign * record.sound_N
    top = int(np.argmax(sign * smooth))
    (value, u, between, when, u_time), last = highest_around(time, force, noise, top, sign * smooth[top])
    # One lower sample at the end may be a number that was cut off.
    return Peak(sign * value, u, between, when, last >= len(force) - 2, u_time)


def highest_around(
    time: Floats, force: Floats, noise: Floats, top: int, level: float, *, falls: bool = False
) -> tuple[Top, int]:
    """Find the highest point of a maximum, and the last sample that belongs to it.

    Parameters
    ----------
    time, force, noise
        The record without spikes, shape (n,), and the standard deviation of its noise.
    top
        A sample near the maximum.
    level
        About the maximum's height.
    falls
        Whether the force falls from this sample on, so that those after it say nothing about its height.
    """
    floor = level - max(TOP * level, 6 * float(noise[top]))
    below = np.flatnonzero(force < floor)
    first = int(below[below < top].max(initial=-1)) + 1
    last = top if falls else int(below[below > top].min(initial=len(force))) - 1
    return _highest(time, force, float(noise[top]), (first, top, last)), last


def _highest(time: Floats, force: Floats, noise: float, run: tuple[int, int, int]) -> Top:
    """Return the parabola's highest point over the widest run that it fits."""
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
    spacing = lasting if lasting else float(np.median(np.diff(time)))
    if top < last or top == 0 or lasting == 0:
        return Top(float(force[top]), noise, 0.0, float(time[top]), spacing)
    rise = max(float(force[top] - force[top - 1]), 0.0) * lasting / float(time[top] - time[top - 1])
    # One and a half times the last sample, less half the one before.
    return Top(
        float(force[top]) + rise / 2, noise * hypot(1.5, 0.5), rise / sqrt(12), float(time[top]), spacing
    )


def _parabola_top(time: Floats, force: Floats, noise: float, unseen: float) -> Top | None:
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
    return Top(
        float(np.polyval(parabola, at)),
        u,
        max(rise, 0.0) / sqrt(12),
        middle + float(best) * width,
        width * _u_place(parabola, float(best), covariance, unseen / width if best == x[-1] else 0.0),
    )


def _u_place(parabola: Floats, best: float, covariance: Floats, unseen: float) -> float:
    """Return the standard uncertainty of a maximum's place, in widths of the window.

    Within the window it is where the slope vanishes, so the slope's uncertainty over the curvature; the
    window itself bounds it.
    """
    slope = np.array([3 * best**2, 2 * best, 1.0, 0.0])
    u_slope = sqrt(float(slope @ covariance @ slope))
    flat = 1 / sqrt(12)
    if unseen:
        return unseen / sqrt(12)
    return min(u_slope / abs(2 * parabola[0]), flat) if parabola[0] < 0 else flat
