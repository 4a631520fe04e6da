"""One property of the material as it stands on the sheet."""

from __future__ import annotations

from dataclasses import dataclass, field
from math import nan

import numpy as np
from numpy.typing import NDArray

from dic.errors import Notice
from dic.uncertainty.budget import Row

Floats = NDArray[np.float64]


@dataclass(frozen=True)
class Property:
    """A property with its uncertainty, method and window.

    Attributes
    ----------
    name
        Stable name, for example ``youngs_modulus``.
    symbol
        The standard's symbol, for example ``E``, ``Rp0.2``.
    value
        Value in `unit`; NaN where it could not be determined (the reason stands in `notes`).
    unit
        Internal unit (``MPa`` or empty).
    standard_uncertainty
        Standard uncertainty in `unit`.
    method
        The method in words, with the standard that it follows.
    window
        Bounds of the data used, with their meaning, for example ``{"strain": (0.0005, 0.0025)}``.
    notes
        What was assumed, a sentence each.
    contributions
        Standard uncertainty contributions in `unit` by source; their root sum of squares is
        `standard_uncertainty`.
    qualifier
        Word that has to stand before the value wherever it is shown, such as ``at least``.
    budget
        The same as a table, with what is not included.
    interval_95, draws_standard_deviation
        95 % interval and standard deviation of the budget propagated by draws; NaN where unknown.
    """

    name: str
    symbol: str
    value: float
    unit: str
    standard_uncertainty: float
    method: str
    window: dict[str, tuple[float, float]] = field(default_factory=dict)
    notes: tuple[str, ...] = ()
    contributions: dict[str, float] = field(default_factory=dict)
    qualifier: str = ""
    budget: tuple[Row, ...] = ()
    interval_95: tuple[float, float] = (nan, nan)
    draws_standard_deviation: float = nan

    @property
    def missing(self) -> tuple[str, ...]:
        """What the uncertainty does not include, in words."""
        return tuple(row.source for row in self.budget if not row.included)


@dataclass(frozen=True)
class Dense:
    """The load record itself, denser than the frames.

    Attributes
    ----------
    time_s
        The machine's clock, s, shape (n,).
    force_N, noise_N
        Force without spikes, and the standard deviation of its noise.
    """

    time_s: Floats
    force_N: Floats
    noise_N: Floats


@dataclass(frozen=True)
class Curve:
    """Stress and strain at the same instants: what all properties are read from.

    Attributes
    ----------
    time_s
        Instants on the machine's clock, s, shape (n,).
    force_N, stress_MPa
        Force and nominal stress (force over original section).
    axial, transverse
        Engineering strains.
    u_axial, u_transverse
        Standard uncertainties of the strains, see `dic.strain.history`.
    area_mm2
        Original cross-section S0.
    peak_force_N, u_peak_force_N
        Largest force of the whole load record (denser than the frames) and its statistical
        standard uncertainty; NaN where the record shows no load.
    peak_time_s
        When that was, on the machine's clock.
    peak_at_end
        Whether the record ends before the force drops again, so that the coupon could perhaps have
        borne more.
    u_peak_between_N
        Standard uncertainty of the largest force from a fracture between two samples.
    spikes_s
        Times of the record's samples that were left out as spikes, on the machine's clock.
    u_peak_time_s
        Standard uncertainty of the time of the largest force.
    u_stress_MPa
        Standard uncertainty of the stresses from the force's noise, shape (n,); None where unknown.
    displacement_mm
        The crosshead's travel, shape (n,); None where it was not recorded.
    dense
        The load record between the frames; None where there is none.
    u_towards
        Standard uncertainty of the false strain from motion towards the camera, between the reference and
        the end; 0 where it was taken off, None where nothing is known about it.
    straightened
        Whether the lens' distortion was taken off.
    left_axial, left_transverse, left_edges
        What may be left of the interpolation's error in the strains, and of the pattern's on the edges, see
        `dic.strain.history`; None where unknown.
    u_axis_deg
        Standard uncertainty of the axis' direction, deg; NaN where unknown.
    """

    time_s: Floats
    force_N: Floats
    stress_MPa: Floats
    axial: Floats
    transverse: Floats
    u_axial: Floats
    u_transverse: Floats
    area_mm2: float
    peak_force_N: float
    u_peak_force_N: float
    peak_time_s: float
    peak_at_end: bool = False
    u_peak_between_N: float = 0.0
    spikes_s: tuple[float, ...] = ()
    u_peak_time_s: float = 0.0
    u_stress_MPa: Floats | None = None
    displacement_mm: Floats | None = None
    dense: Dense | None = None
    u_towards: float | None = None
    straightened: bool = False
    left_axial: Floats | None = None
    left_transverse: Floats | None = None
    left_edges: Floats | None = None
    u_axis_deg: float = nan


@dataclass(frozen=True)
class ModulusLine:
    """The straight line through the elastic part, stress = intercept + slope · strain.

    The proof stress at an offset lies where the curve meets ``intercept + slope · (strain - offset)``,
    so this line and a `Property`'s value are all that a drawing of the construction needs.

    Attributes
    ----------
    slope
        Young's modulus, MPa; NaN where it could not be determined, like the others.
    intercept
        Stress of the line at zero strain, MPa.
    low, high
        Strains between which the frames used lie.
    """

    slope: float
    intercept: float
    low: float
    high: float

    @property
    def far(self) -> float:
        """The end of the window that is farther along the loading, which may be compression."""
        return max(self.low, self.high, key=abs)


@dataclass(frozen=True)
class Evaluation:
    """What a stress-strain curve gave.

    Attributes
    ----------
    properties
        By name, in the order of the sheet; a property that could not be had stands there as NaN.
    line
        The line behind Young's modulus.
    notices
        Where strain counts from, if that is not plainly the rest, and other things people should know.
    """

    properties: dict[str, Property]
    line: ModulusLine
    notices: tuple[Notice, ...] = ()
