"""Upper and lower yield point, and how far the coupon stretches between yielding and hardening."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cache
from math import hypot, sqrt

import numpy as np
from numpy.typing import NDArray
from scipy.ndimage import uniform_filter1d

from dic.properties.loading import Undetermined
from dic.properties.peak import highest_around
from dic.properties.result import Dense
from dic.properties.sheet import Entry, Reading, Sheet
from dic.uncertainty import bounded

Floats = NDArray[np.float64]

#: ISO 6892-1 on computer-read records [from memory]: the force falls by this share after the upper yield
#: point and does not exceed it over the next strain.
DROP = 0.005
QUIET_STRAIN = 0.0005
#: A metal's yield point lies at a plastic strain below this (common practice); a later maximum is necking.
EARLY = 0.005
#: Standard deviations of noise that a fall or a rise has to exceed.
NOISE = 6
#: Knees that are tried for the end of yielding.
KNEES = 200
#: The hardening that the knee is fitted to ends at this share of the way from yielding to the largest force.
HARDENED = 0.3


@dataclass(frozen=True)
class Yielding:
    """The yielding of one test, stresses and strains counted positive along the loading.

    Attributes
    ----------
    upper, u_upper
        Stress at the upper yield point and its standard uncertainty from noise, MPa.
    lower, u_lower
        Lowest stress of yielding, the first transient left out.
    strain
        Strain at the upper yield point.
    time_s
        Instants of upper and lower yield point.
    """

    upper: float
    u_upper: float
    lower: float
    u_lower: float
    strain: float
    time_s: tuple[float, float]


def yielding_entries(sheet: Sheet) -> list[Entry]:
    """List what a yield point gives."""

    @cache
    def found() -> Yielding:
        return find_yielding(sheet)

    return [
        Entry("upper_yield", "ReH", "MPa", lambda: _stress(sheet, found(), upper=True)),
        Entry("lower_yield", "ReL", "MPa", lambda: _stress(sheet, found(), upper=False)),
        Entry("yield_point_extension", "Ae", "", lambda: _extension(sheet, found())),
    ]


def find_yielding(sheet: Sheet) -> Yielding:
    """Find the yield point in the load record.

    The upper one is the force's highest value before it falls by `DROP` and stays below over the next
    `QUIET_STRAIN`.  The lower one is the lowest stress between there and the end of yielding; if the
    force recovers after its first fall, that fall was the transient that ISO 6892-1 leaves out.

    Raises
    ------
    Undetermined
        If there is none.
    """
    elastic, area = sheet.elastic, sheet.curve.area_mm2
    dense, strain = force_and_strain(sheet)
    top = first_fall(dense, strain)
    plastic = strain[top] - elastic.line.at(dense.force_N[top] / area)
    if plastic > EARLY:
        raise Undetermined(
            "the force does not fall before the coupon hardens or breaks: there is no yield point"
        )
    peak, _ = highest_around(
        dense.time_s, dense.force_N, dense.noise_N, top, float(dense.force_N[top]), falls=True
    )
    low, smooth, size = _lowest(dense, strain, top)
    noise = float(dense.noise_N[low])
    return Yielding(
        upper=peak.value / area,
        u_upper=hypot(peak.u_value, peak.u_between) / area,
        lower=float(smooth[low]) / area,
        # The lowest of many smoothed samples lies below the course by about one of their scatter.
        u_lower=noise * sqrt(2 / size) / area,
        strain=float(strain[top]),
        time_s=(peak.time, float(dense.time_s[low])),
    )


def force_and_strain(sheet: Sheet) -> tuple[Dense, Floats]:
    """Return the load record up to the fracture, counted positive along the loading, and its strains."""
    loading, dense = sheet.loading, sheet.curve.dense
    if dense is None:
        raise Undetermined("there is no load record in which a yield point could show")
    inside = (dense.time_s >= loading.time_s[0]) & (dense.time_s <= sheet.last_time_s)
    dense = Dense(dense.time_s[inside], loading.sign * dense.force_N[inside], dense.noise_N[inside])
    whole = sheet.whole
    return dense, np.interp(dense.time_s, whole.time_s, whole.strain)


def first_fall(dense: Dense, strain: Floats) -> int:
    """Return the sample of the first maximum after which the force falls while the coupon stretches on."""
    force, noise = dense.force_N, NOISE * float(np.median(dense.noise_N))
    highest = np.maximum.accumulate(force)
    fallen = np.flatnonzero(highest - force > np.maximum(DROP * highest, noise))
    while fallen.size:
        top = int(np.argmax(force[: fallen[0] + 1]))
        until = np.flatnonzero(strain[top:] > strain[top] + QUIET_STRAIN)
        if not until.size:
            break
        following = force[fallen[0] : top + int(until[0]) + 1]
        # A force that is gone is the coupon's fracture.
        if following.size and following.min() < 0.5 * force[top]:
            break
        if not following.size or following.max() <= force[top] + noise:
            return top
        fallen = fallen[fallen > top + int(until[0])]
    raise Undetermined("the force does not fall before the coupon hardens or breaks: there is no yield point")


def _lowest(dense: Dense, strain: Floats, top: int) -> tuple[int, Floats, int]:
    """Return the sample of the lower yield point, the smoothed force, and over how many samples it is."""
    force, noise = dense.force_N, float(np.median(dense.noise_N))
    span = max(int(np.searchsorted(strain[top:], strain[top] + QUIET_STRAIN)), 1)
    size = max(min(span // 2, 51), 1)
    smooth = uniform_filter1d(force, size)
    # Yielding is over where the force exceeds the upper yield point for good.
    below = np.flatnonzero(force[top:] <= force[top])
    end = top + int(below[-1]) + 1
    still = NOISE * noise / sqrt(size) / 2
    rise = max(2 * still, DROP * float(force[top]))
    start = top + size
    if start >= end - size:
        raise Undetermined("yielding is too short to tell a lower yield point")
    lowest = np.minimum.accumulate(smooth[start:end])
    recovered = np.flatnonzero(smooth[start:end] - lowest > rise)
    first = start + int(np.argmin(smooth[start : start + int(recovered[0])])) if recovered.size else start
    # Only a fall that is over long before yielding is, is a transient.
    if recovered.size and strain[start + int(recovered[0])] - strain[top] < 5 * QUIET_STRAIN:
        start = start + int(recovered[0])
        while start + size < end and smooth[start + size] > smooth[start] + still:
            start += 1
        if start >= end - size:
            return first, smooth, size
    return start + int(np.argmin(smooth[start:end])), smooth, size


def _stress(sheet: Sheet, found: Yielding, *, upper: bool) -> Reading:
    value, scatter = (found.upper, found.u_upper) if upper else (found.lower, found.u_lower)
    when = found.time_s[0 if upper else 1]
    words = (
        "highest force before it falls for the first time (ISO 6892-1)"
        if upper
        else "lowest force during yielding, without the first transient (ISO 6892-1)"
    )
    return Reading(
        sheet.loading.sign * value,
        words,
        {"scatter": scatter} | sheet.of_stress(value),
        {"time_s": (when, when)},
        missing=sheet.left_out(),
    )


def _extension(sheet: Sheet, found: Yielding) -> Reading:
    """Read Ae: from the upper yield point to where a level and the hardening that follows it meet."""
    loading, sign = sheet.loading, sheet.loading.sign
    strain, stress = loading.strain, loading.stress
    after = loading.time_s > found.time_s[0]
    top = found.lower + HARDENED * (float(stress.max()) - found.lower)
    hardened = np.flatnonzero(after & (stress > max(top, found.upper)))
    end = int(hardened[0]) if hardened.size else len(stress)
    # The drop itself is no part of the level.
    here = np.flatnonzero(after & (strain > found.strain + QUIET_STRAIN))
    here = here[here < end]
    if len(here) < 8:
        raise Undetermined("fewer than eight frames lie between yield point and hardening")
    knee, u_knee = _knee(strain[here], stress[here])
    value = knee - found.strain
    u_upper = float(np.median(np.diff(strain[here]))) / sqrt(12)
    return Reading(
        sign * value,
        "strain from the upper yield point to where the level of yielding meets the line of hardening "
        "(ISO 6892-1)",
        {"knee": u_knee, "strain at the upper yield point": bounded(u_upper)},
        {"strain": (sign * found.strain, sign * knee)},
        missing=sheet.left_out_of_strain(),
    )


def _knee(strain: Floats, stress: Floats) -> tuple[float, float]:
    """Fit a level that turns into a rising line; return the turn and its standard uncertainty."""
    knees = np.linspace(strain.min(), strain.max(), KNEES + 2)[1:-1]
    squares, slopes = np.empty(KNEES), np.empty(KNEES)
    for place, knee in enumerate(knees):
        design = np.column_stack([np.ones_like(strain), np.maximum(strain - knee, 0)])
        fit = np.linalg.lstsq(design, stress, rcond=None)[0]
        squares[place], slopes[place] = float(np.sum((stress - design @ fit) ** 2)), fit[1]
    best = int(np.argmin(squares))
    if not slopes[best] > 0 or best in (0, KNEES - 1):
        raise Undetermined("yielding does not end in hardening within the measured strain")
    variance = squares[best] / max(len(strain) - 3, 1)
    # Knees whose misfit exceeds the least by one variance bound one standard uncertainty.
    near = knees[squares <= squares[best] + max(variance, 1e-300)]
    step = float(knees[1] - knees[0])
    return float(knees[best]), max(float(np.ptp(near)) / 2, step / sqrt(12))
