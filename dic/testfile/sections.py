"""The sections on coupon, frames, load record and how they are worked on."""

from __future__ import annotations

from math import pi, prod, sqrt
from pathlib import Path
from typing import Annotated, Literal

from pydantic import Field, model_validator

from dic.testfile.values import (
    Axis,
    Column,
    Duration,
    FileName,
    ForceClass,
    Fraction,
    Length,
    Rate,
    Section,
    Segment,
    Time,
    Unit,
    axis_angle,
)

#: Files that bring their own frame times.
VIDEO_ENDINGS = (".avi", ".mp4", ".mov", ".mkv")
#: What is measured of a coupon by its shape; the camera sees the first.
SIDES = {"flat": ("width", "thickness"), "round": ("diameter",)}


class Specimen(Section):
    """The coupon as measured before the test, lengths in mm."""

    label: str = "coupon"
    material: str = ""
    shape: Literal["flat", "round"] = "flat"
    width: Length | None = None
    thickness: Length | None = None
    diameter: Length | None = None
    width_uncertainty: Length | None = None
    thickness_uncertainty: Length | None = None
    diameter_uncertainty: Length | None = None
    calliper_resolution: Length | None = None

    @model_validator(mode="after")
    def _dimensions_of_its_shape(self) -> Specimen:
        needed = SIDES[self.shape]
        foreign = [key for keys in SIDES.values() for key in keys if key not in needed]
        missing = [key for key in needed if getattr(self, key) is None]
        if missing:
            raise ValueError(
                f"a {self.shape} coupon needs {' and '.join(needed)}; {' and '.join(missing)} missing"
            )
        for key in foreign:
            for given in (key, f"{key}_uncertainty"):
                if getattr(self, given) is not None:
                    raise ValueError(f"a {self.shape} coupon has no {given}; remove it or correct the shape")
        return self

    @property
    def sides(self) -> dict[str, float]:
        """The dimensions by name, mm, first the one that the camera sees."""
        return {side: getattr(self, side) for side in SIDES[self.shape]}

    @property
    def area(self) -> float:
        """Original cross-section S0, mm²."""
        return pi * self.visible_width**2 / 4 if self.shape == "round" else prod(self.sides.values())

    @property
    def visible_width(self) -> float:
        """Width (or diameter) that the camera sees, mm."""
        return next(iter(self.sides.values()))

    def side_uncertainty(self, side: str) -> float | None:
        """Return a dimension's standard uncertainty, mm; for want of another the calliper's.

        A reading lies anywhere within half a digit (JCGM 100:2008, F.2.2.1).
        """
        given: float | None = getattr(self, f"{side}_uncertainty")
        if given is None and self.calliper_resolution is not None:
            return self.calliper_resolution / sqrt(12)
        return given

    @property
    def unstated(self) -> list[str]:
        """The keys of those dimensions whose uncertainty is not given."""
        return [f"specimen.{side}_uncertainty" for side in self.sides if self.side_uncertainty(side) is None]

    @property
    def side_errors(self) -> tuple[tuple[float, int, bool], ...]:
        """The dimensions' relative standard uncertainties, powers in S0, and whether a digit bounds them.

        Those whose uncertainty is not given are left out.
        """
        return tuple(
            (u / value, 2 if side == "diameter" else 1, getattr(self, f"{side}_uncertainty") is None)
            for side, value in self.sides.items()
            if (u := self.side_uncertainty(side))
        )

    @property
    def area_uncertainty(self) -> float | None:
        """Relative standard uncertainty of S0, or None where no dimension's uncertainty is given."""
        shares = [power * u for u, power, _ in self.side_errors]
        return sum(share**2 for share in shares) ** 0.5 if shares else None


class Frames(Section):
    """Where the frames are and which clock they carry."""

    source: FileName
    rate: Rate | None = None
    times: FileName | None = None
    clock: Literal["tags", "names", "modified"] | None = None
    name_time: str | None = None
    start: Time = 0.0
    exposure: Duration | None = None
    reference: int | tuple[int, int] | None = None
    mosaic: Literal["RGGB", "BGGR", "GRBG", "GBRG"] | None = None

    @property
    def own_times(self) -> bool:
        """Whether the frames are those of a video, with the times that it gives them."""
        video = Path(self.source).suffix.lower() in VIDEO_ENDINGS
        return video and self.rate is None and self.times is None and self.clock is None

    @property
    def first_reference(self) -> int:
        """Frame that strain counts from, the first one where several are averaged."""
        return self.reference[0] if isinstance(self.reference, tuple) else self.reference or 0

    @model_validator(mode="after")
    def _one_clock(self) -> Frames:
        # A counter in the names needs a rate to become a time.
        counted = self.clock == "names" and "{frame}" in (self.name_time or "")
        if (self.clock == "names") != (self.name_time is not None):
            raise ValueError('clock = "names" and name_time belong together, and one is missing')
        if counted and self.rate is None:
            raise ValueError("{frame} in name_time counts frames, and needs rate beside it")
        given = [
            key
            for key in ("rate", "times", "clock")
            if getattr(self, key) is not None and not (key == "rate" and counted)
        ]
        if len(given) != 1 and not self.own_times:
            found = " and ".join(given) or "none"
            raise ValueError(f"give one of rate, times or clock (found {found})")
        return self


