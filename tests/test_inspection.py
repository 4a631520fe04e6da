"""What is said before a test is run: inputs with known faults, made here with numpy and tifffile."""

import json

import imageio.v3 as imageio
import numpy as np
import pytest
import tifffile

from dic.errors import TestFileError
from dic.inspection import inspect

TEST = """
[specimen]
width = "10 mm"
thickness = "1 mm"
width_uncertainty = "0.01 mm"
thickness_uncertainty = "0.01 mm"
[frames]
source = "frames"
rate = "2 Hz"
[load_record]
source = "machine.csv"
time = "Time"
force = "Force"
force_uncertainty = "0.5 %"
"""
SHAPE = (40, 30)


def pictures(count=8, seed=1):
    """Return noisy 8-bit pictures from 40 to 220 that brighten by nothing."""
    rng = np.random.default_rng(seed)
    return [rng.integers(40, 221, SHAPE).astype(np.uint8) for _ in range(count)]


@pytest.fixture
def laid_out(tmp_path):
    """Return a function that writes a test, and changes the text of its test file."""

    def lay_out(*changes, frames=None, record=None):
        folder = tmp_path / "frames"
        folder.mkdir(exist_ok=True)
        for k, grey in enumerate(pictures() if frames is None else frames):
            tifffile.imwrite(folder / f"cam_{k + 1}.tif", grey)
        time = np.arange(0, 10.01, 0.1)
        force = np.maximum(0, time - 2) if record is None else record
        rows = "\n".join(f"{t:.2f},{f:.4f}" for t, f in zip(time, force, strict=True))
        (tmp_path / "machine.csv").write_text(f"Time (s),Force (kN)\n{rows}\n")
        text = TEST
        for old, new in changes:
            assert old in text
            text = text.replace(old, new)
        (tmp_path / "test.toml").write_text(text)
        return tmp_path / "test.toml"

    return lay_out


def codes(found):
    return {notice.code for notice in found.warnings}


def test_a_sound_test_has_no_errors_and_no_doubts(laid_out):
    found = inspect(laid_out())
    assert found.errors == ()
    assert found.warnings == ()
    assert (found.frames.count, found.frames.rows, found.frames.columns) == (8, *SHAPE)
    assert (found.frames.first, found.frames.last) == ("cam_1.tif", "cam_8.tif")
    assert found.frames.last_s == pytest.approx(3.5)
    assert found.frames.interval_s == pytest.approx(0.5)
    assert found.record.rows == 101
    assert {one.quantity: (one.low, one.high) for one in found.record.columns} == {
        "time": (0, 10),
        "force": (0, pytest.approx(8000)),
    }
    assert found.record.headers == ("Time (s)", "Force (kN)")
    assert "decimal point" in found.record.written
    assert "start of loading" in found.overlap
    assert "dates" not in found.overlap


def test_exposure_is_that_of_the_pixels(laid_out):
    """Noise that is independent from pixel to pixel: its slope's variance is twice its own."""
    one = inspect(laid_out()).frames.exposures[0]
    first = pictures()[0]
    assert one.median == np.median(first)
    assert one.clipped == 0
    # some 1,200 pixels, so a standard deviation is known to about 3 %
    assert one.detail_px == pytest.approx(1 / np.sqrt(2), rel=0.1)


