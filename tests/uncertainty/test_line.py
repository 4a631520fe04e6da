"""The straight line, against NumPy's polynomial fit."""

import numpy as np
import pytest

from dic.uncertainty import straight_line


@pytest.fixture
def points():
    r = np.random.default_rng(4)
    x = np.sort(r.uniform(20, 90, 17))
    return x, 3.0 - 0.25 * x + r.normal(0, 0.4, 17)


def test_line_and_covariance_agree_with_polyfit(points):
    x, y = points
    line = straight_line(x, y)
    (slope, intercept), covariance = np.polyfit(x, y, 1, cov=True)
    # Two algorithms for one formula: rounding of some 1e-16 times the condition number (about 1e4).
    assert line.slope == pytest.approx(slope, rel=1e-10)
    assert line.intercept == pytest.approx(intercept, rel=1e-10)
    assert line.u_slope == pytest.approx(np.sqrt(covariance[0, 0]), rel=1e-10)
    assert line.u_intercept == pytest.approx(np.sqrt(covariance[1, 1]), rel=1e-10)
    assert line.correlation == pytest.approx(
        covariance[0, 1] / np.sqrt(covariance[0, 0] * covariance[1, 1]), rel=1e-10
    )
    for at in (0.0, 40.0, 200.0):
        place = np.array([at, 1.0])
        assert line.at(at) == pytest.approx(slope * at + intercept, rel=1e-10)
        assert line.u_at(at) == pytest.approx(np.sqrt(place @ covariance @ place), rel=1e-10)


def test_too_few_points_are_refused():
    with pytest.raises(ValueError, match="at least three"):
        straight_line(np.array([1.0, 2.0]), np.array([1.0, 2.0]))


def test_one_abscissa_is_no_line():
    with pytest.raises(ValueError, match="identical"):
        straight_line(np.ones(5), np.arange(5.0))
