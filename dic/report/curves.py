"""The curves: stress against strain, strains against time and each other, and what they prove."""

from __future__ import annotations

from math import copysign, isfinite

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure

from dic.measurement import Measurement
from dic.properties.result import Property
from dic.quantities import for_people, parse
from dic.report.figures import (
    AID,
    AXIAL,
    FAINT,
    TRANSVERSE,
    Drawing,
    Floats,
    legend_above,
    sheet,
    strain_unit,
    thinned,
)
from dic.report.moments import Moment, loading
from dic.store.tables import stated, title_of


def draw_curves(measurement: Measurement, moments: list[Moment]) -> list[Drawing]:
    """Draw the curves of the test, those left out that need a modulus line where there is none."""
    drawings = [_stress_strain(measurement)]
    if isfinite(measurement.line.slope):
        drawings.append(_elastic_part(measurement))
    drawings += [_strains_in_time(measurement, moments), _transverse_against_axial(measurement)]
    if isfinite(measurement.line.slope):
        drawings.append(_residuals(measurement))
    return drawings


def proof_stresses(measurement: Measurement) -> list[tuple[float, Property]]:
    """Return plastic strain, negative in compression, and property of each proof stress that was found."""
    found = [item for name, item in measurement.properties.items() if name.startswith("proof_stress_")]
    return [
        (copysign(parse(title_of(item.name).removesuffix(" proof stress"), "strain"), item.value), item)
        for item in found
        if isfinite(item.value)
    ]


def _stress_strain(measurement: Measurement) -> Drawing:
    figure, axes = _stress_axes(3.6)
    scale = _draw_curve(axes, measurement, measurement.curve.axial)
    reading = (
        "Each dot is one camera frame: how hard the coupon was loaded (force over the section measured "
        "before the test) against how far the gauge had stretched; pressure and shortening are negative."
    )
    if isfinite(measurement.line.slope):
        _draw_modulus_line(axes, measurement, scale)
        _draw_proof(axes, measurement, scale)
        reading += " The line and the crossings are enlarged in the next figure."
    strength = measurement.properties.get("tensile_strength")
    if strength is not None and isfinite(strength.value):
        axes.axhline(
            strength.value, color=AID, lw=0.8, ls=":", label=f"{strength.symbol} {strength.value:.4g} MPa"
        )
        reading += " The dotted level is the strength, from the largest force in the load record."
    legend_above(axes)
    stress = measurement.curve.stress_MPa[np.isfinite(measurement.curve.stress_MPa)]
    top = max(stress, key=abs, default=0.0)
    alt = f"Curve of stress against axial strain; the stress at the frames reaches {top:.4g} MPa."
    return Drawing("stress-strain", "Stress against strain", reading, alt, figure)


def _elastic_part(measurement: Measurement) -> Drawing:
    figure, axes = _stress_axes(3.6)
    line, proofs = measurement.line, proof_stresses(measurement)
    ends = [_zero_strain(measurement) + offset + item.value / line.slope for offset, item in proofs]
    end = 1.12 * max([1.6 * line.far, *ends], key=abs)
    scale = _draw_curve(axes, measurement, np.array([end]))
    _draw_modulus_line(axes, measurement, scale)
    _draw_proof(axes, measurement, scale)
    axes.axvspan(line.low * scale, line.high * scale, color=AXIAL, alpha=0.1, lw=0, label="modulus window")
    axes.set_xlim(*sorted((-0.04 * end * scale, end * scale)))
    stress = measurement.curve.stress_MPa[loading(measurement) & (np.abs(measurement.curve.axial) < abs(end))]
    limits = np.append(stress, 0.0)
    span = 1.1 * np.ptp(limits)
    axes.set_ylim(limits.min() - 0.04 * span, limits.min() + span if limits.max() > 0 else 0.04 * span)
    legend_above(axes)
    modulus = measurement.properties.get("youngs_modulus")
    reading = (
        "The solid line is fitted to the dots inside the shaded window; its slope is Young's modulus. "
        "The dots should lie on it all through the window."
    )
    if proofs:
        reading += (
            " The dashed line has the same slope and is shifted along the strain axis by the plastic strain "
            "that the proof stress allows; where it meets the curve (ring), the proof stress is read."
        )
    slope = (
        stated(modulus)[0]
        if modulus
        else "{:.4g} {}".format(*for_people(line.slope, "MPa", "youngs_modulus"))
    )
    alt = f"Beginning of the stress-strain curve with the modulus line; slope {slope}."
    return Drawing("elastic-part", "The elastic part, enlarged", reading, alt, figure)


