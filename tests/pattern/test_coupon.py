"""The coupon's pose against the scene that was rendered; what cannot be told is refused or said."""

import tracemalloc

import numpy as np
import pytest

from dic.errors import PatternError
from dic.pattern import axes, axis_doubts, doubts, find_coupon, picture_quality
from synthetic_images import Camera, Cosines, Coupon, Dots, rigid


def scene(
    angle=0.0, width=140.0, shape=(420, 260), noise=0.01, background=0.1, hole=0.0, texture=None, ends=None
):
    rows, columns = shape
    centre = (columns / 2 - 0.5, rows / 2 - 0.5)
    side = 2 * int(np.hypot(rows, columns)) + 60
    texture = texture or Dots(4.5, area=(side, side), seed=4)
    coupon = Coupon(texture, rigid(0, 0), centre, width, angle, background)

    def seen(x, y):
        value = coupon(x, y)
        x, y = np.broadcast_arrays(x - centre[0], y - centre[1])
        if hole:
            value = np.where(np.hypot(x - 7, y + 11) < hole / 2, background, value)
        if ends:
            value = np.where(abs(y) > ends / 2, background, value)
        return value

    return Camera(noise=noise).photograph(seen, shape)


def off_axis(found, angle):
    return (found.axis_angle_deg - angle + 90) % 180 - 90


#: Every tilt with every margin; picture, background, hole and direction of the pull change from one to the
#: next, so that each meets several tilts and margins.
POSES = [
    (tilt, margin, *((150, 260), (230, 180), (140, 420), (90, 300), (400, 300))[k % 5],
     (0.1, 0.95, 0.5)[k % 3], (0, 0.35)[k % 2], bool(k % 7 // 4))
    for k, (tilt, margin) in enumerate(
        (tilt, margin) for margin in (10, 15, 25, 60) for tilt in (0.0, 3.0, -8.0, 6.0)
    )
]  # fmt: skip


@pytest.mark.parametrize(("tilt", "margin", "width", "length", "background", "hole", "horizontal"), POSES)
def test_axis_and_width_are_found(tilt, margin, width, length, background, hole, horizontal):
    """Truth from the scene; 0.1° turns strain by (1+ν)·sin² = 4e-6 of itself, 0.4 % is 0.5 px of 140."""
    image = scene(tilt, width, (length, width + 2 * margin), background=background, hole=hole * width)
    # Mirrored about the diagonal, a coupon θ from the vertical stands θ from the horizontal.
    found = find_coupon(np.ascontiguousarray(image.T) if horizontal else image)
    assert abs(off_axis(found, 90 - tilt if horizontal else tilt)) < 0.1
    assert found.width_px == pytest.approx(width, rel=0.004)
    assert found.axis_method == "from 2 edges"
    assert axis_doubts(found) == []


@pytest.mark.parametrize(
    ("tilt", "margin", "background", "turned"), [(6, 25, 0.1, True), (3, 15, 0.95, False)]
)
def test_a_short_edge_settles(tilt, margin, background, turned):
    image = scene(tilt, 230, (180, 230 + 2 * margin), background=background)
    found = find_coupon(np.ascontiguousarray(image.T) if turned else image)
    assert abs(off_axis(found, 90 - tilt if turned else tilt)) < 0.1
    assert found.width_px == pytest.approx(230, rel=0.004)


@pytest.mark.parametrize("texture", [Cosines(4.0, seed=2), Dots(9.0, area=(900, 900), seed=2)])
def test_other_textures(texture):
    found = find_coupon(scene(2.0, 150, (300, 220), texture=texture))
    assert abs(off_axis(found, 2.0)) < 0.1
    assert found.width_px == pytest.approx(150, rel=0.004)


@pytest.mark.parametrize("seed", range(3))
def test_without_edges_the_axis_is_not_guessed(seed):
    image = scene(width=900, texture=Dots(4.5, area=(1200, 1200), seed=seed))
    with pytest.raises(PatternError, match=r"no edge of the coupon is in view; give gauge\.axis"):
        find_coupon(image)
    found = find_coupon(image, 0.0)
    assert found.mask.all()
    assert np.isnan(found.width_px)
    (doubt,) = axis_doubts(found)
    assert doubt.code == "edges_not_seen"
    assert "0 of the coupon's two long edges were found" in doubt.text


def test_as_wide_as_long_is_not_guessed():
    with pytest.raises(PatternError, match=r"no side is longer than the others; give gauge\.axis"):
        find_coupon(scene(width=150, shape=(260, 260), ends=160))


def test_not_much_longer_than_wide_is_said():
    found = find_coupon(scene(width=120, shape=(400, 260), ends=250))
    assert abs(off_axis(found, 0.0)) < 0.1
    assert [doubt.code for doubt in axis_doubts(found)] == ["axis_ambiguous"]


def test_one_edge_gives_the_axis_but_no_scale_and_says_so():
    found = find_coupon(scene(3.0, 200, (300, 300))[:, :200])
    assert abs(off_axis(found, 3.0)) < 0.1
    assert np.isnan(found.width_px)
    assert [doubt.code for doubt in axis_doubts(found)] == ["edges_not_seen"]


def test_a_tapered_coupon_is_said():
    image = scene(2.0)
    image[:, 130:] = scene(-1.0)[:, 130:]
    assert [doubt.code for doubt in axis_doubts(find_coupon(image))] == ["edges_not_parallel"]


def test_a_ragged_spray_has_no_axis():
    rows, columns = np.mgrid[:300, :300]
    ragged = 60 + 12 * np.sin(rows / 9) + 9 * np.sin(rows / 5.1)
    image = scene(width=900, shape=(300, 300))
    image[(columns < ragged) | (columns > 300 - ragged[:, ::-1])] = 30
    with pytest.raises(PatternError, match="not straight"):
        find_coupon(image)


def test_a_given_region_stands_for_a_texture_that_is_too_weak_to_stand_out():
    rng = np.random.default_rng(1)
    image = rng.normal(100, 3, (200, 150)).astype(np.uint8)
    region = np.zeros(image.shape, bool)
    region[40:160, 30:120] = True
    assert np.array_equal(find_coupon(image, 0.0, region).mask, region)


def test_a_region_chooses_among_two_coupons():
    image = np.hstack([scene(), scene(width=100, shape=(420, 200))])
    region = np.zeros(image.shape, bool)
    region[100:300, 300:420] = True
    found = find_coupon(image, region=region)
    assert found.width_px == pytest.approx(100, rel=0.004)
    assert not found.mask[~region].any()


def test_a_region_on_the_very_edge_is_refused():
    region = np.zeros((420, 260), bool)
    region[100:300, 60:62] = True  # the edge is at 59.5
    with pytest.raises(PatternError, match=r"gauge\.region: holds nothing"):
        find_coupon(scene(), 0.0, region)


def test_large_pictures_are_searched_in_bounded_memory():
    """A picture of 100 million px, the most that is read, then needs 2.6 GB; rays are few and bounded."""
    image = np.tile(scene(), (10, 1))
    find_coupon(image)  # whatever is imported meanwhile does not count
    tracemalloc.start()
    find_coupon(image)
    peak = tracemalloc.get_traced_memory()[1]
    tracemalloc.stop()
    assert peak < 26 * image.size


def test_the_mask_stays_off_the_edges():
    found = find_coupon(scene())
    columns = np.flatnonzero(found.mask.any(axis=0))
    assert columns[0] >= 130 - 0.5 - 70 + 1
    assert columns[-1] <= 130 - 0.5 + 70 - 1
    assert columns[-1] - columns[0] > 140 - 8


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
    found = find_coupon(image, 0.0)
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
