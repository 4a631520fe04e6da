"""Random and damaged records: read, or refused in one sentence, in bounded time and memory."""

import io
import random
from pathlib import Path
from zipfile import ZipFile

import numpy as np
import openpyxl
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from dic.errors import LoadRecordError
from dic.sync import look_at_record, read_load_record
from dic.testfile import LoadRecord as Section


def outcome(path, **given):
    """Return a record, None where it was refused; anything else is a failure."""
    try:
        look_at_record(path)
        record = read_load_record(Section(source="m.csv", **given), path)
    except LoadRecordError as error:
        said = str(error)
    else:
        return sound(record)
    assert "\n" not in said
    assert len(said) < 1500
    return None


def sound(record):
    assert np.isfinite(record.time_s).all()
    assert np.isfinite(record.force_N).all()
    assert (np.diff(record.time_s) > 0).all()
    assert len(record.time_s) == len(record.force_N) >= 5
    return record


@st.composite
def tables(draw):
    """Return text of a table, and its forces where nothing in it hinders reading."""
    separator, decimal = draw(
        st.sampled_from([(";", ","), (";", "."), ("\t", ","), ("\t", "."), (",", "."), ("|", ".")])
    )
    unit = draw(st.sampled_from([" (N)", " [N]", " / N"]))
    below = draw(st.booleans())
    columns = [
        "Time" if below else "Time (s)",
        "Force" if below else f"Force{unit}",
        *draw(st.lists(st.sampled_from(["x", "Weg (mm)"]), max_size=2)),
    ]
    lines = draw(
        st.lists(
            st.sampled_from(["Test report", "", "Operator: N. N.", "# remark", "Speed: fast"]), max_size=4
        )
    )
    lines.append(separator.join(columns))
    if below:
        lines.append(separator.join(["s", "N", *("" for _ in columns[2:])]))
    digits = draw(st.integers(1, 6))
    forces = draw(st.lists(st.floats(-9e4, 9e4), min_size=6, max_size=30))
    start = draw(st.floats(0, 1000))
    for i, force in enumerate(forces):
        cells = [f"{start + i / 4:.2f}", f"{force:.{digits}f}", *("1" for _ in columns[2:])]
        lines.append(separator.join(cell.replace(".", decimal) for cell in cells))
        if draw(st.integers(0, 9)) == 0:
            lines.append(draw(st.sampled_from(["", "# pause", "-----"])))
    lines += draw(st.lists(st.sampled_from(["", "End of test"]), max_size=2))
    end = draw(st.sampled_from(["\n", "\r\n", "\r"]))
    return end.join(lines) + end, np.array([float(f"{f:.{digits}f}") for f in forces])