def _strains_in_time(measurement: Measurement, moments: list[Moment]) -> Drawing:
    figure, (axes,) = sheet(height=3.2)
    curve, history, record = measurement.curve, measurement.history, measurement.record
    scale, unit = strain_unit(np.concatenate([curve.axial, curve.transverse]))
    rows = [("axial", history.axial, AXIAL, "-"), ("transverse", history.transverse, TRANSVERSE, "--")]
    rows.append(("shear", history.shear, FAINT, "-."))
    for label, strain, colour, style in rows:
        axes.plot(*thinned(curve.time_s, strain * scale), style, color=colour, lw=1.3, label=label)
    if record.extensometer is not None:
        contact = thinned(record.time_s, record.extensometer * scale)
        axes.plot(*contact, ":", color=AID, lw=1.1, label="contact extensometer")
    lost = ~np.isfinite(history.axial) & np.isfinite(curve.time_s)
    if lost.any():
        foot = axes.get_xaxis_transform()
        axes.plot(
            curve.time_s[lost],
            np.full(lost.sum(), 0.03),
            "x",
            color=AID,
            ms=4,
            transform=foot,
            label="not measured",
        )
    for moment in moments:
        when = curve.time_s[moment.row]
        axes.axvline(when, color=FAINT, lw=0.8, ls=(0, (2, 2)))
        mark = axes.annotate(
            moment.letter, (when, 0.98), xycoords=axes.get_xaxis_transform(), va="top", fontsize=8
        )
        mark.set_bbox({"boxstyle": "circle,pad=0.2", "fc": "white", "ec": FAINT, "lw": 0.8})
        mark.set_horizontalalignment("center")
    axes.set(xlabel="time on the machine's clock, s", ylabel=f"strain, {unit}")
    legend_above(axes, 3)
    reading = (
        "Strains of the gauge region, averaged over it, frame by frame. Before loading they should stay "
        "at zero; the transverse strain runs the other way than the axial one, and shear should stay "
        "small. "
    )
    letters = ", ".join(moment.letter for moment in moments)
    reading += f"Letters mark the moments of the strain maps ({letters})." if moments else ""
    alt = "Axial, transverse and shear strain against time."
    return Drawing("strains-in-time", "Strains against time", reading, alt, figure)


def _transverse_against_axial(measurement: Measurement) -> Drawing:
    figure, (axes,) = sheet(height=3.2)
    curve, line = measurement.curve, measurement.line
    scale, unit = strain_unit(np.concatenate([curve.axial, curve.transverse]))
    axes.plot(
        *thinned(curve.axial * scale, curve.transverse * scale),
        ".-",
        color=TRANSVERSE,
        lw=0.8,
        ms=4,
        label="frames",
    )
    ratio = measurement.properties.get("poissons_ratio")
    reading = (
        "How much the gauge narrows as it stretches, or widens as it is pressed; the falling slope is "
        "Poisson's ratio."
    )
    if ratio is not None and isfinite(ratio.value):
        inside = loading(measurement) & (curve.axial >= line.low) & (curve.axial <= line.high)
        inside &= np.isfinite(curve.transverse)
        start = np.mean(curve.transverse[inside] + ratio.value * curve.axial[inside]) if inside.any() else 0.0
        ends = np.array([np.nanmin(curve.axial), np.nanmax(curve.axial)])
        label = f"slope −{ratio.symbol} = −{ratio.value:.3g}"
        axes.plot(ends * scale, (start - ratio.value * ends) * scale, "--", color=AID, lw=1.0, label=label)
        reading += (
            " The dashed line carries the elastic slope on: frames that leave it show where the coupon "
            "has begun to deform for good (a metal then tends to one half)."
        )
    axes.set(xlabel=f"axial strain, {unit}", ylabel=f"transverse strain, {unit}")
    legend_above(axes)
    alt = "Transverse strain against axial strain, with the slope of Poisson's ratio."
    return Drawing("transverse-axial", "Transverse against axial strain", reading, alt, figure)


