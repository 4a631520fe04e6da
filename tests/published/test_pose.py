"""The coupon's pose against scikit-image's region properties and Hough transform of the scene's outline.

Both see the true silhouette, rendered without texture, so they know nothing of how edges are found here.
"""

import numpy as np
import pytest
from skimage.measure import label, regionprops
from skimage.transform import hough_line, hough_line_peaks

from dic.pattern import find_coupon
from synthetic_images import Camera, Coupon, Dots, rigid

SHAPE = (420, 300)
MIDDLE = (149.5, 209.5)


def scene(tilt, texture):
    return Coupon(texture, rigid(0, 0), MIDDLE, 150.0, tilt, background=0.0)


@pytest.fixture(params=[3.0, -7.0])
def both(request):
    """The silhouette, and what is found in the speckled picture."""
    found = find_coupon(
        Camera(noise=0.01).photograph(scene(request.param, Dots(4.5, area=(900, 900), seed=5)), SHAPE)
    )
    white = Camera(black=0.0, white=1.0, bits=16).photograph(
        scene(request.param, lambda X, Y: np.ones(np.broadcast_shapes(X.shape, Y.shape))), SHAPE
    )
    return found, white > 32767


def test_orientation_of_the_silhouette(both):
    """Moments of a strip cut square by the picture's rim lean by some tenths of a degree; a disc cut out of
    its middle does not end at the rim, and only the strip's sides are left to bound it."""
    found, silhouette = both
    y, x = np.mgrid[: SHAPE[0], : SHAPE[1]]
    turn = np.radians(found.axis_angle_deg)
    along = (x - MIDDLE[0]) * np.sin(turn) - (y - MIDDLE[1]) * np.cos(turn)
    (region,) = regionprops(label(silhouette & (abs(along) < 180)))
    # orientation counts from the rows' axis, counter-clockwise as seen; ends cut by the found axis itself
    # lean along with it, which halves no error of the sides.
    assert -np.degrees(region.orientation) == pytest.approx(found.axis_angle_deg, abs=0.15)


def test_long_sides_in_hough_space(both):
    """Angles are scanned in steps of 0.05°, distances in whole px."""
    found, silhouette = both
    rim = silhouette[:, 1:] ^ silhouette[:, :-1]
    angles = np.radians(np.arange(-10, 10, 0.05))
    space, theta, distance = hough_line(rim, theta=angles)
    _, tilts, places = hough_line_peaks(space, theta, distance, min_distance=40, num_peaks=2)
    # theta is the angle of the normal from the columns' axis; rows count down, so it turns as the axis does
    assert np.degrees(tilts).mean() == pytest.approx(found.axis_angle_deg, abs=0.15)
    assert np.ptp(places) == pytest.approx(found.width_px, abs=2.0)
