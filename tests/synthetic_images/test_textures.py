"""Textures against stochastic geometry, quadrature and an independent spline."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.integrate import quad
from scipy.interpolate import RectBivariateSpline
from scipy.special import i0e
from skimage import data
from skimage.measure import label, regionprops

from dic.errors import InputError
from synthetic_images.textures import Cosines, Dots, Photograph


def lattice(width, height, pitch):
    return np.meshgrid(np.arange(0, width, pitch), np.arange(0, height, pitch))


def blurred_disc(distance, radius, sigma):
    """A disc convolved with a Gaussian: the integral over the disc, written in polar coordinates."""

    def ring(t):
        return t / sigma**2 * np.exp(-((t - distance) ** 2) / (2 * sigma**2)) * i0e(t * distance / sigma**2)

    return quad(ring, 0, radius, epsabs=1e-12, epsrel=1e-12, limit=200)[0]


@pytest.mark.parametrize("cover", [0.3, 0.5])
def test_mean_reflectance_is_one_minus_cover(cover):
    """A Boolean model of mean dot count λ per area leaves exp(−λ·area) clear (Chiu et al., ch. 3)."""
    X, Y = lattice(200, 150, 0.9)
    means = [Dots(4.5, cover, area=(200, 150), seed=seed)(X, Y).mean() for seed in range(24)]
    # Four standard errors of the mean over independent realisations: one false alarm in 16 000.
    assert abs(np.mean(means) - (1 - cover)) < 4 * np.std(means, ddof=1) / np.sqrt(len(means))


def test_two_point_probability_of_a_boolean_model_of_discs():
    """P(both clear) = (1 − p)²·exp(λ·common area of two discs) at a distance (Chiu et al., ch. 3)."""
    diameter, cover, distance = 6.0, 0.4, 2.5
    radius, density = diameter / 2, -np.log(1 - cover) / (np.pi * 9)
    lens = 2 * radius**2 * np.arccos(distance / diameter) - distance / 2 * np.sqrt(
        4 * radius**2 - distance**2
    )
    X, Y = lattice(200, 150, 1.3)
    both = []
    for seed in range(24):
        texture = Dots(diameter, cover, edge=0.02, area=(200, 150), seed=seed)
        both.append(np.mean(texture(X, Y) * texture(X + distance, Y)))
    expected = (1 - cover) ** 2 * np.exp(density * lens)
    assert abs(np.mean(both) - expected) < 4 * np.std(both, ddof=1) / np.sqrt(len(both))  # as above


def test_dots_have_the_stated_size():
    """Lonely dots, cut at half their darkness and measured by scikit-image's region properties."""
    X, Y = lattice(240, 200, 0.1)
    texture = Dots(5.0, 0.015, edge=0.3, area=(240, 200), seed=2)
    found = regionprops(label(texture(X, Y) < 0.5))
    sizes = [0.1 * region.equivalent_diameter_area for region in found]
    # A curved edge blurred by 0.3 px recedes by about sigma²/(2r) = 0.02 px a side; the rest is raster.
    assert np.median(sizes) == pytest.approx(5.0, abs=0.06)


def test_dots_follow_the_formula():
    """Every point against the product of discs blurred by quadrature, distances taken around the rim."""
    texture = Dots(4.5, 0.5, edge=0.5, area=(40, 30), seed=5)
    rng = np.random.default_rng(0)
    X, Y = rng.uniform(-60, 90, (2, 60))
    expected = []
    for x, y in zip(X, Y, strict=True):
        gap = (np.array([x, y]) - texture.centres + np.array(texture.area) / 2) % texture.area
        distances = np.hypot(*(gap - np.array(texture.area) / 2).T)
        expected.append(np.prod([1 - blurred_disc(d, 2.25, 0.5) for d in distances if d < 8]))
    # A dot is cut off where 3 ppm are left and its table is good to 2 ppm; five dots lie within reach.
    np.testing.assert_allclose(texture(X, Y), expected, atol=2.5e-5)


@settings(deadline=None)  # the first call compiles
@given(st.floats(-1e4, 1e4), st.floats(-1e4, 1e4))
def test_dots_stay_within_black_and_white_and_repeat(x, y):
    texture = REPEATING
    value = texture(x, y)
    assert 0 <= value <= 1
    # Coordinates of 1e4 px are rounded to 2e-12 px; the steepest edge gains at most 1 per px.
    assert texture(x + texture.area[0], y - texture.area[1]) == pytest.approx(float(value), abs=1e-8)


