"""The yield point of plastics against a curve whose maximum is known in closed form."""

from dataclasses import replace
from math import e, isnan

import numpy as np
import pytest
from scipy import stats

from dic.properties import Sheet, evaluate
from dic.testfile import Properties

#: σ = E·ε·exp(-ε/ε0) has its maximum at ε0 and is E·ε0/e there; far beyond, chains that are drawn harden.
MODULUS, AT_YIELD, DRAWN, HARDENING, BREAK = 3000.0, 0.04, 0.15, 240.0, 0.4
YIELD = MODULUS * AT_YIELD / e
STRENGTH = HARDENING * (BREAK - DRAWN) + MODULUS * BREAK * np.exp(-BREAK / AT_YIELD)


def ductile(strain):
    return MODULUS * strain * np.exp(-strain / AT_YIELD) + HARDENING * np.clip(strain - DRAWN, 0, None)


def brittle(strain):
    return MODULUS * strain


def evaluated(pull, law=ductile, end=BREAK, sign=1.0, seed=4, **keys):
    """Pull a coupon at one rate until it breaks, with the noise of camera and load cell."""
    r, drawn, lasting = np.random.default_rng(seed), pull(), 100.0
    camera, machine = np.arange(0.05, 104, 0.1), np.arange(0, 105, 0.02)

    def strain_at(time):
        return np.where(time <= 2 + lasting, end * np.clip(time - 2, 0, None) / lasting, 0.0)

    n, axial = len(camera), strain_at(camera)
    nothing, u = np.zeros(n), np.full(n, 1e-5)
    history = replace(
        drawn.history,
        frame=np.arange(n), name=("",) * n, time_s=camera, axial=sign * (axial + r.normal(0, 1e-5, n)),
        transverse=sign * (-0.38 * axial + r.normal(0, 1e-5, n)), shear=nothing, extensometer=nothing,
        u_axial=u, u_transverse=u, u_shear=u, u_extensometer=u, shift_px=np.zeros((n, 2)),
        valid_fraction=np.ones(n), status=("ok",) * n, bending=nothing,
    )  # fmt: skip
    force = 25 * law(strain_at(machine)) + r.normal(0, 0.5, len(machine))
    record = replace(drawn.record, time_s=machine, force_N=sign * force)
    curve = replace(drawn, history=history, record=record).curve
    return evaluate(Sheet(curve, drawn.specimen, None, drawn.clock, Properties(**keys))).properties


@pytest.mark.parametrize("sign", [1, -1])
def test_the_first_maximum_is_the_yield_point(pull, sign):
    found = evaluated(pull, sign=sign, preset="plastics")
    for name, symbol, true in (("yield_stress", "σY", YIELD), ("strain_at_yield", "εY", AT_YIELD)):
        one = found[name]
        assert one.symbol == symbol
        # Three standard uncertainties, each of which is itself small.
        assert one.value == pytest.approx(sign * true, abs=3 * one.standard_uncertainty)
    assert 0 < found["yield_stress"].standard_uncertainty < 1e-3 * YIELD
    assert 0 < found["strain_at_yield"].standard_uncertainty < 0.02 * AT_YIELD
    # The largest stress is another one, reached at break.
    assert abs(found["tensile_strength"].value) == pytest.approx(STRENGTH, rel=2e-3)


def test_stated_uncertainties_hold_the_truth(pull):
    draws = [evaluated(pull, seed=seed, preset="plastics") for seed in range(30)]
    for name, true in (("yield_stress", YIELD), ("strain_at_yield", AT_YIELD)):
        z = np.array([(one[name].value - true) / one[name].standard_uncertainty for one in draws])
        # Fewer hits come up once in ten thousand such tests if k = 2 holds 95 %.
        assert (np.abs(z) < 2).sum() >= stats.binom.ppf(1e-4, len(z), 0.95), name
        assert z.std() > 0.5  # no waste


def test_what_breaks_before_it_yields_has_no_yield_point(pull):
    found = evaluated(pull, brittle, 0.02, preset="plastics")
    for name in ("yield_stress", "strain_at_yield"):
        assert isnan(found[name].value)
        assert "there is no yield point" in found[name].notes[0]


@pytest.mark.parametrize("preset", ["metals", "fibre composites", None])
def test_only_the_preset_for_plastics_has_it(pull, preset):
    assert "yield_stress" not in evaluated(pull, brittle, 0.02, **({"preset": preset} if preset else {}))
