"""The history as a table, the properties as text."""

import dataclasses

import numpy as np
import pytest

from dic.gauges.placing import RESERVED
from dic.properties.result import Property
from dic.store.tables import found_in, history_table, properties_text, short_list, shown_in, stated, title_of

CONTRACT = [
    "frame",
    "time_s",
    "force_N",
    "stress_MPa",
    "strain_axial",
    "strain_transverse",
    "strain_shear",
    "u_strain_axial",
    "u_strain_transverse",
    "valid_fraction",
    "status",
]


def test_columns_are_those_promised_and_more_stand_behind(measurement):
    table = history_table(measurement)
    assert list(table.columns[: len(CONTRACT)]) == CONTRACT
    assert {"machine_time_s", "strain_extensometer", "strain_bending", "name"} <= set(table.columns)


def test_every_frame_has_its_row_and_a_lost_one_says_why(measurement):
    table = history_table(measurement)
    assert len(table) == len(measurement.history)
    lost = table[table["strain_axial"].isna()]
    assert lost["status"].tolist() == ["too few subsets measured"]
    assert np.isfinite(lost["stress_MPa"]).all()  # the force was recorded all the same
    np.testing.assert_array_equal(table["stress_MPa"], measurement.curve.stress_MPa)
    np.testing.assert_array_equal(table["strain_transverse"], measurement.history.transverse)


def test_stress_is_force_over_section(measurement):
    table = history_table(measurement)
    # Force = stress x area was rounded once, so one division brings the stress back to an ulp or two.
    np.testing.assert_allclose(table["force_N"] / 25.0, table["stress_MPa"], rtol=1e-15)


@pytest.mark.parametrize(
    ("name", "title"),
    [
        ("youngs_modulus", "Young's modulus"),
        ("proof_stress_0_2", "0.2 % proof stress"),
        ("proof_stress_1", "1 % proof stress"),
        ("plastic_strain_ratio", "Plastic strain ratio"),
    ],
)
def test_titles(name, title):
    assert title_of(name) == title


def test_modulus_is_read_in_gpa_with_its_uncertainty():
    item = Property("youngs_modulus", "E", 70_123.4, "MPa", 106.0, "line")
    assert stated(item) == ("70.12 ± 0.21 GPa", "0.11 GPa")
    assert shown_in(item)[1] == "GPa"


def test_a_qualifier_stands_before_the_value():
    item = Property("tensile_strength", "Rm", 37.77, "MPa", 0.19, "largest force", qualifier="at least")
    assert stated(item)[0] == "at least 37.77 ± 0.38 MPa"


def test_soft_modulus_stays_in_mpa():
    assert stated(Property("youngs_modulus", "E", 1.234, "MPa", 0.006, "line"))[0] == "1.234 ± 0.012 MPa"


def test_text_shows_every_property_and_every_warning(measurement):
    text = properties_text(measurement)
    assert str(measurement) == text
    for item in found_in(measurement.properties):
        assert title_of(item.name) in text
        assert stated(item)[0] in text
    assert "not determined: 5 % proof stress: the strain never reached this offset" in text
    for notice in measurement.notices:
        assert notice.text in " ".join(text.split())
    assert "k = 2" in text


def test_many_that_are_absent_for_one_reason_fill_one_line(lost):
    text = properties_text(lost)
    [line] = [line for line in text.splitlines() if "no elastic part was found" in line]
    assert (
        line == "not determined: Young's modulus, Poisson's ratio, Shear modulus: no elastic part was found"
    )
    assert [item.symbol for item in found_in(lost.properties)] == ["Rp0.2", "Rm"]
    assert short_list(list(lost.properties.values())) == "E, ν, G, Rp0.2, Rp5, Rm"


def test_compression_gives_a_compressive_strength(pressed):
    assert "Compressive strength" in str(pressed)
    assert "Tensile" not in str(pressed)


def test_text_without_properties_still_names_the_coupon(measurement):
    bare = dataclasses.replace(measurement, properties={}, notices=())
    assert properties_text(bare).startswith("Blatt 7/3 <b> (invented alloy)")


def test_no_gauge_may_be_named_after_a_column(measurement):
    assert set(history_table(measurement)) <= RESERVED


def test_large_strain_measures_stand_beside_engineering_strain(measurement):
    """λ = 1 + ε and Hencky strain ln λ, by definition."""
    table = history_table(measurement)
    there = table["strain_axial"].notna()
    np.testing.assert_allclose(table["stretch_axial"][there], 1 + measurement.history.axial[there])
    np.testing.assert_allclose(np.exp(table["hencky_transverse"]), table["stretch_transverse"])
