"""The whole result of one test, as the report, the store and a notebook see it."""

from __future__ import annotations

from dataclasses import dataclass, field
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from dic.comparison import ClipOn
from dic.errors import Notice
from dic.gauges import NamedHistory
from dic.pattern import Sketch, sketch
from dic.preparation import Setup
from dic.properties.result import Curve, ModulusLine, Property
from dic.store import fields
from dic.strain import GaugeHistory, gauge_size
from dic.strain.alignment import Alignment
from dic.sync.record import Clock, LoadRecord
from dic.testfile import TestFile

if TYPE_CHECKING:
    import pandas as pd
    import xarray as xr


@dataclass(frozen=True)
class Scene:
    """The coupon in the reference picture.

    Attributes
    ----------
    photograph
        Reference frame as 8-bit grey, shape (rows, columns).
    axis_angle_deg
        Angle of the pull from the picture's vertical, deg, clockwise as seen.
    axis_method
        How the axis was found.
    scale_mm
        mm per px, NaN where unknown.
    region
        Corners of the gauge region, px, shape (4, 2), columns x and y.
    subset_px, step_px
        Size and pitch of the subsets.
    map_gauge_px
        Size of the maps' virtual strain gauge, px.
    noise_grey
        Grey noise of one frame, in grey levels.
    sketch
        Edges, parallel section and holes as lines in the picture; None where nothing was found.
    """

    photograph: NDArray[np.uint8]
    axis_angle_deg: float
    axis_method: str
    scale_mm: float
    region: NDArray[np.float64]
    subset_px: int
    step_px: int
    map_gauge_px: float
    noise_grey: float
    sketch: Sketch | None = None


@dataclass(frozen=True)
class Measurement:
    """Everything that one test gave.

    Attributes
    ----------
    test
        The test file as read.
    scene
        Coupon, axis, scale and settings in the picture.
    history
        Gauge readings per frame.
    record
        The load record.
    clock
        How the clocks were joined.
    curve
        Stress and strain at the frames.
    line
        The straight line behind Young's modulus, for drawing.
    properties
        By name, in the order of the sheet.
    alignment
        How straight the coupon was pulled.
    quality
        Figures on how well it could be tracked.
    notices
        Warnings for people.
    provenance
        Versions, hashes of the inputs, parameters in force.
    folder
        Where the results lie; the fields are in ``fields.nc``.
    clip_on
        Comparison with a clip-on extensometer; None where the load record has none.
    gauges
        What the gauges that the test file names read.
    optics
        Scale, lens, and what was taken off the strains, as ``results.json`` says them.
    """

    test: TestFile
    scene: Scene
    history: GaugeHistory
    record: LoadRecord
    clock: Clock
    curve: Curve
    line: ModulusLine
    properties: dict[str, Property]
    alignment: Alignment
    quality: dict[str, float]
    notices: tuple[Notice, ...]
    provenance: dict[str, Any]
    folder: Path = field(default=Path())
    clip_on: ClipOn | None = None
    gauges: tuple[NamedHistory, ...] = ()
    optics: dict[str, Any] = field(default_factory=dict)

    def to_pandas(self) -> pd.DataFrame:
        """Return the history as a table, the columns those of ``history.csv``."""
        from dic.store.tables import history_table

        return history_table(self)

    def to_xarray(self) -> xr.Dataset:
        """Open the displacement and strain fields, on (frame, y, x)."""
        import xarray as xr

        return xr.open_dataset(self.folder / "fields.nc", engine="h5netcdf")

    def __str__(self) -> str:
        from dic.store.tables import properties_text

        return properties_text(self)


def scene_of(test: TestFile, setup: Setup, folder: Path) -> Scene:
    """Return the coupon in the reference picture; the noise is that of the fields in the folder."""
    grid = setup.grid
    return Scene(
        photograph=_eight_bits(setup.image, setup.source.full_scale()),
        axis_angle_deg=setup.coupon.axis_angle_deg,
        axis_method=setup.coupon.axis_method,
        scale_mm=setup.scale_mm,
        region=setup.region.corners(),
        subset_px=grid.subset,
        step_px=grid.step,
        map_gauge_px=gauge_size(test.maps.window, grid.step, grid.subset),
        noise_grey=fields.median_noise(folder),
        sketch=sketch(setup.coupon),
    )


def quality_of(setup: Setup, history: GaugeHistory) -> dict[str, float]:
    """Return the figures on how well the coupon could be tracked."""
    periodic = history.periodic
    return {
        **setup.quality,
        "gauge_region_length_px": setup.region.length,
        "gauge_region_width_px": setup.region.width,
        "extensometer_length_px": setup.reader().extensometer_px,
        "pixel_mm": setup.scale_mm,
        "coupon_width_px": setup.coupon.width_px,
        "u_coupon_width_px": setup.coupon.u_width_px,
        "u_axis_deg": setup.coupon.u_axis_deg,
        "subsets": float(setup.grid.inside.sum()),
        "valid_fraction": float(np.nanmedian(history.valid_fraction)),
        "periodic_error_px": periodic.amplitudes_px[0],
        "u_periodic_error_px": periodic.u_amplitudes_px[0],
        "periodic_error_second_px": periodic.amplitudes_px[1],
        "periodic_error_corrected": float(any(periodic.applied)),
    }


def _eight_bits(image: NDArray[np.float64], full_scale: float) -> NDArray[np.uint8]:
    return np.clip(np.rint(image * (255.0 / full_scale)), 0, 255).astype(np.uint8)
