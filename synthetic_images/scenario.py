"""A virtual test's description (TOML) as a validated model; the only place that knows its keys."""

from __future__ import annotations

from pathlib import Path
from typing import Annotated, Literal

from pydantic import Field, model_validator

from dic import testfile
from dic.errors import TestFileError, nearest
from dic.testfile import Gauge, Properties, Section, quantity, read_toml
from synthetic_images.camera import Camera
from synthetic_images.materials import Elastic, Material, NeoHookean, RambergOsgood, YieldPoint
from synthetic_images.textures import Cosines, Dots, Photograph, Texture

_POSITIVE = Field(gt=0, allow_inf_nan=False)
_NOT_NEGATIVE = Field(ge=0, allow_inf_nan=False)
_ANY = Field(allow_inf_nan=False)
Length = Annotated[float, quantity("length"), _POSITIVE]
Travel = Annotated[float, quantity("length"), _NOT_NEGATIVE]
Force = Annotated[float, quantity("force"), _NOT_NEGATIVE]
Stress = Annotated[float, quantity("stress"), _POSITIVE]
Stiffness = Annotated[float, quantity("stiffness"), _POSITIVE]
PullSpeed = Annotated[float, quantity("speed"), _POSITIVE]
Drift = Annotated[float, quantity("speed"), _ANY]
Moment = Annotated[float, quantity("time"), _NOT_NEGATIVE]
Offset = Annotated[float, quantity("time"), _ANY]
Rate = Annotated[float, quantity("rate"), Field(gt=0, le=100_000)]
Angle = Annotated[float, quantity("angle"), Field(ge=-180, le=180)]
#: Virtual tests stretch to ten times the length at most; beyond that nothing stays in view.
Strain = Annotated[float, quantity("strain"), Field(gt=0, le=9)]
SmallStrain = Annotated[float, quantity("strain"), Field(ge=-0.2, le=0.2)]
SmallShare = Annotated[float, quantity("fraction"), Field(ge=0, le=0.2)]
Share = Annotated[float, quantity("fraction"), Field(ge=0, le=1)]
SignedShare = Annotated[float, quantity("fraction"), Field(ge=-0.5, le=0.5)]

#: Limits that keep a mistyped number from filling memory or disk: the first two bound one picture,
#: the third the folder of frames (20 GB at 8 bits).
MAX_SIDE = 10_000
MAX_PIXELS = 30_000_000
MAX_PIXELS_IN_ALL = 20_000_000_000
MAX_ROWS_OF_RECORD = 5_000_000


def _exactly(
    section: Section, chooser: str, choice: str, needed: set[str], known: set[str] | None = None
) -> None:
    """Check that a section has the keys that its choice needs, and no others."""
    known = known or needed
    given = {key for key in section.model_fields_set if key != chooser and getattr(section, key) is not None}
    if missing := sorted(needed - given):
        raise ValueError(f'{chooser} = "{choice}" needs {" and ".join(missing)}; add it')
    if foreign := sorted(given - known):
        raise ValueError(
            f'{foreign[0]} means nothing with {chooser} = "{choice}"; {nearest(foreign[0], known)}'
        )


class Specimen(testfile.Specimen):
    """The coupon as it truly is, and how well its section was measured."""

    label: str = "virtual coupon"
    material: str = "invented"

    @property
    def dimensions(self) -> tuple[str, ...]:
        """Names of what was measured with the calliper."""
        return ("diameter",) if self.shape == "round" else ("width", "thickness")


