"""Regression against the GUM's worked example and NIST's certified data."""

import importlib.resources
import re
import warnings

import numpy as np
import pytest

from dic.uncertainty import line_with_errors_in_both, straight_line


def test_thermometer_calibration_of_the_gum():
    # JCGM 100:2008, H.3: readings t_k, corrections b_k, line in t - 20 °C.  Data and published results
    # [from memory; recomputed from the data, which agrees].
    t = np.array([21.521, 22.012, 22.512, 23.003, 23.507, 23.999, 24.513, 25.002, 25.503, 26.010, 26.511])
    b = -np.array([171, 169, 166, 159, 164, 165, 156, 157, 159, 161, 160]) / 1000
    line = straight_line(t - 20.0, b)
    # Half a unit of the last published digit.
    assert line.intercept == pytest.approx(-0.1712, abs=0.5e-4)
    assert line.u_intercept == pytest.approx(0.0029, abs=0.5e-4)
    assert line.slope == pytest.approx(0.00218, abs=0.5e-5)
    assert line.u_slope == pytest.approx(0.00067, abs=0.5e-5)
    assert line.correlation == pytest.approx(-0.930, abs=0.5e-3)
    assert line.residual_s == pytest.approx(0.0035, abs=0.5e-4)
    # H.3.4 predicts the correction at 30 °C: -0.1494 with 0.0041 [from memory].
    assert line.at(10.0) == pytest.approx(-0.1494, abs=0.5e-4)
    assert line.u_at(10.0) == pytest.approx(0.0041, abs=0.5e-4)


def test_norris_of_the_nist_reference_data():
    # NIST StRD, data set Norris, as SciPy's test suite carries it (data and certified values).
    text = (importlib.resources.files("scipy.stats.tests") / "data/nist_linregress/Norris.dat").read_text()
    y, x = np.array([line.split() for line in text.splitlines()[60:96]], dtype=float).T
    certified = {key: re.search(rf"^ +{key} +(\S+) +(\S+)$", text, re.M).groups() for key in ("B0", "B1")}
    residual_s = float(re.search(r"Residual\s+Standard Deviation\s+(\S+)", text)[1])
    r_squared = float(re.search(r"R-Squared\s+(\S+)", text)[1])
    line = straight_line(x, y)
    # NIST rates the set "lower level of difficulty"; double precision keeps ten digits and more.
    assert line.intercept == pytest.approx(float(certified["B0"][0]), rel=1e-10)
    assert line.u_intercept == pytest.approx(float(certified["B0"][1]), rel=1e-10)
    assert line.slope == pytest.approx(float(certified["B1"][0]), rel=1e-10)
    assert line.u_slope == pytest.approx(float(certified["B1"][1]), rel=1e-10)
    assert line.residual_s == pytest.approx(residual_s, rel=1e-10)
    assert line.r_squared == pytest.approx(r_squared, rel=1e-12)


#: Pearson's points with York's weights, the classic of errors in both variables: Pearson (1901), doi
#: 10.1080/14786440109462720; York (1966), doi 10.1139/p66-090 [from memory; the result recomputed by SciPy].
PEARSON_X = np.array([0.0, 0.9, 1.8, 2.6, 3.3, 4.4, 5.2, 6.1, 6.5, 7.4])
PEARSON_Y = np.array([5.9, 5.4, 4.4, 4.6, 3.5, 3.7, 2.8, 2.8, 2.4, 1.5])
YORK_X = np.array([1000, 1000, 500, 800, 200, 80, 60, 20, 1.8, 1.0])
YORK_Y = np.array([1, 1.8, 4, 8, 20, 20, 70, 70, 100, 500])


def test_orthogonal_distance_regression_agrees():
    """Reference: scipy.odr (ODRPACK), whose iteration stops at a relative 1e-8 or so."""
    with warnings.catch_warnings():
        warnings.simplefilter("ignore", DeprecationWarning)
        odr = pytest.importorskip("scipy.odr")
        data = odr.RealData(PEARSON_X, PEARSON_Y, YORK_X**-0.5, YORK_Y**-0.5)
        fit = odr.ODR(data, odr.unilinear, beta0=[-0.5, 5.5], sstol=1e-14, partol=1e-14).run()
    line = line_with_errors_in_both(PEARSON_X, PEARSON_Y, YORK_X**-0.5, YORK_Y**-0.5)
    assert line.slope == pytest.approx(fit.beta[0], rel=1e-7)
    assert line.intercept == pytest.approx(fit.beta[1], rel=1e-7)
    # ODRPACK linearises its covariance at the observed, York at the fitted points: half a percent here.
    assert line.u_slope == pytest.approx(fit.sd_beta[0], rel=0.02)
    assert line.u_intercept == pytest.approx(fit.sd_beta[1], rel=0.02)


def test_without_error_in_x_it_is_ordinary_least_squares():
    x, y = PEARSON_X, PEARSON_Y
    one, other = straight_line(x, y), line_with_errors_in_both(x, y, 0.0, 0.3)
    # One formula in two forms: rounding.
    for name in ("slope", "intercept", "u_slope", "u_intercept", "correlation", "residual_s", "u_mean"):
        assert getattr(other, name) == pytest.approx(getattr(one, name), rel=1e-12), name
