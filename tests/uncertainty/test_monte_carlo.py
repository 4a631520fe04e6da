"""Propagation by draws against closed forms and the examples of JCGM 101:2008."""

import time
from copy import deepcopy
from math import erf, hypot, isnan, nan, sqrt

import numpy as np
import pytest
from scipy import integrate, optimize, stats

from dic.uncertainty import Contribution, Draws, Effect, Factor, agrees, bounded, monte_carlo
from dic.uncertainty.monte_carlo import tolerance

#: Ends of an interval by 100 000 draws: a free draw's 2.5 % quantile of a normal scatters by 0.0085 u, and
#: drawing in equal shares takes most of that away; 0.02 u is beyond doubt and finds any wrong distribution.
ENDS = 0.02


def test_a_linear_normal_budget_gives_the_normal_interval():
    drawn = monte_carlo(70e3, {"scatter": 300.0, "fit": 400.0})
    # Closed form: 1.959964 u; drawn in equal shares the ends are exact but for rounding of shares.
    assert (drawn.high - 70e3) / 500 == pytest.approx(1.959964, abs=1e-3)
    assert (70e3 - drawn.low) / 500 == pytest.approx(1.959964, abs=1e-3)
    assert drawn.standard_deviation == pytest.approx(500, rel=1e-3)
    assert agrees(70e3, 500.0, drawn)


@pytest.mark.parametrize("u", [0.98e-6, 1.02, 9.49, 9.6, 512.0, 0.0])
def test_every_linear_normal_budget_agrees_with_the_gum(u):
    assert agrees(3.0, u, monte_carlo(3.0, {"one": 0.6 * u, "other": 0.8 * u}))


def test_four_rectangular_inputs():
    """JCGM 101:2008, 9.2.3 [from memory]: the sum of four with u = 1 has a 95 % interval of ±3.88."""
    drawn = monte_carlo(0.0, {name: bounded(1.0) for name in "abcd"})
    assert [drawn.low, drawn.high] == pytest.approx([-3.88, 3.88], abs=2 * ENDS)
    assert drawn.standard_deviation == pytest.approx(2, rel=0.01)


def test_one_dominant_rectangular_input_is_narrower_than_the_gum_says():
    """Rectangular inputs, three of u = 1 and one of 10 (JCGM 101:2008, 9.2.4 [from memory]: ±17.0)."""
    budget = {"a": bounded(1.0), "b": bounded(1.0), "c": bounded(1.0), "d": bounded(10.0)}
    drawn = monte_carlo(0.0, budget)
    assert [drawn.low, drawn.high] == pytest.approx([-17.0, 17.0], abs=10 * ENDS)
    assert not agrees(0.0, hypot(*budget.values()), drawn)


def test_a_quotient_of_rectangular_inputs():
    """Stress c·(1 + a)/(1 + b), both errors in ±10 %: its distribution function is an integral over b."""
    half = 0.1
    factors = (Factor(half / sqrt(3), 1, bounded=True), Factor(half / sqrt(3), -1, bounded=True))
    drawn = monte_carlo(300.0, {"both": Contribution(300 * half * sqrt(2 / 3), factors=factors)})

    def below(ratio):
        share = stats.uniform(1 - half, 2 * half).cdf
        return integrate.quad(lambda b: share(ratio * b), 1 - half, 1 + half, limit=200)[0] / (2 * half)

    ends = [300 * optimize.brentq(lambda r, p=p: below(r) - p, 0.8, 1.3) for p in (0.025, 0.975)]
    u = 300 * half * sqrt(2 / 3)
    assert [drawn.low, drawn.high] == pytest.approx(ends, abs=ENDS * u)


