"""What is wrong with real records: repeats, restarts, gaps, junk, doubtful columns, the force's zero."""

import numpy as np
import pytest

from dic.errors import LoadRecordError
from dic.sync import look_at_record, read_load_record
from dic.testfile import LoadRecord as Section

HEAD = "Time (s);Force (N)\n"


@pytest.fixture
def path(tmp_path):
    return tmp_path / "m.csv"


@pytest.fixture
def read(path):
    """Return a function that writes text and reads it as a record."""

    def make(text, **given):
        path.write_text(text, encoding="utf-8")
        return read_load_record(Section(source="m.csv", **given), path)

    return make


def rows(n=40, start=0.0, step=0.1, force=float, first=0):
    return "".join(f"{start + i * step:.4f};{force(first + i)}\n" for i in range(n))


def codes(record):
    return [notice.code for notice in record.notices]


def test_remarks_and_ruled_lines_are_no_data(read):
    text = (
        "# made by hand\n"
        + HEAD
        + "-----------\n"
        + rows(20)
        + "\n// pause;1\n; remark\n\n"
        + rows(20, 2, first=20)
    )
    record = read(text.replace("; remark", "# remark; 2"))
    assert record.force_N.tolist() == list(range(40))
    assert codes(record) == []


def test_parts_whose_time_runs_on_are_joined(read):
    record = read(HEAD + rows(20) + "\nSegment 2\n" + HEAD + "s;N\n" + rows(20, 2, first=20))
    assert record.force_N.tolist() == list(range(40))
    assert codes(record) == ["record_joined"]
    assert "first row 23: 'Segment 2" in record.notices[0].text


@pytest.mark.parametrize("between", ["", HEAD, "\n\n", "Cycle 2;\n"])
def test_parts_whose_time_starts_anew(read, between):
    text = HEAD + rows(20) + between + rows(30, first=20)
    with pytest.raises(LoadRecordError, match=r"2 segments: 1 \(rows 2 to 21, 0 to 1.9 s\), 2 "):
        read(text)
    assert read(text, segment=1).force_N.tolist() == list(range(20))
    assert read(text, segment=2).force_N.tolist() == list(range(20, 50))
    assert read(text, segment=2).time_s[0] == 0
    both = read(text, segment="all")
    np.testing.assert_allclose(both.time_s, np.arange(50) / 10, atol=1e-12)  # roundings of the shift
    assert codes(both) == ["record_segments"]
    with pytest.raises(LoadRecordError, match="there is no segment 3, only 2"):
        read(text, segment=3)


def test_other_headers_further_down(read):
    with pytest.raises(LoadRecordError, match="row 22: names other columns"):
        read(HEAD + rows(20) + "Time (s);Weg (mm)\n" + rows(20, 2))


def test_a_clock_that_runs_back_names_its_rows(read):
    text = HEAD + rows(20) + rows(5, 1.55) + rows(5, 1.75) + rows(5, 3)
    with pytest.raises(LoadRecordError, match="rows 22, 27: time does not increase"):
        read(text)


def test_coarse_stamps_are_spread_to_the_next(read):
    """Truth: 40 Hz, stamps cut to 0.1 s."""
    record = read(HEAD + "".join(f"{i // 4 / 10:.1f};{i}\n" for i in range(40)))
    np.testing.assert_allclose(record.time_s, np.arange(40) / 40, atol=1e-12)
    assert record.force_N.tolist() == list(range(40))
    assert codes(record) == ["record_repeated_stamps"]


def test_a_single_repeated_stamp_before_a_gap(read):
    record = read(HEAD + rows(20) + "1.9;20\n" + rows(10, 9))
    assert record.time_s[20] == pytest.approx(1.95)


def test_time_that_stands_still(read):
    with pytest.raises(LoadRecordError, match="time stands still"):
        read(HEAD + "1.0;2\n" * 20)


@pytest.mark.parametrize("mark", ["OVL", "---", "NaN", "#N/A", "", "overload", "1e999"])
def test_a_few_cells_without_number_leave_their_rows_out(read, mark):
    record = read(HEAD + rows(60, force=lambda i: mark if i in (30, 40) else i))
    assert len(record.time_s) == 58
    assert codes(record) == ["record_rows_left_out"]
    assert "rows 32, 42 left out" in record.notices[0].text


def test_too_many_cells_without_number(read):
    with pytest.raises(LoadRecordError, match=r"row 302, column 'Force \(N\)': 'OVL' is not a number"):
        read(HEAD + rows(600, force=lambda i: "OVL" if 300 <= i < 311 else i))


@pytest.mark.parametrize("end", ["3.9", "3.9;4"])
def test_a_record_that_was_cut_off(read, end):
    record = read("Time (s);Force (N);Weg (mm)\n" + "".join(f"{i / 10};{i};{i}\n" for i in range(39)) + end)
    assert record.force_N.tolist() == list(range(39))
    assert codes(record) == ["record_cut_off"]


def test_a_record_cut_off_within_a_character(path):
    path.write_bytes((HEAD + rows(20) + "2.0;µ").encode()[:-1])
    assert len(read_load_record(Section(source="m.csv"), path).time_s) == 20


@pytest.mark.parametrize(
    "headers",
    ["Zeit (s);Kraft (N)", "Prüfzeit [s];Zugkraft [N]", "Temps (s);Effort (N)", "Tiempo (s);Fuerza (N)",
     "Tempo (s);Forza (N)", "t / s;F / N", "Time_s;Load_N", "elapsed time (s);Load cell (N)",
     "Zeit (s);Last (N)", "Zeit in s;Kraft in N", "Time, s;Force, N", "Time (s);Force, filtered (N)",
     "Clock (s);Channel 2 (N)", "Time (s);Force (filtered) [N]"],
)  # fmt: skip
def test_time_and_force_by_their_headers(read, headers):
    record = read(headers + "\n" + rows())
    assert record.force_N.tolist() == list(range(40))


