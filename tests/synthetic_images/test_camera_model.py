"""The camera: pixel means against closed forms, noise as specified."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.polynomial.legendre import leggauss

from synthetic_images.camera import Camera, aperture, picture
from synthetic_images.coupon import Coupon
from synthetic_images.motions import homogeneous, rigid
from synthetic_images.textures import Cosines, Dots, Photograph

SHAPE = (70, 52)
TEXTURES = {
    "dots": Dots(4.5, 0.5, 0.5, area=(128, 128), seed=3),
    "cosines": Cosines(3.0, seed=3),
    "photograph": Photograph.named("gravel", 2.2),
}
#: Grey levels between black and white with the camera's usual settings.
CONTRAST = 0.75 * 255


def coupon(texture, angle=7.0, motion=None):
    motion = motion or homogeneous(0.004, -0.0013, axis_angle_deg=angle, centre=(25, 34), shift=(0.3, -0.4))
    return Coupon(texture, motion, (25.0, 34.0), 36.0, angle)


@pytest.mark.parametrize("name", TEXTURES)
def test_pixel_integration_has_converged(name):
    scene = coupon(TEXTURES[name])
    exact = picture(scene, SHAPE, samples=16)
    error = {n: CONTRAST * np.abs(picture(scene, SHAPE, samples=n) - exact) for n in (2, 3, 4)}
    # The default of three: nowhere a fifth of a grey level, so rounding (0.29 rms) hides it, and on
    # the whole a hundredth, 1/250 of the usual noise of 1 %.
    assert error[3].max() < 0.2
    assert np.sqrt(np.mean(error[3] ** 2)) < 0.01
    # The quick setting of two: a tenth of that noise.
    assert np.sqrt(np.mean(error[2] ** 2)) < 0.25
    # A converging Gauss rule gains an order of magnitude with each point.
    assert error[4].max() < error[3].max() / 8 < error[2].max() / 64


@pytest.mark.parametrize("blur", [0.3, 0.6, 1.0])
def test_blurred_pixels_have_converged_too(blur):
    scene = coupon(TEXTURES["dots"])
    exact = picture(scene, SHAPE, samples=30, blur=blur)
    error = CONTRAST * np.abs(picture(scene, SHAPE, blur=blur) - exact)
    assert error.max() < 0.2  # as for the sharp lens


@pytest.mark.parametrize("blur", [0.0, 0.4, 1.0])
def test_aperture_integrates_polynomials_exactly(blur):
    """Moments of a uniform plus a Gaussian variable: 1/12 + s², 1/80 + s²/2 + 3·s⁴ [closed form]."""
    nodes, weights = aperture(5, blur)
    moments = [np.sum(weights * nodes**k) for k in range(6)]
    expected = [1, 0, 1 / 12 + blur**2, 0, 1 / 80 + blur**2 / 2 + 3 * blur**4, 0]
    np.testing.assert_allclose(moments, expected, atol=1e-12)  # rounding


def test_aperture_of_a_sharp_lens_is_gauss_legendre():
    nodes, weights = leggauss(4)
    np.testing.assert_allclose(aperture(4), (nodes / 2, weights / 2))


@given(st.floats(0.0, 0.35), st.floats(0.0, 0.35), st.sampled_from([0.0, 0.25, 0.5]))
@settings(max_examples=25, deadline=None)  # larger blurs take many more points
def test_waves_are_damped_by_pixel_and_lens(fx, fy, blur):
    """A wave of frequency f passes a square pixel as sinc(f) and a Gaussian lens as exp(−2π²s²f²)."""

    def wave(x, y):
        return 0.5 + 0.4 * np.cos(2 * np.pi * (fx * x + fy * y) + 0.3)

    x, y = np.meshgrid(np.arange(9.0), np.arange(6.0))
    damped = np.sinc(fx) * np.sinc(fy) * np.exp(-2 * (np.pi * blur) ** 2 * (fx**2 + fy**2))
    expected = 0.5 + 0.4 * damped * np.cos(2 * np.pi * (fx * x + fy * y) + 0.3)
    # Three points leave (2πf/2)^6/ 126 000 of the wave [computed from the rule's error term]: 2e-5 here.
    np.testing.assert_allclose(picture(wave, (6, 9), blur=blur), expected, atol=5e-5)


@pytest.mark.parametrize("name", TEXTURES)
@given(st.integers(-7, 7), st.integers(-9, 9))
@settings(max_examples=8, deadline=None)  # whole pictures, and the first call compiles
def test_shift_by_whole_pixels_gives_the_same_picture(name, dx, dy):
    still = coupon(TEXTURES[name], 0.0, rigid(0.0, 0.0))
    moved = coupon(TEXTURES[name], 0.0, rigid(float(dx), float(dy)))
    camera = Camera()
    inner = camera.photograph(still, SHAPE)[9:-9, 7:-7]
    other = camera.photograph(moved, SHAPE)[9 + dy : SHAPE[0] - 9 + dy, 7 + dx : SHAPE[1] - 7 + dx]
    assert np.array_equal(inner, other)


def test_the_strip_has_its_width_and_background():
    """The area of a white strip before black, from the mean grey of the picture."""
    angle = 20.0
    strip = Coupon(lambda X, Y: np.ones_like(X), rigid(0.31, -0.17), (60.0, 40.0), 30.0, angle, 0.0)
    image = picture(strip, (81, 121))
    # Each row is cut along width / cos(angle); the soft rim is symmetric and takes nothing away.
    np.testing.assert_allclose(image.sum(1), 30.0 / np.cos(np.radians(angle)), atol=1e-3)
    assert image[:, :4].max() == 0.0


def test_noise_variance_follows_the_grey_value():
    """EMVA 1288's linear model; rounding to whole grey levels adds 1/12."""
    camera = Camera(bits=12, black=0.0, white=1.0, dark_noise=6.0, gain=0.3)
    for share in (0.05, 0.4, 0.8):
        grey = camera.expose(np.full((400, 300), share), frame=2, seed=5).astype(float)
        expected = 36 + 0.3 * 4095 * share + 1 / 12
        # Four standard errors of a variance from 120 000 normal draws.
        assert grey.var() == pytest.approx(expected, rel=4 * np.sqrt(2 / 120_000))
        assert grey.mean() == pytest.approx(4095 * share, abs=4 * np.sqrt(expected / 120_000))


