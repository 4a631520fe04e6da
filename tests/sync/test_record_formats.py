"""Load records as machines and independent libraries write them, read to identical numbers."""

import csv
from datetime import datetime, timedelta
from zipfile import ZIP_DEFLATED, ZipFile

import numpy as np
import openpyxl
import pandas as pd
import pint
import pytest

from dic import tables
from dic.errors import LoadRecordError
from dic.sync import look_at_record, read_load_record
from dic.testfile import LoadRecord as Section

EVE, NOON, LEAP = (
    datetime(2026, 2, 28, 23, 59, 58),
    datetime(2026, 2, 28, 11, 59, 58),
    datetime(2028, 2, 28, 23, 59, 58),
)

UNITS = pint.UnitRegistry()
TIME = np.arange(40) / 8
FORCE = 1234.5 * np.sin(TIME) + 0.25


def section(**given):
    return Section(**{"source": "m.csv", **given})


@pytest.fixture
def read(tmp_path):
    """Return a function that writes text and reads it as a record."""

    def make(text, encoding="utf-8", **given):
        path = tmp_path / "m.csv"
        path.write_bytes(text.encode(encoding) if isinstance(text, str) else text)
        return read_load_record(section(**given), path)

    return make


def comma(value, digits=4):
    return f"{value:.{digits}f}".replace(".", ",")


def table(head, row, separator=";", tail="", rows=range(40)):
    body = "".join(separator.join(row(i)) + "\n" for i in rows)
    return head + body + tail


def after(start, seconds):
    return start + timedelta(seconds=seconds)


def codes(record):
    return [notice.code for notice in record.notices]


@pytest.mark.parametrize(
    "encoding", ["utf-8", "utf-8-sig", "utf-16", "utf-16-le", "utf-16-be", "cp1252", "latin-1"]
)
@pytest.mark.parametrize(
    ("separator", "decimal"), [(";", ","), ("\t", ","), (",", "."), ("|", "."), (";", ".")]
)
def test_files_that_pandas_writes(tmp_path, encoding, separator, decimal):
    path = tmp_path / "m.csv"
    frame = pd.DataFrame({"Prüfzeit (s)": TIME, "Prüfkraft (N)": FORCE})
    frame.to_csv(path, sep=separator, decimal=decimal, index=False, encoding=encoding)
    record = read_load_record(section(), path)
    np.testing.assert_allclose(record.time_s, TIME, rtol=3e-16)  # the parser may miss the last bit
    np.testing.assert_allclose(record.force_N, FORCE, rtol=3e-16)
    assert record.notices == ()


@pytest.mark.parametrize("quoting", [csv.QUOTE_MINIMAL, csv.QUOTE_ALL, csv.QUOTE_NONNUMERIC])
@pytest.mark.parametrize("dialect", ["excel", "excel-tab", "unix"])
def test_files_that_the_csv_module_writes(tmp_path, quoting, dialect):
    path = tmp_path / "m.csv"
    with path.open("w", newline="") as file:
        writer = csv.writer(file, dialect, quoting=quoting)
        writer.writerow(["Time, elapsed (s)", 'Load "A" (kN)', "Remark"])
        writer.writerows(
            [t, f, 'a "word", and another'] for t, f in zip(TIME.tolist(), FORCE.tolist(), strict=True)
        )
    record = read_load_record(section(), path)
    np.testing.assert_allclose(record.force_N, 1000 * FORCE, rtol=5e-16)  # two roundings


def test_files_that_numpy_writes_aligned_by_blanks(tmp_path):
    path = tmp_path / "m.txt"
    np.savetxt(
        path, np.column_stack([TIME, FORCE, TIME]), fmt="%12.4f", header="Time (s)  Force (N)  Weg (mm)"
    )
    record = read_load_record(section(displacement="Weg"), path)
    np.testing.assert_allclose(record.force_N, FORCE, atol=5.1e-5)  # the digits written
    assert record.columns["time"] == "Time (s)"


@pytest.mark.parametrize("head", ["Zeit [s]   Kraft / kN\n", "Zeit [s] Kraft / kN\n", "Zeit/s Kraft/kN\n"])
def test_headers_between_blanks(read, head):
    record = read(table(head, lambda i: (f"{comma(TIME[i]):>9}", f"{comma(FORCE[i]):>12}"), " "))
    np.testing.assert_allclose(record.force_N, 1000 * FORCE, atol=5.1e-2)


