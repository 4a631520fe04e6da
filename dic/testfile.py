"""One test's description (TOML) as a validated model; the only place that knows its keys."""

from __future__ import annotations

import re
import tomllib
from collections.abc import Mapping
from contextlib import suppress
from math import pi, sqrt
from pathlib import Path
from textwrap import shorten
from types import NoneType
from typing import Annotated, Any, Literal, TypeVar, get_args, get_origin

from pydantic import (
    AfterValidator,
    BaseModel,
    BeforeValidator,
    ConfigDict,
    Field,
    ValidationError,
    model_validator,
)
from pydantic_core import PydanticCustomError

from dic.errors import TestFileError, nearest
from dic.quantities import EXAMPLES, parse

#: A test file is a page of text; anything larger is something else.
MAX_BYTES = 1_000_000
#: What the usual file systems allow.
LONGEST_NAME, LONGEST_PATH = 255, 1000
#: Files that bring their own frame times.
VIDEO_ENDINGS = (".avi", ".mp4", ".mov", ".mkv")


def quantity(kind: str) -> BeforeValidator:
    """Return the validator of a quantity that people may write with its unit."""
    return BeforeValidator(lambda written: parse(_filled_in(written, EXAMPLES[kind]), kind))


def _filled_in(written: Any, example: str) -> Any:
    """Return what was written unless it is blank, as `tauten new` leaves what only the user knows."""
    if isinstance(written, str) and not written.strip():
        raise PydanticCustomError("to_fill_in", "fill it in", {"example": example})
    return written


def in_px(written: str) -> float | None:
    """Return a length that is written in px, None where its unit is another."""
    text = written.strip()
    return float(text.removesuffix("px")) if text.endswith("px") else None


def _is_length(written: str) -> str:
    """Return a length in the picture as written, once it is known to be one."""
    try:
        size = in_px(written)
    except ValueError:
        raise ValueError(f'\'{written}\' is not a length; write for example "120 px" or "5 mm"') from None
    size = parse(written, "length") if size is None else size
    if not abs(size) <= MAX_BYTES:
        raise ValueError(f"'{written}' is far too long")
    return written


def _is_positive_length(written: str) -> str:
    size = in_px(_is_length(written))
    if not (parse(written, "length") if size is None else size) > 0:
        raise ValueError(f"'{written}' is not longer than zero")
    return written


def _is_name(written: str) -> str:
    """Return what was written if a file or a column could be called so."""
    if any(ord(letter) < ord(" ") or letter == "\x7f" for letter in written):
        raise ValueError("holds a control character, which no name does")
    if any(len(part.encode()) > LONGEST_NAME for part in written.replace("\\", "/").split("/")):
        raise ValueError(f"holds a name of more than {LONGEST_NAME} bytes")
    if len(written) > LONGEST_PATH:
        raise ValueError(f"is longer than {LONGEST_PATH} characters")
    return written


Length = Annotated[float, quantity("length"), Field(gt=0, allow_inf_nan=False)]
Time = Annotated[float, quantity("time"), Field(allow_inf_nan=False)]
Duration = Annotated[float, quantity("time"), Field(gt=0, allow_inf_nan=False)]
Rate = Annotated[float, quantity("rate"), Field(gt=0, allow_inf_nan=False)]
Scale = Annotated[float, quantity("scale"), Field(gt=0, allow_inf_nan=False)]
Fraction = Annotated[float, quantity("fraction"), Field(ge=0, lt=1)]
Strain = Annotated[float, quantity("strain"), Field(allow_inf_nan=False)]
Stress = Annotated[float, quantity("stress"), Field(allow_inf_nan=False)]
FileName = Annotated[
    str, BeforeValidator(lambda written: _filled_in(written, "frames")), AfterValidator(_is_name)
]
Column = Annotated[str | int, BeforeValidator(lambda written: _filled_in(written, "Force"))]
Segment = Annotated[
    Literal["all"] | Annotated[int, Field(ge=1)],
    BeforeValidator(lambda written: _filled_in(written, "all")),
]
#: Classes of force measurement (ISO 7500-1 [from memory]).
FORCE_CLASSES = (0.5, 1, 2, 3)
Unit = Annotated[str, BeforeValidator(lambda written: _filled_in(written, "kN"))]


