"""Properties of materials whose answers are closed formulas; curves without noise, densely sampled."""

from pathlib import Path

import numpy as np
import pytest

from dic.properties import Sheet, evaluate, make_curve
from dic.strain.periodic import Periodic
from dic.sync import Clock, LoadRecord
from dic.testfile import ModulusWindow, Properties, Specimen
from synthetic_images.readings import gauge_history

COUPON = Specimen(width=12.5, thickness=2.0)
CLOCK = Clock(0.0, 0.0, 0.0, "one clock")


def curve(strain, transverse, stress):
    """Join frames and record, both with one sample per point on one clock, as the program itself does."""
    n = len(strain)
    history = gauge_history(
        np.arange(n, dtype=float), strain, transverse, 0.0, periodic=Periodic(np.nan, np.nan, 0, False)
    )
    record = LoadRecord(Path("machine.csv"), history.time_s, stress * COUPON.area)
    return make_curve(history, record, CLOCK, COUPON.area)


@pytest.mark.parametrize(
    ("youngs_modulus", "yield_point", "exponent"), [(70e3, 280.0, 20), (205e3, 520.0, 11), (114e3, 880.0, 35)]
)
def test_ramberg_osgood(youngs_modulus, yield_point, exponent):
    """Ramberg and Osgood (NACA TN 902, 1943), written so that the 0.2 % proof stress is a parameter."""
    stress = np.linspace(0, 1.25 * yield_point, 4000)
    plastic = 0.002 * (stress / yield_point) ** exponent
    strain = stress / youngs_modulus + plastic
    transverse = -0.3 * stress / youngs_modulus - plastic / 2
    offsets = (0.002, 0.001, 0.01)
    found = evaluate(
        Sheet(curve(strain, transverse, stress), COUPON, None, CLOCK, Properties(proof=offsets))
    ).properties
    # At 40 % of the proof stress the plastic strain is 0.002·0.4ⁿ, for n = 11 a share of 1e-4 of the
    # window's strain, and far less for the others.
    assert found["youngs_modulus"].value == pytest.approx(youngs_modulus, rel=1e-4)
    assert found["poissons_ratio"].value == pytest.approx(0.3, rel=1e-4)
    assert not any("not a yield point" in note for note in found["proof_stress_0_2"].notes)
    for offset in offsets:
        name = f"proof_stress_{100 * offset:g}".replace(".", "_")
        exact = yield_point * (offset / 0.002) ** (1 / exponent)
        # The modulus' own 1e-4 of the elastic strain at the crossing, seen by a curve at most a quarter
        # as steep as the line.
        assert found[name].value == pytest.approx(exact, rel=3e-5)


@pytest.mark.parametrize(("strength", "exponent"), [(530.0, 0.22), (310.0, 0.1)])
def test_hollomon(strength, exponent):
    """Hollomon's law (1945) with Considère's maximum: Rm = K (n/e)ⁿ at engineering strain eⁿ - 1."""
    true_strain = np.linspace(1e-6, 2 * exponent, 20_001)
    stress = strength * true_strain**exponent * np.exp(-true_strain)
    measured = curve(np.expm1(true_strain), np.expm1(-true_strain / 2), stress)
    found = evaluate(Sheet(measured, COUPON, None, CLOCK, Properties(modulus="auto"))).properties
    # Within 2 % of the maximum, rounding alone hides the cubic term of the law only in a window where it is
    # worth less than this.
    exact = strength * (exponent / np.e) ** exponent
    assert found["tensile_strength"].value == pytest.approx(exact, rel=1e-8)
    at = float(np.interp(measured.peak_time_s, measured.time_s, measured.axial))
    # Near it the law falls as 1 - (ε - n)²/2n, so 1e-8 of its height are √(2e-8/n) of n.
    assert at == pytest.approx(np.expm1(exponent), rel=5e-4)


@pytest.mark.parametrize("shear", [0.4, 1.7])
def test_neo_hookean(shear):
    """Incompressible neo-Hookean rubber: σ = μ(λ - λ⁻²), λ_t = λ^(-1/2), so E = 3μ and ν = 1/2 at first."""
    stretch = np.linspace(1.0, 1.3, 30_001)
    stress = shear * (stretch - stretch**-2)
    measured = curve(stretch - 1, stretch**-0.5 - 1, stress)
    middle = 0.0015
    found = evaluate(Sheet(measured, COUPON, None, CLOCK, Properties())).properties
    # The default window 0.0005 to 0.0025 sees the slope at its middle, dσ/dε = μ(1 + 2λ⁻³); the curve's
    # third derivative changes a line's slope there by less than 1e-5.
    exact = shear * (1 + 2 * (1 + middle) ** -3)
    assert found["youngs_modulus"].value == pytest.approx(exact, rel=2e-5)
    assert exact == pytest.approx(3 * shear, rel=2.1 * middle)
    assert "ISO 527-1" in found["youngs_modulus"].method
    assert any("not a yield point" in note for note in found["proof_stress_0_2"].notes)
    # -dε_t/dε = λ^(-3/2)/2.
    assert found["poissons_ratio"].value == pytest.approx(0.5 * (1 + middle) ** -1.5, rel=2e-5)
    small = Properties(modulus=ModulusWindow(strain=(0.0, 0.0002)))
    found = evaluate(Sheet(measured, COUPON, None, CLOCK, small)).properties
    # Middle of the window 1e-4: tangent 3μ(1 - 2e-4).
    assert found["youngs_modulus"].value == pytest.approx(3 * shear, rel=2.5e-4)
    assert found["shear_modulus"].value == pytest.approx(shear, rel=2.5e-4)
