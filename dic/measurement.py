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
from dic.pattern import Sketch
from dic.properties.result import Curve, ModulusLine, Property
from dic.strain.alignment import Alignment
from dic.strain.history import GaugeHistory
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