@settings(max_examples=25, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(tables(), st.sampled_from(["utf-8", "utf-8-sig", "utf-16", "cp1252"]))
def test_whatever_the_layout_the_numbers_are_found(tmp_path, table, encoding):
    text, forces = table
    path = tmp_path / "m.csv"
    path.write_bytes(text.encode(encoding))
    record = read_load_record(Section(source="m.csv"), path)
    np.testing.assert_allclose(record.force_N, forces, rtol=3e-16)  # the parser may miss the last bit


#: What headers, units, data and junk may look like.
CELLS = [
    *("Time (s)", "Force (N)", "Kraft", "s", "kN", "1", "0,5", "1.5", "2,345", "-", "OVL", "", "1e999"),
    *("12:00:61", "1/1/1", "99.99.9999", "2026-02-30", "#", '"', "'", "\0", "=1+1", "\u202e", "1" * 50),
    *("(", "[" * 9, "/", "%", "٣"),
]


@settings(max_examples=25, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(st.lists(st.lists(st.sampled_from(CELLS), max_size=5), max_size=14), st.sampled_from(",;\t| "))
def test_random_tables(tmp_path, rows, separator):
    path = tmp_path / "m.csv"
    path.write_text("\n".join(separator.join(row) for row in rows), encoding="utf-8")
    outcome(path)


def machine_text():
    rows = "".join(f"{i / 10:.1f};{np.sin(i / 20):.5f};{i}\n".replace(".", ",") for i in range(60))
    return "Prüfung\n\nZeit;Kraft;Weg\ns;kN;mm\n" + rows


def machine_book():
    book = openpyxl.Workbook()
    book.active.append(["Time (s)", "Force (N)"])
    for i in range(30):
        book.active.append([i / 10, np.sin(i)])
    file = io.BytesIO()
    book.save(file)
    return file.getvalue()


def damaged(data, seed):
    """Return bytes with some changed, cut out, repeated or cut off."""
    rng = random.Random(seed)  # noqa: S311  (spoils files, guards no secret)
    data = bytearray(data)
    for _ in range(rng.randint(1, 8)):
        at, kind = rng.randrange(max(len(data), 1)), rng.randrange(5)
        if kind == 0:
            data[at : at + 1] = bytes([rng.randrange(256)])
        elif kind == 1:
            del data[at : at + rng.randint(1, 200)]
        elif kind == 2:
            data[at:at] = data[at : at + rng.randint(1, 200)]
        elif kind == 3:
            data[at:at] = rng.choice([b"\0", b'"', b";", b"\n", b"\xff\xfe", b"1e999", b"-", b",,,"])
        elif rng.random() < 0.3:
            del data[at:]
    return bytes(data)


def record_files(seed):
    """Return a damaged text record for an even seed, a damaged workbook for an odd one."""
    if seed % 2 == 0:
        encoding = ["utf-8", "utf-8-sig", "utf-16", "cp1252"][seed // 2 % 4]
        return damaged(machine_text().encode(encoding), seed)
    return damaged(machine_book(), seed)


@pytest.mark.parametrize("kind", [0, 1])
def test_damaged_bytes(tmp_path, kind):
    path = tmp_path / "m.csv"
    for seed in range(kind, 60, 2):
        path.write_bytes(record_files(seed))
        outcome(path)


def test_damage_inside_a_workbooks_parts(tmp_path):
    """The archive stays sound, so that the damage reaches what reads the parts."""
    path = tmp_path / "m.xlsx"
    whole = ZipFile(io.BytesIO(machine_book()))
    for seed in range(20):
        rng = random.Random(seed)  # noqa: S311  (spoils files, guards no secret)
        hit = rng.choice(whole.namelist())
        with ZipFile(path, "w") as archive:
            for name in whole.namelist():
                part = whole.read(name)
                archive.writestr(name, damaged(part, seed) if name == hit else part)
        outcome(path)


PATHOLOGICAL = [
    b"1" * 5_000_000,
    b";" * 5_000_000,
    b'"' * 19_999,
    b'"a\n' * 9_000,
    b"\n" * 2_000_001,
    b"1;2\n" * 2_000_001,
    b"Time (s);Force (N)\n" + b"1e999999;" + b"9" * 10_000 + b"\n" * 9,
    b"1:" * 9_000,
    b"(" * 19_999 + b"\n1;2" * 9,
    b"Time (s);Force (N)\n" + b"1;2\nx\n" * 4_000,
    b"- " * 9_000 + b"\n" + b"1 " * 9_000,
    b";".join([b"a"] * 9000) + b"\n" + (b";".join([b"1"] * 9000) + b"\n") * 9,
]


@pytest.mark.parametrize("content", PATHOLOGICAL, ids=range(len(PATHOLOGICAL)))
def test_pathological_files_are_refused(tmp_path, content):
    path = tmp_path / "m.csv"
    path.write_bytes(content)
    assert outcome(path) is None


def test_what_has_no_end_is_not_read():
    with pytest.raises(LoadRecordError, match="it is no file"):
        read_load_record(Section(source="m.csv"), Path("/dev/zero"))