def _is_force_class(written: float) -> float:
    if written not in FORCE_CLASSES:
        raise ValueError(f"ISO 7500-1 has no class {written:g}; its classes are 0.5, 1, 2 and 3")
    return written


class Section(BaseModel):
    """A table of the test file: no key but the known ones, and nothing changes after reading."""

    model_config = ConfigDict(extra="forbid", frozen=True)


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
        flat, circular = ("width", "thickness"), ("diameter",)
        needed, foreign = (circular, flat) if self.shape == "round" else (flat, circular)
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
    def area(self) -> float:
        """Original cross-section S0, mm²."""
        if self.shape == "round":
            return pi * self.visible_width**2 / 4
        assert self.thickness is not None  # noqa: S101  (validated above)
        return self.visible_width * self.thickness

    @property
    def visible_width(self) -> float:
        """Width (or diameter) that the camera sees, mm."""
        seen = self.width if self.shape == "flat" else self.diameter
        assert seen is not None  # noqa: S101  (validated above)
        return seen

    def side_uncertainty(self, side: str) -> float | None:
        """Return a dimension's standard uncertainty, mm; for want of another the calliper's.

        A reading lies anywhere within half a digit (JCGM 100:2008, F.2.2.1).
        """
        given: float | None = getattr(self, f"{side}_uncertainty")
        if given is None and self.calliper_resolution is not None:
            return self.calliper_resolution / sqrt(12)
        return given

    @property
    def area_uncertainty(self) -> float | None:
        """Relative standard uncertainty of S0, or None where no dimension's uncertainty is given."""
        parts = [
            (self.width, self.side_uncertainty("width"), 1),
            (self.thickness, self.side_uncertainty("thickness"), 1),
            (self.diameter, self.side_uncertainty("diameter"), 2),
        ]
        shares = [power * u / value for value, u, power in parts if value and u]
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
    force_class: Annotated[float, AfterValidator(_is_force_class)] | None = None

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


Picture = Annotated[float, Field(ge=-1e6, le=1e6)]


class Marks(Section):
    """Two marks on the coupon's face whose distance is known."""

    start: tuple[Picture, Picture] = Field(alias="from")
    end: tuple[Picture, Picture] = Field(alias="to")
    distance: Length
    uncertainty: Length | None = None


class Board(Section):
    """Pictures of a chessboard or ChArUco board, lengths in mm, columns and rows in squares."""

    source: FileName
    kind: Literal["chessboard", "charuco"] = "chessboard"
    columns: int = Field(ge=3, le=100)
    rows: int = Field(ge=3, le=100)
    square: Length
    marker: Length | None = None
    dictionary: str | None = None
    plane: FileName | None = None

    @model_validator(mode="after")
    def _markers_where_there_are_some(self) -> Board:
        if self.kind == "charuco" and (self.marker is None or self.dictionary is None):
            raise ValueError('a ChArUco board needs marker = "3.5 mm" and dictionary = "4X4_50"; add them')
        if self.kind == "chessboard" and (self.marker or self.dictionary):
            raise ValueError('marker and dictionary belong to kind = "charuco"; remove them or say so')
        if self.marker is not None and not self.marker < self.square:
            raise ValueError("marker must be smaller than square")
        known = [f"{n}X{n}_{count}" for n in (4, 5, 6, 7) for count in (50, 100, 250, 1000)]
        if self.dictionary is not None and self.dictionary not in known:
            said = shorten(self.dictionary, 30, placeholder=" …")
            raise ValueError(f"'{said}' is no dictionary of markers; {nearest(said, known)}")
        return self


Coefficient = Annotated[float, Field(ge=-1e3, le=1e3)]


class Distortion(Section):
    """Brown and Conrady's coefficients, and what they refer to, px."""

    focal: Annotated[float, Field(gt=0, le=1e6)]
    centre: tuple[Picture, Picture] | None = None
    k1: Coefficient = 0.0
    k2: Coefficient = 0.0
    p1: Coefficient = 0.0
    p2: Coefficient = 0.0
    k3: Coefficient = 0.0


