"""The sections on the camera and on the coupon in its picture."""

from __future__ import annotations

from textwrap import shorten
from typing import Annotated, Any, Literal

from pydantic import BeforeValidator, Field, model_validator

from dic.errors import nearest
from dic.quantities import parse
from dic.testfile.values import FileName, Fraction, Length, Scale, Section

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
