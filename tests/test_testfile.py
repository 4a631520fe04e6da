import os

import pytest

from dic.errors import TestFileError
from dic.testfile import load, sound_sections

GOOD = """
[specimen]
width = "12.5 mm"
thickness = "0.2 cm"
[frames]
source = "frames"
rate = "300 1/min"
[load_record]
source = "m.csv"
time = "Time"
force = 3
"""


def written(tmp_path, text):
    path = tmp_path / "test.toml"
    path.write_text(text)
    return path


def test_quantities_become_internal_units(tmp_path):
    test = load(written(tmp_path, GOOD))
    assert test.specimen.thickness == pytest.approx(2.0)
    assert test.specimen.area == pytest.approx(25.0)
    assert test.frames.rate == pytest.approx(5.0)
    assert test.beside("m.csv") == tmp_path / "m.csv"


def test_a_round_coupon_has_a_diameter(tmp_path):
    text = GOOD.replace('width = "12.5 mm"\nthickness = "0.2 cm"', 'shape = "round"\ndiameter = "10 mm"')
    test = load(written(tmp_path, text))
    assert test.specimen.area == pytest.approx(78.5398, rel=1e-6)  # π/4 · 10²
    assert test.specimen.visible_width == 10


def test_area_uncertainty_adds_in_squares(tmp_path):
    text = GOOD.replace(
        "[frames]", 'width_uncertainty = "0.0375 mm"\nthickness_uncertainty = "0.008 mm"\n[frames]'
    )
    # 0.3 % and 0.4 %: a 3-4-5 triangle.
    assert load(written(tmp_path, text)).specimen.area_uncertainty == pytest.approx(0.005)


@pytest.mark.parametrize(
    ("old", "new", "said"),
    [
        ("[frames]", "[frame]", "did you mean 'frames'"),
        ("source", "sorce", "did you mean 'source'"),
        ("12.5 mm", "-1 mm", "width: .* is not possible, it must be greater than 0"),
        ("12.5 mm", "twelve", "'twelve' is not a length"),
        ("12.5 mm", "12.5 N", "'N' is not a unit of length"),
        ('thickness = "0.2 cm"', "", "thickness missing"),
        ('rate = "300 1/min"', "", "give one of rate, times or clock"),
        ('rate = "300 1/min"', 'rate = "5 Hz"\ntimes = "t.csv"', "give one of rate, times or clock"),
        ('source = "m.csv"', "", "the key 'source' is missing"),
        ("[specimen]", "[specimen", "not valid TOML"),
        ("[frames]", '[gauge]\naxis = "askew"\n[frames]', "'askew' is not an angle"),
        ("[frames]", '[gauge]\naxis = "1e999 deg"\n[frames]', "'1e999 deg' is not a finite angle"),
        ("[frames]", "diameter = 12\n[frames]", "a flat coupon has no diameter"),
        ("[frames]", "diameter_uncertainty = 1\n[frames]", "a flat coupon has no diameter_uncertainty"),
        ("[specimen]", '[specimen]\nshape = "round"\ndiameter = 12', "a round coupon has no width"),
        ("12.5 mm", "", 'fill in specimen.width; for example width = "12.5 mm"'),
        ('rate = "300 1/min"', 'rate = " "', "fill in frames.rate"),
        ('source = "frames"', 'source = ""', "fill in frames.source"),
        ('force = 3', 'force = ""\nunits = { Force = "" }',
         "fill in load_record.force and load_record.units.Force"),
        ("[frames]", '[sync]\noffset = ""\n[frames]', "fill in sync.offset;"),
        ("[frames]", '[gauge]\nregion = "all"\n[frames]', r"\[gauge\]: region: .* it must be"),
        ('rate = "300 1/min"', 'rate = 1\nreference = "first"', r"\[frames\]: reference: .* it must be"),
        ("m.csv", "m\\u0000.csv", "control character"),
        ("m.csv", "m" * 300, "more than 255 bytes"),
        ("m.csv", "m/" * 600, "longer than 1000"),
        ("rate =", "rate_\n=", "not valid TOML"),
        ('rate = "300 1/min"', "rate = " + "1" * 5000, "not valid TOML"),
        ('rate = "300 1/min"', "rate = 2026-02-30", "not valid TOML"),
        ("[frames]", "[properties]\nmodulus = { strain = [0.2, 0.1] }\n[frames]", "low before high"),
    ],
)  # fmt: skip
def test_each_mistake_is_named_with_its_place(tmp_path, old, new, said):
    assert old in GOOD
    with pytest.raises(TestFileError, match=said):
        load(written(tmp_path, GOOD.replace(old, new, 1)))


def test_not_a_text_file(tmp_path):
    path = tmp_path / "test.toml"
    path.write_bytes(b"\xff\xfe\x00")
    with pytest.raises(TestFileError, match="not valid TOML"):
        load(path)


@pytest.mark.parametrize("name", ["/dev/zero", "pipe", "folder"])
def test_what_has_no_end_is_not_read(tmp_path, name):
    os.mkfifo(tmp_path / "pipe")
    (tmp_path / "folder").mkdir()
    with pytest.raises(TestFileError, match="is not a file"):
        load(tmp_path / name)


def test_a_message_is_one_line_that_steers_no_terminal(tmp_path):
    with pytest.raises(TestFileError) as caught:
        load(written(tmp_path, GOOD + '"\\u001b[2J\\n" = 1\n'))
    assert str(caught.value).isprintable()


def test_sections_that_are_right_by_themselves(tmp_path):
    found = sound_sections(written(tmp_path, GOOD.replace("12.5 mm", "") + '[sync]\noffset = "soon"\n'))
    assert set(found) == {"frames", "load_record"}
    assert found["frames"].rate == pytest.approx(5.0)


def test_far_too_large(tmp_path):
    with pytest.raises(TestFileError, match="far too large"):
        load(written(tmp_path, "#" * 1_000_001))
