"""Pictures: strain maps over the photograph, and where the gauge lay on the coupon."""

from __future__ import annotations

from math import isfinite
from typing import TYPE_CHECKING, Any

import numpy as np
from matplotlib.axes import Axes
from matplotlib.colors import Colormap
from matplotlib.patches import Rectangle

from dic.measurement import Measurement, Scene
from dic.report.figures import AXIAL, TRANSVERSE, Drawing, legend_above, strain_unit
from dic.report.moments import Moment
from dic.report.photograph import (
    lay_over,
    map_extent,
    middle_of,
    outline,
    panels_over,
    scale_bar,
    view_of,
    whole_photograph,
    zero_colours,
)
from dic.rounding import fixed, three_digits, uncertainty_alone
from dic.strain import MapFlag, measures

if TYPE_CHECKING:
    import xarray as xr

#: Colours span at least this many standard deviations of the map at rest.
NOISE_SPAN = 12.0

#: Lines of the coupon as it was found.
_FOUND = "#1f78b4"
_SKETCHED = (
    "Thin lines show what was found of the coupon: its edges, the ends of the parallel section where they "
    "are in view, and holes; where they miss it, [coupon] in the test file can say better. "
)

_MEASURES = {
    "engineering": "The maps show engineering strain.",
    "green_lagrange": "The maps show Green–Lagrange strain; the gauge's mean is engineering strain.",
    "hencky": "The maps show Hencky (logarithmic) strain; the gauge's mean is engineering strain.",
}


def draw_maps(measurement: Measurement, fields: xr.Dataset, moments: list[Moment]) -> list[Drawing]:
    """Draw the axial, transverse and shear strain at each moment over the reference photograph.

    Parameters
    ----------
    measurement
        What the test gave.
    fields
        Fields on (frame, y, x), in the reference picture's coordinates.
    moments
        Which frames; one that the fields do not hold is left out.

    Returns
    -------
    list of Drawing
        One figure for each moment.
    """
    kept = set(fields["frame"].values.tolist())
    history = measurement.history
    rest = _at_rest(measurement, fields)
    measure = measurement.test.maps.measure
    return [
        _map(measurement, _measured(fields.sel(frame=int(history.frame[moment.row])), measure), moment, rest)
        for moment in moments
        if int(history.frame[moment.row]) in kept
    ]


def _measured(field: xr.Dataset, measure: str) -> xr.Dataset:
    """Return one frame's fields with the strains of the measure that is to be drawn."""
    if measure == "engineering":
        return field
    found = measures(field, measure)
    drawn = {f"strain_{name}": found[name] for name in ("axial", "transverse", "shear")}
    return field.assign(drawn | {"u_strain_axial": found["u_axial"]})


def _at_rest(measurement: Measurement, fields: xr.Dataset) -> dict[str, float]:
    """Return each map's scatter in the frame that is strained least, the reference itself left out."""
    strain = np.abs(measurement.history.axial)
    # The reference is the one frame that matches itself, to rounding.
    strain = np.where(strain > 1e-9, strain, np.nan)
    if not np.isfinite(strain).any():
        return {}
    still = fields.isel(frame=int(np.nanargmin(strain)))
    return {name: float(still[f"strain_{name}"].std()) for name in ("axial", "transverse", "shear")}


def draw_scene(measurement: Measurement) -> Drawing:
    """Draw gauge region, axis, subset and strain window on the reference photograph."""
    scene = measurement.scene
    figure, axes = whole_photograph(scene, fade=0.25)
    _coupon_lines(axes, scene)
    axes.add_patch(outline(scene, lw=1.6, label="gauge region"))
    _arrow(axes, scene)
    _squares(axes, scene)
    scale_bar(axes, scene)
    rows, columns = scene.photograph.shape
    # The picture's frame is narrower than the sheet for a tall coupon; the legend then needs one column.
    legend_above(axes, 1 if rows > columns else 2)
    reading = (
        "The reference picture with the region whose strain is averaged (outline) and the direction of "
        f"loading (arrow, {fixed(scene.axis_angle_deg, 2)}° clockwise from the vertical; "
        f"{scene.axis_method}). "
        f"{_SKETCHED if scene.sketch is not None else ''}"
        f"The filled squares show one subset ({scene.subset_px} px, the patch that is recognised again) "
        f"and the window over which a point of the strain maps is formed ({_gauge_size(scene)}). The "
        "outline should lie on the speckled coupon and leave out the grips."
    )
    alt = (
        "Reference photograph of the coupon with the outline of the gauge region and an arrow along the load."
    )
    return Drawing("gauge-on-coupon", "Where the strain was measured", reading, alt, figure, vector=False)