#: False strain per mm of motion, as a telecentric lens was measured to have: 25 µm/m per mm (Sutton et al.
#: 2008, doi 10.1016/j.optlaseng.2008.05.005 [from memory]).
TELECENTRIC = 25e-6


def _per_mm(written: Any) -> Any:
    """Return a false strain per mm of motion from ``"25 µm/m per mm"``; `true` and `false` as they are."""
    if not isinstance(written, str):
        return written
    strain, per, length = written.rpartition(" per ")
    if not per or length.strip() != "mm":
        raise ValueError(f"'{written}' is not a strain per mm; write for example \"25 µm/m per mm\"")
    false = parse(strain, "strain")
    if not 0 <= false <= 1:
        raise ValueError(f"'{written}' is no false strain of a lens; write for example \"25 µm/m per mm\"")
    return false


class Camera(Section):
    """Scale, lens, and what moves towards the camera."""

    scale: Scale | None = None
    scale_uncertainty: Fraction | None = None
    marks: Marks | None = None
    board: Board | None = None
    distortion: Distortion | None = None
    stand_off: Length | None = None
    telecentric: Annotated[bool | Annotated[float, Field(ge=0, le=1)], BeforeValidator(_per_mm)] = False
    out_of_plane: Length | None = None
    still_patch: tuple[Picture, Picture, Picture, Picture] | None = None
    thinning: Literal["auto", "off"] = "auto"

    @model_validator(mode="after")
    def _one_lens(self) -> Camera:
        if self.board is not None and self.distortion is not None:
            raise ValueError("give board or distortion, not both")
        if self.out_of_plane is not None and self.stand_off is None and self.telecentric is False:
            raise ValueError("out_of_plane needs stand_off (the coupon's distance) or telecentric beside it")
        return self

    @property
    def false_strain_per_mm(self) -> float | None:
        """False strain per mm of motion towards the camera; None where it is unknown."""
        if self.telecentric is not False:
            return TELECENTRIC if self.telecentric is True else self.telecentric
        return None if self.stand_off is None else 1.0 / self.stand_off


class CouponSection(Section):
    """Where the coupon is in the reference picture, as far as it is said instead of found, px."""

    edges: (
        tuple[tuple[Picture, Picture, Picture, Picture], tuple[Picture, Picture, Picture, Picture]] | None
    ) = None
    mask: str | None = None
    holes: Annotated[tuple[tuple[Picture, Picture, Picture], ...], Field(max_length=100)] = ()
    parallel: tuple[Picture, Picture, Picture, Picture] | None = None


class Gauge(Section):
    """Where strain is averaged."""

    axis: str = "auto"
    region: Literal["auto"] | tuple[float, float, float, float] = "auto"
    subsets: Literal["everywhere", "ends"] = "everywhere"
    length: Length | None = None

    @model_validator(mode="after")
    def _axis_is_known(self) -> Gauge:
        self.axis_angle  # noqa: B018  (raises when it cannot be read)
        return self

    @property
    def axis_angle(self) -> float | None:
        """Angle of the pull from the picture's vertical, deg clockwise as seen; None for ``auto``."""
        named = {"auto": None, "vertical": 0.0, "horizontal": 90.0}
        if self.axis in named:
            return named[self.axis]
        return parse(self.axis, "angle")


Pixels = Annotated[float, Field(ge=-1e5, le=1e5, allow_inf_nan=False)]
Share = Annotated[float, Field(ge=0, le=1)]
#: A length in the picture: px where it is a number or says so, else mm by the scale.
Size = Annotated[float, Field(gt=0, le=1e5)] | Annotated[str, AfterValidator(_is_positive_length)]
Stretch = Annotated[str, AfterValidator(_is_length)]
#: A place: x and y in the reference picture, px; or, as lengths in quotes, across and along the coupon from
#: the middle of the gauge region.
Place = tuple[Pixels, Pixels] | tuple[Stretch, Stretch]