def test_a_product_of_normal_inputs_has_the_closed_variance():
    """Var(XY) = (1 + a²)(1 + b²) - 1 for means of 1; a diameter's error counts twice."""
    product = Contribution(0.5, factors=(Factor(0.3, 1), Factor(0.4, 1)))
    # The second moment of 100 000 free draws is known to 0.4 %.
    assert monte_carlo(1.0, {"both": product}).standard_deviation == pytest.approx(
        sqrt((1 + 0.3**2) * (1 + 0.4**2) - 1), rel=0.01
    )
    round_bar = monte_carlo(1.0, {"section": Contribution(0.1, factors=(Factor(0.05, -2, bounded=True),))})
    half = 0.05 * sqrt(3)
    ends = sorted((1 + side * 0.95 * half) ** -2 for side in (-1, 1))
    assert [round_bar.low, round_bar.high] == pytest.approx(ends, rel=1e-4)


@pytest.mark.parametrize("sign", [1, -1])
def test_a_one_sided_effect_is_chi_square(sign):
    """An effect c·z² moves a value away from zero by c·χ²(1), whose ends SciPy knows."""
    lacking = Contribution(sqrt(3) * 2.0, (Effect(0.0, 2.0),))
    drawn = monte_carlo(sign * 100.0, {"axis angle": lacking})
    ends = sorted(sign * (100 + 2 * stats.chi2(1).ppf(p)) for p in (0.025, 0.975))
    # One draw's share is 0.003 wide at the far end.
    assert [drawn.low, drawn.high] == pytest.approx(ends, abs=3e-3)
    assert drawn.standard_deviation == pytest.approx(2 * sqrt(2), rel=1e-3)
    assert not agrees(sign * 100, lacking, drawn)


def test_a_parabola_through_three_values():
    """Here and ±u give 10, 14 and 8: 10 + 3z + z², of which less than y has a closed form."""
    drawn = monte_carlo(10.0, {"clock": Contribution(3.0, (Effect(3.0, 1.0),))})

    def normal(z):
        return 0.5 * (1 + erf(z / sqrt(2)))

    for end, share in ((drawn.low, 0.025), (drawn.high, 0.975)):
        root = sqrt(9 - 4 * (10 - end))
        assert normal((-3 + root) / 2) - normal((-3 - root) / 2) == pytest.approx(share, abs=2e-4)


@pytest.mark.parametrize(
    ("u", "expected"),
    [(0.35, 0.05), (2.0, 0.5), (1.4, 0.05), (0.98, 0.05), (94.0, 5.0), (96.0, 5.0), (0.0, 0.0)],
)
def test_tolerance_is_half_a_unit_of_the_last_digit(u, expected):
    """JCGM 101:2008, 7.9.2 [from memory]: 0.35 is 4 × 10^-1 with one digit, so 0.05; 0.98 is 10 × 10^-1."""
    assert tolerance(u) == pytest.approx(expected, rel=1e-12)


def test_what_is_not_known_has_no_interval():
    assert monte_carlo(nan, {"scatter": 1.0}) is None
    assert monte_carlo(1.0, {"scatter": 1.0, "clock": bounded(nan)}) is None
    assert monte_carlo(1.0, {"clock": Contribution(1.0, (Effect(1.0, nan),))}) is None
    assert isnan(bounded(nan))


def test_it_repeats_itself_and_survives_copying():
    budget = {"a": bounded(1.0), "force": Contribution(1.0, factors=(Factor(0.1, 1),)), "b": 0.3}
    first = monte_carlo(10.0, budget)
    assert isinstance(first, Draws)
    assert first == monte_carlo(10.0, deepcopy(budget))
    assert np.isclose(hypot(*budget.values()), sqrt(2.09))


def test_it_takes_a_few_milliseconds():
    budget = {"a": 1.0, "c": bounded(2.0), "d": Contribution(1.0, (Effect(1.0, 0.1),))} | {
        "force": Contribution(1.0, factors=(Factor(0.005, 1, bounded=True),)),
        "section": Contribution(1.0, factors=(Factor(0.005, -1), Factor(0.005, -1))),
    }
    monte_carlo(300.0, budget)
    start = time.process_time()
    for _ in range(20):
        monte_carlo(300.0, budget)
    # Measured 3 ms; several times that for a slow machine.
    assert (time.process_time() - start) / 20 < 0.02
