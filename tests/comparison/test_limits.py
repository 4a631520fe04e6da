"""The classes' limits as the standards have them, and the three verdicts."""

import numpy as np
import pytest

from dic.comparison.limits import CLASSES, joint_factor, verdicts

AT = np.array([0.001, 0.01])


@pytest.mark.parametrize(
    ("standard", "name", "limits"),
    [
        # ISO 9513 class 1: 1 % or 3 µm, over 50 mm; ASTM E83 class B-1: 0.5 % or 0.0001 [both from memory]
        ("ISO 9513", "1", [6e-5, 1e-4]),
        ("ISO 9513", "0.5", [3e-5, 5e-5]),
        ("ASTM E83", "B-1", [1e-4, 1e-4]),
        ("ASTM E83", "A", [2e-5, 2e-5]),
        ("ASTM E83", "C", [1e-3, 1e-3]),
    ],
)
def test_the_larger_part_is_the_limit(standard, name, limits):
    (one,) = (c for c in CLASSES if (c.standard, c.name) == (standard, name))
    np.testing.assert_allclose(one.limit(AT, 50.0), limits, rtol=1e-12)


def test_joint_factor():
    """One interval: 1.95996, the normal distribution's 97.5 % point; ten: that of (1 + 0.95^0.1)/2."""
    assert joint_factor(1) == pytest.approx(1.959964, abs=1e-6)
    assert joint_factor(10) == pytest.approx(2.7996, abs=1e-4)


@pytest.mark.parametrize(
    ("difference", "u", "verdict"),
    [
        ([0, 5e-5], 1e-6, "within"),
        ([0, -5e-5], 1e-6, "within"),
        ([0, 2e-4], 1e-6, "beyond"),
        ([1e-4, 0], 1e-6, "beyond"),
        ([0, 9e-5], 1e-5, "cannot be told"),
        ([0, 1.1e-4], 1e-5, "cannot be told"),
    ],
)
def test_verdict_takes_the_uncertainty_into_account(difference, u, verdict):
    found = verdicts(AT, np.array(difference), np.full(2, u), 50.0)
    (one,) = (v for v in found if (v.standard, v.name) == ("ISO 9513", "1"))
    assert one.verdict == verdict