#: Keys of the named gauges by kind: those needed, and further ones.
GAUGE_KEYS: dict[str, tuple[set[str], set[str]]] = {
    "extensometer": (set(), {"length", "centre", "angle", "width", "from", "to"}),
    "area": (set(), {"region", "points", "component"}),
    "transverse": (set(), {"stations", "length", "width"}),
    "points": ({"from", "to"}, set()),
    "line": ({"from", "to"}, {"length", "width"}),
    "edge_width": (set(), {"centre", "length"}),
}


class NamedGauge(Section):
    """One of the named gauges; each kind has its own keys."""

    kind: Literal["extensometer", "area", "transverse", "points", "line", "edge_width"]
    length: Size | None = None
    width: Size | None = None
    centre: Place | None = None
    angle: Annotated[float, quantity("angle"), Field(ge=-360, le=360)] | None = None
    start: Place | None = Field(None, alias="from")
    end: Place | None = Field(None, alias="to")
    region: tuple[Pixels, Pixels, Pixels, Pixels] | None = None
    points: Annotated[tuple[tuple[Pixels, Pixels], ...], Field(min_length=3, max_length=1000)] | None = None
    component: Literal["axial", "transverse", "shear"] | None = None
    stations: Annotated[tuple[Share | Stretch, ...], Field(min_length=1, max_length=100)] | None = None

    @model_validator(mode="after")
    def _keys_of_its_kind(self) -> NamedGauge:
        alias = {"start": "from", "end": "to"}
        given = {alias.get(key, key) for key in self.model_fields_set - {"kind"}}
        needed, further = GAUGE_KEYS[self.kind]
        if missing := sorted(needed - given):
            raise ValueError(f'a gauge of kind "{self.kind}" needs {" and ".join(missing)}; add it')
        if foreign := sorted(given - needed - further):
            raise ValueError(
                f'{foreign[0]} means nothing for kind "{self.kind}"; {nearest(foreign[0], needed | further)}'
            )
        placed_twice = self.kind == "extensometer" and {"centre", "angle", "length"} & given
        if ("from" in given) != ("to" in given) or ("from" in given and placed_twice):
            raise ValueError("give from and to together, without length, centre and angle")
        if self.region is not None and self.points is not None:
            raise ValueError("give region or points, not both")
        return self


GaugeName = Annotated[str, Field(pattern=r"^[A-Za-z][A-Za-z0-9_]{0,39}$")]


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


class ModulusWindow(Section):
    """Window of the modulus, in strain or in stress, and how it is read from there."""

    kind: Literal["regression", "chord", "tangent", "secant"] = "regression"
    strain: tuple[Strain, Strain] | None = None
    stress: tuple[Stress, Stress] | None = None

    @model_validator(mode="after")
    def _one_window(self) -> ModulusWindow:
        given = [window for window in (self.strain, self.stress) if window is not None]
        if len(given) != 1 or not given[0][0] < given[0][1]:
            raise ValueError("give one of strain = [low, high] or stress = [low, high], low before high")
        if self.kind == "secant" and 0 not in given[0]:
            raise ValueError("a secant starts from zero; write for example strain = [0, 0.0025]")
        return self


#: What each preset sets where the test file says nothing else, and the standard that it follows.
PRESETS: dict[str, tuple[str, dict[str, Any]]] = {
    "metals": ("ISO 6892-1", {"modulus": "auto", "proof": [0.002]}),
    "plastics": ("ISO 527-1", {"modulus": {"strain": [0.0005, 0.0025]}, "proof": []}),
    "fibre composites": (
        "ASTM D3039",
        {"modulus": {"kind": "chord", "strain": [0.001, 0.003]}, "proof": []},
    ),
}


