"""Combining contributions."""

from math import inf, isnan, nan

import numpy as np
import pytest
from scipy import stats

from dic.uncertainty import Input, budget_of, combine, few_readings


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


def test_a_budget_adds_up_and_names_what_it_lacks():
    """Closed form: E = F / (A·ε) has sensitivities E/F and E/A; contributions 3 and 4 make shares 9:16."""
    inputs = {"force": Input(1.0, "", 0.03), "section": Input(25.0, "mm²", 1.0)}
    rows = budget_of({"force": 3.0, "section": 4.0}, "MPa", inputs, ("the clock",))
    assert [row.source for row in rows] == ["section", "force", "the clock"]
    assert [row.share for row in rows[:2]] == pytest.approx([16 / 25, 9 / 25], rel=1e-12)
    for row in rows[:2]:
        assert row.sensitivity * row.standard_uncertainty == pytest.approx(row.contribution, rel=1e-12)
    assert rows[0].sensitivity == 4.0
    assert not rows[2].included
    assert isnan(rows[2].contribution)


def test_a_product_of_inputs_has_the_spread_that_its_budget_says():
    """Monte Carlo (JCGM 101) of stress = c·F/A against the linear sum: the model is nearly linear."""
    draw = np.random.default_rng(4)
    force, area = 1 + 0.002 * draw.standard_normal(40_000), 25 + 0.05 * draw.standard_normal(40_000)
    stress = 7500 * force / area
    linear = combine({"force": 300 * 0.002, "section": 300 * 0.05 / 25})
    # The spread of 40 000 draws is known to 0.35 %; four times that.
    assert stress.std() == pytest.approx(linear, rel=0.014)
