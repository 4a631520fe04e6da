"""The kernels against plain NumPy and SciPy twins; also run once with Numba's bounds checks on."""

import numpy as np
import pytest
from numba import njit
from scipy import ndimage

from dic.correlation import kernels
from dic.correlation.splines import MARGIN, flat, gradients, smooth, spline_image


@njit
def _values_at(c, stride, margin, x, y, out):
    for i in range(x.size):
        ix, iy = int(np.floor(x[i])), int(np.floor(y[i]))
        tap = np.uint64((iy + margin - 2) * stride + ix + margin - 2)
        out[i] = kernels._value(c, tap, np.uint64(stride), np.float32(x[i] - ix), np.float32(y[i] - iy))


@pytest.fixture
def picture():
    rng = np.random.default_rng(5)
    return ndimage.gaussian_filter(rng.normal(size=(47, 83)), 1.2) * 300  # lopsided on purpose


def test_spline_values_equal_scipys(picture):
    """Reference: scipy.ndimage.map_coordinates, order 5, mirror; float32 sums allow 1e-5 of the range."""
    image = smooth(picture, 0.0)
    spline = spline_image(image)
    rng = np.random.default_rng(6)
    x, y = rng.uniform(0, 82, 500), rng.uniform(0, 46, 500)
    found = np.empty(500)
    _values_at(spline.coefficients, spline.stride, MARGIN, x, y, found)
    expected = ndimage.map_coordinates(image.astype(float), [y, x], order=5, mode="mirror")
    np.testing.assert_allclose(found, expected, atol=1e-5 * np.ptp(image))


def test_gradients_are_the_splines_own_slopes(picture):
    """Reference: central difference of scipy's spline; its h² error is below 1e-4 of the largest slope."""
    image = smooth(picture, 0.0)
    fx, fy = gradients(image)
    y, x = np.mgrid[0:47, 0:83].astype(float)
    h = 1e-2
    inside = np.s_[2:-2, 2:-2]  # the mirror's kink makes differences across the border meaningless
    for found, (dy, dx) in ((fx, (0, h)), (fy, (h, 0))):
        ahead, behind = (
            ndimage.map_coordinates(image.astype(float), [y + s * dy, x + s * dx], order=5, mode="mirror")
            for s in (1, -1)
        )
        np.testing.assert_allclose(
            found[inside], ((ahead - behind) / (2 * h))[inside], atol=2e-4 * np.abs(found).max()
        )


@pytest.mark.parametrize(
    "p",
    [
        (0.3, 0.0, 0.0, -0.6, 0.0, 0.0),
        (-1.7, 0.004, -0.02, 2.2, 0.03, -0.01),  # several runs per row, both signs
        (0.0, 0.2, 0.1, 0.0, -0.15, 0.1),  # strain of a soft coupon: runs of few pixels
        (1.0, 0.0, 0.0, -1.0, 0.0, 0.0),  # exactly whole pixels
    ],
)
def test_one_pass_sums_equal_a_plain_loop(picture, p):
    image = smooth(picture, 0.0)
    fx, fy = gradients(image)
    spline, half, x0, y0 = spline_image(image), 9, 40, 22
    sums = np.empty(9)
    kernels._subset_sums(
        spline.coefficients, spline.stride, MARGIN, flat(image), flat(fx), flat(fy), 83, x0, y0, half,
        np.array(p), sums,
    )  # fmt: skip
    eta, xi = np.mgrid[-half : half + 1, -half : half + 1].astype(float)
    x = x0 + xi + p[0] + p[1] * xi + p[2] * eta
    y = y0 + eta + p[3] + p[4] * xi + p[5] * eta
    g = ndimage.map_coordinates(image.astype(float), [y, x], order=5, mode="mirror")
    box = np.s_[y0 - half : y0 + half + 1, x0 - half : x0 + half + 1]
    f, fx, fy = (part[box].astype(float) for part in (image, fx, fy))
    images = (1, g, f, fx, fx * xi, fx * eta, fy, fy * xi, fy * eta)
    for found, one in zip(sums, images, strict=True):
        scale = np.abs(g * one).sum()  # single precision in a row: 1e-6 of what is added up
        assert found == pytest.approx((g * one).sum(), abs=2e-6 * scale)


def test_gram_is_the_plain_product(picture):
    image = smooth(picture, 0.5)
    fx, fy = gradients(image)
    half, x0, y0 = 7, 30, 20
    found = kernels.gram(flat(image), flat(fx), flat(fy), 83, np.array([x0]), np.array([y0]), half)[0]
    eta, xi = np.mgrid[-half : half + 1, -half : half + 1].astype(float)
    box = np.s_[y0 - half : y0 + half + 1, x0 - half : x0 + half + 1]
    f, gx, gy = (part[box].astype(float) for part in (image, fx, fy))
    basis = np.stack([np.ones_like(f), f, gx, gx * xi, gx * eta, gy, gy * xi, gy * eta]).reshape(8, -1)
    np.testing.assert_allclose(found, basis @ basis.T, rtol=1e-10, atol=1e-6)


def test_composing_with_the_inverse_is_matrix_algebra():
    p, d = np.array([1.2, 0.1, -0.05, -0.7, 0.02, 0.2]), np.array([0.3, -0.02, 0.01, 0.1, 0.03, -0.01])

    def matrix(q):
        return np.array([[1 + q[1], q[2], q[0]], [q[4], 1 + q[5], q[3]], [0, 0, 1]])

    expected = matrix(p) @ np.linalg.inv(matrix(d))
    kernels._compose_inverse(p, d)
    np.testing.assert_allclose(matrix(p), expected, rtol=1e-13)