@pytest.mark.parametrize(
    "extra", ["Loading rate (N/s)", "Strain (%)", "Kraftmoment (N*m)", "Last cycle (mm)"]
)
def test_columns_that_only_sound_like_it(read, extra):
    text = f"Time (s);Force (N);{extra}\n" + "".join(f"{i};{i};7\n" for i in range(20))
    assert read(text).columns["force"] == "Force (N)"


def test_two_columns_that_could_be_the_force_are_listed(read):
    listed = r"2 'Force A \(N\)', 3 'Load B \(kN\)'; say which.*load_record.force = 2"
    text = "Time (s);Force A (N);Load B (kN)\n" + "".join(f"{i};{i};{i}\n" for i in range(20))
    with pytest.raises(LoadRecordError, match=listed):
        read(text)
    assert read(text, force=3).force_N[1] == 1000


def test_no_column_that_could_be_the_force(read):
    with pytest.raises(
        LoadRecordError, match=r"no column can be told to be the force \(1 'Time \(s\)', 2 'Q'\)"
    ):
        read("Time (s);Q\n" + rows())


def test_a_table_without_headers(read):
    with pytest.raises(LoadRecordError, match=r"give the columns' numbers and load_record\.units"):
        read(rows())
    assert len(read(rows(), time=1, force=2, units={"time": "s", "force": "N"}).time_s) == 40


def pulled(zero, noise=0.02):
    draw = np.random.default_rng(4).normal(0, noise, 400)
    return lambda i: zero + draw[i] + 3.0 * max(0, i - 100)


def test_the_forces_zero_is_taken_off_only_when_asked(read):
    text = HEAD + rows(400, force=pulled(12.5))
    asis = read(text)
    assert asis.force_N[:80].mean() == pytest.approx(12.5, abs=0.01)  # 0.02 / √80 × 4
    assert codes(asis) == ["record_zero"]
    assert "load_record.tare = true" in asis.notices[0].text
    for tare in (True, "5 s"):
        record = read(text, tare=tare)
        assert record.force_N[:80].mean() == pytest.approx(0, abs=0.01)
        assert codes(record) == ["record_tared"]
        assert ": 12." in record.notices[0].text


def test_a_zero_that_is_one_is_not_spoken_of(read):
    assert codes(read(HEAD + rows(400, force=pulled(0.0)))) == []


def test_a_record_without_rest_has_no_zero(read):
    with pytest.raises(LoadRecordError, match="samples before loading"):
        read(HEAD + rows(), tare=True)


def test_looking_at_a_record(path):
    path.write_text(
        "Test 7\n\nZeit;Kraft;Weg;Phase\ns;kN;mm;\n" + "".join(f"{i},5;{i},25;{i};A\n" for i in range(20))
    )
    survey = look_at_record(path)
    assert (survey.encoding, survey.separator, survey.decimal, survey.heading) == (
        "utf-8",
        "semicolon",
        ",",
        1,
    )
    assert [(c.header, c.unit, c.quantity) for c in survey.columns] == [
        ("Zeit", "s", "time"), ("Kraft", "kN", "force"), ("Weg", "mm", "displacement"), ("Phase", None, None),
    ]  # fmt: skip
    assert (survey.columns[1].low, survey.columns[1].high) == (0.25, 19.25)
    assert survey.columns[3].missing == survey.rows == 20
    assert survey.interval_s == (1, 1, 1)
    assert (survey.start_s, survey.end_s) == (0.5, 19.5)
    assert len(survey.segments) == 1


def test_looking_at_a_record_whose_time_cannot_be_told(path):
    path.write_text("A;B\n" + rows())
    survey = look_at_record(path)
    assert survey.segments == ()
    assert np.isnan(survey.start_s)


@pytest.mark.parametrize(
    ("last", "kept"),
    [("4.0000;40.000\n", True), ("4.0000;40.000", True), ("4.0000;4", False), ("4.0000;40.00", False),
     ("4.0000;40.", False), ("4.0000;4\n", True)],
)  # fmt: skip
def test_a_last_number_that_may_be_cut_off(read, path, last, kept):
    """Cut off behind the first digit, 40 N would become 4 N, which looks like fracture."""
    record = read(HEAD + rows(40, force="{:.3f}".format) + last)
    assert len(record.time_s) == 40 + kept
    assert codes(record) == ([] if kept else ["record_cut_off"])
    assert [one.code for one in look_at_record(path).notices] == codes(record)


def test_a_whole_number_without_a_line_end_cannot_be_told_from_a_cut_one(read):
    record = read(HEAD + rows(40, force=int).rstrip("\n"))
    assert record.force_N.tolist() == list(range(39))
    assert "row (41) has no line end and may be cut off" in record.notices[0].text


def test_a_clock_that_runs_backwards_is_no_row_of_segments(read, path):
    turned = "".join(reversed(rows(40).splitlines(keepends=True)))
    with pytest.raises(LoadRecordError, match=r"rows 2 to 41: time runs backwards, from 3.9 s to 0 s"):
        read(HEAD + turned)
    seen = look_at_record(path)
    assert len(seen.segments) == 1
    assert "runs backwards" in seen.notices[0].text
