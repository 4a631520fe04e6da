"""Units against definitions and against pint itself."""

import pint
import pytest

from dic.quantities import EXAMPLES, UNITS, factor, for_people, parse, split_header


def test_definitions():
    """International pound and inch: 0.45359237 kg, g = 9.80665 m/s², 25.4 mm, hence by multiplication."""
    assert factor("lbf", "force") == pytest.approx(4.4482216152605, rel=1e-13)
    assert factor("ksi", "stress") == pytest.approx(6.894757293168, rel=1e-12)
    assert factor("in", "length") == pytest.approx(25.4, rel=1e-15)
    assert factor("N/mm²", "stress") == pytest.approx(1.0, rel=1e-15)
    assert parse("500 µm/m", "strain") == pytest.approx(5e-4)
    assert parse("0.021 mm/px", "scale") == pytest.approx(0.021)


@pytest.mark.parametrize("unit", ["kN", "lbf", "daN", "kgf"])
def test_forces_are_pints(unit):
    """Reference: pint's own conversion, asked directly."""
    expected = pint.UnitRegistry().Quantity(12.5, unit).to("newton").magnitude
    assert parse(f"12.5 {unit}", "force") == pytest.approx(expected, rel=1e-14)


@pytest.mark.parametrize("kind", UNITS)
def test_every_example_is_understood(kind):
    assert parse(EXAMPLES[kind], kind) > 0


@pytest.mark.parametrize("kind", UNITS)
def test_bare_numbers_are_internal(kind):
    assert parse(3, kind) == 3.0
    assert parse("3", kind) == 3.0


@pytest.mark.parametrize(
    "text", ["", "mm", "1 2 mm", "1 mm; import os", "__import__('os')", "nan mm", "1 " + "m" * 99]
)
def test_nonsense_is_refused(text):
    with pytest.raises(ValueError, match="write for example"):
        parse(text, "length")


def test_a_long_text_is_refused_before_it_is_looked_at():
    """Ten thousand digits and a second line: a pattern that tries every division of them never ends."""
    with pytest.raises(ValueError, match="is not a length; write for example") as caught:
        parse("1" * 10_000 + "x\ny", "length")
    assert len(str(caught.value)) < 150


@pytest.mark.parametrize("written", ["1e999 mm", "-1e999", "1e308 km", float("inf"), float("nan")])
def test_what_is_not_finite_is_refused(written):
    with pytest.raises(ValueError, match="is not a finite length"):
        parse(written, "length")


@pytest.mark.parametrize("unit", ["N**9**9**9", "9⁹⁹⁹⁹", "N/", "m^99", "N*", "(((", "m**-9**9", "¹²", ""])
def test_hostile_units_are_refused_at_once(unit):
    with pytest.raises(ValueError, match="is not a unit"):
        factor(unit, "force")


@pytest.mark.parametrize("unit", ["Kicount⁹⁹", "Kicount·Kicount¹²"])
def test_raised_digits_are_no_exponents_that_grow(unit):
    """1024 to a power of ten digits, all of which Python would work out."""
    with pytest.raises(ValueError, match="is not a unit;"):
        factor(unit, "strain")


def test_a_decimal_comma_is_told_so():
    with pytest.raises(ValueError, match="write a point"):
        parse("12,50 mm", "length")


@pytest.mark.parametrize(
    ("header", "name", "unit"),
    [
        ("Force (kN)", "Force", "kN"),
        ("Load [lbf]", "Load", "lbf"),
        ("Kraft / N", "Kraft", "N"),
        ("Force/MN", "Force", "MN"),
        ("time_s", "time", "s"),
        ("Time", "Time", None),
        ("Force (corr.) (N)", "Force (corr.)", "N"),
        ("Kraft in kN", "Kraft", "kN"),
        ("Force, N", "Force", "N"),
        ("Plug-in", "Plug-in", None),
    ],
)
def test_headers(header, name, unit):
    assert split_header(header) == (name, unit)


def test_moduli_are_shown_in_gpa():
    assert for_people(71300.0, "MPa", "youngs_modulus") == (pytest.approx(71.3), "GPa")
    assert for_people(0.8, "MPa", "youngs_modulus") == (0.8, "MPa")
    assert for_people(280.0, "MPa", "proof_stress_0_2") == (280.0, "MPa")
