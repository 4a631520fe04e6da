"""Rounding to the uncertainty's digits."""

from decimal import Decimal

import pytest
from hypothesis import given
from hypothesis import strategies as st

from dic.rounding import decimals_for, fixed, power_of_ten, three_digits, uncertainty_alone, with_uncertainty

positive = st.floats(min_value=1e-12, max_value=1e12)
values = st.floats(min_value=-1e12, max_value=1e12)


# JCGM 100:2008 (GUM) 7.2.6 rounds an uncertainty of 28.05 kHz (y = 10,057,62... ) to two digits, and
# 7.2.2 writes a nominally 100 g standard as 100.021 47 g with u = 0.35 mg [from memory].
@pytest.mark.parametrize(
    ("value", "u", "written"),
    [
        (100.02147, 0.00035, "100.02147 ± 0.00035 g"),
        (70.1234, 0.2123, "70.12 ± 0.21 g"),
        (71234.0, 1234.0, "71200 ± 1200 g"),
        (1.0, 0.0996, "1.00 ± 0.10 g"),
        (-0.0004, 0.21, "0.00 ± 0.21 g"),
        (1.0, 99.6, "0 ± 100 g"),
        # One power of ten for both, outside the brackets (common practice).
        (0.00083914, 0.00000093, "(8.3914 ± 0.0093) × 10⁻⁴ g"),
        (-0.00083914, 0.00000093, "(-8.3914 ± 0.0093) × 10⁻⁴ g"),
        (0.0, 3.02e-9, "(0.0 ± 3.0) × 10⁻⁹ g"),
        (9.9999999e-5, 3e-7, "(1.0000 ± 0.0030) × 10⁻⁴ g"),
    ],
)
def test_written_as_the_gum_asks(value, u, written):
    assert with_uncertainty(value, u, "g") == written


def test_without_value_or_uncertainty_says_so():
    assert with_uncertainty(float("nan"), 1.0, "MPa") == "not determined"
    assert with_uncertainty(12.345, float("nan"), "MPa") == "12.35 MPa (uncertainty not determined)"
    assert with_uncertainty(12.345, 0.0) == "12.35 (uncertainty not determined)"
    assert uncertainty_alone(float("nan"), "MPa") == "not determined"
    assert uncertainty_alone(0.0, "MPa") == "0 MPa"


def test_an_uncertainty_alone():
    assert uncertainty_alone(0.1049, "GPa") == "0.10 GPa"
    assert uncertainty_alone(0.02, "°") == "0.020°"
    assert uncertainty_alone(1.14e-8) == "1.1 × 10⁻⁸"
    assert uncertainty_alone(9.999e-8, "m") == "1.0 × 10⁻⁷ m"
    # With the power of ten of its value.
    assert uncertainty_alone(4.7e-7, "1/s", power_of_ten(0.00083914, 9.4e-7)) == "0.0047 × 10⁻⁴ 1/s"


@pytest.mark.parametrize(
    ("value", "written"),
    [
        (4.0216e-5, "4.02 × 10⁻⁵"),
        (-9.999e-8, "-1 × 10⁻⁷"),
        (9.999e-5, "0.0001"),
        (0.0, "0"),
        (71234.0, "71200"),
        (float("nan"), "nan"),
    ],
)
def test_three_digits(value, written):
    assert three_digits(value) == written


@given(positive)
def test_an_uncertainty_keeps_two_significant_digits(u):
    shown = Decimal(fixed(u, decimals_for(u)))
    digits = shown.scaleb(decimals_for(u))
    assert digits == digits.to_integral_value()
    assert 10 <= digits <= 99


@given(values, positive)
def test_rounding_moves_a_value_by_half_a_last_place_at_most(value, u):
    decimals = decimals_for(u)
    moved = abs(Decimal(fixed(value, decimals)) - Decimal(repr(value)))
    assert moved <= Decimal("0.5").scaleb(-decimals)
    # Half a unit of the second digit is at most 5 % of the uncertainty: rounding stays hidden in it.
    assert moved <= Decimal("0.05") * Decimal(fixed(u, decimals))


@given(values, positive)
def test_rounding_twice_changes_nothing_and_the_sign_is_symmetric(value, u):
    decimals = decimals_for(u)
    once = fixed(value, decimals)
    assert fixed(float(once), decimals) == once
    assert fixed(-value, decimals).removeprefix("-") == once.removeprefix("-")


# Fifteen digits survive the way through a float, so another unit changes no digit.
@given(st.integers(-(10**12), 10**12), st.integers(1, 10**6), st.integers(-3, 3))
def test_another_power_of_ten_of_the_unit_moves_only_the_point(value, u, power):
    here, there = [[float(Decimal(n).scaleb(p)) for n in (value, u)] for p in (-3, power)]
    assert decimals_for(there[1]) == decimals_for(here[1]) - (power + 3)
    written = [Decimal(fixed(number, decimals_for(of))) for number, of in (here, there)]
    assert written[0].scaleb(power + 3) == written[1]
