"""Regression against the GUM's worked example and NIST's certified data."""

import importlib.resources
import re

import numpy as np
import pytest

from dic.uncertainty import straight_line


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
