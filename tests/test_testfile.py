import pytest

from dic.errors import TestFileError
from dic.testfile import load

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
        ("12.5 mm", "-1 mm", "width: input should be greater than 0"),
        ("12.5 mm", "twelve", "'twelve' is not a length"),
        ("12.5 mm", "12.5 N", "'N' is not a unit of length"),
        ('thickness = "0.2 cm"', "", "thickness missing"),
        ('rate = "300 1/min"', "", "give either rate or times"),
        ('rate = "300 1/min"', 'rate = "5 Hz"\ntimes = "t.csv"', "give either rate or times"),
        ('force = 3', "", "the key 'force' is missing"),
        ("[specimen]", "[specimen", "not valid TOML"),
        ("[frames]", '[gauge]\naxis = "askew"\n[frames]', "'askew' is not an angle"),
        ("[frames]", '[gauge]\naxis = "1e999 deg"\n[frames]', "'1e999 deg' is not a finite angle"),
        ("[frames]", "diameter = 12\n[frames]", "a flat coupon has no diameter"),
        ("[frames]", "diameter_uncertainty = 1\n[frames]", "a flat coupon has no diameter_uncertainty"),
        ("[specimen]", '[specimen]\nshape = "round"\ndiameter = 12', "a round coupon has no width"),
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


def test_far_too_large(tmp_path):
    with pytest.raises(TestFileError, match="far too large"):
        load(written(tmp_path, "#" * 1_000_001))
