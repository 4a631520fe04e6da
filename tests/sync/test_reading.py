"""Reading the load record: spellings that laboratories use, and everything that can be wrong with them."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from dic.errors import LoadRecordError
from dic.sync import read_load_record, reading
from dic.testfile import LoadRecord as Section

ROWS = [(0.0, 0.0, 0.0), (0.1, 0.25, 0.01), (0.2, 0.5, 0.02), (0.3, 0.75, 0.03), (0.4, 1.0, 0.04)]


def section(**given):
    return Section(**{"source": "machine.csv", "time": "Time", "force": "Force", **given})


@pytest.fixture
def write(tmp_path):
    """Return a function that writes a record and returns its path."""

    def make(
        header="Time (s),Force (kN),Crosshead (mm)", rows=ROWS, separator=",", encoding="utf-8", end="\n"
    ):
        lines = [header, *(separator.join(str(cell) for cell in row) for row in rows)]
        path = tmp_path / "machine.csv"
        path.write_bytes((end.join(lines) + end).encode(encoding))
        return path

    return make


def test_columns_by_name_in_internal_units(write):
    record = read_load_record(section(force="Force (kN)", displacement="Crosshead"), write())
    assert record.time_s.tolist() == [0.0, 0.1, 0.2, 0.3, 0.4]
    assert record.force_N.tolist() == [0.0, 250.0, 500.0, 750.0, 1000.0]
    assert record.displacement_mm.tolist() == [0.0, 0.01, 0.02, 0.03, 0.04]
    assert record.extensometer is None
    assert record.columns == {"time": "Time (s)", "force": "Force (kN)", "displacement": "Crosshead (mm)"}


def test_columns_by_number_counted_from_one(write):
    record = read_load_record(section(time=1, force=2, displacement=3), write())
    assert record.force_N[-1] == 1000.0
    assert record.displacement_mm[-1] == 0.04


@pytest.mark.parametrize("encoding", ["utf-8", "utf-8-sig"])
@pytest.mark.parametrize("end", ["\n", "\r\n"])
def test_encodings_and_line_ends(write, encoding, end):
    record = read_load_record(section(), write(encoding=encoding, end=end))
    assert record.columns["time"] == "Time (s)"
    assert len(record.time_s) == 5


@pytest.mark.parametrize("separator", [";", "\t"])
@pytest.mark.parametrize("point", [".", ","])
def test_separators_and_decimal_comma(write, separator, point):
    rows = [[str(cell).replace(".", point) for cell in row] for row in ROWS]
    header = separator.join(["Zeit / s", "Kraft / N", "Weg / mm"])
    record = read_load_record(section(time="Zeit", force="Kraft"), write(header, rows, separator))
    assert record.force_N.tolist() == [row[1] for row in ROWS]


@pytest.mark.parametrize(
    ("header", "newtons"),
    [
        ("Force (kN)", 1000.0),
        ("Force [N]", 1.0),
        ("Force / N", 1.0),
        ("Force/MN", 1e6),
        # One pound-force is 0.45359237 kg × 9.80665 m/s² by definition.
        ("Force [lbf]", 0.45359237 * 9.80665),
        ("Force (kgf)", 9.80665),
    ],
)
def test_units_in_the_header(write, header, newtons):
    record = read_load_record(section(force=header), write(f"Time (s),{header},x"))
    assert record.force_N[-1] == pytest.approx(newtons, rel=1e-14)  # one rounding


@pytest.mark.parametrize("key", ["Force (filtered)", "Force", "force"])
def test_units_from_the_test_file(write, key):
    path = write("Time [ms],Force (filtered),x")
    record = read_load_record(section(units={key: "kN"}), path)
    assert record.force_N[-1] == 1000.0
    assert record.time_s[-1] == pytest.approx(0.0004, rel=1e-15)


def test_a_contact_extensometer(write):
    record = read_load_record(section(extensometer="Strain"), write("Time (s),Force (N),Strain (%)"))
    assert record.extensometer[-1] == pytest.approx(0.0004, rel=1e-15)


def test_blank_lines_and_trailing_separators_are_no_data(write):
    data = [[*row, ""] for row in ROWS]
    rows = [*data[:2], [""], *data[2:], [""]]
    assert len(read_load_record(section(), write(rows=rows)).time_s) == 5


@given(st.lists(st.floats(-1e9, 1e9), min_size=5, max_size=20))
def test_numbers_survive(tmp_path_factory, forces):
    path = tmp_path_factory.mktemp("record") / "machine.csv"
    path.write_text("Time (s);Force (N)\n" + "".join(f"{i};{force!r}\n" for i, force in enumerate(forces)))
    # The parser may miss the last bit.
    np.testing.assert_allclose(read_load_record(section(), path).force_N, forces, rtol=3e-16)


def refused(path, **given):
    with pytest.raises(LoadRecordError) as caught:
        read_load_record(section(**given), path)
    message = str(caught.value)
    assert "\n" not in message
    assert str(path) in message
    return message


def test_missing_file(tmp_path):
    assert "check load_record.source" in refused(tmp_path / "nothing.csv")


def test_a_folder_is_no_record(tmp_path):
    assert "cannot be read" in refused(tmp_path)


def test_file_beyond_the_limit(write, monkeypatch):
    monkeypatch.setattr(reading, "MAX_BYTES", 20)
    assert "larger than" in refused(write())


def test_a_workbook_is_no_text(tmp_path):
    path = tmp_path / "machine.xlsx"
    path.write_bytes(b"PK\x03\x04\xff\xfe\x00\x80" * 50)
    assert "is no Excel workbook that can be read" in refused(path)


def test_bytes_that_break_further_down(write):
    path = write()
    path.write_bytes(path.read_bytes() + b"0.5,\xff\xfe,0.05\n")
    assert "'ÿþ' is not a number" in refused(path)


@pytest.mark.parametrize(
    ("content", "said"),
    [("", "is empty"), ("\n", "is empty"), (",,\n1,2,3\n", "no line of column headers"),
     ("Time (s),Force (N)\n" + "".join(f"{k},n/a\n" for k in range(9)), "holds no numbers")],
)  # fmt: skip
def test_nothing_to_read(tmp_path, content, said):
    path = tmp_path / "machine.csv"
    path.write_text(content)
    assert said in refused(path)


@pytest.mark.parametrize(
    "content", [b"Time\0(s),Force (N)\n", b"\x89PNG\r\n\x1a\n\0\0\0", bytes(range(256)) * 9]
)
def test_what_is_no_text(tmp_path, content):
    path = tmp_path / "machine.csv"
    path.write_bytes(content)
    assert "is no text table" in refused(path)


def test_an_open_quote_is_no_table(write):
    path = write(rows=[*ROWS, ('"0.5', 1.2, 0.05)])
    assert "row 7: has a quotation mark that is not closed" in refused(path)


def test_rows_longer_than_the_header(write):
    path = write(rows=[*ROWS, (0.5, 1.2, 0.05, 7, 8, 9)])
    assert "row 7: holds more than the 3 cells" in refused(path)


def test_one_cell_too_many(write):
    assert "row 7: holds more than the 3 cells" in refused(write(rows=[*ROWS, (0.5, 1.2, 0.05, 7)]))


def test_bare_decimal_commas_in_a_comma_separated_file(write):
    rows = [("0,0", "0,1", "0,2"), *((f"{i},1", f"{i},2", f"{i},3") for i in range(1, 6))]
    assert "with semicolons or tabs between columns" in refused(write(rows=rows))


def test_unknown_column_names_the_nearest_and_all(write):
    message = refused(write(), force="Forse (kN)")
    assert "did you mean 'Force (kN)'?" in message
    assert "'Crosshead (mm)'" in message


def test_a_column_like_no_other(write):
    assert "name one of them" in refused(write(), force="Q")


@pytest.mark.parametrize("number", [0, 4, -1])
def test_column_number_out_of_range(write, number):
    assert "the file has 3" in refused(write(), force=number)


def test_an_ambiguous_name(write):
    assert "fits 2 columns" in refused(write("Time (s),Force (kN),Force (N)"))


def test_two_headers_alike(write):
    assert "fits 2 columns" in refused(write("Time (s),Force (N),Force (N)"), force="Force (N)")


def test_no_unit_anywhere(write):
    message = refused(write("Time (s),Force,x"))
    assert "says no unit" in message
    assert '{ force = "kN" }' in message


@pytest.mark.parametrize("unit", ["mm", "kX", "__import__('os')", "N**9**9", "9⁹⁹⁹⁹⁹⁹⁹⁹", "N/"])
def test_wrong_unit(write, unit):
    # The exponents would take years to evaluate.
    assert "is not a unit" in refused(write(f"Time (s),Force [{unit}],x"))
    assert "is not a unit" in refused(write("Time (s),Force,x"), units={"force": unit})


def test_header_and_test_file_contradict(write):
    assert "the header says kN but load_record.units says N" in refused(write(), units={"force": "N"})


def test_header_and_row_of_units_contradict(write):
    """Which of the two is right, only the user knows."""
    path = write("Time (s),Force (kN),Crosshead (mm)\ns,N,mm")
    assert "the header says kN but the row below it says N" in refused(path)
    assert read_load_record(section(units={"force": "N"}), path).force_N[-1] == 1.0
    assert read_load_record(section(units={"force": "kN"}), path).force_N[-1] == 1000.0
    assert "load_record.units says MN" in refused(path, units={"force": "MN"})
    same = write("Time (s),Force (kN),Crosshead (mm)\n[s],[kN],[mm]")
    assert read_load_record(section(), same).force_N[-1] == 1000.0


def test_a_unit_for_nothing(write):
    assert "did you mean 'Force'?" in refused(write(), units={"Forse": "N"})


@pytest.mark.parametrize("text", ["over", "", "1.2.3", "inf", "nan", "1e999", "0x10"])
def test_force_that_is_not_a_number(write, text):
    path = write(rows=[*ROWS[:3], ("0.25", text, "0.5"), *ROWS[3:]])
    message = refused(path)
    assert f"'{text}' is not a number" in message
    assert "row 5, column 'Force (kN)'" in message


def test_the_row_named_counts_blank_lines(write):
    path = write(rows=[*ROWS[:2], ("",), ("0.15", "bad", ""), *ROWS[2:]])
    assert "row 5" in refused(path)


def test_a_quoted_decimal_comma_in_a_comma_separated_file(write):
    rows = [(f'"{t}"', f'"{str(f).replace(".", ",")}"', "0") for t, f, _ in ROWS]
    record = read_load_record(section(), write(rows=rows))
    assert record.force_N.tolist() == [1000 * f for _, f, _ in ROWS]


def test_time_that_runs_back(write):
    path = write(rows=[*ROWS[:3], (0.1, 0.6, 0.02), *ROWS[3:]])
    message = refused(path)
    assert "time does not increase" in message
    assert "row 5" in message


@pytest.mark.parametrize("count", [0, 1, 4])
def test_too_few_rows(write, count):
    assert f"holds {count} rows" in refused(write(rows=ROWS[:count]))


def test_an_endless_header_costs_no_time(write):
    message = refused(write("Time (s),Force" + " (" * 20_000 + ",x"))
    assert len(message) < 1000
