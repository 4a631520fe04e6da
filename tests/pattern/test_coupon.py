"""The coupon's pose against the scene that was rendered, and against scikit-image's region measure."""

import numpy as np
import pytest

from dic.errors import PatternError
from dic.pattern import axes, doubts, find_coupon, picture_quality
from synthetic_images import Camera, Coupon, Dots, rigid


def scene(angle=0.0, width=140.0, shape=(420, 260), noise=0.01, background=0.1):
    rows, columns = shape
    coupon = Coupon(
        Dots(4.5, area=(700, 700), seed=4),
        rigid(0, 0),
        (columns / 2 - 0.5, rows / 2 - 0.5),
        width,
        angle,
        background,
    )
    return Camera(noise=noise).photograph(coupon, shape)


@pytest.mark.parametrize("angle", [0.0, 3.0, -8.0])
def test_axis_and_width_are_found(angle):
    """Truth from the scene; 0.1° turns strain by (1+ν)·sin² = 4e-6 of itself, 0.4 % is 0.5 px of 140."""
    found = find_coupon(scene(angle))
    assert found.axis_angle_deg == pytest.approx(angle, abs=0.1)
    assert found.width_px == pytest.approx(140, rel=0.004)
    assert found.axis_method == "from 2 edges"


def test_a_bright_background_is_no_coupon():
    found = find_coupon(scene(background=0.95))
    assert found.width_px == pytest.approx(140, rel=0.004)


def test_the_mask_stays_off_the_edges():
    found = find_coupon(scene())
    columns = np.flatnonzero(found.mask.any(axis=0))
    assert columns[0] >= 130 - 0.5 - 70 + 1
    assert columns[-1] <= 130 - 0.5 + 70 - 1
    assert columns[-1] - columns[0] > 140 - 8


def test_a_horizontal_pull_is_seen():
    found = find_coupon(np.ascontiguousarray(scene().T))
    assert abs(found.axis_angle_deg) == pytest.approx(90, abs=0.1)


def test_texture_to_every_rim_is_a_coupon_without_edges():
    found = find_coupon(scene(width=900))
    assert found.mask.all()
    assert np.isnan(found.width_px)


def test_a_given_axis_is_kept():
    found = find_coupon(scene(3.0), 0.0)
    assert found.axis_angle_deg == 0
    assert found.axis_method == "given"


@pytest.mark.parametrize(
    "image",
    [
        np.full((200, 150), 90, np.uint8),
        np.random.default_rng(1).normal(100, 3, (200, 150)).astype(np.uint8),
    ],
)
def test_no_texture_is_an_error_with_its_reason(image):
    with pytest.raises(PatternError, match=r"one grey value|no textured area"):
        find_coupon(image)


def test_axes_are_right_handed_as_seen():
    up, right = axes(0.0)
    np.testing.assert_allclose(up, [0, -1])
    np.testing.assert_allclose(right, [1, 0])
    clockwise, _ = axes(90.0)
    np.testing.assert_allclose(clockwise, [1, 0], atol=1e-15)


@pytest.mark.parametrize("diameter", [5.0, 8.0, 12.0])
def test_speckle_size_follows_the_dots(diameter):
    """A disc's autocorrelation falls to half at 0.81 of its radius either side (overlap of two circles).

    The pixel (1 px) and the soft edge (0.5 px) widen it by about half a pixel; hence the tolerance."""
    shape = (300, 300)
    texture = Dots(diameter, area=(400, 400), seed=2)
    image = Camera().photograph(lambda x, y: texture(x, y), shape)
    found = find_coupon(image)
    assert found.speckle_px == pytest.approx(0.81 * diameter, abs=0.8)


def test_doubts_name_what_is_wrong_and_what_to_do():
    image = scene()
    coupon = find_coupon(image)
    good = picture_quality(image, coupon, 255)
    assert doubts(good, 31) == []
    codes = {
        doubt.code
        for doubt in doubts({"speckle_px": 1.5, "saturated_fraction": 0.2, "grey_range_percent": 5.0}, 31)
    }
    assert codes == {"small_speckles", "saturated", "low_contrast"}
    (small,) = doubts({**good, "speckle_px": 9.0}, 21)
    assert "correlation.subset to 29" in small.text
