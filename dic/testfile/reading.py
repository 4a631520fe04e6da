"""From a file to its model, or to one sentence that says what is wrong with it."""

from __future__ import annotations

import re
import tomllib
from collections.abc import Iterator, Mapping
from contextlib import suppress
from functools import partial
from pathlib import Path
from textwrap import shorten
from types import NoneType
from typing import Any, TypeVar, get_args, get_origin

from pydantic import BaseModel, BeforeValidator, ValidationError

from dic.errors import TestFileError, nearest
from dic.quantities import UNITS
from dic.testfile.sections import Frames
from dic.testfile.values import Section
from dic.testfile.whole import TestFile

#: A test file is a page of text; anything larger is something else.
MAX_BYTES = 1_000_000


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
        Each section that is right by itself, keys that are left blank set aside, under its name.

    Raises
    ------
    TestFileError
        If the file is missing or is not TOML.
    """
    content = _content(path)
    sections: dict[str, Section] = {}
    for name, field in TestFile.model_fields.items():
        if isinstance(model := field.annotation, type) and issubclass(model, Section) and name in content:
            said = _without_blanks(content[name])
            with suppress(ValidationError):
                sections[name] = model.model_validate(said)
            if model is Frames and name not in sections:
                with suppress(ValidationError, TypeError):  # only the clock may be missing
                    sections[name] = model.model_validate(said | {"rate": 1.0}).model_copy(
                        update={"rate": None}
                    )
    return sections


def _without_blanks(said: Any) -> Any:
    if not isinstance(said, dict):
        return said
    return {key: _without_blanks(value) for key, value in said.items() if value != ""}


def bare_quantities(path: Path) -> Iterator[str]:
    """Say which quantities are written without a unit, and which one they were taken to have.

    Parameters
    ----------
    path
        The test file.

    Raises
    ------
    TestFileError
        If the file is missing or is not TOML.
    """
    for name, said in _content(path).items():
        field = TestFile.model_fields.get(name)
        model = field.annotation if field else None
        if not (isinstance(said, dict) and isinstance(model, type) and issubclass(model, Section)):
            continue
        for key, written in said.items():
            unit = UNITS.get(_kind_of(model.model_fields[key]), "") if key in model.model_fields else ""
            with suppress(ValueError, TypeError):
                if unit and not isinstance(written, bool):
                    bare = f"{float(written):g}"
                    yield f"{name}.{key} has no unit, and {bare} was read as {bare} {unit}."


def _kind_of(field: Any) -> str:
    """Return the kind of quantity that a key holds; empty where it holds none."""
    parts = [field.annotation, *field.metadata]
    while parts:
        part = parts.pop()
        if isinstance(part, BeforeValidator) and isinstance(part.func, partial):
            return str(part.func.args[0])
        parts += get_args(part)
    return ""


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
    if what.startswith("Input should"):
        found = shorten(f"{first['input']}", 60, placeholder=" …")
        what = what.partition(", unable")[0].replace(
            "Input should be", f"'{found}' is not possible, it must be", 1
        )
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
