"""The stress over the coupon's face while it is elastic."""

from __future__ import annotations

from math import isfinite
from typing import TYPE_CHECKING

import numpy as np

from dic.errors import InputError
from dic.measurement import Measurement
from dic.properties import elastic_stress
from dic.report.figures import Drawing
from dic.report.photograph import lay_over, map_extent, middle_of, outline, panels_over, scale_bar, view_of
from dic.rounding import three_digits

if TYPE_CHECKING:
    import xarray as xr

#: What is drawn, and its heading.
PANELS = {"axial": "axial", "transverse": "transverse", "equivalent": "von Mises"}


def draw_stress(measurement: Measurement, fields: xr.Dataset) -> tuple[list[Drawing], str]:
    """Draw the stresses in the last frame of the modulus' window over the reference photograph.

    Parameters
    ----------
    measurement
        What the test gave.
    fields
        Fields on (frame, y, x), in the reference picture's coordinates.

    Returns
    -------
    tuple
        The figure, or none and the reason why.
    """
    if measurement.test.properties.preset == "fibre composites":
        return [], "a fibre composite has preferred directions, and the map assumes an isotropic material"
    if not isfinite(measurement.line.slope):
        return [], "without an elastic part there is no modulus to turn strain into stress"
    history, curve = measurement.history, measurement.curve
    rows = np.flatnonzero(np.isin(history.frame, fields["frame"].values) & np.isfinite(curve.axial))
    if not rows.size:
        return [], "no frame of the elastic part was measured"
    # Where the window ends the stress is largest beside the camera's noise.
    row = int(rows[np.argmin(np.abs(curve.axial[rows] - measurement.line.far))])
    place = int(np.flatnonzero(fields["frame"].values == history.frame[row])[0])
    try:
        found = elastic_stress(fields, place, measurement.properties)
    except InputError as reason:
        return [], reason.what
    return [_drawing(measurement, fields.isel(frame=place), found, row)], ""


def _drawing(measurement: Measurement, field: xr.Dataset, found: xr.Dataset, row: int) -> Drawing:
    scene, curve, history = measurement.scene, measurement.curve, measurement.history
    figure, panels = panels_over(scene, view_of(field, scene), len(PANELS))
    for axes, (name, title) in zip(panels, PANELS.items(), strict=True):
        values = found[f"stress_{name}"].values
        lay_over(axes, values, map_extent(field), middle_of(values))
        axes.set_title(f"{title}, MPa", fontsize=8)
        axes.add_patch(outline(scene, lw=0.9))
    scale_bar(panels[0], scene)
    stress = found["stress_axial"].values
    frame, beyond = int(history.frame[row]), int(found["beyond"].values.sum())
    limit = float(found.attrs["elastic_limit_MPa"])
    reading = (
        f"Frame {frame} ({history.name[row]}) at {curve.time_s[row]:.2f} s, near the end of the modulus' "
        "window. Hooke's law with the measured E and ν turns the strains of each point into plane stress. "
        f"That holds in the elastic range only (here up to {limit:.4g} MPa) and assumes an isotropic "
        f"material. Mean axial stress over the map {float(np.nanmean(stress)):.4g} MPa, "
        f"scatter (standard deviation) {three_digits(float(np.nanstd(stress)))} MPa; "
        f"force over section gives {curve.stress_MPa[row]:.4g} MPa. "
        "The transverse stress of a free coupon is zero but for noise and the grips; von Mises' "
        "equivalent stress is what is held against the limit. "
        + (f"{beyond} points beyond the elastic range are left out. " if beyond else "")
        + "Colours span the middle 98 % of the values."
    )
    alt = f"Maps of axial, transverse and equivalent stress over the photograph of the coupon, frame {frame}."
    return Drawing("elastic-stress", "Elastic stress", reading, alt, figure, vector=False)
