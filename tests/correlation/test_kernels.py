"""The kernels against plain NumPy and SciPy twins; also run once with Numba's bounds checks on."""

import numpy as np
import pytest
from numba import njit
from scipy import ndimage
from scipy.interpolate import BSpline

from dic.correlation import Prefilter, kernels, moments, spline_image
from dic.correlation.filters import SPLINES
from dic.correlation.splines import MARGIN, blur, flat, gradients, smooth

WIDTH, HEIGHT = 83, 47  # lopsided on purpose


@njit
def _values_at(taps, c, sampling, stride, plane, margin, x, y, out):
    back = len(taps) // 2 - 1
    for i in range(x.size):
        u, v = sampling * (x[i] + margin), sampling * (y[i] + margin)
        iu, iv = int(np.floor(u)), int(np.floor(v))
        r, o = kernels._taps_at(iu - back, iv - back, sampling, stride, plane)
        out[i] = kernels._value(taps, c, np.uint64(0), r, o, np.float32(u - iu), np.float32(v - iv))


def values_at(spline, x, y):
    found = np.empty(len(x))
    _values_at(
        spline.taps, spline.coefficients, spline.sampling, spline.stride, spline.plane, MARGIN, x, y, found
    )
    return found


@pytest.fixture(scope="module")
def picture():
    rng = np.random.default_rng(5)
    return ndimage.gaussian_filter(rng.normal(size=(HEIGHT, WIDTH)), 1.2) * 300


@pytest.fixture(scope="module")
def places():
    rng = np.random.default_rng(6)
    return rng.uniform(0, WIDTH - 1, 500), rng.uniform(0, HEIGHT - 1, 500)


def level(image):
    return np.float32(image[::16, ::16].mean())


@pytest.mark.parametrize(("kind", "order"), [("cubic", 3), ("quintic", 5)])
def test_spline_values_equal_scipys(picture, places, kind, order):
    """Reference: scipy.ndimage.map_coordinates with mirrored rim; 2e-6 of the range for the filter's cut
    tail and single precision."""
    x, y = places
    found = values_at(spline_image(picture, kind, 0.0), x, y)
    expected = ndimage.map_coordinates(picture, [y, x], order=order, mode="mirror") - level(picture)
    np.testing.assert_allclose(found, expected, atol=3e-6 * np.ptp(picture))


def test_septic_values_are_those_of_scipys_basis(picture, places):
    """Reference: scipy.interpolate.BSpline's basis of degree 7, coefficients from a dense linear system."""
    x, y = places
    basis = BSpline.basis_element(np.arange(9.0) - 4, extrapolate=False)

    def interpolation(n, at):
        # coefficients of mirrored signals repeat with period 2n − 2
        period = 2 * n - 2
        mirror = np.minimum(np.arange(period), period - np.arange(period))
        k = np.arange(period)
        away = (at[:, None] - k[None, :] + period / 2) % period - period / 2
        shape = np.nan_to_num(basis(away))
        system = np.nan_to_num(basis((k[:, None] - k[None, :] + period / 2) % period - period / 2))
        return shape @ np.linalg.inv(system) @ np.eye(n)[mirror]

    across, down = interpolation(WIDTH, x), interpolation(HEIGHT, y)
    expected = np.einsum("ia,ab,ib->i", down, picture, across) - level(picture)
    found = values_at(spline_image(picture, "septic", 0.0), x, y)
    np.testing.assert_allclose(found, expected, atol=3e-6 * np.ptp(picture))


def test_the_twofold_spline_follows_the_septic_one(picture, places):
    """Its construction: septic values at half pixels, a cubic through them; on this texture within 2e-4."""
    x, y = places
    twofold = values_at(spline_image(picture, "twofold", 0.0), x, y)
    septic = values_at(spline_image(picture, "septic", 0.0), x, y)
    cubic = values_at(spline_image(picture, "cubic", 0.0), x, y)
    off = np.abs(twofold - septic).max() / np.ptp(picture)
    assert off < 1e-3
    assert off < np.abs(cubic - septic).max() / np.ptp(picture) / 10