# Digits grouped by threes, as in SI practice (blanks), English, German and Swiss writing.
@pytest.mark.parametrize("group", ["\u202f", "\u00a0", " ", "'", "’", "."])
def test_grouped_digits_with_a_decimal_comma(read, group):
    def spell(x):
        return f"{x:,.2f}".translate({ord(","): group, ord("."): ","})

    record = read(table("Zeit (s);Kraft (N)\n", lambda i: (comma(TIME[i]), spell(1e4 * FORCE[i]))))
    np.testing.assert_allclose(record.force_N, 1e4 * FORCE, atol=5.1e-3)
    assert codes(record) == []


@pytest.mark.parametrize("separator", [";", "\t", ","])
def test_grouped_digits_with_a_decimal_point(read, separator):
    record = read(
        table(
            f"Time (s){separator}Load (N)\n", lambda i: (f"{TIME[i]}", f'"{1e4 * FORCE[i]:,.1f}"'), separator
        )
    )
    np.testing.assert_allclose(record.force_N, 1e4 * FORCE, atol=5.1e-2)


def test_another_column_tells_which_mark_is_decimal(read):
    """1,234 alone may be either; the file has one decimal mark."""
    english = read(table("Time (s);Load (N)\n", lambda i: (f"{i}.5", f"{i + 1},{200 + i}")))
    german = read(table("Zeit (s);Kraft (N)\n", lambda i: (f"{i},5", f"{i + 1},{200 + i}")))
    assert (english.force_N[0], german.force_N[0]) == (1200.0, 1.2)
    assert codes(english) == codes(german) == []


@pytest.mark.parametrize(
    ("mark", "decimal", "first"), [(",", ",", 1.2), (",", ".", 1200), (".", ".", 1.2), (".", ",", 1200)]
)
def test_what_can_be_read_either_way_is_said_and_can_be_settled(read, mark, decimal, first):
    text = table("Time (s);Load (N)\n", lambda i: (f"{i}", f"{i + 1}{mark}{200 + i}"))
    assert codes(read(text)) == ["record_decimal"]
    settled = read(text, decimal=decimal)
    assert settled.force_N[0] == first
    assert codes(settled) == []


def test_both_decimal_marks_in_one_column(read):
    text = table("Time (s);Load (N)\n", lambda i: (f"{i}", "1,5" if i % 2 else "1.5"))
    with pytest.raises(
        LoadRecordError, match=r"decimal comma and .* decimal point; say load_record\.decimal"
    ):
        read(text)


def test_wrongly_grouped_digits_are_no_numbers(read):
    text = table("Time (s);Load (N)\n", lambda i: (f"{i}.5", "1,23,456.5" if i % 2 else "1234,567.5"))
    with pytest.raises(LoadRecordError, match="is not a number"):
        read(text)


@pytest.mark.parametrize("units", ["s;kN;mm", "(s);(kN);(mm)", "[s];[kN];[mm]", '"s";"kN";"mm"'])
def test_heading_lines_and_a_row_of_units(read, units):
    heading = "Prüfprotokoll;Nr. 7\nGeschwindigkeit;2;mm/min\n\nBreite b0;12,5\n"
    head = f"{heading}Prüfzeit;Zugkraft;Weg\n{units}\n"
    text = table(
        head, lambda i: (comma(TIME[i]), comma(FORCE[i]), comma(TIME[i])), tail="Ende der Prüfung;;\n"
    )
    record = read(text, "cp1252", displacement="Weg")
    np.testing.assert_allclose(record.force_N, 1000 * FORCE, atol=5.1e-2)
    assert record.columns["force"] == "Zugkraft (kN)"
    assert codes(record) == ["record_trailer"]


@pytest.mark.parametrize(
    ("unit", "kind", "worth"),
    [
        # NIST SP 811, appendix B: exact factors.
        ("lbf", "force", 4.4482216152605),
        ("kip", "force", 4448.2216152605),
        ("kgf", "force", 9.80665),
        ("ms", "time", 1e-3),
        ("min", "time", 60.0),
        ("h", "time", 3600.0),
        ("in", "displacement", 25.4),
        ("µm", "displacement", 1e-3),
        ("um", "displacement", 1e-3),
        ("%", "extensometer", 1e-2),
        ("mm/mm", "extensometer", 1.0),
        ("1", "extensometer", 1.0),
        ("µm/m", "extensometer", 1e-6),
        ("µε", "extensometer", 1e-6),
    ],
)  # fmt: skip
def test_units_against_their_definitions_and_pint(read, unit, kind, worth):
    names = {"time": "Time", "force": "Force", "displacement": "Travel", "extensometer": "Clip"}
    units = {"time": "s", "force": "N", "displacement": "mm", "extensometer": "%", kind: unit}
    head = ";".join(f"{names[q]} [{u}]" for q, u in units.items()) + "\n"
    record = read(table(head, lambda i: (f"{i}",) * 4), displacement="Travel", extensometer="Clip")
    fields = {
        "time": "time_s",
        "force": "force_N",
        "displacement": "displacement_mm",
        "extensometer": "extensometer",
    }
    read_value = getattr(record, fields[kind])[8]
    assert read_value == pytest.approx(8 * worth, rel=1e-14)
    bases = {"time": "s", "force": "N", "displacement": "mm"}
    if kind in bases:
        assert read_value == pytest.approx(UNITS.Quantity(8.0, unit).to(bases[kind]).magnitude, rel=1e-14)


