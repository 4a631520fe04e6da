"""Where strain counts from: rest, preload, toe; and slack that strain does not see."""

import re
from dataclasses import replace
from math import isnan

import numpy as np
import pytest

from dic.properties import Sheet, evaluate
from dic.testfile import ModulusWindow, Properties

WINDOW = ModulusWindow(strain=(0.0005, 0.0025))


def evaluated(drawn, **keys):
    return evaluate(Sheet(drawn.curve, drawn.specimen, None, drawn.clock, Properties(**keys)))


def codes(found):
    return [notice.code for notice in found.notices]


def with_strain(drawn, axial):
    return replace(drawn, history=replace(drawn.history, axial=axial))


def stress_at_frames(drawn):
    return drawn.curve.stress_MPa


def test_strain_counts_from_rest(pull):
    """A reference frame under load shifts every reading; the window in strain stays where it was."""
    drawn = pull(3)
    one = evaluated(drawn, modulus=WINDOW)
    other = evaluated(with_strain(drawn, drawn.history.axial - 7e-4), modulus=WINDOW)
    # The same frames, so nothing but rounding of the shift.
    assert other.properties["youngs_modulus"].value == pytest.approx(
        one.properties["youngs_modulus"].value, rel=1e-9
    )
    window = other.properties["youngs_modulus"].window["strain"]
    assert window == pytest.approx(one.properties["youngs_modulus"].window["strain"], abs=1e-12)
    # The line for the figures stays on the readings as they are.
    assert other.line.low == pytest.approx(one.line.low - 7e-4, abs=1e-12)
    assert codes(one) == codes(other) == []


def with_toe(drawn, size, sign=1.0):
    """A coupon that straightens first: its strain gains `size` over the first 5 MPa."""
    stress = np.abs(stress_at_frames(drawn))
    return with_strain(drawn, drawn.history.axial + sign * size * (1 - np.exp(-np.clip(stress, 0, None) / 5)))


@pytest.mark.parametrize("sign", [1.0, -1.0])
@pytest.mark.parametrize("size", [2e-4, 6e-4])
def test_a_clear_toe_is_taken_off_and_said(pull, sign, size):
    drawn = with_toe(pull(1, sign=sign, rate=1e-4), size, sign)
    found = evaluated(drawn, modulus=WINDOW)
    assert codes(found) == ["toe_compensated"]
    modulus = found.properties["youngs_modulus"]
    # Strain 0.0005 is 35 MPa, where e⁻⁷ of the toe is left: 0.02 % of the window's strain at most.
    assert modulus.value == pytest.approx(70e3, abs=4 * modulus.standard_uncertainty + 14)
    # Counted from the corrected zero the window begins at 35 MPa, less or more one frame of 2e-5 · E.
    assert abs(modulus.window["stress_MPa"][0 if sign > 0 else 1]) == pytest.approx(35.0, abs=2.0)
    # In the readings as they are, the line meets zero stress at the toe's size.
    assert -found.line.intercept / found.line.slope == pytest.approx(sign * size, abs=1e-5)


def test_a_toe_may_be_left_in(pull):
    found = evaluated(with_toe(pull(1, rate=1e-4), 6e-4), modulus=WINDOW, toe=False)
    assert codes(found) == ["toe_left_in"]
    # 0.0005 as read is still in the toe, which makes the line steeper or flatter by far more than noise.
    assert found.properties["youngs_modulus"].value < 69e3


@pytest.mark.parametrize("seed", range(20))
def test_without_a_toe_nothing_is_taken_off(pull, seed):
    assert codes(evaluated(pull(seed, rate=1e-4), modulus=WINDOW)) == []


def test_a_clock_that_is_off_is_no_toe(pull):
    drawn = pull(2, rate=4e-4)
    late = replace(drawn, clock=replace(drawn.clock, offset_s=drawn.clock.offset_s - 0.4))
    # 0.4 s of 4e-4 1/s are a shift of 1.6e-4, but the loaded frames all lie on one line.
    assert codes(evaluated(late, modulus=WINDOW)) == []


def test_a_toe_that_is_asked_for_moves_the_zero_to_the_line(pull):
    drawn = pull(2)
    found = evaluated(drawn, modulus=WINDOW, toe=True)
    assert codes(found) == ["toe_compensated"]
    assert found.properties["youngs_modulus"].value == pytest.approx(70e3, rel=1e-3)


@pytest.mark.parametrize("preload", ["500 N", "20 MPa"])
def test_strain_counts_from_a_preload(pull, preload):
    drawn = pull(4, rate=1e-4)
    found = evaluated(drawn, modulus=WINDOW, preload=preload)
    assert codes(found) == ["preload"]
    low, high = found.properties["youngs_modulus"].window["stress_MPa"]
    # From 20 MPa on, 0.0005 to 0.0025 strain are 35 to 175 MPa more, less one frame of 1.4 MPa.
    assert low == pytest.approx(55.0, abs=2.0)
    assert high == pytest.approx(195.0, abs=2.0)


def test_a_preload_that_is_never_reached(pull):
    found = evaluated(pull(), preload="1 GPa")
    assert isnan(found.properties["youngs_modulus"].value)
    assert "never reaches the preload" in found.properties["youngs_modulus"].notes[0]
    assert found.properties["tensile_strength"].value > 0


def test_a_force_at_rest_is_told(pull):
    drawn = pull(1)
    loaded = replace(drawn, record=replace(drawn.record, force_N=drawn.record.force_N + 200.0))
    found = evaluated(loaded)
    assert codes(found) == ["force_at_rest"]
    shown = float(re.search(r"shows (\S+) MPa", found.notices[0].text)[1])
    # Ten frames at rest whose force scatters by 0.1 % of the largest, that is 0.3 MPa.
    assert shown == pytest.approx(8.0, abs=4 * 0.3 / np.sqrt(10))
    assert codes(evaluated(loaded, preload="200 N")) == ["preload"]


@pytest.mark.parametrize(("slack", "told"), [(0.0, False), (0.3, True)])
def test_slack_in_the_grips_is_recognised(pull, slack, told):
    """The crosshead's travel: the slack first, then as far as a machine of 20 kN/mm gives way."""
    drawn = pull(1)
    time, force = drawn.record.time_s, drawn.record.force_N
    # The pull begins at 2 s, the coupon takes load from there on; the slack is travelled before.
    travel = force / 20e3 + slack * np.clip((time - 1.0) / 0.9, 0, 1)
    found = evaluated(replace(drawn, record=replace(drawn.record, displacement_mm=travel)))
    assert codes(found) == (["seating_slack"] if told else [])
    if told:
        # The force's noise of 8 N is 0.4 µm of travel.
        assert "0.3 mm" in found.notices[0].text
