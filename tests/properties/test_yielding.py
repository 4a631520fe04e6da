"""Yield point, hardening, energies, rates and cycles against closed forms."""

from dataclasses import replace
from math import e, isnan
from pathlib import Path

import numpy as np
import pytest

from dic.errors import InputError
from dic.properties import Sheet, elastic_stress, evaluate, make_curve
from dic.properties.hooke import principal_strains
from dic.sync import Clock, LoadRecord
from dic.testfile import Properties, Specimen
from synthetic_images.readings import gauge_history

COUPON = Specimen(width=12.5, thickness=2.0)
CLOCK = Clock(0.0, 0.0, 0.0, "one clock")


def history(time, axial, across, noise=0.0, seed=0):
    r, n = np.random.default_rng(seed), len(time)
    return gauge_history(time, axial + r.normal(0, noise, n), across + r.normal(0, noise, n), noise)


def evaluated(time, axial, across, dense, force, *, noise=0.0, force_noise=0.0, seed=0, **keys):
    """Join a course of strain at the frames and one of force at the record's samples."""
    r = np.random.default_rng(1000 + seed)
    record = LoadRecord(Path("machine.csv"), dense, force + r.normal(0, force_noise, len(force)))
    curve = make_curve(history(time, axial, across, noise, seed), record, CLOCK, COUPON.area)
    return evaluate(Sheet(curve, COUPON, None, CLOCK, Properties(**keys)))


STEEL = {"upper": 300.0, "lower": 270.0, "plateau": 0.015, "transient": 255.0}


def mild_steel(time, rate=5e-4, start=2.0, end=0.12):
    """A steel with a yield point: elastic to ReH, a fall with a short dip, a level, then hardening."""
    strain = np.clip(rate * (time - start), 0, end)
    at_upper = STEEL["upper"] / 205e3
    knots = [0, at_upper, at_upper + 2e-4, at_upper + 6e-4, at_upper + STEEL["plateau"]]
    levels = [0, STEEL["upper"], STEEL["transient"], STEEL["lower"], STEEL["lower"]]
    beyond = np.clip(strain - knots[-1], 0, None)
    # Straight at first, flat at the largest strain, 130 MPa above the level.
    top = end - knots[-1]
    hardening = 130 * (2 * beyond / top - (beyond / top) ** 2)
    stress = np.interp(strain, knots, levels) + hardening
    return strain, np.where(time > start + end / rate + 0.5, 0.0, stress)


@pytest.fixture(scope="module")
def steel():
    time, dense = np.arange(0, 243, 0.2) + 0.05, np.arange(0, 243, 0.01)
    strain, _ = mild_steel(time)
    _, stress = mild_steel(dense)
    elastic = np.minimum(strain, STEEL["upper"] / 205e3)
    across = -0.3 * elastic - 0.5 * (strain - elastic)
    return evaluated(time, strain, across, dense, 25 * stress, noise=3e-6, force_noise=8.0).properties


def test_upper_and_lower_yield_point(steel):
    for name, true in (("upper_yield", STEEL["upper"]), ("lower_yield", STEEL["lower"])):
        found = steel[name]
        # Four standard uncertainties, and for the lower one the dip of smoothed noise below the level,
        # about three of its scatter of 0.32 MPa over √50 samples.
        assert found.value == pytest.approx(true, abs=4 * found.standard_uncertainty + 0.3), name
    # The dip to 255 MPa is the first transient and no lower yield point.
    assert steel["lower_yield"].value > 269


def test_yield_point_extension(steel):
    found = steel["yield_point_extension"]
    # From the upper yield point to the end of the level; hardening begins as a line of 130·2/0.105 MPa,
    # whose bend within the first third moves the knee by a tenth of that third's strain.
    assert found.value == pytest.approx(STEEL["plateau"], abs=0.003)
    assert steel["upper_yield"].symbol == "ReH"


def test_strains_and_rates_of_the_steel(steel):
    agt = steel["strain_at_maximum"]
    assert agt.value == pytest.approx(0.12, abs=4 * agt.standard_uncertainty + 1e-5)
    ag = steel["plastic_strain_at_maximum"]
    assert ag.value == pytest.approx(0.12 - 400 / 205e3, abs=4 * ag.standard_uncertainty + 1e-5)
    assert steel["strain_rate_elastic"].value == pytest.approx(5e-4, rel=0.01)
    assert "in none of the ranges" in steel["strain_rate_elastic"].notes[0]


