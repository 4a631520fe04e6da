"""Strains at instants that the load record names: largest force, fracture."""

from __future__ import annotations

from dataclasses import dataclass
from math import sqrt

import numpy as np
from numpy.typing import NDArray

from dic.properties.loading import Loading, Undetermined
from dic.properties.result import Curve
from dic.uncertainty import bounded, few_readings

Floats = NDArray[np.float64]

#: A broken coupon bears less than this share of the largest force.
BROKEN = 0.1
#: A fall of more than this share of the largest force from sample to sample belongs to the fracture.
FALL = 0.05
#: Frames to either side of an instant that its strain is read from.
NEAR = 4
#: Frame intervals that a strain may be carried beyond the last frame: a fracture always comes after the last
#: frame of the whole coupon, but within one interval.  The hundredth is for frames that are not quite even.
BEYOND = 1.01
#: Samples from which a force is gone for good; one alone at the record's end may be a number cut off.
GONE = 2


@dataclass(frozen=True)
class StrainAt:
    """A strain at an instant, its rate of growth, and its standard uncertainty from scatter.

    `beyond_s` is how far the instant lies after the last measured frame; 0 where it lies between frames.
    """

    strain: float
    rate: float
    u_scatter: float
    beyond_s: float = 0.0

    def contributions(self, u_time_s: float, u_clock_s: float) -> dict[str, float]:
        """Return the standard uncertainties by source, the instant being uncertain as well.

        Beyond the last frame the strain may have stood still or grown twice as fast: a rectangle.
        """
        known = {
            "scatter": self.u_scatter,
            "instant": abs(self.rate) * u_time_s,
            "clock": abs(self.rate) * u_clock_s,
        }
        beyond = {"beyond the last frame": bounded(abs(self.rate) * self.beyond_s / sqrt(3))}
        return known | (beyond if self.beyond_s else {})

    @property
    def notes(self) -> tuple[str, ...]:
        """Say where the strain was carried beyond the frames."""
        told = f"carried {self.beyond_s:.2g} s beyond the last measured frame"
        return (told,) if self.beyond_s else ()


def strain_at(loading: Loading, when_s: float, what: str) -> StrainAt:
    """Read the axial strain at an instant from a parabola in time through the frames around it.

    Beyond the last frame it is carried along the line through the last ones, at most one frame interval.

    Parameters
    ----------
    loading
        Frames up to the fracture.
    when_s
        The instant, on the machine's clock.
    what
        What happens then, for the message.

    Raises
    ------
    Undetermined
        If no frame was measured before the instant, or none up to it.
    """
    time, strain = loading.time_s, loading.strain
    if len(time) < 3:
        raise Undetermined(f"fewer than three frames were measured before {what}")
    interval = float(np.median(np.diff(time)))
    if when_s < time[0]:
        raise Undetermined(f"the first measured frame was taken after {what}")
    beyond = max(when_s - float(time[-1]), 0.0)
    if beyond > BEYOND * interval:
        raise Undetermined(f"the last measured frame was taken {beyond:.3g} s before {what}")
    place = int(np.searchsorted(time, when_s))
    here = slice(max(place - NEAR, 0), place + NEAR)
    degree = 2 if len(time[here]) >= 6 and not beyond else 1
    design = np.vander((time[here] - when_s) / interval, degree + 1)
    fit = np.linalg.lstsq(design, strain[here], rcond=None)[0]
    free = len(time[here]) - degree - 1
    if free < 1:
        raise Undetermined(f"too few frames were measured around {what}")
    residuals = strain[here] - design @ fit
    variance = float(residuals @ residuals) / free
    covariance = np.linalg.inv(design.T @ design) * variance
    # Few frames of a bent course: their own noise is the least that the value can scatter by.
    own = float(np.median(loading.u_strain[here])) / sqrt(len(time[here]))
    return StrainAt(
        float(fit[-1]),
        float(fit[-2]) / interval,
        max(sqrt(float(covariance[-1, -1])) * few_readings(max(free, 3)), own),
        beyond,
    )


@dataclass(frozen=True)
class Fracture:
    """When the coupon broke, on the machine's clock, and the standard uncertainty of that."""

    time_s: float
    u_time_s: float


def fracture_of(curve: Curve) -> Fracture:
    """Find the fracture: the fall of the force to next to nothing after its largest value.

    Raises
    ------
    Undetermined
        If the record ends before.
    """
    if curve.dense is None or not np.isfinite(curve.peak_force_N):
        raise Undetermined("there is no load record in which a fracture could show")
    time, force = curve.dense.time_s, np.abs(curve.dense.force_N)
    peak = abs(curve.peak_force_N)
    begin = max(int(np.searchsorted(time, curve.peak_time_s)) - 1, 0)
    borne = np.flatnonzero(force >= BROKEN * peak)
    last = int(borne[-1]) + 1 if borne.size else len(force)
    if last > len(force) - GONE:
        lone = last < len(force)
        raise Undetermined(
            "the force falls away in the record's last row only, whose number may be cut off"
            if lone
            else "the record ends before the coupon breaks"
        )
    falls = -np.diff(force[begin : last + 1])
    steepest = begin + int(np.argmax(falls))
    if falls.max() < FALL * peak:
        raise Undetermined("the force goes back slowly: the coupon was unloaded and did not break")
    while steepest > begin and force[steepest - 1] - force[steepest] > FALL * peak:
        steepest -= 1
    lasting = float(time[steepest + 1] - time[steepest])
    return Fracture(float(time[steepest]) + lasting / 2, lasting / sqrt(12))
