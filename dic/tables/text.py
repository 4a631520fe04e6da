"""From the bytes of a text file to its lines: encoding, line ends, and what is no text at all."""

from __future__ import annotations

import codecs
import re
from dataclasses import dataclass

from dic.errors import InputError

#: Most columns that a record has, by far.
MOST_COLUMNS = 1000
#: Longest line of such a table.
MOST_CHARACTERS = 20 * MOST_COLUMNS
#: Lines cost memory even where they are blank.
MOST_LINES = 2_000_000
#: An hour of five columns at 200 Hz, and more.  A cell costs some 200 bytes on its way to a number.
MOST_CELLS = 4_000_000
#: Lines that a quoted cell may run over, as a header with a line break does.
_QUOTED_LINES = 5

_MARKS = (
    (codecs.BOM_UTF8, "utf-8-sig"),
    (codecs.BOM_UTF32_LE, "utf-32"),  # before UTF-16, whose mark it begins with
    (codecs.BOM_UTF32_BE, "utf-32"),
    (codecs.BOM_UTF16_LE, "utf-16"),
    (codecs.BOM_UTF16_BE, "utf-16"),
)

#: Characters that no text holds, apart from tabs, line ends and page ends.
_CONTROL = re.compile(r"[\0-\x08\x0e-\x19\x1b-\x1f]")


#: A cell that a quotation mark opens; one further inside stands for inches.
_OPEN = re.compile(r'(?:^|[,;\t|])\s*"[^"]*$')


@dataclass(frozen=True)
class Text:
    """A text file.

    Attributes
    ----------
    lines
        Its lines, without their ends.
    encoding
        How its bytes were understood.
    """

    lines: list[str]
    encoding: str


def lines_of(data: bytes, where: str, fault: type[InputError]) -> Text:
    """Decode a text file and take it apart into lines.

    Parameters
    ----------
    data
        The file's bytes.
    where
        Its name, for messages.
    fault
        The error to raise where it is no text.

    Returns
    -------
    Text
        Decoded by its byte-order mark, else as UTF-16 if every other byte is zero, else as UTF-8, else as
        Windows-1252.
    """
    encoding = _encoding(data)
    text = _decoded(data, encoding).removeprefix("\ufeff").rstrip("\x1a")
    if _CONTROL.search(text):
        raise fault("is no text table", where=where, remedy="export it as CSV")
    text = text.replace("\r\n", "\n").replace("\r", "\n")
    if text.count("\n") > MOST_LINES:
        raise fault(f"holds more than {MOST_LINES} lines", where=where, remedy="export only this test")
    lines = text.split("\n")
    if max(map(len, lines)) > MOST_CHARACTERS:
        raise fault(
            f"has a line of more than {MOST_CHARACTERS} characters, so it is no table",
            where=where,
            remedy="export it as CSV",
        )
    return Text(lines, encoding.removesuffix("-sig"))


def _encoding(data: bytes) -> str:
    for mark, name in _MARKS:
        if data.startswith(mark):
            return name
    even, odd = data[0:4096:2], data[1:4096:2]
    if odd.count(0) > len(odd) // 2 and not even.count(0):
        return "utf-16-le"
    if even.count(0) > len(even) // 2 and not odd.count(0):
        return "utf-16-be"
    try:
        data.decode("utf-8")
    except UnicodeDecodeError as error:
        # A file that was cut off may end within a character.
        return "utf-8" if error.start >= len(data) - 3 and error.start > 3 else "cp1252"
    return "utf-8"


def _decoded(data: bytes, encoding: str) -> str:
    # A character that was cut off at the end is left out; a byte that means nothing shows as one.
    return data.decode(encoding, "ignore" if encoding == "utf-8" else "replace")


def joined_quotes(lines: list[str], where: str, fault: type[InputError]) -> list[tuple[int, str]]:
    """Return the lines that are not blank, numbered from 1, joined where a quoted cell runs over them."""
    numbered = [(number, line) for number, line in enumerate(lines, start=1) if line and not line.isspace()]
    if not any('"' in line for line in lines):
        return numbered
    whole: list[tuple[int, str]] = []
    taken = 0
    for i, (number, line) in enumerate(numbered):
        if i < taken:
            continue
        taken = i + 1
        if '"' in line and line.count('"') % 2:
            for more in range(i + 2, min(i + 1 + _QUOTED_LINES, len(numbered)) + 1):
                together = " ".join(text for _, text in numbered[i:more])
                if together.count('"') % 2 == 0:
                    line, taken = together, more
                    break
            else:
                if _OPEN.search(line):
                    raise fault(
                        "has a quotation mark that is not closed, so its cells cannot be told",
                        where=f"{where}, row {number}",
                        remedy="correct the row",
                    )
        whole.append((number, line))
    return whole
