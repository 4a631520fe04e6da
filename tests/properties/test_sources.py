"""The sources that codes of practice list stand in the budget, or are named as not included."""

from dataclasses import replace
from math import isfinite, radians, sqrt

import pytest

from dic.properties import Sheet, evaluate
from dic.testfile import Properties

#: Sources of UNCERT CoP 07 (tensile) and CoP 16 (Poisson's ratio), 2000 [from memory], and the word under
#: which the budget has them.
COP_07 = {
    "force": "force",
    "cross-section": "section",
    "readings": "scatter",
    "extensometer": "interpolation",
}
COP_16 = {"alignment": "axis", "readings": "scatter", "strain measurement": "interpolation"}


@pytest.mark.parametrize(
    ("name", "sources"),
    [("youngs_modulus", COP_07), ("proof_stress_0_2", COP_07), ("poissons_ratio", COP_16)],
)
def test_every_listed_source_is_accounted_for(pull, name, sources):
    drawn = pull()
    found = evaluate(Sheet(drawn.curve, drawn.specimen, None, drawn.clock, Properties())).properties[name]
    told = [row.source for row in found.budget]
    for source, word in sources.items():
        assert any(word in one for one in told), (source, told)
    # What is not included stands in the table itself, and has no share in the sum.
    assert sum(row.share for row in found.budget if row.included) == pytest.approx(1, rel=1e-9)
    if name != "poissons_ratio":
        assert any("load_record.force_uncertainty" in row.source for row in found.budget if not row.included)


def checked(drawn, specimen, **keys):
    return evaluate(
        Sheet(drawn.curve, specimen, 0.01, drawn.clock, Properties(modulus="auto"), **keys)
    ).properties


def test_the_budget_is_checked_by_draws(pull):
    drawn = pull(u_thickness=0.01, u_clock=0.003)
    found = checked(drawn, drawn.specimen)
    for one in found.values():
        if isfinite(one.standard_uncertainty) and one.standard_uncertainty > 0:
            low, high = one.interval_95
            assert low < one.value < high
            assert high - low == pytest.approx(2 * 1.96 * one.draws_standard_deviation, rel=0.1)
    # With normal inputs and small errors, linear is good enough (JCGM 100:2008, 5.1.2).
    assert not [note for note in found["tensile_strength"].notes if "Monte Carlo" in note]


def test_an_interval_that_is_not_normal_is_told(pull):
    """A class' bounds that outweigh all else: 95 % of a rectangle lie within 0.95·√3 of u, not 1.96."""
    drawn = pull()
    coupon = drawn.specimen.model_copy(update={"calliper_resolution": 0.01})
    strength = checked(drawn, coupon, force_bounded=True)["tensile_strength"]
    low, high = strength.interval_95
    u = strength.contributions["force calibration"]
    assert (high - low) / 2 == pytest.approx(0.95 * sqrt(3) * u, rel=0.03)
    assert any("Monte Carlo" in note and f"{low:.5g}" in note for note in strength.notes)


@pytest.mark.parametrize("sign", [1, -1])
def test_an_axis_that_is_off_only_ever_raises_the_modulus(pull, sign):
    """Strain lacks (1 + ν)·θ² of itself, so E is that much too high: the draws lie below, never above."""
    drawn = pull(sign=sign)
    curve = replace(drawn.curve, u_axis_deg=3.0)
    told = evaluate(Sheet(curve, drawn.specimen, None, drawn.clock, Properties())).properties[
        "youngs_modulus"
    ]
    low, high = told.interval_95
    mean = (1 + 0.33) * radians(3.0) ** 2 * told.value
    (effect,) = told.contributions["axis angle"].effects
    # Terms of second order in θ² are 0.4 % of it.
    assert effect.square == pytest.approx(-mean, rel=0.02)
    assert high - told.value < told.value - low


def test_the_bulk_modulus_bends_with_its_scatter(pull):
    """K is one over a sum of slopes: moved by its share e either way, their mean is K·e²/(1 - e²) off."""
    drawn = pull(strain_noise=3e-5)
    found = evaluate(Sheet(drawn.curve, drawn.specimen, None, drawn.clock, Properties())).properties[
        "bulk_modulus"
    ]
    (effect,) = found.contributions["scatter"].effects
    share = effect.linear / found.value
    # The derivatives are taken over steps of a millionth.
    assert effect.square == pytest.approx(found.value * share**2 / (1 - share**2), rel=1e-3)
    low, high = found.interval_95
    assert high - found.value > found.value - low