def _map(measurement: Measurement, field: xr.Dataset, moment: Moment, rest: dict[str, float]) -> Drawing:
    scene, curve, history = measurement.scene, measurement.curve, measurement.history
    left, _, top, _ = view = view_of(field, scene)
    figure, panels = panels_over(scene, view, 3)
    spreads = []
    for axes, component in zip(panels, ("axial", "transverse", "shear"), strict=True):
        spreads.append(_panel(axes, field, component, rest.get(component, 0.0)))
        axes.add_patch(outline(scene, lw=0.9))
    scale_bar(panels[0], scene)
    panels[-1].add_patch(_square(scene.map_gauge_px, left, top, view, fill=False, ec="black", lw=1.0))
    frame, row = int(history.frame[moment.row]), moment.row
    reading = (
        f"Frame {frame} ({history.name[row]}) at {curve.time_s[row]:.2f} s, stress "
        f"{curve.stress_MPa[row]:.4g} MPa, axial strain {_sized(curve.axial[row])} over the gauge "
        f"(outline). {_MEASURES[measurement.test.maps.measure]} Each point is formed over a window of "
        f"{_gauge_size(scene)} (black square); nothing smaller can be seen. {_certainty(field)}"
        "Scatter over the map (standard deviation): "
        f"{', '.join(spreads)}. Fine "
        "mottling is the camera's noise"
        + (f" ({_sized(rest['axial'])} in the axial map of a frame at rest)" if rest else "")
        + "; a slope from side to side is bending, a band or spot well above the mottling is local yielding, "
        "a weak place or lost pattern. Points that could not be measured are left out. Colours span the "
        "middle 98 % of the values, and never less than the noise."
    )
    alt = f"Maps of axial, transverse and shear strain over the photograph of the coupon, frame {frame}."
    title = f"{moment.letter}: {moment.title}"
    return Drawing(f"map-{moment.letter.lower()}", title, reading, alt, figure, vector=False)


def _certainty(field: xr.Dataset) -> str:
    """Say how sure a point is and which share of the points leans on part of a window."""
    known = field["u_strain_axial"].values
    known = known[np.isfinite(known)]
    u = float(np.median(known)) if known.size else float("nan")
    flag = field["map_flag"].values
    made = int((flag <= MapFlag.ONE_SIDED).sum())
    if not (made and isfinite(u)):
        return ""
    share = 100 * int((flag == MapFlag.ONE_SIDED).sum()) / made
    return (
        f"Standard uncertainty of one point's axial strain: {_sized(u)} (median); {share:.0f} % of the "
        "points lie at an edge, a hole or a lost patch, where the window is one-sided and the uncertainty "
        "larger. "
    )


def _panel(axes: Axes, field: xr.Dataset, component: str, noise: float) -> str:
    """Draw one component; return its scatter in words."""
    strain = field[f"strain_{component}"].values
    if not np.isfinite(strain).any():
        axes.set_title(f"{component}: not measured", fontsize=8)
        return f"{component} not measured"
    low, high = middle_of(strain)
    # Colours that span less than the noise would show nothing else.
    missing = max(0.0, NOISE_SPAN * noise - (high - low)) / 2
    low, high = low - missing, high + missing
    colours: Colormap | str = "cividis"
    if component == "shear":
        # Zero has a meaning for shear: its sign is a direction.  Axial and transverse run one way.
        high = max(abs(low), abs(high))
        low, colours = -high, zero_colours()
    scale, unit = strain_unit(np.array([low, high]))
    lay_over(axes, strain * scale, map_extent(field), (low * scale, high * scale), colours)
    axes.set_title(f"{component}, {unit}", fontsize=8)
    spread = float(np.nanstd(strain))
    scale, unit = strain_unit(spread)
    return f"{component} {uncertainty_alone(spread * scale, unit)}"


def _sized(strain: float) -> str:
    scale, unit = strain_unit(strain)
    return f"{three_digits(strain * scale)} {unit}"


def _coupon_lines(axes: Axes, scene: Scene) -> None:
    """Draw the long edges, the ends of the parallel section and the holes as they were found."""
    if scene.sketch is None:
        return
    for lines, style, label in (
        (scene.sketch.edges, "-", "edges of the coupon"),
        (scene.sketch.ends, "--", "ends of the parallel section"),
        (scene.sketch.holes, ":", "holes and gaps, left out"),
    ):
        for number, line in enumerate(lines):
            axes.plot(*line.T, style, color=_FOUND, lw=1.4, label=label if number == 0 else None)


def _arrow(axes: Axes, scene: Scene) -> None:
    """Draw a double arrow along the pull, through the middle of the gauge."""
    angle = np.deg2rad(scene.axis_angle_deg)
    along = np.array([-np.sin(angle), np.cos(angle)])
    centre = scene.region.mean(axis=0)
    half = 0.4 * np.ptp(scene.region @ along)
    style = {"arrowstyle": "<->", "color": TRANSVERSE, "lw": 1.6, "shrinkA": 0, "shrinkB": 0}
    axes.annotate("", centre + half * along, centre - half * along, arrowprops=style)


def _squares(axes: Axes, scene: Scene) -> None:
    """Draw one subset inside one strain window, at the gauge's middle beside the arrow."""
    centre = scene.region.mean(axis=0)
    sizes = [
        (scene.map_gauge_px, "strain window of the maps", "#f4e3c8"),
        (scene.subset_px, "subset", AXIAL),
    ]
    for size, label, colour in sizes:
        if isfinite(size):
            corner = centre - size / 2
            axes.add_patch(
                Rectangle(corner, size, size, fc=colour, ec="black", lw=0.8, alpha=0.85, label=label)
            )


def _square(
    size: float, left: float, top: float, view: tuple[float, float, float, float], **style: Any
) -> Rectangle:
    inset = 0.02 * (view[3] - view[2])
    return Rectangle((left + inset, top + inset), size, size, **style)


def _gauge_size(scene: Scene) -> str:
    """Say the size of the maps' strain window (virtual strain gauge) in px and mm."""
    if not isfinite(scene.map_gauge_px):
        return "unknown size"
    size = f"{scene.map_gauge_px:g} px"
    return f"{size} = {scene.map_gauge_px * scene.scale_mm:.3g} mm" if isfinite(scene.scale_mm) else size
