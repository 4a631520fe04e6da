"""The registry of flags: every flag has its meaning and a case that gives it (others in their rooms).

Masked: tests/store/test_fields.py.  Low texture, out of view, saturated: tests/correlation/test_matching.py.
Decorrelated: the crack in tests/correlation/test_tracking.py.
"""

import numpy as np
import pytest

from dic.correlation import MEANING, Flag, match_frame, spline_image
from synthetic_images import rigid


def test_every_flag_has_its_meaning():
    assert set(MEANING) == set(Flag)
    assert len(set(MEANING.values())) == len(Flag)


def test_converged(photograph, prepared, matched):
    found = matched(prepared(photograph()), photograph(rigid(0.2, 0.1)))
    assert (found.flag == Flag.CONVERGED).all()
    assert np.isfinite(found.parameters).all()


def test_not_converged_when_started_too_far_off(photograph, prepared, matched):
    """Half a subset away no gradient leads back; wherever the iteration goes, it is not taken for a match."""
    reference = prepared(photograph(), margin=60)
    start = np.zeros((len(reference.x), 6))
    start[:, 0] = 17
    found = matched(reference, photograph(), start)
    wrong = ~(np.abs(found.u) < 0.1)
    assert (found.flag[wrong] != Flag.CONVERGED).all()
    assert (found.flag[wrong] == Flag.NOT_CONVERGED).any()


@pytest.mark.parametrize("kind", ["cubic", "quintic", "septic", "twofold"])
def test_what_starts_as_nan_stays_nan(photograph, prepared, kind):
    reference = prepared(photograph(), kind=kind)
    start = np.zeros((len(reference.x), 6))
    start[::2] = np.nan
    found = match_frame(reference, spline_image(photograph(), kind, 0.5), start)
    assert np.isnan(found.parameters[::2]).all()
    assert (found.flag[::2] == Flag.NOT_CONVERGED).all()
    assert found.converged[1::2].all()