REPEATING = Dots(4.5, 0.5, area=(60, 50), seed=9)


def test_seed_fixes_the_realisation():
    X, Y = lattice(50, 40, 1.0)
    for kind in (lambda seed: Dots(area=(50, 40), seed=seed), lambda seed: Cosines(seed=seed)):
        assert np.array_equal(kind(3)(X, Y), kind(3)(X, Y))
        assert not np.array_equal(kind(3)(X, Y), kind(4)(X, Y))


def test_dots_of_no_place_are_nan():
    value = REPEATING([np.nan, np.inf, 1.0], [1.0, 1.0, -np.inf])
    assert np.isnan(value).all()


def test_dots_broadcast_like_numpy():
    X, Y = np.arange(7.0)[None, :], np.arange(5.0)[:, None]
    assert REPEATING(X, Y).shape == (5, 7)
    np.testing.assert_array_equal(REPEATING(X, Y), REPEATING(*np.meshgrid(X[0], Y[:, 0])))


def test_dots_too_many_for_memory_are_refused():
    with pytest.raises(InputError, match="memory"):
        Dots(1.0, 0.98, edge=5.0, area=(5000, 5000))


def test_cosines_show_all_greys_equally_and_have_their_scale():
    """A Gaussian field through its own distribution function is uniform: mean 1/2, variance 1/12."""
    feature = 4.0
    X, Y = np.meshgrid(np.arange(1024.0), np.arange(700.0))
    value = Cosines(feature, seed=1)(X, Y)
    # Some 10 000 patches; 64 waves differ from a Gaussian field by about 1/64.
    assert value.mean() == pytest.approx(0.5, abs=0.005)
    assert value.var() == pytest.approx(1 / 12, rel=0.02)
    power = np.abs(np.fft.rfft2(value - value.mean())) ** 2
    frequency = np.hypot(np.fft.fftfreq(700)[:, None], np.fft.rfftfreq(1024)[None, :])
    inside = np.abs(np.log(frequency * 2 * feature, where=frequency > 0, out=np.full(power.shape, 9.0)))
    # The grey curve turns some power into overtones: arcsine law, 95 % stays in the band [computed].
    assert power[inside < np.log(1.3)].sum() / power.sum() > 0.93


@pytest.mark.parametrize("name", ["gravel", "brick", "grass"])
def test_photograph_passes_through_its_pixels(name):
    photo = getattr(data, name)().astype(float)
    texture = Photograph.named(name, 2.2)
    rows, columns = np.arange(3, 60), np.arange(5, 47)
    value = texture(2.2 * columns[None, :], 2.2 * rows[:, None])
    seen = photo[3:60, 5:47]
    expected = 0.08 + 0.84 * (seen - photo.min()) / np.ptp(photo)
    # An exact prefilter interpolates; what is left is rounding of coordinates and coefficients.
    np.testing.assert_allclose(value, expected, atol=1e-9)


def test_photograph_between_pixels_against_fitpack():
    """FITPACK's interpolating quintic spline; other rim, so compared deep inside (0.43 per px fades)."""
    photo = data.gravel()[:90, :110].astype(float)
    photo[0, 0], photo[0, 1] = 0, 255
    spline = RectBivariateSpline(np.arange(90), np.arange(110), photo, kx=5, ky=5, s=0)
    rng = np.random.default_rng(1)
    rows, columns = rng.uniform(40, 50, 200), rng.uniform(42, 66, 200)
    expected = 0.08 + 0.84 * spline.ev(rows, columns) / 255
    np.testing.assert_allclose(Photograph(photo, 1.7)(1.7 * columns, 1.7 * rows), expected, atol=1e-9)


@settings(max_examples=30)
@given(st.floats(0, 100), st.floats(0, 100))
def test_photograph_is_mirrored_at_its_rim(x, y):
    texture = MIRRORED
    assert texture(-x, y) == pytest.approx(float(texture(x, y)), abs=1e-9)
    assert texture(x, 2 * texture.area[1] - y) == pytest.approx(float(texture(x, y)), abs=1e-9)


MIRRORED = Photograph(data.brick()[:80, :100], 1.3)
