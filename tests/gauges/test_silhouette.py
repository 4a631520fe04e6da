"""The width between the edges, against the coupon's true width: plain and speckled, tilted and moved."""

from dataclasses import dataclass

import numpy as np
import pytest

from dic.errors import TestFileError
from dic.gauges import NamedReadings, place_gauges
from dic.gauges.silhouette import MOST_UNEVEN, USUAL_PX, Silhouette, clear, mean_motion, pattern_px
from dic.pattern import axes, find_coupon
from dic.strain import Region
from dic.testfile import NamedGauge
from synthetic_images import Camera, Dots, Photograph, homogeneous
from synthetic_images.coupon import Coupon as Scene

SHAPE, WIDTH, NOISE = (380, 300), 180.3, 0.01
CENTRE = ((SHAPE[1] - 1) / 2, (SHAPE[0] - 1) / 2)
SPECKLE = Dots(4.5, area=(450, 500), seed=1)


def plain(x, y):
    return np.full(np.broadcast(x, y).shape, 0.8)


def picture(texture, motion, angle, frame):
    camera = Camera(bits=8, noise=NOISE)
    return camera.photograph(Scene(texture, motion, CENTRE, WIDTH, angle, 0.1), SHAPE, frame=frame, seed=5)


def motion_of(strain, angle, shift=(0.0, 0.0)):
    return homogeneous(strain, -0.33 * strain, axis_angle_deg=angle, centre=CENTRE, shift=shift)


def affine(motion):
    x, y = (grid.ravel() for grid in np.meshgrid(np.arange(90, 211, 20.0), np.arange(60, 321, 20.0)))
    to_x, to_y = motion(x, y)
    return mean_motion(np.stack([x, y], 1), np.stack([to_x - x, to_y - y], 1), np.array(CENTRE))


@pytest.fixture(scope="module")
def silhouette():
    """Return a function that prepares one, 288 px of edge long, from eight frames at rest."""
    kept = {}

    def prepare(texture, angle):
        if (texture, angle) not in kept:
            still = motion_of(0.0, angle)
            frames = [picture(texture, still, angle, 1000 + k).astype(float) for k in range(8)]
            # A plain coupon has no pattern to be found by; its pose is that of the speckled one.
            coupon = find_coupon(picture(SPECKLE, still, angle, 1), angle)
            region = Region(np.array(CENTRE), 300.0, 170.0, *axes(angle))
            kept[texture, angle] = Silhouette(np.mean(frames, axis=0), coupon, region)
        return kept[texture, angle]

    return prepare


@pytest.mark.parametrize("angle", [0.0, 3.0])
@pytest.mark.parametrize(("texture", "bias"), [(plain, 0.003), (SPECKLE, 0.01)])
def test_change_of_width_is_true_within_a_hundredth_of_a_pixel(silhouette, texture, bias, angle):
    """Mean over six sub-pixel places; four times its scatter comes on top of what is allowed.  A pattern at
    the edge is squeezed with the coupon, which a plain one has not."""
    edges = silhouette(texture, angle)
    for strain in (0.0, 0.005, 0.02):
        misses, stated = [], []
        for k in range(6):
            motion = motion_of(strain, angle, (0.21 * k, 0.13 * k))
            found = clear(edges.measure(picture(texture, motion, angle, k), affine(motion)), 2.57)
            seen = np.isfinite(found.px)
            assert seen.sum() >= 17
            misses.append(np.mean((found.px - edges.reference.px)[seen]) + 0.33 * strain * WIDTH)
            stated.append(2.57 * found.u_per_grey[seen][0] * np.sqrt((1 + 1 / 8) / seen.sum()))
        assert abs(np.mean(misses)) < bias + 4 * np.mean(stated) / np.sqrt(6) * 0.5
        # One frame, noise and all: the target of 0.01 px for 300 px of edge.
        assert np.mean(stated) < 0.01
        assert np.std(misses) < 2 * np.mean(stated)


def test_plain_width_itself_is_true(silhouette):
    """An area under the edge has no bias: 0.003 px are two standard uncertainties of eight frames."""
    assert np.mean(silhouette(plain, 0.0).reference.px) == pytest.approx(WIDTH, abs=0.005)


