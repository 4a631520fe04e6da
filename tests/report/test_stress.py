"""The map of elastic stress: its mean is the nominal stress, and it is left out where it would be false."""

import dataclasses
import re

import numpy as np
import pytest

from dic.report.figures import house_style
from dic.report.stress import draw_stress


def with_preset(measurement, preset):
    section = measurement.test.properties.model_copy(update={"preset": preset})
    return dataclasses.replace(measurement, test=measurement.test.model_copy(update={"properties": section}))


def with_ratio(measurement, value):
    ratio = dataclasses.replace(measurement.properties["poissons_ratio"], value=value, notes=("not seen",))
    return dataclasses.replace(measurement, properties={**measurement.properties, "poissons_ratio": ratio})


@pytest.mark.parametrize("turned", [False, True])
def test_the_maps_mean_is_force_over_section(measurement, pressed, fields, turned):
    one, sign = (pressed, -1) if turned else (measurement, 1)
    strains = [name for name in fields if name.startswith("strain_")]
    with house_style():
        [drawing], reason = draw_stress(one, fields.assign({name: sign * fields[name] for name in strains}))
    assert not reason
    mean, nominal = re.search(
        r"Mean axial stress over the map (\S+) MPa.*section gives (\S+) MPa", drawing.reading
    ).groups()
    # 500 points of 60 µm/m at 70 GPa: 4.7 MPa (with ν) over √500 each, and the missing corner of a bent map,
    # 6 of 539 points at 4 % of 110 MPa.
    assert float(mean) == pytest.approx(float(nominal), abs=4 * 4.7 / np.sqrt(500) + 0.05)
    assert sign * float(nominal) > 100
    assert "holds in the elastic range only (here up to 250 MPa) and assumes an isotropic" in drawing.reading


@pytest.mark.parametrize(
    ("change", "said"),
    [
        (lambda one: with_preset(one, "fibre composites"), "preferred directions"),
        (lambda one: with_ratio(one, np.nan), "there is no Poisson's ratio for a stress map (not seen)"),
        (lambda one: with_ratio(one, 0.55), "no isotropic solid"),
    ],
)
def test_a_map_that_would_be_false_is_left_out_with_its_reason(measurement, fields, change, said):
    drawings, reason = draw_stress(change(measurement), fields)
    assert drawings == []
    assert said in reason


def test_without_an_elastic_part_or_frames_there_is_none(measurement, lost, fields):
    assert "without an elastic part" in draw_stress(lost, fields)[1]
    empty = fields.assign(strain_axial=np.nan * fields["strain_axial"])
    assert "no point with enough subsets" in draw_stress(measurement, empty)[1]
    assert "no frame" in draw_stress(measurement, fields.isel(frame=slice(0, 0)))[1]
