"""Rules of optics that a single camera has to keep."""

import numpy as np
import pytest

from dic.pattern import axes
from dic.strain.tensors import engineering
from synthetic_images import homogeneous


@pytest.mark.parametrize("angle_deg", [1.0, 5.0, 10.0])
def test_an_axis_that_is_not_turned_with_the_coupon_reads_low(angle_deg):
    """By the fraction (1 + ν)·sin²θ, which follows from turning a small strain; turned, nothing is lost."""
    strain, ratio = 1e-5, 0.3
    gradient = np.array(homogeneous(strain, -ratio * strain, axis_angle_deg=angle_deg).gradient) - np.eye(2)
    turned, _, _ = engineering(gradient, *axes(angle_deg))
    straight, _, _ = engineering(gradient, *axes(0.0))
    # Second-order terms of a strain of 1e-5.
    assert turned == pytest.approx(strain, rel=1e-9)
    low = (1 + ratio) * np.sin(np.radians(angle_deg)) ** 2
    assert straight / strain == pytest.approx(1 - low, abs=2e-5)