class MaterialLaw(Section):
    """The material's law and its constants; each law has its own keys."""

    law: Literal["elastic", "ramberg_osgood", "yield_point", "neo_hookean"]
    youngs_modulus: Stress | None = None
    poissons_ratio: float | None = Field(None, gt=-1, le=0.5)
    proof_stress: Stress | None = None
    exponent: float | None = Field(None, ge=1, le=200)
    shear_modulus: Stress | None = None
    upper_yield: Stress | None = None
    lower_yield: Stress | None = None
    saturation: Stress | None = None
    drop: Strain | None = None
    level: Strain | None = None
    hardening: Strain | None = None

    @model_validator(mode="after")
    def _constants_of_its_law(self) -> MaterialLaw:
        keys = {
            "elastic": {"youngs_modulus", "poissons_ratio"},
            "ramberg_osgood": {"youngs_modulus", "poissons_ratio", "proof_stress", "exponent"},
            "yield_point": {
                "youngs_modulus", "poissons_ratio", "upper_yield", "lower_yield", "saturation",
            },
            "neo_hookean": {"shear_modulus"},
        }  # fmt: skip
        optional = {"drop", "level", "hardening"} if self.law == "yield_point" else set()
        _exactly(self, "law", self.law, keys[self.law], keys[self.law] | optional)
        yields = (self.lower_yield, self.upper_yield, self.saturation)
        if self.upper_yield is not None and not sorted(set(yields), key=lambda one: one or 0) == [*yields]:
            raise ValueError("lower_yield, upper_yield and saturation have to grow in this order")
        return self

    def make(self) -> Material:
        """Return the material."""
        constants = self.model_dump(exclude={"law"}, exclude_none=True)
        if self.law == "elastic":
            return Elastic(**constants)
        if self.law == "ramberg_osgood":
            return RambergOsgood(**constants)
        if self.law == "yield_point":
            return YieldPoint(**constants)
        return NeoHookean(**constants)


class TextureLook(Section):
    """The texture; sizes in px of the reference picture."""

    kind: Literal["dots", "cosines", "photograph"] = "dots"
    diameter: float | None = Field(None, ge=1, le=200)
    cover: float | None = Field(None, ge=0.02, le=0.98)
    edge: float | None = Field(None, ge=0.05, le=20)
    feature: float | None = Field(None, ge=1, le=200)
    photograph: Literal["gravel", "brick", "grass"] | None = None
    magnification: float | None = Field(None, ge=0.5, le=50)

    @model_validator(mode="after")
    def _keys_of_its_kind(self) -> TextureLook:
        keys = {
            "dots": {"diameter", "cover", "edge"},
            "cosines": {"feature"},
            "photograph": {"photograph", "magnification"},
        }
        needed = keys[self.kind] & {"photograph"}
        _exactly(self, "kind", self.kind, needed, keys[self.kind])
        return self

    def make(self, area: tuple[float, float], seed: int) -> Texture:
        """Return the texture, whose realisation covers an area (width, height), px."""
        given = self.model_dump(exclude={"kind", "photograph"}, exclude_none=True)
        if self.kind == "dots":
            return Dots(**given, area=area, seed=seed)
        if self.photograph is not None:
            return Photograph.named(self.photograph, **given)
        return Cosines(**given, seed=seed)


class View(Section):
    """What the picture shows; its middle sees the middle of the coupon at the start."""

    rows: int = Field(1100, ge=32, le=MAX_SIDE)
    columns: int = Field(320, ge=32, le=MAX_SIDE)
    coupon_width: float = Field(250.0, ge=16, le=MAX_SIDE)
    axis_angle: Angle = 0.0
    background: float = Field(0.1, ge=0, le=1)

    @model_validator(mode="after")
    def _fits(self) -> View:
        if self.rows * self.columns > MAX_PIXELS:
            raise ValueError(f"the picture is larger than {MAX_PIXELS} px; lower rows or columns")
        return self


class CameraLook(Section):
    """The camera: its clock, its grey values and its faults."""

    frames: int = Field(70, ge=3, le=20_000)
    rate: Rate = 5.0
    offset: Offset = 0.0
    bits: int = Field(8, ge=8, le=16)
    black: Share = 0.10
    white: Share = 0.85
    noise: SmallShare = 0.01
    dark_noise: float = Field(0.0, ge=0, le=10_000)
    gain: float = Field(0.0, ge=0, le=1000)
    blur: float = Field(0.0, ge=0, le=1)
    samples: int = Field(3, ge=1, le=9)
    vignette: Share = 0.0
    gradient: SignedShare = 0.0
    drift: SignedShare = 0.0

    def make(self) -> Camera:
        """Return the camera."""
        return Camera(**self.model_dump(exclude={"frames", "rate", "offset"}))


