"""The gauges that the test file names: where they sit, what they read, and strain along lines."""

from __future__ import annotations

from math import isfinite

import numpy as np

from dic.gauges import NamedHistory
from dic.measurement import Measurement
from dic.report.figures import Drawing, legend_above, sheet, strain_unit, thinned
from dic.report.photograph import colour_bar, middle_of, of_some_width, whole_photograph
from dic.rounding import COVERAGE_FACTOR, three_digits, with_uncertainty
from dic.store.results import largest

#: Blue, orange, green, violet, ochre and grey that differ in lightness too; line styles differ besides.
_COLOURS = ("#14506e", "#b8560f", "#3f7d4e", "#7a4a8c", "#a08a1c", "#3c3c3c")
_STYLES = ("-", "--", "-.", ":")
#: Most gauges that one figure of curves can hold apart.
MOST_CURVES = 12

KINDS = {
    "extensometer": "extensometer between two bands",
    "area": "mean of an area",
    "transverse": "transverse extensometer",
    "points": "two points",
    "line": "strain along a line",
    "edge_width": "width between the coupon's edges",
}


def draw_gauges(measurement: Measurement) -> list[Drawing]:
    """Draw the named gauges: on the coupon, against time, and lines as pictures of place and time."""
    gauges = list(measurement.gauges)
    if not gauges:
        return []
    lines = [one for one in gauges if len(one.gauge.places_px) > 1 and np.isfinite(one.parts).any()]
    return [
        _on_coupon(measurement, gauges),
        _in_time(measurement, gauges[:MOST_CURVES]),
        *(_line(measurement, one, number) for number, one in enumerate(lines, start=1)),
    ]


def _look(number: int) -> tuple[str, str]:
    return _COLOURS[number % len(_COLOURS)], _STYLES[number // len(_COLOURS) % len(_STYLES)]


def _on_coupon(measurement: Measurement, gauges: list[NamedHistory]) -> Drawing:
    scene = measurement.scene
    rows, columns = scene.photograph.shape
    figure, axes = whole_photograph(scene, fade=0.45)
    for number, one in enumerate(gauges):
        colour, style = _look(number)
        for first, outline in enumerate(one.gauge.outlines):
            closed = np.vstack([outline, outline[:1]]) if len(outline) > 2 else outline
            label = one.gauge.name if first == 0 else None
            axes.plot(*closed.T, style, color=colour, lw=1.4, label=label)
    legend_above(axes, 1 if rows > columns else 3)
    reading = (
        "Where each gauge of the test file sits on the reference picture. Boxes are the bands or areas whose "
        "subsets are averaged, lines the lengths between them. They follow the material in later frames."
    )
    alt = "Reference photograph with the outlines of the named gauges."
    return Drawing("named-gauges", "The gauges of the test file", reading, alt, figure, vector=False)


def _in_time(measurement: Measurement, gauges: list[NamedHistory]) -> Drawing:
    figure, (axes,) = sheet(height=3.2)
    time = measurement.curve.time_s
    scale, unit = strain_unit(np.concatenate([one.strain for one in gauges]))
    for number, one in enumerate(gauges):
        colour, style = _look(number)
        axes.plot(*thinned(time, one.strain * scale), style, color=colour, lw=1.2, label=one.gauge.name)
    axes.set(xlabel="time on the machine's clock, s", ylabel=f"strain, {unit}")
    legend_above(axes, 3)
    reading = (
        "What each gauge reads, frame by frame: change of length over the length in the reference frame. "
        "Gaps are frames in which its subsets, or the edges, were not found; history.csv says why."
    )
    alt = "Strain of each named gauge against time."
    return Drawing("named-gauges-in-time", "Their strain against time", reading, alt, figure)


def _line(measurement: Measurement, one: NamedHistory, number: int) -> Drawing:
    figure, (axes,) = sheet(height=3.2)
    time, scene = measurement.curve.time_s, measurement.scene
    by, unit = (scene.scale_mm, "mm") if isfinite(scene.scale_mm) else (1.0, "px")
    places = np.array(one.gauge.places_px) * by
    strain = np.ma.masked_invalid(one.parts.T)
    scale, strain_in = strain_unit(one.parts)
    low, high = of_some_width(*middle_of(one.parts * scale))
    axes.grid(visible=False)
    picture = axes.pcolormesh(
        time, places, strain * scale, cmap="cividis", vmin=low, vmax=high,
        shading="nearest", rasterized=True,
    )  # fmt: skip
    colour_bar(axes, picture, tall=False).set_label(f"strain, {strain_in}")
    axes.set(xlabel="time on the machine's clock, s", ylabel=f"place along {one.gauge.name}, {unit}")
    reading = (
        f"Strain along the line, from its first end (0) to its last, against time; {one.gauge.note}. Level "
        "colours from bottom to top mean that the coupon stretches alike everywhere on the line; a bright "
        "band is where it stretches more."
    )
    alt = f"Picture of strain along the line {one.gauge.name}: time to the right, place upwards."
    return Drawing(
        f"line-{number}", f"Strain along the line {one.gauge.name}", reading, alt, figure, vector=False
    )


def gauge_rows(measurement: Measurement) -> list[tuple[str, str, str]]:
    """Return name, largest strain and description of each gauge, as the page shows them."""
    return [_row(one) for one in measurement.gauges]


def _row(one: NamedHistory) -> tuple[str, str, str]:
    strain = largest(one.strain)
    value = "not measured"
    if isfinite(strain):
        row = int(np.nanargmax(np.abs(one.strain)))
        scale, unit = strain_unit(strain)
        value = with_uncertainty(strain * scale, COVERAGE_FACTOR * float(one.u_strain[row]) * scale, unit)
    length = f"{one.gauge.length_px:.0f} px"
    if isfinite(one.length_mm):
        length += f" = {three_digits(one.length_mm)} mm"
    lost = sum(said != "ok" for said in one.status)
    said = [KINDS[one.gauge.kind], f"length {length}", one.gauge.note]
    if lost:
        said.append(f"not wholly measured in {lost} of {len(one.status)} frames")
    return one.gauge.name, value, "; ".join(filter(None, said))
