"""What aliasing leaves in a gauge: the law of each subset's error by closed form."""

import numpy as np
import pytest

from dic.strain.aliasing import aliasing

FRAMES, IDLE, REST = 60, 10, 3e-6
STRAIN = np.linspace(0, 2e-3, FRAMES)


def readings(amplitude, *, moved=0.4, frames=FRAMES):
    """Return shift and stated uncertainty of a gauge whose error is A·(sin(2πu + φ) − sin φ), φ anything.

    Over φ its mean square is A²·(1 − cos(2πu)).  Frames in the mean of n have residuals of σ²·(1 − 1/n)
    where others have σ²·(1 + 1/n).
    """
    shift = np.concatenate([np.zeros(IDLE), np.linspace(0, moved, frames - IDLE)])
    u = np.sqrt(REST**2 + amplitude**2 * (1 - np.cos(2 * np.pi * shift)))
    u[:IDLE] *= np.sqrt((IDLE - 1) / (IDLE + 1))
    return shift, u


@pytest.mark.parametrize("amplitude", [1e-6, 2e-6, 8e-6])
@pytest.mark.parametrize("window", [(20, 40), (30, 60)])
def test_a_slopes_error_is_as_large_as_stated(amplitude, window):
    shift, u = readings(amplitude)
    here = slice(*window)

    def slope(error):
        return np.polyfit(STRAIN[here], error[here], 1)[0]

    phases = 2 * np.pi * np.arange(360) / 360
    off = [slope(amplitude * (np.sin(2 * np.pi * shift + phi) - np.sin(phi))) for phi in phases]
    stated = np.hypot(*(slope(part) for part in aliasing(u, shift, STRAIN, range(IDLE)).T))
    # Closed form on both sides, so rounding.
    assert stated == pytest.approx(np.sqrt(np.mean(np.square(off))), rel=1e-6)


def test_camera_noise_alone_leaves_nothing():
    shift, u = readings(0.0)
    # u is known to rounding here.
    assert np.abs(aliasing(u, shift, STRAIN, range(IDLE))).max() < 1e-6 * REST


def test_what_comes_at_large_strains_says_nothing():
    shift, u = readings(2e-6)
    strain = np.linspace(0, 0.015, FRAMES)
    worn = np.where(strain < 0.01, u, 10 * u)
    before, after = (aliasing(one, shift, strain, range(IDLE)) for one in (u, worn))
    np.testing.assert_array_equal(before, after)


def test_lost_frames_are_passed_over():
    shift, u = readings(2e-6)
    whole = aliasing(u, shift, STRAIN, range(IDLE))
    shift[[25, 33]], u[[25, 33]] = np.nan, np.nan
    found = aliasing(u, shift, STRAIN, range(IDLE))
    assert np.isfinite(found).all()
    there = np.isfinite(u)
    # Two terms fewer on either side of a ratio that the law makes the same for each.
    np.testing.assert_allclose(found[there], whole[there], rtol=1e-9)


@pytest.mark.parametrize("averaged", [range(1), range(3, 4)])
def test_without_a_mean_the_quietest_frame_stands_for_rest(averaged):
    shift, u = readings(2e-6, moved=1.0)
    u[:IDLE] = REST
    u[averaged.start] = 0.0  # a reference against itself
    stated = aliasing(u, shift, STRAIN, averaged)
    size = np.hypot(*stated.T)
    # A/√2·√(2 − 2·cos) at half a pixel is √2·A; the frames at rest, in the sums, change nothing.
    assert size.max() == pytest.approx(np.sqrt(2) * 2e-6, rel=0.05)


def test_nothing_measured_is_nothing_stated():
    nothing = np.full(5, np.nan)
    assert (aliasing(nothing, nothing, nothing, range(2)) == 0).all()
