"""The noise that the matching feels, and the uncertainty stated from it."""

import numpy as np
import pytest

from dic.correlation import Tracker, lay_grid
from synthetic_images import rigid


def tracker(reference):
    mask = reference.mask[: np.prod(reference.shape)].reshape(reference.shape) > 0
    return Tracker(reference, lay_grid(mask, reference.subset, 15).neighbours())


@pytest.mark.parametrize("settings", [{}, {"kind": "quintic", "smoothing": 0.65}, {"quadratic": True}])
@pytest.mark.parametrize("kind", ["dots", "cosines"])
def test_stated_uncertainty_is_the_true_scatter(photograph, prepared, kind, settings):
    """Ten draws of 170 subsets that overlap by a half: 3 % statistical error, two of them and the
    benchmark's largest departure of 4 % allowed."""
    errors, stated = [], []
    for draw in range(10):
        reference = prepared(photograph(kind=kind, noise=0.01, frame=2 * draw), **settings)
        found = tracker(reference).follow(
            photograph(rigid(0.1 * draw, 0.2), kind=kind, noise=0.01, frame=2 * draw + 1)
        )
        errors.append(found.u - 0.1 * draw)
        stated.append(found.sigma_u)
    ratio = np.sqrt(np.mean(np.square(stated)) / np.mean(np.square(errors)))
    assert ratio == pytest.approx(1.0, abs=0.1)


def test_noise_is_read_in_grey_levels(photograph, prepared):
    """1 % of 255 plus rounding, √(2.55² + 1/12) = 2.57; what sharp edges alias adds up to 5 %."""
    reference = prepared(photograph(noise=0.01, frame=0))
    found = tracker(reference).follow(photograph(rigid(0.5, 0.5), noise=0.01, frame=1))
    assert found.noise_grey == pytest.approx(2.57, rel=0.06)


def test_averaged_reference_frames_are_accounted_for(photograph, prepared):
    """As above with nine frames in the reference."""
    frames = [photograph(noise=0.01, frame=k) for k in range(9)]
    reference = prepared(np.mean(frames, axis=0), frames=9)
    follow = tracker(reference).follow
    found = [follow(photograph(rigid(0.1 * k, 0.1), noise=0.01, frame=20 + k)) for k in range(8)]
    scatter = np.sqrt(np.mean([np.square(one.u - 0.1 * k) for k, one in enumerate(found)]))
    assert np.sqrt(np.mean([np.square(one.sigma_u) for one in found])) == pytest.approx(scatter, rel=0.1)