def test_plain_noise_is_a_share_of_full_scale():
    grey = Camera(noise=0.01).expose(np.full((400, 300), 0.5)).astype(float)
    assert grey.var() == pytest.approx(2.55**2 + 1 / 12, rel=4 * np.sqrt(2 / 120_000))  # as above


def test_each_frame_has_its_own_noise_in_whatever_order():
    camera, flat = Camera(noise=0.02), np.full((20, 30), 0.5)
    forward = [camera.expose(flat, frame, 7) for frame in range(4)]
    backward = [camera.expose(flat, frame, 7) for frame in reversed(range(4))][::-1]
    assert all(np.array_equal(a, b) for a, b in zip(forward, backward, strict=True))
    assert not np.array_equal(forward[0], forward[1])
    assert not np.array_equal(forward[0], camera.expose(flat, 0, 8))


@pytest.mark.parametrize(("bits", "kind"), [(8, np.uint8), (10, np.uint16), (12, np.uint16), (16, np.uint16)])
def test_bit_depth_and_saturation(bits, kind):
    camera = Camera(bits=bits, black=-0.5, white=1.5)
    grey = camera.expose(np.array([[0.0, 0.5, 1.0]]))
    assert grey.dtype == kind
    assert grey.tolist() == [[0, round((2**bits - 1) / 2), 2**bits - 1]]


def test_uneven_light():
    light = Camera(vignette=0.2, gradient=0.1, drift=-0.01).light((41, 61), frame=3)
    # Middle, corners (each direction takes half of the vignette), and half the gradient to each side.
    assert light[20, 30] == pytest.approx(0.97)
    assert light[0, -1] == pytest.approx(0.97 * 0.8 * 1.05)
    assert light[-1, 0] == pytest.approx(0.97 * 0.8 * 0.95)
    assert np.all(Camera().light((4, 5), frame=9) == 1.0)
