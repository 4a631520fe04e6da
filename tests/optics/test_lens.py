"""Straight coordinates against OpenCV's projection, and the gauges behind a lens that bends."""

import cv2
import numpy as np
import pytest

from dic.correlation.flags import Flag
from dic.correlation.matching import Match
from dic.optics import Lens

FOCAL, CENTRE = (2000.0, 2000.0), (640.0, 480.0)
COEFFICIENTS = (-0.1, 0.03, 1e-3, -5e-4, 0.01)


@pytest.fixture
def lens():
    return Lens.level(FOCAL, CENTRE, COEFFICIENTS)


@pytest.fixture
def places():
    return np.random.default_rng(3).uniform(0, [1279, 959], (500, 2))


def shown(points):
    """Return where OpenCV's model of the same lens shows straight points."""
    ideal = np.c_[(points - CENTRE) / FOCAL, np.ones(len(points))]
    matrix = np.array([[FOCAL[0], 0, CENTRE[0]], [0, FOCAL[1], CENTRE[1]], [0, 0, 1]])
    return cv2.projectPoints(ideal, np.zeros(3), np.zeros(3), matrix, np.array(COEFFICIENTS))[0][:, 0]


def test_straight_places_are_those_that_opencv_projects_back(lens, places):
    # 1e-9 px: Newton's method ends at 1e-13 focal lengths.
    assert np.abs(shown(lens.straight(*places.T)[0]) - places).max() < 1e-9


def test_slopes_are_those_of_differences(lens, places):
    h = 1e-3
    steps = [
        lens.straight(*(places + h * one).T)[0] - lens.straight(*(places - h * one).T)[0] for one in np.eye(2)
    ]
    # Rounding of differences over 2e-3 px of numbers near 1000.
    assert np.abs(np.stack(steps, axis=-1) / (2 * h) - lens.straight(*places.T)[1]).max() < 1e-8


def test_a_settled_lens_keeps_a_place_its_axis_and_its_area(lens):
    middle, axial = np.array([300.0, 200.0]), np.array([-0.6, 0.8])
    place, slopes = lens.settled(middle, axial).straight(*middle)
    assert place == pytest.approx(middle, abs=1e-9)
    turned = slopes @ axial
    assert turned[0] * axial[1] == pytest.approx(turned[1] * axial[0], abs=1e-12)
    assert np.linalg.det(slopes) == pytest.approx(1.0, abs=1e-12)


def test_rigid_travel_behind_a_bending_lens_is_no_strain(lens):
    """Points that OpenCV's lens shows before and after 50 px of travel: straight, they only travel."""
    true = np.random.default_rng(1).uniform(100, 850, (200, 2))
    h = 1e-3

    def slopes(points):
        ends = [shown(points + h * one) - shown(points - h * one) for one in np.eye(2)]
        return np.stack(ends, axis=-1) / (2 * h)

    gone = true + np.array([50.0, -20.0])
    before, after = shown(true), shown(gone)
    gradient = slopes(gone) @ np.linalg.inv(slopes(true)) - np.eye(2)
    moved = after - before
    seen = np.column_stack([moved[:, 0], gradient[:, 0], moved[:, 1], gradient[:, 1]])
    nothing = np.zeros(len(true))
    flags = np.full(len(true), Flag.CONVERGED, np.uint8)
    match = Match(seen, nothing, nothing, nothing, flags, np.zeros(len(true), np.uint8), 1.0)
    straight = lens.straighten(match, *before.T)
    assert np.abs(seen[:, [1, 2, 4, 5]]).max() > 1e-3
    assert straight.affine[:, [0, 3]] == pytest.approx(np.tile([50.0, -20.0], (200, 1)), abs=1e-8)
    # Differences over 2e-3 px again.
    assert np.abs(straight.affine[:, [1, 2, 4, 5]]).max() < 1e-8
    assert straight.as_matched is not None
    assert straight.as_matched == pytest.approx(seen)


def test_a_lens_that_folds_the_picture_is_found_out(lens):
    assert lens.shows((960, 1280))
    assert not Lens.level((500.0, 500.0), CENTRE, (-1.0, 0.0, 0.0, 0.0, 0.0)).shows((960, 1280))
