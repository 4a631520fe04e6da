"""Displacements against independent registrations and against a shift by Fourier phase."""

import cv2
import numpy as np
import pytest
from scipy import ndimage
from skimage import data
from skimage.registration import phase_cross_correlation

from synthetic_images import homogeneous, rigid


def fourier_shifted(image, dx, dy):
    """Shift by phase: exact for a periodic band-limited picture (the shift theorem)."""
    return np.real(np.fft.ifft2(ndimage.fourier_shift(np.fft.fft2(image), (dy, dx))))


def band_limited(photograph):
    """Take away what lies above 0.4 cycles per pixel, where a sampled photograph is aliased anyway,
    and what a window needs for periodicity, so that the shifted picture has no ringing."""
    rows, columns = photograph.shape
    fy, fx = np.fft.fftfreq(rows)[:, None], np.fft.rfftfreq(columns)[None, :]
    low = np.exp(-((np.hypot(fx, fy) / 0.28) ** 4))
    return np.fft.irfft2(np.fft.rfft2(photograph) * low, s=photograph.shape)


@pytest.mark.parametrize("name", ["gravel", "brick", "grass"])
@pytest.mark.parametrize("shift", [(0.25, -0.4), (0.5, 0.5)])
def test_photographs_shifted_by_fourier_phase(prepared, matched, name, shift):
    """Photographs: scikit-image's gravel, brick, grass (CC0).  Truth: the Fourier shift theorem.

    2 mpx: quintic interpolation of content up to 0.3 cycles per pixel, mean over all subsets.
    """
    image = band_limited(getattr(data, name)().astype(float))
    reference = prepared(image, subset=41, step=20, margin=40)
    found = matched(reference, fourier_shifted(image, *shift))
    good = found.converged
    assert good.mean() > 0.9  # grass and brick have bare patches
    assert np.mean(found.u[good]) == pytest.approx(shift[0], abs=2e-3)
    assert np.mean(found.v[good]) == pytest.approx(shift[1], abs=2e-3)


def test_enhanced_correlation_coefficient_agrees(photograph, prepared, matched):
    """Reference: cv2.findTransformECC (Evangelidis & Psarakis 2008, doi 10.1109/TPAMI.2008.113).

    It interpolates linearly and so is off the motion's formula by 0.013 px in the mean, 0.02 px at the
    rim and 180 µm/m; half as much again is allowed, and 0.025 px at a point for this program's noise.
    This program's own mean is held against the formula: its noise over 187 subsets is 0.3 mpx.
    """
    motion = homogeneous(0.004, -0.0012, 0.001, centre=(130, 95), shift=(0.7, -0.4))
    one, other = photograph(noise=0.01), photograph(motion, noise=0.01, frame=1)
    _, warp = cv2.findTransformECC(
        one.astype(np.float32), other.astype(np.float32), np.eye(2, 3, dtype=np.float32),
        cv2.MOTION_AFFINE, (cv2.TERM_CRITERIA_EPS | cv2.TERM_CRITERIA_COUNT, 200, 1e-8), None, 1,
    )  # fmt: skip
    reference = prepared(one)
    found = matched(reference, other)
    points = np.stack([reference.x, reference.y, np.ones_like(reference.x)])
    expected = warp @ points - points[:2]
    for part, reference_part in ((found.u, expected[0]), (found.v, expected[1])):
        np.testing.assert_allclose(part, reference_part, atol=0.045)
        assert np.mean(part - reference_part) == pytest.approx(0.0, abs=0.02)
    slope = np.polyfit(reference.y, found.v, 1)[0]
    assert slope == pytest.approx(float(warp[1, 1]) - 1, abs=2.7e-4)
    x, y = motion(reference.x.astype(float), reference.y.astype(float))
    assert np.mean(found.u - (x - reference.x)) == pytest.approx(0.0, abs=2e-3)
    assert np.mean(found.v - (y - reference.y)) == pytest.approx(0.0, abs=2e-3)


def test_phase_cross_correlation_agrees(photograph, prepared, matched):
    """Reference: skimage.registration.phase_cross_correlation without whitening, upsampled 50 times
    (Guizar-Sicairos 2008, doi 10.1364/OL.33.000156); steps of 0.02 px, edges cost another 0.05."""
    one, other = photograph(noise=0.01), photograph(rigid(0.62, -0.26), noise=0.01, frame=1)
    window = np.outer(np.hanning(190), np.hanning(260))
    back, _, _ = phase_cross_correlation(
        (one - one.mean()) * window, (other - other.mean()) * window, upsample_factor=50, normalization=None
    )
    found = matched(prepared(one), other)
    assert np.mean(found.v) == pytest.approx(-back[0], abs=0.07)
    assert np.mean(found.u) == pytest.approx(-back[1], abs=0.07)
