"""What the test file says of the coupon instead of leaving it to be found."""

import numpy as np
import pytest
from PIL import Image

from dic.errors import PatternError, TestFileError
from dic.pattern import Given, find_coupon
from dic.preparation import _gauge_length, _grid, given_coupon
from dic.strain import Region
from dic.testfile import TestFile
from synthetic_images import Camera, Coupon, Dots, rigid

SHAPE = (300, 240)
LEFT, RIGHT = (54.5, 0.0, 54.5, 299.0), (184.5, 0.0, 184.5, 299.0)


@pytest.fixture(scope="module")
def image():
    """A strip 130 px wide, its edges at x 54.5 and 184.5 px."""
    texture = Dots(4.5, area=(500, 500), seed=7)
    return Camera(noise=0.01).photograph(Coupon(texture, rigid(0, 0), (119.5, 149.5), 130), SHAPE)


def test_edges_given_are_kept(image):
    found = find_coupon(image, given=Given(edges=(RIGHT, LEFT)))
    assert found.axis_angle_deg == pytest.approx(0, abs=1e-9)
    assert found.width_px == pytest.approx(130, abs=1e-9)
    assert found.axis_method == "from the edges given"


def test_edges_at_an_angle_give_the_axis_between_them():
    """Two lines 1° and 3° from the vertical: the axis lies at 2°, and the width where they are seen."""
    lean = [np.tan(np.radians(angle)) for angle in (1, 3)]
    lines = [(x + 149 * t, 0.5, x - 149 * t, 298.5) for x, t in zip((60, 180), lean, strict=True)]
    image = Camera(noise=0.01).photograph(Dots(4.5, area=(500, 500), seed=7), SHAPE)
    found = find_coupon(image, given=Given(edges=tuple(lines)))
    assert found.axis_angle_deg == pytest.approx(2.0, abs=0.01)
    assert found.width_px == pytest.approx(120 * np.cos(np.radians(2)), abs=0.1)


def test_edges_given_stand_for_what_is_horizontal_too(image):
    lines = tuple((y1, x1, y2, x2) for x1, y1, x2, y2 in (LEFT, RIGHT))
    found = find_coupon(np.ascontiguousarray(image.T), given=Given(edges=lines))
    assert abs(found.axis_angle_deg) == pytest.approx(90)
    assert found.width_px == pytest.approx(130, abs=1e-6)


def test_a_mask_given_is_kept_off_the_edges_found(image):
    mask = np.zeros(SHAPE, bool)
    mask[:, 52:188] = True
    found = find_coupon(image, given=Given(mask=mask))
    assert found.width_px == pytest.approx(130, rel=0.002)
    assert not found.mask[:, :56].any()


def test_holes_given_are_left_out_of_the_mask(image):
    found = find_coupon(image, given=Given(holes=((120.0, 150.0, 20.0),)))
    y, x = np.mgrid[: SHAPE[0], : SHAPE[1]]
    assert not found.mask[np.hypot(x - 120, y - 150) < 21].any()
    assert found.holes[150, 120]


def test_the_parallel_section_given_bounds_the_mask(image):
    found = find_coupon(image, given=Given(parallel=(119.0, 100.0, 119.0, 220.0)))
    rows = np.flatnonzero(found.mask.any(axis=1))
    assert 99 <= rows[0] <= 102
    assert 218 <= rows[-1] <= 221


@pytest.mark.parametrize(
    ("given", "said"),
    [
        (
            Given(edges=(LEFT, (300.0, 0.0, 300.0, 299.0))),
            r"edge 2, from x 300, y 0 .* not inside.* 240 px wide",
        ),
        (Given(edges=(LEFT, (184.0, 0.0, 10.0, 299.0))), r"cross inside the picture, at x 5\d, y 2\d\d px"),
        (Given(edges=(LEFT, LEFT)), "same line"),
        (Given(edges=(LEFT, (9.0, 9.0, 9.0, 9.0))), "two points at the same place, x 9, y 9"),
        (Given(mask=np.zeros(SHAPE, bool)), "leaves nothing of the picture.*white"),
        (Given(mask=np.ones((30, 40), bool)), "40 px wide and 30 px high.*240 by 300"),
        (Given(holes=((500.0, 20.0, 10.0),)), "hole 1, radius 10 px about x 500, y 20.*240 px wide"),
        (Given(parallel=(10.0, -5.0, 10.0, 90.0)), "parallel section, from x 10, y -5"),
    ],
)
def test_what_does_not_fit_is_named_with_its_coordinates(image, given, said):
    with pytest.raises(TestFileError, match=said):
        find_coupon(image, given=given)


