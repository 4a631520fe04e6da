"""A speckled picture with subsets on it, and matches that follow a motion exactly."""

import numpy as np
import pytest

from dic.correlation import Flag, Match, lay_grid
from dic.gauges.probes import Subsets
from dic.strain import Region

SUBSET, STEP, MARGIN = 21, 10, 8


@pytest.fixture(scope="session")
def subsets(photograph, prepared):
    """190 × 260 px, the coupon's axis upright."""
    image = photograph()
    mask = np.zeros(image.shape, bool)
    mask[MARGIN:-MARGIN, MARGIN:-MARGIN] = True
    reference = prepared(image, subset=SUBSET, step=STEP, margin=MARGIN)
    return Subsets(reference, lay_grid(mask, SUBSET, STEP))


@pytest.fixture(scope="session")
def region():
    return Region(np.array([129.5, 94.5]), 170.0, 240.0, np.array([0.0, -1.0]), np.array([1.0, 0.0]))


@pytest.fixture(scope="session")
def moved_by(subsets):
    """Return a function that gives the match of a homogeneous motion: deformation F, then a shift."""

    def match(deformation, shift=(0.0, 0.0), lost=()):
        gradient = np.asarray(deformation, float) - np.eye(2)
        places = subsets.places
        moved = places @ gradient.T + shift
        parameters = np.column_stack(
            [moved[:, 0], np.tile(gradient[0], (len(places), 1)), moved[:, 1],
             np.tile(gradient[1], (len(places), 1))]
        )  # fmt: skip
        flag = np.full(len(places), Flag.CONVERGED, np.uint8)
        flag[list(lost)] = Flag.DECORRELATED
        parameters[list(lost)] = np.nan
        n = len(places)
        return Match(parameters, np.ones(n), np.full(n, 0.01), np.full(n, 0.01), flag,
                     np.ones(n, np.uint8), 2.0)  # fmt: skip

    return match
