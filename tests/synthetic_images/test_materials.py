"""Materials against their closed forms."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from synthetic_images.materials import Elastic, NeoHookean, RambergOsgood, YieldPoint, proof_stress

METAL = RambergOsgood(71_300.0, 0.327, 432.0, 24.0)
RUBBER = NeoHookean(0.62)
MILD = YieldPoint(210_000.0, 0.3, 300.0, 270.0, 420.0)


@given(st.floats(1e3, 4e5), st.floats(50, 2000), st.floats(2, 60))
def test_ramberg_osgood_has_its_proof_stress(modulus, sigma, exponent):
    """ε = σ/E + 0.002·(σ/σ0.2)ⁿ: at σ0.2 the plastic strain is 0.002, so Rp0.2 = σ0.2 exactly."""
    metal = RambergOsgood(modulus, 0.3, sigma, exponent)
    limit = 4 * (sigma / modulus + 0.002)
    # The stated 1e-9; the crossing of two lines loses digits where they are nearly parallel.
    assert proof_stress(metal, limit) == pytest.approx(sigma, rel=1e-9)


@given(st.floats(1e-7, 0.2))
def test_ramberg_osgood_stress_and_strain_undo_each_other(strain):
    # Both are smooth; rounding is all that separates them.
    assert METAL.strain(METAL.stress(strain)) == pytest.approx(strain, rel=1e-11)
    assert METAL.stress(-strain) == -METAL.stress(strain)


def test_ramberg_osgood_volume():
    """Transverse slope −ν at first; the plastic part alone keeps length × width² (no volume change)."""
    assert METAL.transverse(1e-5) / 1e-5 == pytest.approx(-0.327, rel=1e-6)
    plastic, across = METAL.unloaded(0.05)
    assert plastic == pytest.approx(0.05 - METAL.stress(0.05) / 71_300, rel=1e-12)
    assert (1 + plastic) * (1 + across) ** 2 == pytest.approx(1.0, rel=1e-12)


def test_slope_at_zero_is_youngs_modulus():
    for material in (METAL, RUBBER, MILD, Elastic(3000.0, 0.4)):
        # A one-sided difference over 1e-6 of strain is off by the curvature, of that order.
        assert material.stress(1e-6) / 1e-6 == pytest.approx(material.youngs_modulus, rel=1e-5)
        assert material.transverse(1e-6) / 1e-6 == pytest.approx(-material.poissons_ratio, rel=1e-5)


@given(st.floats(-0.6, 5.0))
def test_neo_hookean_closed_forms(strain):
    """σ = μ(λ − λ⁻²), λ_t = λ^(−1/2), E = 3μ (Treloar)."""
    stretch = 1 + strain
    assert RUBBER.stress(strain) == pytest.approx(0.62 * (stretch - 1 / stretch**2), rel=1e-12, abs=1e-15)
    assert (1 + RUBBER.transverse(strain)) ** 2 * stretch == pytest.approx(1.0, rel=1e-12)
    assert RUBBER.strain(RUBBER.stress(strain)) == pytest.approx(strain, rel=1e-9, abs=1e-12)
    assert RUBBER.youngs_modulus == 3 * 0.62


def test_hooke():
    """Steel as EN 1993-1-1 takes it [from memory]: E 210 000, ν 0.3."""
    steel = Elastic(210_000.0, 0.3)
    assert steel.stress(0.001) == pytest.approx(210.0)
    assert steel.strain(210.0) == pytest.approx(0.001)
    assert steel.transverse(0.001) == pytest.approx(-0.0003)


def test_what_is_left_after_unloading():
    assert Elastic(3000.0, 0.4).unloaded(0.01) == (0.0, 0.0)
    assert RUBBER.unloaded(0.3) == (0.0, 0.0)


def test_proof_stress_that_is_not_reached_is_nan():
    assert np.isnan(proof_stress(Elastic(3000.0, 0.4), 0.5))
    assert np.isnan(proof_stress(METAL, 0.005))
    assert np.isnan(proof_stress(METAL, 0.001))


def test_mild_steel_has_its_yield_points():
    """By construction: ReH, a level at ReL from 0.001 beyond it, and Rs at last; Rp0.2 lies on the level."""
    upper = 300 / 210_000
    assert MILD.stress(upper) == pytest.approx(300, rel=1e-12)
    level = MILD.stress(np.linspace(upper + 0.001, upper + 0.016, 20))
    assert level == pytest.approx(np.full(20, 270.0), rel=1e-12)
    assert MILD.stress(upper + 0.016 + 0.04) == pytest.approx(270 + 150 * (1 - np.exp(-1)), rel=1e-12)
    assert MILD.strain(np.array([150.0, 300.0, 380.0])) == pytest.approx(
        [150 / 210_000, upper, upper + 0.016 - 0.04 * np.log(40 / 150)], rel=1e-12
    )
    assert proof_stress(MILD, 0.03) == pytest.approx(270, rel=1e-9)
    # The plastic part keeps its volume.
    plastic, across = MILD.unloaded(0.05)
    assert (1 + plastic) * (1 + across) ** 2 == pytest.approx(1.0, rel=1e-12)