def test_an_elongation_becomes_strain_by_its_gauge_length(read):
    text = table("Time (s);Force (N);Clip (µm)\n", lambda i: (f"{i}", f"{i}", f"{i}"))
    assert read(text, extensometer="Clip", extensometer_length="50 mm").extensometer[20] == pytest.approx(
        0.0004
    )
    with pytest.raises(LoadRecordError, match=r"add load_record\.extensometer_length"):
        read(text, extensometer="Clip")


def test_columns_that_hold_no_number_now_and_then(read):
    text = table(
        "Time (s);Force (N);Clip (%);Frame\n",
        lambda i: (f"{i}", f"{i}", "---" if i > 30 else "1", f"{i}" if i % 4 == 0 else ""),
    )
    record = read(text, extensometer="Clip", trigger="Frame")
    assert np.isnan(record.extensometer).sum() == 9
    assert record.trigger[4] == 4
    assert np.isnan(record.trigger).sum() == 30
    assert codes(record) == ["record_values_missing", "record_values_missing"]


@pytest.mark.parametrize(
    ("spell", "epoch"),
    [
        (lambda t: f"0:00:{t:06.3f}", None),
        (lambda t: f"00:{t:06.3f}".replace(".", ","), None),
        (lambda t: after(EVE, t).isoformat(), EVE),
        (lambda t: after(EVE, t).isoformat(" ", "milliseconds") + "Z", EVE),
        (lambda t: after(LEAP, t).strftime("%d.%m.%Y %H:%M:%S,%f"), LEAP),
        (lambda t: after(EVE, t).strftime("%d/%m/%y %H:%M:%S.%f"), EVE),
        (lambda t: after(NOON, t).strftime("%m/%d/%Y %I:%M:%S.%f %p"), NOON),
    ],
)  # fmt: skip
def test_clock_times_and_dates(read, spell, epoch):
    """Across minutes, noon, midnight and months, written by the standard library."""
    record = read(table("Zeit;Kraft (N)\n", lambda i: (spell(TIME[i]), f"{i}")))
    # One bit of a day's seconds is 1.5e-11 s.
    np.testing.assert_allclose(record.time_s, TIME, atol=2e-11)
    assert record.epoch == epoch
    assert codes(record) == []


def test_a_clock_that_passes_midnight(read):
    record = read(
        table(
            "Uhrzeit;Kraft (N)\n",
            lambda i: (
                f"{(i + 86380) // 3600 % 24:02d}:{(i + 86380) // 60 % 60:02d}:{(i + 86380) % 60:02d}",
                f"{i}",
            ),
        )
    )
    np.testing.assert_array_equal(np.diff(record.time_s), 1)


def test_days_and_months_that_cannot_be_told_apart(read):
    record = read(table("Date;Force (N)\n", lambda i: (f"03/04/2026 10:00:{i:02d}", f"{i}")))
    assert record.epoch == datetime(2026, 4, 3, 10)
    assert codes(record) == ["record_dates"]
    noon = read(table("Date;Force (N)\n", lambda i: (f"3/4/2026 10:00:{i:02d} AM", f"{i}")))
    assert noon.epoch == datetime(2026, 3, 4, 10)


def test_a_time_that_is_none(read):
    text = table("Time;Force (N)\n", lambda i: ("00:00:61.5" if i == 20 else f"00:00:{i:02d}.0", f"{i}"))
    assert len(read(text).time_s) == 39


def workbook(path, rows, sheets=("Data",)):
    book = openpyxl.Workbook()
    for k, name in enumerate(sheets):
        page = book.active if k == 0 else book.create_sheet()
        page.title = name
        for row in rows[k] if len(sheets) > 1 else rows:
            page.append(row)
    book.save(path)
    return path


