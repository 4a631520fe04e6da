"""Local strain maps: exact on polynomials, flagged where one-sided, as uncertain as they say."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from dic.pattern import axes
from dic.strain import MapFlag, StrainMapper, Window, gauge_size
from synthetic_images import Camera, Dots, HoledPlate, picture

STEP, SUBSET = 10, 31
WEIGHTINGS = ("even", "gaussian")


def window(size=5, step=STEP, **said):
    return Window(size, step, SUBSET, **said)


def coordinates(shape=(7, 9), step=STEP):
    y, x = np.mgrid[0 : shape[0], 0 : shape[1]] * float(step)
    return x, y


def test_virtual_gauge_size_is_the_guides_formula():
    """iDICs Good Practices Guide: VSG = (window − 1)·step + subset; their kind of example by hand."""
    assert gauge_size(5, 10, 31) == 71
    assert window().size_px == 71


slopes = st.floats(-0.2, 0.2)


@given(slopes, slopes, slopes, slopes, st.integers(1, 20), st.sampled_from(WEIGHTINGS))
@settings(deadline=None)  # the first call compiles
def test_a_linear_field_gives_its_own_gradient_with_or_without_gaps(a, b, c, d, step, weighting):
    x, y = coordinates(step=step)
    u, v = a * x + b * y + 1, c * x + d * y - 2
    u[2, 3] = np.nan
    mapper = StrainMapper(window(3, step, weighting=weighting), axes(0.0))
    found = mapper.gradient(u, v)
    assert np.isnan(found[2, 3]).all()
    good = np.isfinite(found).all(axis=(2, 3))
    assert good.sum() >= 9 * 7 - 5  # the gap, and corners with fewer than half a window
    np.testing.assert_allclose(found[good], np.broadcast_to([[a, b], [c, d]], found[good].shape), atol=1e-9)


@pytest.mark.parametrize("weighting", WEIGHTINGS)
def test_degree_two_follows_a_quadratic_field_up_to_the_edge(weighting):
    x, y = coordinates((11, 13))
    u, v = 1e-5 * x**2 - 2e-5 * x * y, 3e-5 * y**2 + 1e-3 * x
    truth = np.stack([2e-5 * x - 2e-5 * y, -2e-5 * x, np.full_like(x, 1e-3), 6e-5 * y], axis=-1)
    found = {d: StrainMapper(window(degree=d, weighting=weighting), axes(0.0)).gradient(u, v) for d in (1, 2)}
    good = np.isfinite(found[2]).all(axis=(2, 3))
    assert good[0, 5]
    assert good[5, 0]
    np.testing.assert_allclose(found[2][good], truth.reshape(11, 13, 2, 2)[good], atol=1e-12)
    # Over full windows degree 1 gives the same slope; at an edge it gives the mean of half a window.
    np.testing.assert_allclose(found[1][2:-2, 2:-2], found[2][2:-2, 2:-2], atol=1e-12)
    assert abs(found[1][5, 0, 0, 0] - truth[5, 0, 0]) > 1e-4


def test_fits_are_numpys_least_squares():
    rng = np.random.default_rng(1)
    x, y = coordinates((9, 11))
    u, v = rng.normal(size=(2, *x.shape))
    u[3:6, 4] = np.nan
    for degree, weighting in ((1, "even"), (1, "gaussian"), (2, "gaussian")):
        mapper = StrainMapper(window(degree=degree, weighting=weighting), axes(0.0))
        found = mapper.gradient(u, v)
        for row, column in ((4, 5), (3, 6), (0, 5), (4, 3)):
            near = (abs(x - x[row, column]) <= 20) & (abs(y - y[row, column]) <= 20) & np.isfinite(u)
            dx, dy = x[near] - x[row, column], y[near] - y[row, column]
            terms = [np.ones_like(dx), dx, dy] + ([dx**2, dx * dy, dy**2] if degree == 2 else [])
            sigma = 0.25 * 5 * STEP
            root = np.exp(-(dx**2 + dy**2) / (4 * sigma**2)) if weighting == "gaussian" else np.ones_like(dx)
            fit = np.linalg.lstsq(np.column_stack(terms) * root[:, None], u[near] * root, rcond=None)[0]
            np.testing.assert_allclose(found[row, column, 0], fit[1:3], rtol=1e-9)


def test_points_say_how_they_came_about():
    x, y = coordinates((9, 11))
    u = 0.01 * x
    u[4, 5] = np.nan
    mapper = StrainMapper(window(3), axes(0.0))
    found = mapper.strain(u, 0 * y, 0 * x + 0.01, 0 * x + 0.01)
    assert found.flag[2, 2] == MapFlag.FULL
    assert found.flag[4, 4] == found.flag[0, 4] == MapFlag.ONE_SIDED
    assert found.flag[0, 0] == MapFlag.TOO_FEW  # four of nine
    assert found.flag[4, 5] == MapFlag.NO_SUBSET
    for values in (found.axial, found.u_axial, found.gradient[..., 0, 0]):
        np.testing.assert_array_equal(np.isfinite(values), found.flag <= MapFlag.ONE_SIDED)


def test_too_few_neighbours_are_no_strain():
    u = np.full((7, 7), np.nan)
    u[3, :] = 1.0  # a line of points spans no plane
    assert np.isnan(StrainMapper(window(), axes(0.0)).gradient(u, u)).all()


def test_strain_map_turns_into_coupon_axes():
    x, y = coordinates((6, 8))
    sigma = np.full_like(x, 0.01)
    # Pull along the picture's horizontal by 1 %.
    found = StrainMapper(window(3), axes(90.0)).strain(0.01 * x, -0.003 * y, sigma, sigma)
    np.testing.assert_allclose(found.axial[1:-1, 1:-1], 0.01, atol=1e-12)
    np.testing.assert_allclose(found.transverse[1:-1, 1:-1], -0.003, atol=1e-12)


def test_a_mapper_notices_when_other_subsets_are_valid():
    x, y = coordinates((6, 8))
    mapper = StrainMapper(window(3), axes(0.0))
    whole = mapper.gradient(0.01 * x, 0 * y)
    u = 0.01 * x
    u[2, 3] = np.nan
    part = mapper.gradient(u, 0 * y)
    assert np.isnan(part[2, 3]).all()
    good = np.isfinite(part)
    np.testing.assert_allclose(part[good], whole[good], atol=1e-12)
    np.testing.assert_array_equal(mapper.gradient(0.01 * x, 0 * y), whole)


@pytest.mark.parametrize("shape", ["affine", "quadratic"])
def test_overlapping_subsets_share_their_noise(shape):
    """Subset displacements as least-squares polynomials through white noise, by convolution.

    Affine: the overlapping share of two squares.  1000 subsets' worth of noise: correlations to 0.03.
    """
    offset = np.arange(-15, 16.0)
    y, x = np.meshgrid(offset, offset, indexing="ij")
    terms = [np.ones_like(x), x, y] + ([x * x, x * y, y * y] if shape == "quadratic" else [])
    weights = np.linalg.pinv(np.stack(terms, axis=-1).reshape(961, -1))[0].reshape(31, 31)
    noise = np.random.default_rng(2).normal(size=(1024, 1024))
    u = np.fft.irfft2(np.fft.rfft2(noise) * np.fft.rfft2(weights, noise.shape))
    said = window(shape=shape).overlap()
    for rows, columns in ((0, 1), (1, 1), (2, 0), (1, 2)):
        far = np.roll(u, (rows * STEP, columns * STEP), axis=(0, 1))
        assert said[rows, columns] == pytest.approx((u * far).mean() / u.var(), abs=0.03)
    if shape == "affine":
        assert said[1, 2] == pytest.approx((21 / 31) * (11 / 31), abs=1e-12)


def test_stated_uncertainty_of_a_map_is_its_true_scatter(prepared, matched):
    """Scatter over noise draws against what is stated, within 10 %.

    18 draws at some hundred points, neighbours sharing noise: the mean scatter is known to 4 %.
    """
    mappers = [
        StrainMapper(window(degree=d, weighting=w), axes(0.0)) for d, w in ((1, "even"), (2, "gaussian"))
    ]
    found = [[] for _ in mappers]
    camera, scene = Camera(noise=0.01), picture(Dots(4.5, area=(320, 260), seed=1), (190, 260))
    for draw in range(18):
        reference = prepared(camera.expose(scene, 2 * draw), step=STEP)
        match = matched(reference, camera.expose(scene, 2 * draw + 1))
        shape = len(np.unique(reference.y)), len(np.unique(reference.x))
        parts = [one.reshape(shape) for one in (match.u, match.v, match.sigma_u, match.sigma_v)]
        for mapper, maps in zip(mappers, found, strict=True):
            maps.append(mapper.strain(*parts))
    for maps in found:
        scatter = np.var([one.axial for one in maps], axis=0, ddof=1)
        stated = np.mean([one.u_axial**2 for one in maps], axis=0)
        for flag in (MapFlag.FULL, MapFlag.ONE_SIDED):
            here = maps[0].flag == flag
            ratio = np.sqrt(stated[here].mean() / scatter[here].mean())
            assert ratio == pytest.approx(1.0, abs=0.1), flag


def test_degree_two_reaches_nearer_to_a_hole():
    """Kirsch's displacements, no pictures: strain at the hole's edge, three times that far away."""
    plate = HoledPlate((201.0, 153.0), radius=100.0, strain=0.001)
    x, y = np.meshgrid(np.arange(0.0, 401, STEP), np.arange(0.0, 301, STEP))
    u, v = (np.where(np.isfinite(plate.axial(x, y)), part, np.nan) for part in plate.displacement(x, y))
    sigma = np.full_like(x, 0.01)
    errors = {}
    for degree in (1, 2):
        found = StrainMapper(window(degree=degree), axes(0.0)).strain(u, v, sigma, sigma)
        assert found.flag[15, 31] == MapFlag.ONE_SIDED  # 9 px from the edge
        errors[degree] = abs(found.axial[15, 31] / plate.axial(x, y)[15, 31] - 1)
    # The plane takes the mean of half a window, 30 px, over which strain falls by a quarter.
    assert errors[1] > 0.08
    assert errors[2] < 0.03
