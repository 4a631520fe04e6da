"""The camera's strain beside a clip-on extensometer's: curves, difference and figures in words."""

from __future__ import annotations

from math import isfinite

import numpy as np
from matplotlib.axes import Axes

from dic.comparison import Agreement, ClipOn
from dic.comparison.limits import CLASSES
from dic.measurement import Measurement
from dic.report.figures import (
    AID,
    AXIAL,
    FAINT,
    TRANSVERSE,
    Drawing,
    legend_above,
    sheet,
    strain_unit,
    thinned,
)
from dic.rounding import COVERAGE_FACTOR, with_uncertainty

#: Classes whose limits are drawn: narrow enough to be seen beside a difference.
DRAWN = (("ISO 9513", "0.5"), ("ISO 9513", "1"), ("ASTM E83", "B-1"))


def draw_clip_on(measurement: Measurement) -> list[Drawing]:
    """Draw both curves and the difference; nothing where there is no clip-on reading to compare."""
    found = measurement.clip_on
    if found is None or not found.used.any():
        return []
    return [_both_curves(measurement, found), _difference(measurement, found)]


def _both_curves(measurement: Measurement, found: ClipOn) -> Drawing:
    figure, (axes,) = sheet(height=3.4)
    curve, used = measurement.curve, found.used
    scale, unit = strain_unit(np.concatenate([curve.axial[used], found.strain[used]]))
    stress = curve.stress_MPa[used]
    axes.plot(*thinned(curve.axial[used] * scale, stress), ".-", color=AXIAL, lw=0.8, ms=4.5, label="camera")
    axes.plot(
        *thinned(found.strain[used] * scale, stress),
        "+--", color=TRANSVERSE, lw=0.8, ms=4.5, label="clip-on extensometer",
    )  # fmt: skip
    axes.set(xlabel=f"axial strain, {unit}", ylabel="stress, MPa")
    legend_above(axes)
    reading = (
        "The same forces against the strain that the camera saw and against the clip-on's, as recorded. "
        "Curves side by side at a constant distance differ by a zero; curves that lean apart, by a scale."
    )
    alt = "Stress against strain, once with the camera's strain and once with the clip-on extensometer's."
    return Drawing("clip-on-curves", "Camera and clip-on extensometer", reading, alt, figure)


def _difference(measurement: Measurement, found: ClipOn) -> Drawing:
    figure, (axes,) = sheet(height=3.2)
    strain = measurement.curve.axial
    shown = np.append(found.difference[found.used], found.station_difference)
    across, across_unit = strain_unit(strain[found.used])
    up, up_unit = strain_unit(shown)
    axes.axhline(0.0, color=AID, lw=0.9)
    axes.plot(
        *thinned(strain[found.used] * across, found.difference[found.used] * up),
        ".", color=FAINT, ms=3.5, label="frames",
    )  # fmt: skip
    if len(found.station_strain):
        axes.errorbar(
            found.station_strain * across,
            found.station_difference * up,
            found.coverage_factor * found.u_station * up,
            fmt="o", color=AXIAL, ms=4, lw=1.1, capsize=2, label="stations",
        )  # fmt: skip
    # A wide limit must not flatten the difference.
    reach = 1.6 * max(map(abs, axes.get_ylim()))
    _draw_limits(found, axes, across, up, reach)
    bottom, top = axes.get_ylim()
    axes.set_ylim(max(bottom, -reach), min(top, reach))
    axes.set(xlabel=f"axial strain, {across_unit}", ylabel=f"clip-on less camera, {up_unit}")
    legend_above(axes)
    reading = (
        "Clip-on less camera, both counted from the reference frames. Dots are frames, circles their means "
        f"between ten stations, with bars of {found.coverage_factor:.2g} standard uncertainties, so that all "
        "bars together hold with 95 % probability. Dashed lines are limits of extensometer classes, "
        "where they are not far outside."
    )
    alt = "Difference of clip-on and camera strain against strain, with limits of extensometer classes."
    return Drawing("clip-on-difference", "Clip-on less camera", reading, alt, figure)


def _draw_limits(found: ClipOn, axes: Axes, across: float, up: float, reach: float) -> None:
    if not len(found.station_strain):
        return
    length = found.gauge_length_mm if isfinite(found.gauge_length_mm) else None
    strain = np.linspace(found.station_strain.min(), found.station_strain.max(), 101)
    styles = {DRAWN[0]: ":", DRAWN[1]: "--", DRAWN[2]: "-."}
    for one in CLASSES:
        style = styles.get((one.standard, one.name))
        if style is None or not one.knows_fixed(length):
            continue
        limit = one.limit(strain, length) * up
        if limit.min() > reach:
            continue
        axes.plot(strain * across, limit, style, color=AID, lw=0.9, label=f"{one.standard} class {one.name}")
        axes.plot(strain * across, -limit, style, color=AID, lw=0.9)


def agreement_rows(found: ClipOn) -> list[tuple[str, str, str, str, str]]:
    """Return range, slope, offset, frames and remark of both lines, as the page shows them."""
    lines = (("all frames compared", found.whole), ("modulus window", found.window))
    return [_row(name, line) for name, line in lines]


def _row(name: str, line: Agreement) -> tuple[str, str, str, str, str]:
    slope = with_uncertainty(line.slope, COVERAGE_FACTOR * line.u_slope)
    largest = max((abs(end) for end in line.strain if isfinite(end)), default=0.0)
    scale, unit = strain_unit(line.offset if isfinite(line.offset) else largest)
    offset = with_uncertainty(line.offset * scale, COVERAGE_FACTOR * line.u_offset * scale, unit)
    return name, slope, offset, str(line.frames), line.note


def class_rows(found: ClipOn) -> list[tuple[str, str, str]]:
    """Return class, verdict and remark for each class, as the page shows them."""
    rows = []
    for one in found.classes:
        scale, unit = strain_unit(one.strain)
        used = f"uses {100 * one.used:.3g} % of the limit at a strain of {one.strain * scale:.3g} {unit}"
        remark = "; ".join(filter(None, [used, one.note]))
        rows.append((f"{one.standard} class {one.name}", one.verdict, remark))
    return rows
