"""Which column of a record holds what, and in which unit."""

from __future__ import annotations

import re
import unicodedata
from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path
from textwrap import shorten

from dic.errors import LoadRecordError, nearest
from dic.quantities import EXAMPLES, factor, is_unit, measures, split_header
from dic.tables import Table
from dic.testfile import Column

#: Kinds of unit that each quantity may have; the trigger has none.
KINDS: dict[str, tuple[str, ...]] = {
    "time": ("time",),
    "force": ("force",),
    "displacement": ("length",),
    "extensometer": ("strain", "length"),
    "trigger": (),
}

#: What headers call each quantity, in lower case without accents, as whole words.
_WORDS = {
    "time": "time zeit temps tiempo tempo tijd tid t elapsed prufzeit testzeit laufzeit messzeit "
    "uhrzeit timestamp zeitstempel hora heure ora czas",
    "force": "force load kraft last prufkraft messkraft zugkraft axialkraft fuerza "
    "carga carico forza effort charge kracht f sila loadcell",
    "displacement": "displacement crosshead traverse traversenweg weg prufweg stroke hub "
    "position extension deplacement course desplazamiento spostamento corsa traversa "
    "actuator elongation",
    "extensometer": "extensometer strain dehnung extensometre extensometro extenso clip deformation "
    "deformacion deformazione allungamento allongement langenanderung eps",
    "trigger": "trigger frame frames bild bilder kamera camera image ttl framecounter",
}
_KNOWN = {quantity: frozenset(words.split()) for quantity, words in _WORDS.items()}
#: Used where nothing else is called a time.
_DATES = frozenset({"date", "datum", "fecha", "data", "datetime"})


@dataclass(frozen=True)
class Header:
    """A column's header.

    Attributes
    ----------
    position
        The column, counted from 0.
    text
        As it stands in the file.
    name
        Without the unit.
    unit
        The unit below it or in it; None where there is none.
    other
        The unit in it, where one stands below it too.
    """

    position: int
    text: str
    name: str
    unit: str | None
    other: str | None = None

    @property
    def words(self) -> frozenset[str]:
        """The name's words in lower case, without accents and numbers."""
        plain = unicodedata.normalize("NFKD", self.name[:200].lower())
        plain = "".join(c for c in plain if not unicodedata.combining(c))
        return frozenset(re.findall(r"[^\W\d_]+", plain))

    def guess(self) -> str | None:
        """Return the quantity that name and unit stand for, if any."""
        if _is_clock_unit(self.unit):
            return "time"
        named = [q for q, words in _KNOWN.items() if self.words & words and self.fits(q)]
        if named:
            # "Strain time" would be odd, "extensometer displacement" is the extensometer's.
            order = ("trigger", "extensometer", "time", "force", "displacement")
            return min(named, key=order.index)
        if self.words & _DATES and self.unit is None:
            return "time"
        by_unit = [q for q in ("time", "force") if self.unit is not None and self.fits(q)]
        return by_unit[0] if by_unit else None

    def fits(self, quantity: str) -> bool:
        """Tell whether the unit, where there is one, is one of the quantity."""
        if self.unit is None or not is_unit(self.unit):
            return True
        if quantity == "trigger":
            return not any(measures(self.unit, kind) for kind in ("time", "force", "length"))
        return any(measures(self.unit, kind) for kind in KINDS[quantity])


def headers_of(table: Table) -> list[Header]:
    """Return a table's headers, taken apart into name and unit."""
    found = []
    for position, text in enumerate(table.headers):
        name, unit = split_header(text)
        if unit and text.endswith(unit) and not (is_unit(unit) or _is_clock_unit(unit)):
            name, unit = text, None  # "Date/Time"
        below = table.units[position] if position < len(table.units) else None
        found.append(Header(position, text, name, below or unit, unit if below else None))
    return found


def find_columns(
    table: Table, named: Mapping[str, Column | None], headers: list[Header]
) -> dict[str, Header]:
    """Return the column of each quantity: as named, and time and force by their headers if not named.

    Raises
    ------
    LoadRecordError
        If a named column is not there, or time or force cannot be told.
    """
    taken = {
        quantity: _numbered(table, quantity, column, headers)
        if isinstance(column, int)
        else _named(table, quantity, column.strip(), headers)
        for quantity, column in named.items()
        if column is not None
    }
    for quantity in ("time", "force"):
        if quantity not in taken:
            used = {header.position for header in taken.values()}
            taken[quantity] = _told(table, quantity, headers, used)
    return {quantity: taken[quantity] for quantity in KINDS if quantity in taken}


def _numbered(table: Table, quantity: str, number: int, headers: list[Header]) -> Header:
    """Return the column of this number, counted from 1."""
    if 1 <= number <= len(headers):
        return headers[number - 1]
    raise LoadRecordError(
        f"there is no column {number}, the file has {len(headers)} ({_shown(headers)})",
        where=_key(table, quantity),
        remedy="count from 1",
    )


