"""The line with errors in both coordinates, against published values and limits with closed forms."""

import numpy as np
import pytest

from dic.uncertainty import line_with_errors_in_both

# Pearson's points with York's weights, the field's standard example (York 1966, doi 10.1139/p66-090;
# York and others 2004, doi 10.1119/1.1632486) [points and results from memory].
X = np.array([0.0, 0.9, 1.8, 2.6, 3.3, 4.4, 5.2, 6.1, 6.5, 7.4])
Y = np.array([5.9, 5.4, 4.4, 4.6, 3.5, 3.7, 2.8, 2.8, 2.4, 1.5])
WEIGHT_X = np.array([1000, 1000, 500, 800, 200, 80, 60, 20, 1.8, 1.0])
WEIGHT_Y = np.array([1, 1.8, 4, 8, 20, 20, 70, 70, 100, 500.0])


def test_pearsons_points_with_yorks_weights():
    line = line_with_errors_in_both(X, Y, WEIGHT_X**-0.5, WEIGHT_Y**-0.5, scaled=False)
    # As many digits as are remembered.
    assert line.slope == pytest.approx(-0.480533407, abs=2e-9)
    assert line.intercept == pytest.approx(5.479910224, abs=2e-8)
    assert line.misfit**2 == pytest.approx(1.483294149, abs=1e-8)
    assert line.u_slope == pytest.approx(0.0579850, abs=1e-6)
    assert line.u_intercept == pytest.approx(0.2949707, abs=1e-6)


def test_exchanging_the_axes_inverts_the_slope():
    """What ordinary least squares does not do."""
    line = line_with_errors_in_both(X, Y, WEIGHT_X**-0.5, WEIGHT_Y**-0.5, scaled=False)
    turned = line_with_errors_in_both(Y, X, WEIGHT_Y**-0.5, WEIGHT_X**-0.5)
    assert turned.slope == pytest.approx(1 / line.slope, rel=1e-9)


def test_noise_in_both_leaves_slope_unbiased_and_its_uncertainty_true():
    r = np.random.default_rng(2)
    truth = np.linspace(0, 1, 25)
    lines = [
        line_with_errors_in_both(
            truth + r.normal(0, 0.2, 25), 2 * truth + r.normal(0, 0.2, 25), 0.2, 0.2, scaled=False
        )
        for _ in range(400)
    ]
    slopes = np.array([line.slope for line in lines])
    # Ordinary least squares would give 2·0.087/(0.087 + 0.04) = 1.37.  The median, because with so much
    # noise the slopes lean to one side; 4 standard deviations of a median of 400.
    assert np.median(slopes) == pytest.approx(2.0, abs=4 * 1.25 * slopes.std() / 20)
    stated = np.median([line.u_slope for line in lines])
    quartiles = np.subtract(*np.percentile(slopes, [75, 25])) / 1.349
    # 400 draws tell a spread to some 5 %; the formula itself is of first order.
    assert stated == pytest.approx(quartiles, rel=0.2)


@pytest.mark.parametrize("x", [[1.0, 2.0], [1.0, 1.0, 1.0]])
def test_too_little_for_a_line_is_refused(x):
    x = np.array(x)
    with pytest.raises(ValueError, match="three points"):
        line_with_errors_in_both(x, x, 0.0, 1.0)