class Machine(Section):
    """The testing machine and how the coupon sits in it."""

    free_length: Length
    speed: PullSpeed
    start: Moment = 2.0
    stiffness: Stiffness = 20_000.0
    slack: Travel = 0.0
    seating_force: Force = 0.0
    lower_share: Share = 0.4
    sideways: Drift = 0.0
    bending: SignedShare = 0.0
    fracture_strain: Strain | None = None


class Record(Section):
    """The load record and the faults of its transducers."""

    rate: Rate = 50.0
    force_noise: Force = 0.0
    force_uncertainty: SmallShare = 0.0
    crosshead_noise: Travel = 0.0
    extensometer_gain: float | None = Field(None, gt=0, le=10)
    extensometer_offset: SmallStrain = 0.0
    extensometer_noise: SmallShare = 0.0
    extensometer_length: Length | None = None
    extensometer_removed: Strain | None = None

    @model_validator(mode="after")
    def _extensometer_is_there(self) -> Record:
        given = [key for key in self.model_fields_set if key.startswith("extensometer_")]
        if given and self.extensometer_gain is None:
            raise ValueError(f"{given[0]} needs extensometer_gain; add it (1 for a true one)")
        return self


class Scenario(Section):
    """A whole virtual test; every number in it is invented."""

    seed: int = Field(1, ge=0, lt=2**63)
    specimen: Specimen
    material: MaterialLaw
    machine: Machine
    texture: TextureLook = TextureLook()
    view: View = View()
    camera: CameraLook = CameraLook()
    load_record: Record = Record()
    gauge: Gauge | None = None  # this and the next stand in the test file as they are here
    properties: Properties | None = None

    @model_validator(mode="after")
    def _fits_together(self) -> Scenario:
        if self.view.rows * self.view.columns * self.camera.frames > MAX_PIXELS_IN_ALL:
            raise ValueError("the frames would fill more than 20 GB; lower rows, columns or frames")
        material = self.material.make()
        if isinstance(material, YieldPoint):
            falls = (material.upper_yield - material.lower_yield) * self.specimen.area
            falls /= self.machine.stiffness
            if falls >= material.drop * self.machine.free_length:
                raise ValueError(
                    "the machine's spring gives back more than the coupon takes up in the yield point's "
                    "drop; raise machine.stiffness or material.drop"
                )
        if self.record_end <= 0:
            raise ValueError("the camera stops before the machine's clock starts; raise camera.offset")
        if self.record_end * self.load_record.rate > MAX_ROWS_OF_RECORD:
            raise ValueError(
                f"the load record would be longer than {MAX_ROWS_OF_RECORD} rows; lower its rate"
            )
        return self

    @property
    def record_end(self) -> float:
        """When the load record ends, on the machine's clock, s: one frame after the last one."""
        return self.camera.offset + self.camera.frames / self.camera.rate

    @property
    def scale(self) -> float:
        """True scale, mm/px."""
        return self.specimen.visible_width / self.view.coupon_width


def load_scenario(path: str | Path) -> Scenario:
    """Read and check a scenario.

    Parameters
    ----------
    path
        A TOML file, or the name of a scenario that is shipped (see `scenarios`).

    Raises
    ------
    TestFileError
        If there is no such file, it is not TOML, or a key or value is not understood.
    """
    shipped = scenarios()
    if str(path) in shipped and not Path(path).is_file():
        path = shipped[str(path)]
    elif not Path(path).exists():
        raise TestFileError(
            "is neither a file nor a shipped scenario", where=str(path), remedy=nearest(str(path), shipped)
        )
    return read_toml(Path(path), Scenario)


def scenarios() -> dict[str, Path]:
    """List the shipped scenarios, all of them invented: name and file."""
    folder = Path(__file__).parent / "scenarios"
    return {path.stem: path for path in sorted(folder.glob("*.toml"))}