@pytest.mark.parametrize("kind", SPLINES)
def test_every_spline_passes_through_the_pixels(picture, kind):
    y, x = np.mgrid[3 : HEIGHT - 3, 3 : WIDTH - 3].astype(float)
    found = values_at(spline_image(picture, kind, 0.0), x.ravel(), y.ravel())
    expected = picture[3 : HEIGHT - 3, 3 : WIDTH - 3].ravel() - level(picture)
    np.testing.assert_allclose(found, expected, atol=5e-6 * np.ptp(picture))


@pytest.mark.parametrize("kind", SPLINES)
def test_gradients_are_the_splines_own_slopes(picture, kind):
    """Reference: central difference of the kernel's own values; h² error below 1e-3 of the largest slope."""
    fx, fy = gradients(picture, kind, 0.5)
    spline = spline_image(picture, kind, 0.5)
    y, x = (part.ravel().astype(float) for part in np.mgrid[4 : HEIGHT - 4, 4 : WIDTH - 4])
    h = 0.02
    for found, dx, dy in ((fx, h, 0), (fy, 0, h)):
        slope = (values_at(spline, x + dx, y + dy) - values_at(spline, x - dx, y - dy)) / (2 * h)
        # the cubic through half-pixel samples has slopes of its own, 0.2 % off the septic's
        limit = 4e-3 if kind == "twofold" else 1e-3
        np.testing.assert_allclose(
            found[4 : HEIGHT - 4, 4 : WIDTH - 4].ravel(), slope, atol=limit * np.abs(found).max()
        )


def test_smoothing_is_scipys_gaussian(picture):
    """Reference: scipy.ndimage.gaussian_filter."""
    np.testing.assert_allclose(
        blur(picture, 0.65),
        ndimage.gaussian_filter(picture, 0.65, mode="mirror", truncate=8),
        atol=2e-6 * np.ptp(picture),
    )


@pytest.mark.parametrize("kind", SPLINES)
def test_filtering_a_part_gives_the_same_coefficients_there(kind):
    rng = np.random.default_rng(1)
    image = rng.integers(0, 255, (310, 420)).astype(np.uint8)
    whole = Prefilter(image.shape, kind, 0.5)(image)
    part = Prefilter(image.shape, kind, 0.5)(image, np.array([[150.0, 120.0, 200.0, 170.0]]))
    y, x = (edge.ravel().astype(float) for edge in np.mgrid[120:170, 150:200])
    np.testing.assert_array_equal(values_at(whole, x, y), values_at(part, x, y))


@pytest.mark.parametrize("kind", SPLINES)
@pytest.mark.parametrize("quadratic", [False, True])
@pytest.mark.parametrize(
    "p",
    [
        (0.3, 0.0, 0.0, -0.6, 0.0, 0.0),
        (-1.7, 0.004, -0.02, 2.2, 0.03, -0.01),  # several runs per row, both signs
        (0.0, 0.2, 0.1, 0.0, -0.15, 0.1),  # strain of a soft coupon: runs of few pixels
        (1.0, 0.0, 0.0, -1.0, 0.0, 0.0),  # exactly whole pixels
    ],
)
def test_one_pass_sums_equal_a_plain_loop(picture, kind, quadratic, p):
    image = smooth(picture, 0.0)
    fx, fy = gradients(image, kind, 0.0)
    spline, half, x0, y0 = spline_image(image, kind, 0.0), 9, 40, 22
    mask = np.ones(image.shape, np.float32)
    mask[:, 47:] = 0
    bow = (2e-3, -1e-3, 1.5e-3), (-1e-3, 2e-3, 0.0)
    u, v = (np.array([*part, *(b if quadratic else ())]) for part, b in ((p[:3], bow[0]), (p[3:], bow[1])))
    marker = (0,) * len(u)
    sums = np.empty(3 + 2 * len(u))
    kernels._subset_sums(
        spline.taps, marker, spline.coefficients, spline.sampling, spline.stride, spline.plane, MARGIN,
        flat(image), flat(fx), flat(fy), flat(mask), WIDTH, x0, y0, half, np.concatenate([u, v]), sums,
    )  # fmt: skip
    eta, xi = np.mgrid[-half : half + 1, -half : half + 1].astype(float)
    powers = np.stack([np.ones_like(xi), xi, eta, xi * xi, xi * eta, eta * eta])[: len(u)]
    x, y = x0 + xi + np.tensordot(u, powers, 1), y0 + eta + np.tensordot(v, powers, 1)
    g = values_at(spline, x.ravel(), y.ravel()).reshape(x.shape)
    box = np.s_[y0 - half : y0 + half + 1, x0 - half : x0 + half + 1]
    f, fx, fy, m = (part[box].astype(float) for part in (image, fx, fy, mask))
    for found, one in zip(sums, (1, g, f, *(fx * powers), *(fy * powers)), strict=True):
        scale = np.abs(g * one).sum()  # single precision in a row: 1e-6 of what is added up
        assert found == pytest.approx((m * g * one).sum(), abs=3e-6 * scale)