@pytest.mark.parametrize(
    ("change", "code"),
    [
        (lambda grey: [*grey[:4], grey[3], *grey[5:]], "frames_doubled"),
        (lambda grey: [np.where(g > 200, 255, g).astype(np.uint8) for g in grey], "frames_clipped"),
        (lambda grey: [g // 12 for g in grey], "frames_flat"),
        (lambda grey: [*grey[:-1], (grey[-1] * 0.6).astype(np.uint8)], "frames_brightness"),
        (lambda grey: [*grey[:-1], np.repeat(grey[-1][:, ::3], 3, axis=1)], "frames_blurred"),
    ],
)
def test_each_fault_of_the_pictures_is_a_doubt(laid_out, change, code):
    assert code in codes(inspect(laid_out(frames=change(pictures()))))


def test_a_gap_in_the_times_is_named(laid_out, tmp_path):
    (tmp_path / "t.csv").write_text("time (s)\n0\n1\n2\n3\n5\n6\n7\n8\n")
    found = inspect(laid_out(('rate = "2 Hz"', 'times = "t.csv"')))
    assert found.frames.gaps == (("cam_4.tif", "cam_5.tif"),)
    assert "frames_dropped" in codes(found)


@pytest.mark.parametrize(
    ("old", "new", "code"),
    [
        ('width = "10 mm"', 'width = "10 m"', "dimension_odd"),
        ('thickness = "1 mm"', 'thickness = "12 mm"', "dimension_odd"),
        ('thickness = "1 mm"', 'thickness = "0.01 um"', "stress_odd"),
        ('width_uncertainty = "0.01 mm"', 'width_uncertainty = "2 mm"', "uncertainty_odd"),
        ('force_uncertainty = "0.5 %"', "", "uncertainty_not_given"),
        ("[frames]", '[camera]\nscale = "0.01 mm/px"\n[frames]', "scale_odd"),
        ("[frames]", '[sync]\noffset = "8 s"\n[frames]', "frames_outside"),
        ('rate = "2 Hz"', 'rate = "0.5 Hz"', "record_shorter"),
    ],
)
def test_each_odd_value_is_a_doubt(laid_out, old, new, code):
    assert code in codes(inspect(laid_out((old, new))))


@pytest.mark.parametrize(
    ("force", "code"), [(np.zeros(101), "record_no_load"), (-np.arange(101.0), "record_negative")]
)
def test_each_odd_force_is_a_doubt(laid_out, force, code):
    assert code in codes(inspect(laid_out(record=force)))


def test_what_is_given_is_not_assumed(laid_out):
    assumed = inspect(laid_out()).assumed
    for key in ("sync.offset", "correlation.subset", "properties.proof"):
        assert any(key in sentence for sentence in assumed)
    found = inspect(laid_out(("[frames]", '[sync]\noffset = "1 s"\n[frames]')))
    assert not any("sync.offset" in sentence for sentence in found.assumed)
    assert found.overlap.startswith("8 of 8 frames lie within the record")


def test_clocks_that_do_not_meet_are_an_error(laid_out):
    found = inspect(laid_out(("[frames]", '[sync]\noffset = "100 s"\n[frames]')))
    assert "do not overlap" in found.errors[0]


def test_where_one_input_fails_the_other_is_still_seen(laid_out, tmp_path):
    path = laid_out()
    (tmp_path / "machine.csv").unlink()
    found = inspect(path)
    assert found.record is None
    assert found.frames.count == 8
    assert len(found.errors) == 1
    found = inspect(laid_out(('"frames"', '"none"')))
    assert found.frames is None
    assert found.record.rows == 101
    assert "none" in found.errors[0]


def test_blanks_to_fill_in_do_not_hide_the_inputs(laid_out):
    found = inspect(laid_out(('"10 mm"', '""'), ('"1 mm"', '""')))
    assert "fill in specimen.width and specimen.thickness" in found.errors[0]
    assert found.frames.count == 8
    assert found.record.rows == 101


def test_a_file_that_is_no_toml_is_an_error(tmp_path):
    (tmp_path / "test.toml").write_text("[frames")
    with pytest.raises(TestFileError):
        inspect(tmp_path / "test.toml")


def test_it_is_json_without_what_is_not_a_number(laid_out):
    from dic_cli.inspected import as_json

    flat = [np.full(SHAPE, 90, np.uint8)] * 8
    found = json.loads(as_json(inspect(laid_out(frames=flat))))
    assert found["frames"]["exposures"][0]["detail_px"] is None
    assert found["record"]["rows"] == 101
    assert {"code", "text"} == set(found["warnings"][0])


def test_a_damaged_frame_is_a_doubt_and_most_of_them_an_error(laid_out, tmp_path):
    path = laid_out()
    for k in (3, 4, 5, 6, 7):
        file = tmp_path / "frames" / f"cam_{k}.tif"
        file.write_bytes(file.read_bytes()[:600])
        found = inspect(path)
        assert bool(found.errors) == (k == 7)
        if k < 7:
            assert f"cam_{k}.tif" in found.frames.unreadable
            assert "frames_unreadable" in codes(found)


def test_the_frame_that_strain_counts_from_must_be_readable(laid_out, tmp_path):
    """A PNG that is cut off is known by its data only; of 16 bits even the depth in use needs them."""
    path = laid_out()
    for depth in (np.uint8, np.uint16):
        for k, grey in enumerate(pictures()):
            (tmp_path / "frames" / f"cam_{k + 1}.tif").unlink(missing_ok=True)
            imageio.imwrite(tmp_path / "frames" / f"cam_{k + 1}.png", grey.astype(depth))
        first = tmp_path / "frames" / "cam_1.png"
        first.write_bytes(first.read_bytes()[:400])
        found = inspect(path)
        assert "cam_1.png" in found.errors[0]
        assert found.record.rows == 101
    first.write_bytes((tmp_path / "frames" / "cam_2.png").read_bytes())
    for said, fault in (("[0, 7]", None), ("9", "no frames 9 to 9")):
        path = laid_out(('rate = "2 Hz"', f'rate = "2 Hz"\nreference = {said}'), frames=[])
        errors = inspect(path).errors
        assert fault in errors[0] if fault else not errors


def test_dates_on_both_sides_give_an_offset_to_look_at(laid_out, tmp_path):
    """The frames' clock counts from its first stamp, the record's from its own: 1.5 s later."""
    stamps = "\n".join(f"cam_{k + 1}.tif,2026-05-04 10:00:0{k}.000" for k in range(8))
    (tmp_path / "t.csv").write_text(f"frame,time\n{stamps}\n")
    path = laid_out(('rate = "2 Hz"', 'times = "t.csv"'))
    rows = "\n".join(f"2026-05-04 10:00:{k + 1.5:06.3f},{max(0, k - 3)}" for k in range(12))
    (tmp_path / "machine.csv").write_text(f"Time,Force (kN)\n{rows}\n")
    assert 'it would be "-1.5 s"' in inspect(path).overlap


@pytest.mark.parametrize(
    ("old", "new", "frames_timed"),
    [('rate = "2 Hz"', 'rate = ""', False), ('force = "Force"', 'force = ""', True)],
)
def test_a_blank_key_hides_neither_input(laid_out, old, new, frames_timed):
    found = inspect(laid_out((old, new)))
    assert "fill in" in found.errors[0]
    assert found.frames.count == 8
    assert np.isfinite(found.frames.interval_s) == frames_timed
    assert found.record.rows == 101


def test_a_record_with_a_choice_of_forces_is_still_shown(laid_out, tmp_path):
    path = laid_out(('force = "Force"', 'force = ""'))
    rows = "".join(f"{k / 10},{k}.5,{2 * k}.5\n" for k in range(40))
    (tmp_path / "machine.csv").write_text(f"Time (s),Force 1 (kN),Force 2 (kN)\n{rows}")
    found = inspect(path)
    assert [(one.quantity, one.high) for one in found.record.columns] == [
        ("time", pytest.approx(3.9)), ("force", 39.5), ("force", 78.5)
    ]  # fmt: skip
    assert found.overlap == "unknown as long as the load record is not known"


def test_what_a_run_would_refuse_at_once_is_an_error(laid_out):
    found = inspect(laid_out(("[load_record]", "[gauge]\nregion = [0, 0, 31, 40]\n[load_record]")))
    assert "not inside the picture" in found.errors[0]


def test_bare_numbers_and_an_even_subset_are_assumed(laid_out):
    found = inspect(
        laid_out(
            ('width = "10 mm"', "width = 10"),
            ('rate = "2 Hz"', 'rate = "2"'),
            ("[load_record]", "[correlation]\nsubset = 20\n[load_record]"),
        )
    )
    assert "specimen.width has no unit, and 10 was read as 10 mm." in found.assumed
    assert "frames.rate has no unit, and 2 was read as 2 Hz." in found.assumed
    assert sum("has no unit" in one for one in found.assumed) == 2
    assert any("correlation.subset = 20 is taken as 21" in one for one in found.assumed)


def test_a_value_out_of_bounds_is_said_in_plain_words(laid_out):
    found = inspect(laid_out(('thickness = "1 mm"', 'thickness = "0 mm"')))
    assert "thickness: '0 mm' is not possible, it must be greater than 0" in found.errors[0]


def test_a_named_gauge_outside_the_picture_is_an_error(laid_out):
    gauge = '[gauges.neck]\nkind = "line"\nfrom = [5, 5]\nto = [31, 5]\n[load_record]'
    assert "gauges.neck: [31, 5] px is not inside" in inspect(laid_out(("[load_record]", gauge))).errors[0]
    ok = gauge.replace("31", "29")
    assert inspect(laid_out(("[load_record]", ok))).errors == ()