def _named(table: Table, quantity: str, name: str, headers: list[Header]) -> Header:
    """Return the column with this header, with the unit or without."""
    found = [h for h in headers if h.text == name] or [h for h in headers if h.name == name]
    if found:
        return _only(table, quantity, found, f"'{name}' fits {len(found)} columns")
    _refuse_without_headers(table)
    hint = nearest(name, [header.text for header in headers])
    raise LoadRecordError(
        f"there is no column '{name}', only {_shown(headers)}",
        where=_key(table, quantity),
        remedy=hint if hint.endswith("?") else "name one of them, or give its number counted from 1",
    )


def _told(table: Table, quantity: str, headers: list[Header], used: set[int]) -> Header:
    """Return the one column whose header says that it is this quantity."""
    found = recognised(quantity, [header for header in headers if header.position not in used])
    if found:
        return _only(table, quantity, found, f"{len(found)} columns could be the {quantity}")
    _refuse_without_headers(table)
    raise LoadRecordError(
        f"no column can be told to be the {quantity} ({_shown(headers)})",
        where=_key(table, quantity),
        remedy=f"name it, or give its number, as load_record.{quantity}",
    )


def _only(table: Table, quantity: str, found: list[Header], several: str) -> Header:
    """Return the one column that was found, or raise with what is said of several."""
    if len(found) == 1:
        return found[0]
    raise LoadRecordError(
        f"{several}: {_shown(found)}",
        where=_key(table, quantity),
        remedy=f"say which, for example load_record.{quantity} = {found[0].position + 1}",
    )


def recognised(quantity: str, headers: list[Header]) -> list[Header]:
    """Return the columns that could hold a quantity; those that are called so, before others by unit."""
    there = [header for header in headers if header.guess() == quantity]
    return [header for header in there if header.words & _KNOWN[quantity]] or there


def _key(table: Table, quantity: str) -> str:
    return f"{table.path}, load_record.{quantity}"


def _shown(headers: list[Header]) -> str:
    """Return columns with their numbers, for messages."""
    return shorten(", ".join(f"{h.position + 1} '{h.text}'" for h in headers), 300, placeholder=" …")


def _refuse_without_headers(table: Table) -> None:
    if not any(table.headers):
        raise LoadRecordError(
            "has no line of column headers at its top",
            where=str(table.path),
            remedy="export it with headers, or give the columns' numbers and load_record.units",
        )


def refuse_stray_units(units: Mapping[str, str], headers: list[Header], path: Path) -> None:
    """Raise if a unit is given for something that is not there."""
    known = {*(h.text for h in headers), *(h.name for h in headers), *KINDS}
    for key in units:
        if key not in known:
            raise LoadRecordError(
                f"there is no column or quantity '{key}'",
                where=f"{path}, load_record.units",
                remedy=nearest(key, known),
            )


@dataclass(frozen=True)
class Unit:
    """A column's unit.

    Attributes
    ----------
    text
        As written.
    worth
        What one is in the internal unit.
    kind
        What it measures.
    """

    text: str
    worth: float
    kind: str


def unit_of(quantity: str, header: Header, units: Mapping[str, str], path: Path) -> Unit:
    """Return a column's unit, checked to be one of its quantity.

    Raises
    ------
    LoadRecordError
        If there is none, it is none of the quantity, or test file and header contradict each other.
    """
    given = next((units[key] for key in (header.text, header.name, quantity) if units.get(key)), None)
    where = f"{path}, column '{header.text}'"
    text = header.unit if given is None else given
    kinds = KINDS[quantity]
    if not text:
        raise LoadRecordError(
            "says no unit",
            where=where,
            remedy=f'add load_record.units = {{ {quantity} = "{EXAMPLES[kinds[0]].split()[-1]}" }}',
        )
    kind = next((kind for kind in kinds if measures(text, kind)), kinds[0])
    try:
        worth = _worth(text, kind)
    except ValueError as error:
        raise LoadRecordError(
            str(error),
            where=where,
            remedy=f"correct it, or give the right one as load_record.units.{quantity}",
        ) from error
    if given is None and _contradicts(header.other, worth, kind):
        raise LoadRecordError(
            f"the header says {header.other} but the row below it says {header.unit}",
            where=where,
            remedy=f"give the right one as load_record.units.{quantity}",
        )
    in_file = [unit for unit in (header.unit, header.other) if unit is not None]
    if given is not None and in_file and all(_contradicts(unit, worth, kind) for unit in in_file):
        raise LoadRecordError(
            f"the header says {header.unit} but load_record.units says {given}",
            where=where,
            remedy="remove the wrong one",
        )
    return Unit(text, worth, kind)


def _worth(unit: str, kind: str) -> float:
    """Return what one `unit` is worth in the internal unit of `kind`; a strain may be a bare number."""
    return 1.0 if kind == "strain" and unit.strip() in ("1", "-", "--") else factor(unit, kind)


def _is_clock_unit(unit: str | None) -> bool:
    return unit is not None and bool(re.fullmatch(r"(?:hh?:)?mm?:ss?(?:[.,]\w+)?", unit.lower()))


def _contradicts(in_header: str | None, worth: float, kind: str) -> bool:
    """Tell whether a header names another unit; a remark like "(filtered)" is no unit."""
    try:
        return in_header is not None and _worth(in_header, kind) != worth
    except ValueError:
        return False
