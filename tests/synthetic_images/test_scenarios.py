"""Scenarios: the shipped ones are whole, and mistakes are told in one sentence."""

import subprocess
import sys

import numpy as np
import pytest

from dic.errors import TestFileError
from synthetic_images.scenario import Scenario, load_scenario, scenarios
from synthetic_images.textures import Cosines, Dots, Photograph
from synthetic_images.virtual_test import VirtualTest

GOOD = """
[specimen]
width = "10 mm"
thickness = "1.5 mm"
[material]
law = "elastic"
youngs_modulus = "3 GPa"
poissons_ratio = 0.4
[machine]
free_length = "80 mm"
speed = "2 mm/min"
"""


def written(tmp_path, text):
    path = tmp_path / "scenario.toml"
    path.write_text(text)
    return path


def test_shipped_scenarios_are_whole():
    assert set(scenarios()) == {"demo", "elastomer", "gravel"}
    for name in scenarios():
        assert isinstance(load_scenario(name), Scenario)


@pytest.mark.parametrize("name", ["demo", "gravel"])
def test_metal_scenarios_show_every_part_of_the_test(name):
    """Two seconds of rest, twenty frames before and some beyond the proof stress, and the fracture."""
    test = VirtualTest(load_scenario(name))
    state, time = test.at(test.frame_times), test.frame_times
    machine = test.scenario.machine
    assert (time < machine.start).sum() >= 10
    proof_strain = 432 / 71_300 + 0.002
    assert ((state.axial > 0) & (state.axial < 432 / 71_300)).sum() >= 20
    assert ((state.axial > proof_strain) & (time < test.fracture_time)).sum() >= 10
    assert (time > test.fracture_time).sum() >= 1
    assert state.axial.max() > 0.02


def test_elastomer_gauge_stays_in_the_picture():
    test = VirtualTest(load_scenario("elastomer"))
    scenario = test.scenario
    assert 0.28 < test.at(test.frame_times).axial[-1] < 0.32
    left, top, width, height = scenario.gauge.region
    for motion in (test.motions()[0], test.motions()[-1]):
        for x, y in [(left, top), (left + width, top), (left, top + height), (left + width, top + height)]:
            column, row = motion(x, y)
            assert 0 < column < scenario.view.columns - 1
            assert 0 < row < scenario.view.rows - 1


def test_textures_by_name(tmp_path):
    for lines, kind in [
        ('kind = "dots"\ndiameter = 3.5', Dots),
        ('kind = "cosines"\nfeature = 3', Cosines),
        ('kind = "photograph"\nphotograph = "brick"\nmagnification = 1.5', Photograph),
    ]:
        scenario = load_scenario(written(tmp_path, f"{GOOD}[texture]\n{lines}\n"))
        assert isinstance(scenario.texture.make((100, 80), 1), kind)


@pytest.mark.parametrize(
    ("text", "message"),
    [
        (GOOD + 'stifness = "3 kN/mm"\n', "did you mean 'stiffness'"),
        (GOOD.replace('free_length = "80 mm"', ""), "'free_length' is missing"),
        (GOOD.replace("2 mm/min", "2 mm"), "is not a unit of speed"),
        (GOOD.replace("poissons_ratio = 0.4", ""), "needs poissons_ratio"),
        (
            GOOD.replace("poissons_ratio = 0.4", "poissons_ratio = 0.4\nexponent = 5"),
            "exponent means nothing",
        ),
        (GOOD.replace("elastic", "plastic"), "law"),
        (GOOD.replace("0.4", "0.7"), "poissons_ratio"),
        (GOOD + "[camra]\n", "did you mean 'camera'"),
        (GOOD + '[texture]\nkind = "photograph"\n', "needs photograph"),
        (GOOD + '[texture]\nkind = "cosines"\ndiameter = 4\n', "diameter means nothing"),
        (GOOD + '[texture]\nkind = "photograph"\nphotograph = "../me"\n', "photograph"),
        (GOOD + "[view]\nrows = 1000000\n", "rows"),
        (GOOD + "[view]\nrows = 9000\ncolumns = 9000\n", "larger than"),
        (GOOD + "[view]\nrows = 5000\ncolumns = 5000\n[camera]\nframes = 9000\n", "20 GB"),
        (GOOD + '[camera]\noffset = "-1 h"\n', "stops before"),
        (GOOD + '[camera]\nframes = 20000\nrate = "1 Hz"\n[load_record]\nrate = "9 kHz"\n', "load record"),
        (GOOD + "[camera]\nbits = 7\n", "bits"),
        ("seed = -1\n" + GOOD, "seed"),
        ("[specimen", "not valid TOML"),
    ],
)
def test_mistakes_are_told_in_one_sentence(tmp_path, text, message):
    with pytest.raises(TestFileError, match=message) as caught:
        load_scenario(written(tmp_path, text))
    assert "\n" not in str(caught.value)


def test_no_such_scenario(tmp_path):
    with pytest.raises(TestFileError, match="did you mean 'gravel'"):
        load_scenario("gravle")


def test_package_loads_late():
    """Its name alone must not bring in the heavy libraries."""
    code = (
        "import sys, synthetic_images; print([m for m in ('numba', 'scipy', 'skimage') if m in sys.modules])"
    )
    heavy = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert heavy.stdout.strip() == "[]"


MILD = GOOD.replace('law = "elastic"', 'law = "yield_point"').replace(
    'youngs_modulus = "3 GPa"',
    'youngs_modulus = "210 GPa"\nupper_yield = "300 MPa"\nlower_yield = "270 MPa"\nsaturation = "420 MPa"',
)


def test_mild_steel_is_pulled_through_its_yield_point(tmp_path):
    test = VirtualTest(load_scenario(written(tmp_path, MILD + "[camera]\nframes = 400\n")))
    stress = test.at(np.linspace(0, 40, 4001)).force_N / test.area_mm2
    # The instants are dense enough to meet the peak within 0.1 %, and the level.
    assert stress.max() == pytest.approx(300, rel=1e-3)
    assert np.isclose(stress, 270, rtol=1e-9).sum() > 100


@pytest.mark.parametrize(
    ("change", "said"),
    [(("270 MPa", "310 MPa"), "grow in this order"), (("speed", 'stiffness = "1 kN/mm"\nspeed'), "spring")],
)
def test_a_yield_point_that_cannot_be(tmp_path, change, said):
    with pytest.raises(TestFileError, match=said):
        load_scenario(written(tmp_path, MILD.replace(*change)))