def hollomon(exponent, ratio=0.5, youngs_modulus=None, samples=4001):
    """Hollomon's law up to the largest force and a little beyond, then fracture."""
    true_strain = np.concatenate([np.zeros(20), np.linspace(1e-4, 1.3 * exponent, samples)])
    stress = np.where(true_strain > 0, 500 * true_strain**exponent * np.exp(-true_strain), 0.0)
    time = np.arange(len(true_strain)) * 0.1
    return time, np.expm1(true_strain), np.expm1(-ratio * true_strain), stress


@pytest.mark.parametrize("assumed", ["constant volume", "transverse strain"])
@pytest.mark.parametrize("exponent", [0.15, 0.25])
def test_hollomons_law(exponent, assumed):
    """Hollomon (1945): σ = C εⁿ; Considère's maximum at ε = n, Rm = C (n/e)ⁿ."""
    time, axial, across, stress = hollomon(exponent)
    section = {"modulus": {"strain": [0.001, 0.004]}, "true_stress": assumed}
    found = evaluated(time, axial, across, time, 25 * stress, **section).properties
    # The law's own points on a straight line: rounding, and what bridging between samples costs.
    assert found["strain_hardening_exponent"].value == pytest.approx(exponent, rel=1e-6)
    assert found["strength_coefficient"].value == pytest.approx(500.0, rel=1e-6)
    assert found["tensile_strength"].value == pytest.approx(500 * (exponent / e) ** exponent, rel=1e-6)
    agt = found["strain_at_maximum"]
    # 1e-8 of the flat top's height are √(2e-8/n) of n.
    assert agt.value == pytest.approx(np.expm1(exponent), rel=1e-3)


@pytest.mark.parametrize("ratio", [0.7, 1.0, 1.8])
def test_plastic_strain_ratio(ratio):
    """r = ε_w/ε_t at constant volume, so ε_w = -r/(1 + r)·ε_l (ISO 10113)."""
    r = ratio / (1 + ratio)
    true_strain = np.concatenate([np.zeros(20), np.linspace(0, 0.25, 2001)])
    plastic = np.clip(true_strain - 0.002, 0, None)
    elastic = np.minimum(true_strain, 0.002)
    stress = (140 * elastic / 0.002 + 500 * np.clip(plastic, 0, None)) / np.exp(true_strain)
    # The elastic part grows on with the true stress; what is left is plastic.
    grown = 140 * elastic / 0.002 + 500 * plastic
    length = plastic + grown / 70e3
    across = np.expm1(-0.33 * grown / 70e3 - r * plastic)
    time = np.arange(len(true_strain)) * 0.1
    found = evaluated(time, np.expm1(length), across, time, 25 * stress).properties
    # Engineering and logarithmic elastic strains differ by half their square, 1e-3 of them.
    assert found["plastic_strain_ratio"].value == pytest.approx(ratio, rel=2e-3)
    assert "ISO 10113" in found["plastic_strain_ratio"].method


def cyclic(unloading=68e3):
    """Load to 1.2 %, unload and load again, twice, then on to fracture; E 70 GPa, unloading softer."""
    plastic, stress, points = 0.0, [0.0], [0.0]
    for level in (220.0, 240.0, 260.0):
        plastic += 0.003
        stress += [200.0 if level == 220.0 else level - 20, level, 10.0, level]
        at = level / unloading
        points += [stress[-4] / 70e3 + plastic - 0.003, at + plastic, 10 / unloading + plastic, at + plastic]
    return np.array(points), np.array(stress)


def test_moduli_of_each_cycle():
    strain, stress = cyclic()
    legs = np.concatenate([np.full(20, 0.0), np.linspace(0, len(strain) - 1, 1201)])
    time = np.arange(len(legs)) * 0.1
    axial, force = (np.interp(legs, np.arange(len(strain)), part) for part in (strain, stress))
    found = evaluated(time, axial, -0.3 * axial, time, 25 * force, modulus={"stress": [20, 120]}).properties
    names = [name for name in found if name.startswith(("loading_modulus", "unloading_modulus"))]
    assert names == [
        "unloading_modulus_1", "loading_modulus_2", "unloading_modulus_2", "loading_modulus_3",
        "unloading_modulus_3", "loading_modulus_4",
    ]  # fmt: skip
    for name in names:
        assert found[name].value == pytest.approx(68e3, rel=1e-6), name
    assert found["youngs_modulus"].value == pytest.approx(70e3, rel=1e-6)