@pytest.mark.parametrize("parameters", [6, 12])
def test_gram_is_the_plain_product(picture, parameters):
    image = smooth(picture, 0.5)
    fx, fy = gradients(picture, "twofold", 0.5)
    mask = np.ones(image.shape, np.float32)
    mask[:18] = 0
    half, x0, y0 = 7, 30, 20
    found = moments.gram(
        flat(image), flat(fx), flat(fy), flat(mask), WIDTH, np.array([x0]), np.array([y0]), half, parameters
    )[0]
    eta, xi = np.mgrid[-half : half + 1, -half : half + 1].astype(float)
    box = np.s_[y0 - half : y0 + half + 1, x0 - half : x0 + half + 1]
    f, gx, gy, m = (part[box].astype(float) for part in (image, fx, fy, mask))
    powers = np.stack([np.ones_like(xi), xi, eta, xi * xi, xi * eta, eta * eta])[: parameters // 2]
    basis = np.concatenate([[np.ones_like(f), f], gx * powers, gy * powers]).reshape(2 + parameters, -1)
    expected = (basis * m.ravel()) @ basis.T
    np.testing.assert_allclose(found, expected, rtol=1e-9, atol=1e-9 * np.abs(expected).max())


def test_composing_with_the_inverse_is_matrix_algebra():
    p, d = np.array([1.2, 0.1, -0.05, -0.7, 0.02, 0.2]), np.array([0.3, -0.02, 0.01, 0.1, 0.03, -0.01])

    def matrix(q):
        return np.array([[1 + q[1], q[2], q[0]], [q[4], 1 + q[5], q[3]], [0, 0, 1]])

    expected = matrix(p) @ np.linalg.inv(matrix(d))
    kernels._compose_inverse((0, 0, 0), p, d)
    np.testing.assert_allclose(matrix(p), expected, rtol=1e-13)


def test_composing_quadratic_warps_is_right_to_first_order_in_the_step():
    """p ∘ d⁻¹ applied to d(ξ) is p(ξ); the error falls with the square of the step."""
    p = np.array([1.2, 0.1, -0.05, 1e-3, -2e-3, 5e-4, -0.7, 0.02, 0.2, -1e-3, 1e-3, 2e-3])
    step = np.array([0.3, -0.02, 0.01, 1e-4, 2e-4, -1e-4, 0.1, 0.03, -0.01, 1e-4, 0, 1e-4])
    xi, eta = np.random.default_rng(1).uniform(-5, 5, (2, 50))

    def warped(q, xi, eta):
        powers = np.stack([np.ones_like(xi), xi, eta, xi * xi, xi * eta, eta * eta])
        return xi + q[:6] @ powers, eta + q[6:] @ powers

    errors = []
    for size in (0.1, 0.01):
        q = p.copy()
        kernels._compose_inverse((0,) * 6, q, size * step)
        again = warped(q, *warped(size * step, xi, eta))
        errors.append(np.abs(np.subtract(again, warped(p, xi, eta))).max())
    # cubic terms that the shape cannot hold are of the first order in d but small: 1e-3·d
    assert errors[0] < 5e-3
    assert errors[1] < errors[0] / 8
