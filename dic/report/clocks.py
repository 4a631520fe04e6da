"""How well the camera's clock and the machine's were put together, as a figure."""

from __future__ import annotations

from math import isfinite

import numpy as np

from dic.measurement import Measurement
from dic.report.figures import AID, AXIAL, Drawing, legend_above, sheet, strain_unit, thinned
from dic.rounding import COVERAGE_FACTOR
from dic.sync.record import Clock


def draw_clocks(measurement: Measurement) -> list[Drawing]:
    """Draw how well frames and forces belong together, and how sharply the data tell the offset.

    Returns
    -------
    list of Drawing
        Strain by camera and by force over time, unless there is no modulus line to turn force into strain;
        the misfit over the offset, where it was estimated.
    """
    return [*_on_one_clock(measurement), *_misfit(measurement.clock)]


def _misfit(clock: Clock) -> list[Drawing]:
    shown = np.isfinite(clock.misfit)
    if not shown.any():
        return []
    figure, (axes,) = sheet(height=2.4)
    u = COVERAGE_FACTOR * clock.offset_standard_uncertainty_s
    axes.axvspan(
        clock.offset_s - u,
        clock.offset_s + u,
        color=AID,
        alpha=0.15,
        lw=0,
        label=f"± (k = {COVERAGE_FACTOR:g})",
    )
    axes.plot(clock.tried_s[shown], clock.misfit[shown], "-", color=AXIAL, lw=1.2, label="left unexplained")
    axes.axvline(clock.offset_s, color=AID, lw=1.0, label="offset taken")
    axes.set(xlabel="offset tried, s", ylabel="misfit, least = 1", ylim=(0, None))
    legend_above(axes)
    reading = (
        "How much of what the camera saw the machine's record leaves unexplained, if the clocks are shifted "
        "against each other. A deep, narrow valley means that the data tell the offset; the band is its "
        "expanded uncertainty."
    )
    alt = "Misfit of frames and record over the offset of the clocks, with the offset taken and its band."
    return [Drawing("clock-offset", "How sharply the data tell the offset", reading, alt, figure)]


def _on_one_clock(measurement: Measurement) -> list[Drawing]:
    line, curve, record = measurement.line, measurement.curve, measurement.record
    if not isfinite(line.slope):
        return []
    called_for = (record.force_N / curve.area_mm2 - line.intercept) / line.slope
    begun = np.flatnonzero(np.abs(called_for) > abs(line.far))
    end = record.time_s[begun[0]] if begun.size else record.time_s[-1]
    # The foot of the ramp is what tells the clocks apart; the rest before it only needs to be seen.
    start = max(record.time_s[0], end - 3.0 * _ramp_time(record.time_s, called_for, line.far, end))
    shown = (record.time_s >= start) & (record.time_s <= end)
    seen = (curve.time_s >= start) & (curve.time_s <= end) & np.isfinite(curve.axial)
    scale, unit = strain_unit(line.far)
    figure, (axes,) = sheet(height=2.8)
    by_force = thinned(record.time_s[shown], called_for[shown] * scale)
    axes.plot(*by_force, "-", color=AID, lw=1.0, label="called for by the force")
    axes.plot(
        *thinned(curve.time_s[seen], curve.axial[seen] * scale),
        "o",
        color=AXIAL,
        ms=4,
        label="seen by the camera",
    )
    axes.set(xlabel="time on the machine's clock, s", ylabel=f"axial strain, {unit}")
    legend_above(axes)
    reading = (
        "The beginning of the test on the machine's clock. The line is the recorded force turned into "
        "strain by the modulus line; the dots are what the camera saw, at the times that the matched "
        "clocks give them. Dots on the line mean that frames and forces belong together; dots shifted to "
        "one side all along the ramp mean that the clocks are apart."
    )
    alt = "Strain seen by the camera and strain called for by the force, at the beginning of the test."
    return [Drawing("clocks", "Frames and forces on one clock", reading, alt, figure)]


def _ramp_time(time: np.ndarray, strain: np.ndarray, high: float, end: float) -> float:
    """Return how long the strain took to get from a tenth of `high` to `high`, s."""
    before = np.flatnonzero((np.abs(strain) < 0.1 * abs(high)) & (time <= end))
    began = time[before[-1]] if before.size else time[0]
    return float(max(end - began, time[1] - time[0]))
