"""Quantities with units, as people write them: ``"12.5 mm"`` to a float in internal units and back.

Internal units are mm, N, MPa, s, Hz, deg and mm/px; strain has none.  This is the only room that
converts, once, at the edge.
"""

from __future__ import annotations

import re
from functools import cache
from math import isfinite
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    import pint

#: Internal unit of each kind of quantity.
UNITS = {
    "length": "mm",
    "force": "N",
    "stress": "MPa",
    "time": "s",
    "rate": "Hz",
    "angle": "deg",
    "scale": "mm/px",
    "speed": "mm/s",
    "stiffness": "N/mm",
    "strain": "",
    "fraction": "",
}

#: An example of each kind, for messages.
EXAMPLES = {
    "length": "12.5 mm",
    "force": "4.2 kN",
    "stress": "120 MPa",
    "time": "1.25 s",
    "rate": "5 Hz",
    "angle": "2.5 deg",
    "scale": "0.021 mm/px",
    "speed": "2 mm/min",
    "stiffness": "20 kN/mm",
    "strain": "0.2 %",
    "fraction": "0.5 %",
}

_A = {kind: "an" if kind[0] in "aeiou" else "a" for kind in UNITS}

#: Spellings that testing machines write and pint does not know.
_SPELLINGS = {
    "kn": "kN",
    "mpa": "MPa",
    "gpa": "GPa",
    "sec": "s",
    "secs": "s",
    "µm/m": "ppm",
    "um/m": "ppm",
    "µε": "ppm",
    "ue": "ppm",
    "mm/mm": "dimensionless",
    "n/mm²": "N/mm**2",
    "n/mm2": "N/mm**2",
    "fps": "Hz",
    "°": "deg",
}


@cache
def registry() -> pint.UnitRegistry[Any]:
    """Return the one unit registry, built at first use because that takes a moment."""
    import pint

    return pint.UnitRegistry()


_QUANTITY = re.compile(r"\s*(?P<number>[-+]?(\d+(\.\d*)?|\.\d+)([eE][-+]?\d+)?)\s*(?P<unit>\S.*)?$")
#: No quantity is written longer, and the pattern's work grows faster than the text.
_LONGEST_QUANTITY = 60


def parse(written: str | float, kind: str) -> float:
    """Turn what a person wrote into a float in internal units.

    Parameters
    ----------
    written
        ``"12.5 mm"``, or a bare number, which is taken as being in the internal unit already.
    kind
        A key of `UNITS`.

    Returns
    -------
    float
        The value in ``UNITS[kind]``.

    Raises
    ------
    ValueError
        If the text is not a quantity of that kind; the message says what one looks like.
    """
    if isinstance(written, bool) or not isinstance(written, str | int | float):
        raise ValueError(f'{written!r} is not {_A[kind]} {kind}; write for example "{EXAMPLES[kind]}"')
    number, unit = _taken_apart(written, kind) if isinstance(written, str) else (float(written), None)
    value = number if unit is None else number * factor(unit, kind)
    if not isfinite(value):
        raise ValueError(f"'{written}' is not a finite {kind}; write for example \"{EXAMPLES[kind]}\"")
    return value


def _taken_apart(written: str, kind: str) -> tuple[float, str | None]:
    """Return number and unit of a quantity as written; the unit is None where there is none."""
    found = _QUANTITY.match(written) if len(written) <= _LONGEST_QUANTITY else None
    if found is not None and re.match(r",\d", found["unit"] or ""):
        raise ValueError(f"'{written}' has a decimal comma; write a point")
    if found is None:
        shown = written if len(written) <= _LONGEST_QUANTITY else f"{written[:_LONGEST_QUANTITY]} …"
        raise ValueError(f"'{shown}' is not {_A[kind]} {kind}; write for example \"{EXAMPLES[kind]}\"")
    return float(found["number"]), found["unit"]


#: Names joined by * and /, each with a one-digit exponent at most: what pint is given to evaluate must
#: not be able to grow.  Raised digits, which would be exponents too, count as letters of a name otherwise.
_NAME = r"[^\W\d_⁰¹²³⁴-⁹][^\W\d⁰¹²³⁴-⁹]*(?:(?:\^|\*\*)-?\d)?"
_UNIT = re.compile(rf"(?:1\s*/\s*)?{_NAME}(?:\s*[*/·]\s*{_NAME}|\s+{_NAME})*$")


def factor(unit: str, kind: str) -> float:
    """Return what one `unit` is worth in the internal unit of `kind`.

    Raises
    ------
    ValueError
        If the unit is unknown or measures something else.
    """
    import pint

    spelled = _SPELLINGS.get(unit.strip().lower(), unit.strip())
    # pint's own "px" is a printer's 1/96 inch; the camera's pixel is what it calls "pixel".
    spelled = re.sub(r"\bpx\b", "pixel", spelled.replace("²", "**2").replace("%", " percent ").strip())
    if len(spelled) > 40 or not _UNIT.match(spelled):
        raise ValueError(f"'{unit}' is not a unit; write for example \"{EXAMPLES[kind]}\"")
    try:
        return float(registry().Quantity(1.0, spelled).to(_target(kind)).magnitude)
    except (
        pint.errors.PintError,
        ValueError,
        TypeError,
        ArithmeticError,
        AttributeError,
        AssertionError,
    ) as error:
        raise ValueError(
            f"'{unit}' is not a unit of {kind}; write for example \"{EXAMPLES[kind]}\""
        ) from error


def measures(unit: str, kind: str) -> bool:
    """Tell whether a text is a unit of a kind of quantity."""
    try:
        factor(unit, kind)
    except ValueError:
        return False
    return True


def is_unit(text: str) -> bool:
    """Tell whether a text is a unit of any kind; one of a column's header is never longer than 20 letters."""
    return len(text) <= 20 and any(measures(text, kind) for kind in UNITS)


def _target(kind: str) -> str:
    return UNITS[kind].replace("px", "pixel") or "dimensionless"


_HEADER = re.compile(
    r"\s*(?P<name>.*?)\s*(?:\((?P<round>[^()]*)\)|\[(?P<square>[^\[\]]*)\]|\s*/\s*(?P<slash>[^\s/()\[\]]+)"
    r"|\sin\s+(?P<within>[^\s()\[\]]+)|,\s*(?P<comma>[^\s,()\[\]]+)|_(?P<tail>s|N|kN|mm))?\s*$"
)


def split_header(header: str) -> tuple[str, str | None]:
    """Split a column's header into name and unit.

    Understood are "Force (kN)", "Load [lbf]", "Kraft / N", "Kraft in N", "Force, N" and "time_s".

    Returns
    -------
    name, unit
        The unit is None where the header names none.
    """
    # No real header is longer, and the pattern's work grows faster than the text.
    found = _HEADER.match(header) if len(header) <= 200 else None
    if found is None:
        return header.strip(), None
    unit = next(filter(None, found.groups()[1:]), None)
    return found["name"], unit.strip() if unit else None


#: Strains of the sheet, which people read in percent; all moduli they read in GPa.
_PERCENT = ("yield_point_extension", "strain_at_maximum", "plastic_strain_at_maximum", "strain_at_break")


def for_people(value: float, unit: str, name: str = "") -> tuple[float, str]:
    """Return value and unit as a report shows them (moduli in GPa from 1 GPa up, strains in percent)."""
    if name in _PERCENT:
        return 100 * value, "%"
    if unit == "MPa" and ("_modulus" in name or name == "lame_constant") and abs(value) >= 1000:
        return value / 1000, "GPa"
    return value, unit