def _residuals(measurement: Measurement) -> Drawing:
    figure, (axes,) = sheet(height=2.6)
    curve, line = measurement.curve, measurement.line
    inside = loading(measurement) & (curve.axial >= line.low) & (curve.axial <= line.high)
    scale, unit = strain_unit(line.far)
    left = curve.stress_MPa[inside] - line.intercept - line.slope * curve.axial[inside]
    axes.axhline(0.0, color=AID, lw=0.9)
    axes.plot(*thinned(curve.axial[inside] * scale, left), "o", color=AXIAL, ms=3.5)
    axes.set(xlabel=f"axial strain, {unit}", ylabel="stress less line, MPa")
    # A line needs two numbers, so two degrees of freedom are spent.
    scatter = np.sqrt(np.sum(left**2) / (left.size - 2)) if left.size > 2 else np.nan
    reading = (
        f"What is left of the stress when the modulus line is taken away, for the {left.size} frames in "
        "the window. Dots strewn evenly about zero are noise; a bow or a hook means that the window "
        "reaches beyond the straight part, or that the coupon still settled in the grips."
    )
    alt = f"Residuals of the modulus fit, {left.size} frames, standard deviation {scatter:.2g} MPa."
    return Drawing("modulus-residuals", "What the modulus line leaves over", reading, alt, figure)


def _stress_axes(height: float) -> tuple[Figure, Axes]:
    figure, (axes,) = sheet(height=height)
    axes.set_ylabel("stress, MPa")
    return figure, axes


def _draw_curve(axes: Axes, measurement: Measurement, sized_for: Floats) -> float:
    """Draw stress against strain; return the factor from strain to the axis' unit."""
    curve = measurement.curve
    scale, unit = strain_unit(sized_for)
    axes.plot(
        *thinned(curve.axial * scale, curve.stress_MPa), ".-", color=AXIAL, lw=0.8, ms=4.5, label="frames"
    )
    axes.set_xlabel(f"axial strain, {unit}")
    return scale


def _zero_strain(measurement: Measurement) -> float:
    """Return the strain at which the modulus line has no stress."""
    return -measurement.line.intercept / measurement.line.slope


def _draw_modulus_line(axes: Axes, measurement: Measurement, scale: float) -> None:
    line, stress = measurement.line, measurement.curve.stress_MPa[loading(measurement)]
    ends = np.array([0.0, 0.92 * stress[np.argmax(np.abs(stress))] if stress.size else 0.0])
    strain = _zero_strain(measurement) + ends / line.slope
    axes.plot(strain * scale, ends, "-", color=AID, lw=1.1, label="modulus line")


def _draw_proof(axes: Axes, measurement: Measurement, scale: float) -> None:
    for offset, item in proof_stresses(measurement):
        foot = _zero_strain(measurement) + offset
        crossing = foot + item.value / measurement.line.slope
        axes.plot(np.array([foot, crossing]) * scale, [0.0, item.value], "--", color=AID, lw=1.0)
        label = f"{item.symbol} {item.value:.4g} MPa"
        axes.plot(
            crossing * scale,
            item.value,
            "o",
            ms=7,
            mfc="none",
            mec=TRANSVERSE,
            mew=1.4,
            ls="none",
            label=label,
        )
