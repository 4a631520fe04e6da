"""Scales that contradict each other, and patches that are none."""

from types import SimpleNamespace

import numpy as np
import pytest

from dic.correlation import Settings
from dic.errors import TestFileError
from dic.optics import lay_patch, settle_scale
from dic.testfile import Camera, Specimen, load
from synthetic_images import Dots
from synthetic_images.camera import picture

SHAPE = (300, 400)
FLAT = Specimen(width="10 mm", thickness="2 mm", width_uncertainty="0.01 mm")


def settled(camera, width_px=200.0):
    coupon = SimpleNamespace(width_px=width_px, u_width_px=0.2)
    return settle_scale(camera, FLAT, coupon, SHAPE)


def marks(distance, to=(390, 50)):
    return {"from": (90, 50), "to": to, "distance": distance}


def test_scale_comes_from_what_is_said_first():
    scale, notices = settled(Camera())
    assert (scale.mm, scale.source, notices) == (0.05, "the coupon's width", ())
    # 0.01 mm of 10 mm and 0.2 px of 200 px.
    assert scale.u_relative == pytest.approx(np.hypot(0.001, 0.001))
    scale, _ = settled(Camera(marks=marks("15 mm")))
    assert scale.mm == pytest.approx(0.05)
    assert scale.u_relative == pytest.approx(np.sqrt(2) * 0.5 / 300)
    assert settled(Camera(scale="0.05 mm/px"), np.nan)[0].mm == 0.05


def test_two_scales_that_contradict_each_other_are_named():
    with pytest.raises(TestFileError, match=r"camera.scale gives 0.05 mm/px, camera.marks 0.053"):
        settled(Camera(scale="0.05 mm/px", marks=marks("16 mm")))
    _, (notice,) = settled(Camera(scale="0.06 mm/px"))
    assert notice.code == "scale_contradicts_width"
    assert "200.0 px" in notice.text


def test_marks_outside_the_picture_are_named():
    with pytest.raises(
        TestFileError, match=r"mark x 500, y 50 px is not in the picture; the picture is 400 px"
    ):
        settled(Camera(marks=marks("15 mm", (500, 50))))
    with pytest.raises(TestFileError, match=r"only 2.0 px apart"):
        settled(Camera(marks=marks("15 mm", (92, 50))))


@pytest.fixture(scope="module")
def photograph():
    image = 255 * picture(Dots(4.5, area=SHAPE[::-1], seed=2), SHAPE)
    image[:, 300:] = 128.0
    return image


@pytest.mark.parametrize(
    ("rectangle", "what"),
    [
        ((350, 10, 100, 90), "x 350 to 450, y 10 to 100 px is not inside the picture; the picture is 400"),
        ((50, 10, 100, 90), "lies on the coupon at x 50 to 79, y 10 to 99 px"),
        ((100, 10, 20, 20), "is smaller than a subset of 31 px"),
        ((100, 10, 32, 32), "holds only [1-5] subsets"),
        ((305, 10, 90, 90), "has too little texture"),
    ],
)  # fmt: skip
def test_a_patch_that_is_none_is_named(photograph, rectangle, what):
    coupon = np.zeros(SHAPE, bool)
    coupon[:, :80] = True
    with pytest.raises(TestFileError, match=what):
        lay_patch(
            photograph, rectangle, coupon, subset=31, step=10, settings=Settings(), frames=1, lens=None
        )  # fmt: skip


BOARD = 'source = "b", columns = 9, rows = 7, square = "5 mm"'


@pytest.mark.parametrize(
    ("said", "what"),
    [
        ("still_patch = [1, 2, 3]", "still_patch: a number is missing in the list"),
        ('telecentric = "3 per mm"', "is no false strain of a lens"),
        (f"board = {{ sorce = 'b', {BOARD} }}", "did you mean 'source'"),
        (f"board = {{ {BOARD}, kind = 'charuco', marker = '3 mm', dictionary = '4X4_51' }}", "mean '4X4_50'"),
        (f"board = {{ {BOARD}, kind = 'charuco' }}", "needs marker"),
    ],
)
def test_a_camera_that_is_not_understood_is_named(tmp_path, said, what):
    sections = '[specimen]\nwidth = "10 mm"\nthickness = "2 mm"\n[frames]\nsource = "f"\nrate = "5 Hz"\n'
    path = tmp_path / "test.toml"
    path.write_text(f'{sections}[load_record]\nsource = "m.csv"\n[camera]\n{said}\n')
    with pytest.raises(TestFileError, match=what):
        load(path)
