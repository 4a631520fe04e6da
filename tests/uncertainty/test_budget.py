"""Combining contributions."""

from math import inf, isnan, nan

import pytest
from scipy import stats

from dic.uncertainty import combine, few_readings


def test_independent_contributions_combine_as_root_sum_of_squares():
    # JCGM 100:2008, 5.1.2; 2, 3 and 6 make 7 exactly.
    assert combine({"scatter": 2.0, "force": 3.0, "section": 6.0}) == 7.0
    assert combine({}) == 0.0


def test_an_unknown_contribution_makes_the_whole_unknown():
    assert isnan(combine({"scatter": 1.0, "clock": nan}))


@pytest.mark.parametrize("dof", [3, 5, 8, 30, 200])
def test_few_readings_is_the_standard_deviation_of_students_t(dof):
    # SciPy's t distribution is the independent source; rounding only.
    assert few_readings(dof) == pytest.approx(stats.t(dof).std(), rel=1e-12)


@pytest.mark.parametrize("dof", [0, 1, 2])
def test_two_degrees_of_freedom_bound_nothing(dof):
    assert few_readings(dof) == inf