def test_a_test_without_cycles_has_none(pull):
    drawn = pull()
    found = evaluate(Sheet(drawn.curve, drawn.specimen, None, drawn.clock, Properties())).properties
    assert not [name for name in found if "loading_modulus" in name]


def reasons(found):
    return {name: item.notes[0] for name, item in found.properties.items() if isnan(item.value)}


def test_times_that_run_back_leave_the_strength(pull):
    drawn = pull()
    time = drawn.history.time_s.copy()
    time[20] = time[18]
    back = replace(drawn.curve, time_s=time)
    found = evaluate(Sheet(back, drawn.specimen, None, drawn.clock, Properties()))
    said = reasons(found)
    assert "times do not grow from frame 19 to frame 20" in said["youngs_modulus"]
    assert found.properties["tensile_strength"].value > 0


def test_a_section_that_is_none_leaves_nothing_false(pull):
    drawn = pull()
    for area in (-25.0, 0.0, float("nan")):
        found = evaluate(
            Sheet(replace(drawn.curve, area_mm2=area), drawn.specimen, None, drawn.clock, Properties())
        )
        assert "section of" in reasons(found)["youngs_modulus"]
        assert "section of" in reasons(found)["tensile_strength"]


def test_a_force_that_falls_before_yield(pull):
    """The coupon breaks in its elastic part: strength and modulus stand, yielding has its reason."""
    drawn = pull(fracture=0.0025)
    found = evaluate(Sheet(drawn.curve, drawn.specimen, None, drawn.clock, Properties()))
    said = reasons(found)
    assert "never reaches" in said["proof_stress_0_2"]
    assert "does not fall" in said["upper_yield"]
    assert "strain_energy_to_yield" in said
    assert found.properties["youngs_modulus"].value == pytest.approx(70e3, rel=0.01)
    assert found.properties["strain_at_break"].value == pytest.approx(0.0025, abs=3e-5)


def test_a_record_that_ends_early_has_no_break(pull):
    drawn = pull()
    early = drawn.record.time_s < 40
    cut = LoadRecord(drawn.record.path, drawn.record.time_s[early], drawn.record.force_N[early])
    one = replace(drawn, record=cut)
    found = evaluate(Sheet(one.curve, drawn.specimen, None, drawn.clock, Properties()))
    assert "ends before the coupon breaks" in reasons(found)["strain_at_break"]


def test_strain_that_was_lost_before_the_break(pull):
    drawn = pull()
    lost = np.where(drawn.history.time_s > 50, np.nan, drawn.history.axial)
    one = replace(drawn, history=replace(drawn.history, axial=lost))
    said = reasons(evaluate(Sheet(one.curve, drawn.specimen, None, drawn.clock, Properties())))
    assert "last measured frame was taken" in said["strain_at_maximum"]
    for name in ("strain_at_break", "strain_energy_to_break"):
        assert "s before the fracture" in said[name]


def test_elastic_stress_map(pull):
    xarray = pytest.importorskip("xarray")
    drawn = pull(strain_noise=0.0, force_noise=0.0)
    sheet = evaluate(Sheet(drawn.curve, drawn.specimen, None, drawn.clock, Properties())).properties
    e_, nu = sheet["youngs_modulus"].value, sheet["poissons_ratio"].value
    stress = np.linspace(50, 270, 12).reshape(3, 4)
    axial, across, _ = principal_strains(e_, nu, np.stack([stress, 20 + 0 * stress, 0 * stress], -1)).T
    fields = {"strain_axial": axial.T, "strain_transverse": across.T, "strain_shear": 0 * axial.T}
    data = xarray.Dataset({name: (("frame", "y", "x"), one[None]) for name, one in fields.items()})
    found = elastic_stress(data, 0, sheet)
    # Hooke's law forth and back: rounding.
    np.testing.assert_allclose(found.stress_axial, stress, rtol=1e-10)
    np.testing.assert_allclose(found.stress_transverse, 20, rtol=1e-9)
    some = elastic_stress(data * 1.3, 0, sheet)
    assert some.beyond.sum() == np.isnan(some.stress_axial).sum() > 0
    with pytest.raises(InputError, match="beyond the elastic range"):
        elastic_stress(data * 3, 0, sheet)
    with pytest.raises(InputError, match="there is no Poisson's ratio"):
        elastic_stress(data, 0, {**sheet, "poissons_ratio": replace(sheet["poissons_ratio"], value=np.nan)})
    with pytest.raises(InputError, match="no isotropic solid"):
        elastic_stress(data, 0, {**sheet, "poissons_ratio": replace(sheet["poissons_ratio"], value=0.52)})