def test_edges_across_the_pull_are_refused(image):
    with pytest.raises(TestFileError, match="across the pull"):
        find_coupon(image, 90.0, given=Given(edges=(LEFT, RIGHT)))


def test_holes_that_leave_nothing_are_refused(image):
    with pytest.raises(PatternError, match="leave nothing of the coupon"):
        find_coupon(image, 0.0, given=Given(holes=((120.0, 150.0, 400.0),)))


def test_a_region_beside_the_coupon_is_told_where_it_lies(image):
    region = np.zeros(SHAPE, bool)
    region[50:90, 2:30] = True
    with pytest.raises(PatternError, match=r"gauge\.region: .*coupon lies in x 5\d to 18\d, y 0 to 299"):
        find_coupon(image, 0.0, region)


def said(folder, mask):
    """Return a test file that names a mask."""
    sections = {
        "specimen": {"width": "10 mm", "thickness": "1 mm"},
        "frames": {"source": "frames", "rate": "5 Hz"},
        "load_record": {"source": "machine.csv"},
        "coupon": {"mask": mask},
    }
    return TestFile.model_validate(sections).model_copy(update={"path": folder / "test.toml"})


def test_a_mask_is_read_from_beside_the_test_file(tmp_path):
    white = np.zeros((50, 40), np.uint8)
    white[5:45, 10:30] = 255
    Image.fromarray(white).save(tmp_path / "mask.png")
    assert np.array_equal(given_coupon(said(tmp_path, "mask.png")).mask, white > 0)


@pytest.mark.parametrize("name", ["missing.png", "one_bit.png", "text.txt"])
def test_a_mask_that_cannot_be_read_is_named(tmp_path, name):
    Image.fromarray(np.ones((50, 40), bool)).save(tmp_path / "one_bit.png")
    (tmp_path / "text.txt").write_text("no picture", encoding="utf-8")
    with pytest.raises(TestFileError, match=rf"coupon\.mask: the mask .*{name} .*grey picture of 8 bits"):
        given_coupon(said(tmp_path, name))


def test_edges_beside_the_coupon_are_named_and_not_a_region_that_nobody_gave(image):
    beside = Given(edges=((5.0, 10.0, 5.0, 290.0), (35.0, 10.0, 35.0, 290.0)))
    with pytest.raises(PatternError, match=r"coupon\.edges: holds nothing .* lies in x 5\d to 18\d"):
        find_coupon(image, given=beside)


def wanted(**sections):
    return TestFile.model_validate(
        {
            "path": "test.toml",
            "specimen": {"width": "10 mm", "thickness": "1 mm"},
            "frames": {"source": "frames", "rate": "1 Hz"},
            "load_record": {"source": "machine.csv"},
            **sections,
        }
    )


def test_a_gauge_length_of_less_than_two_subsets_is_refused():
    """1 mm at 0.05 mm/px is 20 px; two subsets of 31 px are 3.1 mm."""
    with pytest.raises(TestFileError, match=r"gauge\.length: 1 mm is 20 px.*make it 3\.1 mm or longer"):
        _gauge_length(wanted(gauge={"length": "1 mm"}), 0.05)


@pytest.mark.parametrize(
    ("sections", "named"),
    [
        ({"coupon": {"parallel": (1.0, 2.0, 3.0, 4.0)}}, "coupon.parallel"),
        ({"gauge": {"region": (1.0, 2.0, 30.0, 40.0)}}, "gauge.region"),
    ],
)
def test_where_no_subset_fits_the_key_that_says_where_is_named(sections, named):
    mask = np.zeros(SHAPE, bool)
    mask[100:120, 100:120] = True
    region = Region(np.array([110.0, 110.0]), 20.0, 20.0, np.array([0.0, -1.0]), np.array([1.0, 0.0]))
    with pytest.raises(PatternError, match=rf"^{named} and correlation.subset: .*set .* to 19 or less"):
        _grid(wanted(**sections), mask, region, None)
