"""What a key's value may be: quantities with units, names of files and columns."""

from __future__ import annotations

from functools import partial
from typing import Annotated, Any, Literal

from pydantic import AfterValidator, BaseModel, BeforeValidator, ConfigDict, Field
from pydantic_core import PydanticCustomError

from dic.quantities import EXAMPLES, parse

#: No length in a picture is larger, px or mm.
LARGEST = 1e6
#: What the usual file systems allow.
LONGEST_NAME, LONGEST_PATH = 255, 1000


def quantity(kind: str) -> BeforeValidator:
    """Return the validator of a quantity that people may write with its unit."""
    return BeforeValidator(partial(_read_quantity, kind))


def _read_quantity(kind: str, written: Any) -> float:
    return parse(_filled_in(written, EXAMPLES[kind]), kind)


def _filled_in(written: Any, example: str) -> Any:
    """Return what was written unless it is blank, as `tauten new` leaves what only the user knows."""
    if isinstance(written, str) and not written.strip():
        raise PydanticCustomError("to_fill_in", "fill it in", {"example": example})
    return written


def in_px(written: str) -> float | None:
    """Return a length that is written in px, None where its unit is another."""
    text = written.strip()
    return float(text.removesuffix("px")) if text.endswith("px") else None


def _size(written: str) -> float:
    """Return how long a length in the picture is, in px or mm."""
    try:
        size = in_px(written)
    except ValueError:
        raise ValueError(f'\'{written}\' is not a length; write for example "120 px" or "5 mm"') from None
    size = parse(written, "length") if size is None else size
    if not abs(size) <= LARGEST:
        raise ValueError(f"'{written}' is far too long")
    return size


def _is_length(written: str) -> str:
    """Return a length in the picture as written, once it is known to be one."""
    _size(written)
    return written


def _is_positive_length(written: str) -> str:
    if not _size(written) > 0:
        raise ValueError(f"'{written}' is not longer than zero")
    return written


def axis_angle(written: str) -> float | None:
    """Return the angle of an axis from the picture's vertical, deg clockwise as seen; None for ``auto``."""
    named = {"auto": None, "vertical": 0.0, "horizontal": 90.0}
    return named[written] if written in named else parse(written, "angle")


def _is_axis(written: str) -> str:
    """Return an axis as written, once it is known to be one."""
    axis_angle(written)
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
#: A length in the picture, as written: in px or, by the scale, in mm.
Stretch = Annotated[str, AfterValidator(_is_length)]
#: The same of something that has a size; px where it is a number.
Size = Annotated[float, Field(gt=0, le=1e5)] | Annotated[str, AfterValidator(_is_positive_length)]
Axis = Annotated[str, AfterValidator(_is_axis)]
Column = Annotated[str | int, BeforeValidator(lambda written: _filled_in(written, "Force"))]
Segment = Annotated[
    Literal["all"] | Annotated[int, Field(ge=1)],
    BeforeValidator(lambda written: _filled_in(written, "all")),
]
Unit = Annotated[str, BeforeValidator(lambda written: _filled_in(written, "kN"))]


#: Classes of force measurement (ISO 7500-1 [from memory]).
FORCE_CLASSES = (0.5, 1, 2, 3)


def _is_force_class(written: float) -> float:
    if written not in FORCE_CLASSES:
        raise ValueError(f"ISO 7500-1 has no class {written:g}; its classes are 0.5, 1, 2 and 3")
    return written


ForceClass = Annotated[float, AfterValidator(_is_force_class)]


class Section(BaseModel):
    """A table of the test file: no key but the known ones, and nothing changes after reading."""

    model_config = ConfigDict(extra="forbid", frozen=True)