def test_workbooks_that_openpyxl_writes(tmp_path):
    rows = [["Test 7"], [], ["Time", "Force"], ["s", "kN"], *zip(TIME.tolist(), FORCE.tolist(), strict=True)]
    record = read_load_record(section(), workbook(tmp_path / "m.xlsx", rows))
    np.testing.assert_allclose(record.time_s, TIME, rtol=3e-16)
    np.testing.assert_allclose(record.force_N, 1000 * FORCE, rtol=5e-16)
    assert record.notices == ()


def test_dates_in_a_workbook(tmp_path):
    start = datetime(2026, 2, 28, 23, 59, 58)
    rows = [
        ["Time", "Force (N)"],
        *([start + timedelta(seconds=t), f] for t, f in zip(TIME, FORCE, strict=True)),
    ]
    record = read_load_record(section(), workbook(tmp_path / "m.xlsx", rows))
    assert record.epoch == start
    # A workbook's instants are days in double precision, which openpyxl rounds to milliseconds.
    np.testing.assert_allclose(record.time_s, TIME, atol=1e-3)


def test_sheets(tmp_path):
    rows = [["Time (s)", "Force (N)"], *([t, 2 * f] for t, f in zip(TIME, FORCE, strict=True))]
    twice = [rows[0], *([t, 2 * f] for t, f in rows[1:])]
    path = workbook(tmp_path / "m.xlsx", ([], rows, twice), ("Empty", "First", "Second"))
    first = read_load_record(section(), path)
    assert codes(first) == ["record_sheet"]
    second = read_load_record(section(sheet="Second"), path)
    np.testing.assert_allclose(second.force_N, 2 * first.force_N, rtol=5e-16)
    with pytest.raises(
        LoadRecordError, match=r"there is no sheet 'Third'; there are: 'Empty', 'First', 'Second'"
    ):
        read_load_record(section(sheet="Third"), path)


def test_a_sheet_of_text_in_front(tmp_path):
    """Nor are settings a table, whatever numbers stand in them."""
    notes = [["Sample", "Operator"], ["c3", "x"], *(["Speed", "mm/min", k] for k in range(9))]
    rows = [["Time (s)", "Force (N)"], *zip(TIME.tolist(), FORCE.tolist(), strict=True)]
    path = workbook(tmp_path / "m.xlsx", (notes, rows), ("Info", "Data"))
    record = read_load_record(section(), path)
    np.testing.assert_allclose(record.force_N, FORCE, rtol=5e-16)
    assert record.notices == ()
    assert look_at_record(path).sheet == "Data"
    with pytest.raises(LoadRecordError):
        read_load_record(section(sheet="Info"), path)


def test_a_workbook_without_its_reader(tmp_path, monkeypatch):
    path = workbook(tmp_path / "m.xlsx", [[1]])
    monkeypatch.setitem(__import__("sys").modules, "openpyxl", None)
    with pytest.raises(LoadRecordError, match=r"pip install 'tauten\[excel\]'"):
        read_load_record(section(), path)


def test_a_damaged_workbook(tmp_path):
    path = workbook(tmp_path / "m.xlsx", [["Time (s)", "Force (N)"], [1, 2]])
    path.write_bytes(path.read_bytes()[:-200])
    with pytest.raises(LoadRecordError, match="no Excel workbook that can be read"):
        read_load_record(section(), path)


@pytest.mark.parametrize("part", ["xl/sharedStrings.xml", "xl/worksheets/sheet1.xml"])
def test_a_workbook_that_unpacks_without_end(tmp_path, part, monkeypatch):
    monkeypatch.setattr(tables.workbook, "MOST_UNPACKED", 2_500_000)
    path = tmp_path / "m.xlsx"
    with ZipFile(path, "w", ZIP_DEFLATED) as archive, archive.open(part, "w", force_zip64=True) as file:
        for _ in range(3):
            file.write(b" " * 1_000_000)
    with pytest.raises(LoadRecordError, match="unpacks to more than a load record holds"):
        read_load_record(section(), path)


def test_a_workbook_with_entities(tmp_path):
    path = tmp_path / "m.xlsx"
    with ZipFile(path, "w") as archive:
        archive.writestr("xl/workbook.xml", '<!DOCTYPE x [<!ENTITY a "aaaa">]><x>&a;</x>')
    with pytest.raises(LoadRecordError, match="definitions that no record needs"):
        read_load_record(section(), path)


def test_an_old_workbook(read):
    with pytest.raises(LoadRecordError, match=r"of the old kind \(.xls\); save it as .xlsx"):
        read(b"\xd0\xcf\x11\xe0\xa1\xb1\x1a\xe1" + bytes(500))


def test_a_sheet_of_a_text_file(read):
    with pytest.raises(LoadRecordError, match="has no sheets"):
        read("Time (s);Force (N)\n1;2\n", sheet="A")