def test_turning_is_no_widening(silhouette):
    """By 5° about the middle; cos 5° would make 0.7 px of it."""
    edges = silhouette(plain, 0.0)
    turned = motion_of(0.0, 5.0)
    angle = np.deg2rad(5.0)
    rotation = np.array([[np.cos(angle), -np.sin(angle)], [np.sin(angle), np.cos(angle)]]) - np.eye(2)
    motion = np.column_stack([np.zeros(2), rotation])
    found = edges.measure(picture(plain, turned, 5.0, 3), motion)
    assert np.nanmean(found.px) == pytest.approx(WIDTH, abs=0.02)


def test_what_leaves_the_view_is_nan_and_does_not_shift_the_rest(silhouette):
    edges = silhouette(SPECKLE, 0.0)
    motion = motion_of(0.0, 0.0, (0.0, -120.0))
    found = edges.measure(picture(SPECKLE, motion, 0.0, 4), affine(motion))
    lost = np.isnan(found.px)
    assert 4 <= lost.sum() <= 8
    change = np.nanmean(found.px - edges.reference.px)
    # Four standard uncertainties of some 200 px of edge.
    assert abs(change) < 4 * 0.009


def test_a_coupon_as_grey_as_its_background_is_not_clear(silhouette):
    edges = silhouette(plain, 0.0)
    grey = np.full(SHAPE, 90.0) + np.random.default_rng(1).normal(0, 2, SHAPE)
    assert np.isnan(clear(edges.measure(grey, np.zeros((2, 3))), 2.0).px).all()


@pytest.mark.parametrize("light", [{}, {"gradient": 0.3}, {"vignette": 0.3}])
def test_a_plain_background_may_be_lit_unevenly(light):
    still, camera = motion_of(0.0, 0.0), Camera(bits=8, noise=NOISE, **light)
    frame = camera.photograph(Scene(SPECKLE, still, CENTRE, WIDTH, 0.0, 0.1), SHAPE, seed=5)
    assert over(frame).uneven < MOST_UNEVEN / 2


@pytest.mark.parametrize("name", ["brick", "grass", "gravel"])
def test_a_cluttered_background_is_refused(name):
    """Real photographs; what passes the edge would read as a change of width."""
    scene = Scene(SPECKLE, motion_of(0.0, 0.0), CENTRE, WIDTH, 0.0, Photograph.named(name, 3.0))
    edges = over(Camera(bits=8, noise=NOISE).photograph(scene, SHAPE, seed=5))
    gauge = {"w": NamedGauge(kind="edge_width")}
    with pytest.raises(TestFileError, match=r"gauges\.w: the background .* not plain.*5 % is the most"):
        place_gauges(gauge, None, edges_region(), 0.05, edges)


def test_a_round_bar_before_clutter_has_no_transverse_strain(subsets):
    @dataclass(frozen=True)
    class History:
        transverse: np.ndarray
        u_transverse: np.ndarray

    scene = Scene(SPECKLE, motion_of(0.0, 0.0), CENTRE, WIDTH, 0.0, Photograph.named("brick", 3.0))
    edges = over(Camera(bits=8, noise=NOISE).photograph(scene, SHAPE, seed=5))
    found = NamedReadings(subsets, (), edges).of_round_bar(History(np.zeros(3), np.ones(3)))
    assert np.isnan([found.transverse, found.u_transverse]).all()


def edges_region():
    return Region(np.array(CENTRE), 300.0, 170.0, *axes(0.0))


def over(frame):
    coupon = find_coupon(picture(SPECKLE, motion_of(0.0, 0.0), 0.0, 1), 0.0)
    return Silhouette(frame, coupon, edges_region())


def test_the_scatter_of_stations_tells_what_the_pattern_does():
    """A taper, grey noise of 0.03 px and a pattern's 0.1 px at 15 stations, drawn 400 times: the variance
    of their mean is known to 2 %, four times that; 17 % on top is the pattern in the coupon's level, and the
    part of the noise that all stations share does not show in their scatter."""
    rng, along = np.random.default_rng(2), np.arange(15) * 16.0
    change = 0.002 * along + rng.normal(0, np.hypot(0.1, 0.03 * np.sqrt(0.75)), (400, 15))
    stated = np.array([pattern_px(along, one, np.full(15, 0.03)) for one in change])
    assert np.mean(stated**2) == pytest.approx(1.17 * 0.1**2 / 15, rel=0.09)
    assert pattern_px(along, 0.002 * along, np.full(15, 0.03)) == 0.0
    lost = np.where(np.arange(15) < 3, 0.0, np.nan)
    assert pattern_px(along, lost, np.full(15, 0.03)) == pytest.approx(USUAL_PX / np.sqrt(3))