class LoadRecord(Section):
    """The testing machine's record: file, columns, units where the headers are silent."""

    source: FileName
    sheet: str | None = None
    decimal: Literal[".", ","] | None = None
    segment: Segment | None = None
    time: Column | None = None
    force: Column | None = None
    displacement: Column | None = None
    extensometer: Column | None = None
    extensometer_length: Length | None = None
    trigger: Column | None = None
    units: dict[str, Unit] = Field(default_factory=dict)
    tare: bool | Annotated[Time, Field(gt=0)] = False
    force_uncertainty: Fraction | None = None
    force_class: ForceClass | None = None

    @model_validator(mode="after")
    def _one_calibration(self) -> LoadRecord:
        if self.force_class is not None and self.force_uncertainty is not None:
            raise ValueError("give force_class or force_uncertainty, not both")
        return self

    @property
    def relative_uncertainty(self) -> float | None:
        """Relative standard uncertainty of the force, None where nothing is given.

        A machine of class c (ISO 7500-1) is false by at most c % [from memory]; within that any error is
        as likely as any other.
        """
        if self.force_class is not None:
            return self.force_class / 100 / sqrt(3)
        return self.force_uncertainty


class Gauge(Section):
    """Where strain is averaged."""

    axis: Axis = "auto"
    region: Literal["auto"] | tuple[float, float, float, float] = "auto"
    subsets: Literal["everywhere", "ends"] = "everywhere"
    length: Length | None = None

    @property
    def axis_angle(self) -> float | None:
        """Angle of the pull from the picture's vertical, deg clockwise as seen; None for ``auto``."""
        return axis_angle(self.axis)


class Correlation(Section):
    """How subsets are matched."""

    subset: int = Field(31, ge=9, le=201)
    step: int | None = Field(None, ge=1, le=200)
    shape: Literal["affine", "quadratic"] = "affine"
    spline: Literal["cubic", "quintic", "septic", "twofold"] = "twofold"
    smoothing: float = Field(0.5, ge=0, le=3)
    periodic: Literal["auto", "off"] = "auto"


class Maps(Section):
    """The local strain maps: window of the local fit in subsets across, the fit, what is drawn."""

    window: int = Field(5, ge=3, le=99)
    degree: Literal[1, 2] = 1
    weighting: Literal["even", "gaussian"] = "even"
    measure: Literal["engineering", "green_lagrange", "hencky"] = "engineering"

    @model_validator(mode="after")
    def _window_has_a_middle(self) -> Maps:
        if self.window % 2 == 0:
            raise ValueError(
                f"window must be odd, so that it has a middle subset; write {self.window - 1} or "
                f"{self.window + 1} in place of {self.window}"
            )
        return self


class Alignment(Section):
    """How much bending is allowed, by itself or as a standard's usual limit."""

    limit: Fraction | None = None
    standard: Literal["ASTM D3039", "ASTM E606", "ASTM E1012", "ISO 23788"] | None = None


class Sync(Section):
    """How the camera's clock is put on the machine's."""

    source: Literal["auto", "trigger", "absolute", "loading"] = "auto"
    offset: Literal["auto"] | Time = "auto"
    offset_uncertainty: Duration | None = None
    drift: Literal["auto"] | Annotated[float, Field(gt=-0.1, lt=0.1)] = "auto"

    @model_validator(mode="after")
    def _one_source(self) -> Sync:
        if self.offset != "auto" and self.source != "auto":
            raise ValueError("give offset or source, not both")
        if self.offset_uncertainty is not None and self.offset == "auto" and self.source != "absolute":
            raise ValueError('offset_uncertainty belongs to a given offset or to source = "absolute"')
        return self

    @property
    def assumed_drift(self) -> float:
        """The drift as given, or 0 as long as it is not found."""
        return 0.0 if self.drift == "auto" else self.drift