class Properties(Section):
    """What is evaluated, and in which windows."""

    preset: Literal["metals", "plastics", "fibre composites"] | None = None
    modulus: Literal["auto"] | ModulusWindow = "auto"
    proof: tuple[Strain, ...] = (0.002,)
    toe: Literal["auto"] | bool = "auto"
    preload: str | None = None
    hardening: Literal["auto"] | tuple[Strain, Strain] = "auto"
    true_stress: Literal["constant volume", "transverse strain"] = "constant volume"

    @model_validator(mode="before")
    @classmethod
    def _preset_first(cls, given: Any) -> Any:
        chosen = given.get("preset") if isinstance(given, dict) else None
        return PRESETS[chosen][1] | given if isinstance(chosen, str) and chosen in PRESETS else given

    @model_validator(mode="after")
    def _windows_and_preload_can_be_meant(self) -> Properties:
        self.preload_stress(1.0)
        if self.hardening != "auto" and not 0 < self.hardening[0] < self.hardening[1]:
            raise ValueError("hardening needs two strains above zero, low before high")
        return self

    def preload_stress(self, area_mm2: float) -> float | None:
        """Return the preload as stress over a section, MPa; None where none is given."""
        if self.preload is None:
            return None
        try:
            force = parse(self.preload, "force")
        except ValueError:
            return parse(self.preload, "stress")
        return force / area_mm2

    @property
    def modulus_source(self) -> str:
        """Who asked for the modulus' window."""
        if self.preset is None or self.modulus == "auto":
            return "as given"
        standard, keys = PRESETS[self.preset]
        own = keys["modulus"] != "auto" and ModulusWindow(**keys["modulus"]) == self.modulus
        return f"{standard}, preset {self.preset}" if own else "as given"


class TestFile(Section):
    """A whole test as described by the user."""

    __test__ = False

    specimen: Specimen
    frames: Frames
    load_record: LoadRecord
    camera: Camera = Camera()
    coupon: CouponSection = CouponSection()
    gauge: Gauge = Gauge()
    gauges: dict[GaugeName, NamedGauge] = Field(default_factory=dict, max_length=100)
    correlation: Correlation = Correlation()
    maps: Maps = Maps()
    alignment: Alignment = Alignment()
    sync: Sync = Sync()
    properties: Properties = Properties()
    path: Path = Field(default=Path("test.toml"), exclude=True)

    @property
    def follows_edges(self) -> bool:
        """Whether the width between the coupon's edges is wanted in every frame."""
        named = any(gauge.kind == "edge_width" for gauge in self.gauges.values())
        return named or self.specimen.shape == "round"

    def beside(self, name: str) -> Path:
        """Return the path of a file that the test file names relative to itself."""
        return self.path.parent / name

    def inputs(self) -> list[Path]:
        """List the files and folders that the test is read from, whether they exist or not."""
        frames = self.beside(self.frames.source)
        named = [self.path, self.beside(self.load_record.source), frames, frames.parent]
        board = self.camera.board
        pictures = () if board is None else (board.source, board.plane)
        others = (self.frames.times, self.coupon.mask, *pictures)
        return named + [self.beside(name) for name in others if name]


Model = TypeVar("Model", bound=BaseModel)


def load(path: str | Path) -> TestFile:
    """Read and check a test file.

    Parameters
    ----------
    path
        The TOML file.

    Returns
    -------
    TestFile
        The description, all quantities in internal units.

    Raises
    ------
    TestFileError
        If the file is missing, is not TOML, or has a key or value that is not understood.
    """
    path = Path(path)
    return read_toml(path, TestFile).model_copy(update={"path": path})


def read_toml(path: Path, model: type[Model]) -> Model:
    """Read a TOML file into a validated model.

    Raises
    ------
    TestFileError
        One sentence about the first thing that is wrong, with its key.
    """
    try:
        return model.model_validate(_content(path))
    except ValidationError as error:
        raise _explain(error, model, path) from error


