"""Strain measures against an independent library's matrix functions, and their stated uncertainty."""

import numpy as np
import pytest
import xarray as xr
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.linalg import logm, polar

from dic.pattern import axes
from dic.strain import StrainMapper, Window, engineering, measures
from dic.strain.tensors import MEASURES, components

slopes = st.floats(-0.3, 0.3)
gradients = st.builds(lambda a, b, c, d: np.array([[a, b], [c, d]]), slopes, slopes, slopes, slopes)


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


@settings(max_examples=30, deadline=None)  # SciPy's logarithm is slow
@given(gradients, st.floats(-90, 90))
def test_measures_are_scipys_matrix_functions(gradient, angle):
    """SciPy's polar decomposition and matrix logarithm, turned into coupon axes."""
    turn, stretch = polar(gradient + np.eye(2))
    frame = np.array(axes(angle))
    tensors = {"green_lagrange": (stretch @ stretch - np.eye(2)) / 2, "hencky": np.real(logm(stretch))}
    for measure, tensor in tensors.items():
        found, turned = components(gradient, measure, *frame), frame @ tensor @ frame.T
        for name, expected in (
            ("axial", turned[0, 0]), ("transverse", turned[1, 1]), ("shear", 2 * turned[0, 1]),
            ("principal_first", np.linalg.eigvalsh(tensor)[1]),
            ("principal_second", np.linalg.eigvalsh(tensor)[0]),
            ("rotation_deg", np.degrees(np.arctan2(turn[1, 0], turn[0, 0]))),
        ):  # fmt: skip
            # Two nearly equal principal values leave half the digits to the ways of finding them.
            assert found[name] == pytest.approx(expected, abs=1e-7), (measure, name)
    stretches = np.linalg.eigvalsh(stretch)[::-1] - 1
    found = components(gradient, "engineering", *frame)
    assert (found["principal_first"], found["principal_second"]) == pytest.approx(tuple(stretches), abs=1e-7)


@settings(max_examples=20, deadline=None)  # a turn of axes for each
@given(gradients, st.sampled_from(sorted(MEASURES)))
def test_principal_values_and_largest_shear_are_those_of_the_best_axes(gradient, measure):
    found = components(gradient, measure, *axes(0.0))
    turned = [components(gradient, measure, *axes(angle)) for angle in np.arange(0.0, 180.0, 0.5)]
    # 0.25° beside the best axis an extreme is low by 2e-5 of its range, which is below 1 here.
    assert found["principal_first"] == pytest.approx(max(one["axial"] for one in turned), abs=3e-5)
    assert found["maximum_shear"] == pytest.approx(max(one["shear"] for one in turned), abs=3e-4)
    along = components(gradient, measure, *axes(float(found["principal_angle_deg"])))
    assert along["axial"] == pytest.approx(float(found["principal_first"]), abs=1e-9)
    assert along["shear"] == pytest.approx(0.0, abs=1e-7)


def test_directions_run_clockwise_from_the_vertical():
    pull = np.outer(axes(20.0)[0], axes(20.0)[0])
    assert components(0.01 * pull, "hencky", *axes(0.0))["principal_angle_deg"] == pytest.approx(20.0)
    right, down = np.array([0.0, 0.1]), np.array([-0.1, 0.0])
    # x (to the right) turns towards y (down): clockwise as seen.
    turned = components(np.column_stack([right, down]), "hencky", *axes(0.0))
    assert turned["rotation_deg"] == pytest.approx(np.degrees(np.arctan(0.1)))


def stored(u, v, sigma, window):
    """Return one frame's fields as the store has them."""
    mapper = StrainMapper(window, axes(3.0))
    found = mapper.strain(u, v, np.full_like(u, sigma), np.full_like(u, sigma))
    names = ("gradient_u_x", "gradient_u_y", "gradient_v_x", "gradient_v_y")
    parts = dict(zip(names, found.gradient.reshape(*u.shape, 4).transpose(2, 0, 1), strict=True))
    parts |= {"u": u, "v": v, "sigma_u": np.full_like(u, sigma), "sigma_v": np.full_like(u, sigma)}
    attributes = {"axis_angle_deg": 3.0, **window.attributes()}
    return xr.Dataset({k: (("y", "x"), one) for k, one in parts.items()}, attrs=attributes), found


@pytest.mark.parametrize("measure", sorted(MEASURES))
def test_uncertainties_of_all_measures_are_their_scatter(measure):
    """Subsets that do not overlap, independent noise, large strain: 80 draws at 117 points, 2 %."""
    rng, window = np.random.default_rng(4), Window(3, 10, 9)
    y, x = np.mgrid[0:9, 0:13] * 10.0
    draws = []
    for _ in range(80):
        noise = rng.normal(0, 0.01, (2, *x.shape))
        field, found = stored(0.1 * y - 0.05 * x + noise[0], 0.3 * y + noise[1], 0.01, window)
        draws.append(measures(field, measure))
    # The store's own figure is the same, worked out by hand.
    if measure == "engineering":
        np.testing.assert_allclose(draws[-1].axial, found.axial, atol=1e-12)
        np.testing.assert_allclose(draws[-1].u_axial, found.u_axial, rtol=1e-5)
    for name in [name for name in draws[0] if not name.startswith("u_")]:
        scatter = np.var([one[name] for one in draws], axis=0, ddof=1)
        stated = np.mean([one[f"u_{name}"] ** 2 for one in draws], axis=0)
        assert np.sqrt(np.nanmean(stated) / np.nanmean(scatter)) == pytest.approx(1.0, abs=0.06), name


def test_measures_of_several_frames_and_their_gaps():
    y, x = np.mgrid[0:6, 0:7] * 10.0
    v = 0.5 * y
    v[2, 3] = np.nan
    field, _ = stored(0 * x, v, 0.01, Window(3, 10, 9))
    both = xr.concat([field, field], dim="frame").assign_coords(frame=[4, 5])
    found = measures(both, "hencky")
    assert found.axial.dims == ("frame", "y", "x")
    assert found.frame.values.tolist() == [4, 5]
    assert np.isnan(found.axial.values[:, 2, 3]).all()
    assert np.isnan(found.u_axial.values[:, 2, 3]).all()
    stretch = np.hypot(1.5 * np.cos(np.radians(3)), np.sin(np.radians(3)))
    assert float(measures(field).axial[4, 3]) == pytest.approx(stretch - 1)


def test_an_unknown_measure_is_named():
    y, x = np.mgrid[0:6, 0:7] * 10.0
    with pytest.raises(ValueError, match="unknown strain measure 'log'"):
        measures(stored(x, y, 0.01, Window(3, 10, 9))[0], "log")
