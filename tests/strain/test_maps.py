import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from dic.pattern import axes
from dic.strain import StrainMapper, engineering, gauge_size


def test_virtual_gauge_size_is_the_guides_formula():
    """iDICs Good Practices Guide: VSG = (window − 1)·step + subset; their kind of example by hand."""
    assert gauge_size(5, 10, 31) == 71


slopes = st.floats(-0.2, 0.2)


@given(slopes, slopes, slopes, slopes, st.integers(1, 20))
def test_a_linear_field_gives_its_own_gradient_with_or_without_gaps(a, b, c, d, step):
    x, y = np.meshgrid(np.arange(9.0) * step, np.arange(7.0) * step)
    u, v = a * x + b * y + 1, c * x + d * y - 2
    u[2, 3] = np.nan
    found = StrainMapper(3, step, axes(0.0)).gradient(u, v)
    assert np.isnan(found[2, 3]).all()
    good = np.isfinite(found).all(axis=(2, 3))
    assert good.sum() >= 9 * 7 - 5  # the gap, and corners with fewer than half a window
    np.testing.assert_allclose(found[good], np.broadcast_to([[a, b], [c, d]], found[good].shape), atol=1e-9)


def test_too_few_neighbours_are_no_strain():
    u = np.full((7, 7), np.nan)
    u[3, :] = 1.0  # a line of points spans no plane
    assert np.isnan(StrainMapper(5, 4, axes(0.0)).gradient(u, u)).all()


def test_strain_map_turns_into_coupon_axes():
    y, x = np.mgrid[0:60:10.0, 0:80:10.0]
    # Pull along the picture's horizontal by 1 %.
    found = StrainMapper(3, 10, axes(90.0)).strain(0.01 * x, -0.003 * y)
    np.testing.assert_allclose(found.axial[1:-1, 1:-1], 0.01, atol=1e-12)
    np.testing.assert_allclose(found.transverse[1:-1, 1:-1], -0.003, atol=1e-12)


@given(st.floats(-0.5, 0.5), st.floats(-0.3, 1.0), st.floats(-0.3, 0.3))
def test_stretch_is_what_remains_after_any_rotation(angle, axial, transverse):
    """F = R·U: engineering strains read U whatever R is."""
    c, s = np.cos(angle), np.sin(angle)
    gradient = np.array([[c, -s], [s, c]]) @ np.diag([1 + transverse, 1 + axial]) - np.eye(2)
    a, t, shear = engineering(gradient, *axes(0.0))
    assert a == pytest.approx(axial, abs=1e-12)
    assert t == pytest.approx(transverse, abs=1e-12)
    assert shear == pytest.approx(0, abs=1e-12)


def test_simple_shear_changes_the_right_angle_by_its_arctangent():
    _, _, shear = engineering(np.array([[0.0, -0.1], [0.0, 0.0]]), *axes(0.0))
    assert abs(shear) == pytest.approx(np.arctan(0.1), abs=1e-12)


def test_a_mapper_notices_when_other_subsets_are_valid():
    y, x = np.mgrid[0:60:10.0, 0:80:10.0]
    mapper = StrainMapper(3, 10, axes(0.0))
    whole = mapper.gradient(0.01 * x, 0 * y)
    u = 0.01 * x
    u[2, 3] = np.nan
    part = mapper.gradient(u, 0 * y)
    assert np.isnan(part[2, 3]).all()
    good = np.isfinite(part)
    np.testing.assert_allclose(part[good], whole[good], atol=1e-12)
    np.testing.assert_array_equal(mapper.gradient(0.01 * x, 0 * y), whole)