def _content(path: Path) -> dict[str, Any]:
    try:
        if path.exists() and not path.is_file():  # a pipe or a device may have no end
            raise TestFileError("is not a file", where=str(path), remedy="name the test file itself")
        if path.stat().st_size > MAX_BYTES:
            raise TestFileError("is far too large for a description", where=str(path))
        return tomllib.loads(path.read_text(encoding="utf-8-sig"))
    except OSError as error:
        raise TestFileError(
            f"cannot be read ({error.strerror})", where=str(path), remedy="check the path"
        ) from error
    except (tomllib.TOMLDecodeError, UnicodeDecodeError) as error:
        raise TestFileError(
            f"is not valid TOML ({error})", where=str(path), remedy="correct it there"
        ) from error
    except (ValueError, RecursionError) as error:  # the parser lets these pass
        raise TestFileError(
            "is not valid TOML (a number, a date or the nesting is out of range)", where=str(path)
        ) from error


def sound_sections(path: Path) -> dict[str, Section]:
    """Read what can be read of a test file whose sections are not all right yet.

    Returns
    -------
    dict
        Each section that is right by itself, under its name.

    Raises
    ------
    TestFileError
        If the file is missing or is not TOML.
    """
    content = _content(path)
    sections: dict[str, Section] = {}
    for name, field in TestFile.model_fields.items():
        if isinstance(model := field.annotation, type) and issubclass(model, Section) and name in content:
            with suppress(ValidationError):
                sections[name] = model.model_validate(content[name])
    return sections


#: A mistyped key also makes the right one missing, and a choice complains of every alternative.
_TELLING = {"extra_forbidden": 0, "to_fill_in": 1, "value_error": 2, "literal_error": 4}


def _explain(error: ValidationError, model: type[BaseModel], path: Path) -> TestFileError:
    """Turn pydantic's most telling complaint into one sentence in the user's terms."""
    said = error.errors(include_url=False)
    first = min(said, key=lambda one: _TELLING.get(one["type"], 3))
    *sections, key = [shorten(part, 60, placeholder=" …") for part in _keys(first)] or [""]
    where = f"{path}, [{'.'.join(sections) or key}]"
    if first["type"] == "extra_forbidden":
        known = _keys_at(model, sections)
        return TestFileError(f"'{key}' is not a key of this file", where=where, remedy=nearest(key, known))
    if first["type"] == "to_fill_in":
        blank = list(dict.fromkeys(".".join(_keys(one)) for one in said if one["type"] == "to_fill_in"))
        listed = " and ".join(filter(None, [", ".join(blank[:-1]), blank[-1]]))
        example = f'for example {key} = "{first["ctx"]["example"]}"'
        return TestFileError(f"fill in {listed}", where=str(path), remedy=example)
    if first["type"] == "missing" and isinstance(first["loc"][-1], int):
        return TestFileError(f"{key}: a number is missing in the list", where=where, remedy="add it")
    if first["type"] == "missing":
        kind = "key" if sections else "section"
        return TestFileError(f"the {kind} '{key}' is missing", where=where, remedy="add it")
    what = first["msg"].removeprefix("Value error, ")
    what = what[:1].lower() + what[1:] if not what.startswith("'") else what
    return TestFileError(f"{key}: {what}" if sections else what, where=where)


#: What pydantic calls the kinds of value that a key may have.
_KIND = re.compile(r"(int|str|bool|float|ModulusWindow|.*[(\[].*[)\]]|constrained-.*)$", re.DOTALL)


def _keys(complaint: Mapping[str, Any]) -> list[str]:
    """Return the keys that lead to what is complained of, without kinds of value and places in a list."""
    parts = [part for part in complaint["loc"] if isinstance(part, str)]
    return parts[:2] + [part for part in parts[2:] if not _KIND.match(part)]


def _keys_at(model: type[BaseModel], sections: list[str]) -> list[str]:
    """List the keys that a section knows, walking down the models by name."""
    steps = iter(sections)
    for section in steps:
        field = model.model_fields.get(section)
        inner = field.annotation if field else None
        if get_origin(inner) is dict:
            inner = get_args(inner)[1]
            next(steps, None)  # the name that the user chose
        # Of a section that may be left out, the section.
        inner = next((one for one in get_args(inner) if isinstance(one, type) and one is not NoneType), inner)
        if not (isinstance(inner, type) and issubclass(inner, BaseModel)):
            break
        model = inner
    return [field.alias or name for name, field in model.model_fields.items() if not field.exclude]
