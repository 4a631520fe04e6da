"""A virtual test: physics recomputed independently, files read back by others' readers."""

import json
import os
import tomllib

import numpy as np
import pandas as pd
import pytest
import tifffile
import typer
from scipy.optimize import brentq
from typer.testing import CliRunner

import dic.testfile
from dic.errors import StoreError, TestFileError
from dic_cli.render import render as render_command
from synthetic_images.files import render, truth
from synthetic_images.scenario import Scenario, load_scenario
from synthetic_images.virtual_test import VirtualTest

CONTENT = {
    "seed": 5,
    "specimen": {
        "width": "10 mm",
        "thickness": "1.5 mm",
        "width_uncertainty": "0.01 mm",
        "thickness_uncertainty": "0.004 mm",
    },
    "material": {
        "law": "ramberg_osgood",
        "youngs_modulus": "68 GPa",
        "poissons_ratio": 0.33,
        "proof_stress": "250 MPa",
        "exponent": 15,
    },
    "machine": {
        "free_length": "80 mm",
        "speed": "18 mm/min",
        "start": "3.5 s",
        "stiffness": "5 kN/mm",
        "slack": "0.1 mm",
        "seating_force": "200 N",
        "lower_share": "30 %",
        "sideways": "0.01 mm/s",
        "bending": "2 %",
        "fracture_strain": "1.2 %",
    },
    "view": {"rows": 64, "columns": 48, "coupon_width": 36, "axis_angle": "5 deg"},
    "camera": {"frames": 12, "rate": "1 Hz", "offset": "1.25 s"},
    "load_record": {
        "rate": "40 Hz",
        "force_noise": "2 N",
        "force_uncertainty": "0.5 %",
        "crosshead_noise": "1 µm",
    },
}


def scenario(**changes):
    content = {key: dict(value) if isinstance(value, dict) else value for key, value in CONTENT.items()}
    for name, value in changes.items():
        section, key = name.split("__")
        content[section][key] = value
    return Scenario.model_validate(content)


@pytest.fixture(scope="module")
def folder(tmp_path_factory):
    out = tmp_path_factory.mktemp("virtual") / "test"
    render(scenario(), out)
    return out


def stress_by_hand(travel):
    """Solve slack, spring and Ramberg–Osgood coupon in series for the stress, one instant at a time."""
    if travel == 0:
        return 0.0

    def missing(stress):
        force = stress * 15.0
        strain = stress / 68_000 + 0.002 * (stress / 250) ** 15
        return 0.1 * (1 - np.exp(-force / 200)) + force / 5000 + 80 * strain - travel

    return brentq(missing, 0.0, 600.0, xtol=1e-12)


def test_force_record_follows_from_the_machine(folder):
    table = pd.read_csv(folder / "machine.csv")
    assert list(table.columns) == ["Time (s)", "Crosshead (mm)", "Force (kN)"]
    time, force = table["Time (s)"].to_numpy(), 1000 * table["Force (kN)"].to_numpy()
    known = json.loads((folder / "truth.json").read_text())
    travel = 0.3 * np.clip(time - 3.5, 0, None)
    expected = np.array([15.0 * stress_by_hand(d) for d in travel])
    expected[time >= known["fracture_time_s"]] = 0.0
    noise = force - known["errors"]["force_factor"] * expected
    # Four standard errors of mean and of standard deviation of the stated 2 N.
    assert abs(noise.mean()) < 4 * 2 / np.sqrt(len(noise))
    assert noise.std() == pytest.approx(2.0, rel=4 / np.sqrt(2 * len(noise)))
    assert np.std(table["Crosshead (mm)"] - travel) == pytest.approx(0.001, rel=4 / np.sqrt(2 * len(noise)))
    np.testing.assert_allclose(np.diff(time), 1 / 40, atol=1e-9)


def test_truth_of_the_frames(folder):
    known = json.loads((folder / "truth.json").read_text())
    frames, time = known["frames"], np.array(known["frames"]["machine_time_s"])
    np.testing.assert_allclose(time, 1.25 + np.arange(12))
    before = time < known["fracture_time_s"]
    assert 6 < before.sum() < 12
    for k in np.flatnonzero(before):
        travel = 0.3 * max(time[k] - 3.5, 0)
        stress = stress_by_hand(travel)
        strain = stress / 68_000 + 0.002 * (stress / 250) ** 15
        # Both solvers go to rounding, on strains of 1e-2 and stresses of 1e2.
        assert frames["stress_MPa"][k] == pytest.approx(stress, rel=1e-9, abs=1e-9)
        assert frames["strain_axial"][k] == pytest.approx(strain, rel=1e-9, abs=1e-14)
        # Half of the coupon's extension, and 30 % of what slack and spring have taken, at 36 px in 10 mm.
        rise = 3.6 * (80 * strain / 2 + 0.3 * (travel - 80 * strain))
        assert frames["rise_px"][k] == pytest.approx(rise, rel=1e-9, abs=1e-9)
    broken = ~before
    left = 0.012 - stress_by_hand(0.3 * (known["fracture_time_s"] - 3.5)) / 68_000
    np.testing.assert_allclose(np.array(frames["strain_axial"])[broken], left, rtol=1e-9)
    assert np.all(np.array(frames["force_N"])[broken] == 0)
    # The spring returns and the coupon shortens; the slack of 0.1 mm was all taken up and stays so.
    np.testing.assert_allclose(np.array(frames["rise_px"])[broken], 3.6 * (40 * left + 0.03), rtol=1e-6)


def test_truth_of_the_properties(folder):
    known = json.loads((folder / "truth.json").read_text())["properties"]
    assert known["youngs_modulus"] == {"value": 68_000.0, "unit": "MPa"}
    assert known["poissons_ratio"] == {"value": 0.33, "unit": ""}
    assert known["shear_modulus"]["value"] == pytest.approx(68_000 / 2.66)
    assert known["proof_stress_0_2"]["value"] == pytest.approx(250.0, rel=1e-9)
    largest = brentq(lambda s: s / 68_000 + 0.002 * (s / 250) ** 15 - 0.012, 1, 600)
    assert known["tensile_strength"]["value"] == pytest.approx(largest, rel=1e-9)


def test_what_is_not_reached_is_null():
    short = truth(VirtualTest(scenario(machine__fracture_strain="0.3 %")))
    assert short["properties"]["proof_stress_0_2"]["value"] is None
    whole = truth(VirtualTest(scenario(machine__fracture_strain=None)))
    assert whole["fracture_time_s"] is None


@pytest.mark.parametrize("fracture", [None, "1.2 %"])
def test_the_strength_is_what_the_record_can_show(fracture):
    """The last sample of a coarse record lies before the end; an unseen rise is no strength."""
    test = VirtualTest(scenario(machine__fracture_strain=fracture, load_record__rate=0.8, camera__frames=7))
    time, _, _ = test.record()
    # 8.25 s after the record's beginning the camera stops; the last sample is the sixth interval's.
    assert time[-1] == 6 / 0.8
    assert test.properties()["tensile_strength"][0] == pytest.approx(stress_by_hand(0.3 * 4.0), rel=1e-9)


def test_slack_without_seating_force_is_free_travel():
    test = VirtualTest(scenario(machine__seating_force=0, machine__slack="0.3 mm"))
    state = test.at([3.5, 4.0, 4.4999, 4.6])  # 0.3 mm are gone at 4.5 s
    assert state.force_N[:3] == pytest.approx(0, abs=1e-9)
    assert state.force_N[3] > 30
    assert state.rise_mm[1] == pytest.approx(0.3 * 0.15)


def test_motion_of_a_frame_is_the_stated_strain():
    """Lengths between material points along and across the coupon, and the bent edges' strains."""
    test = VirtualTest(scenario())
    state, motion = test.at(test.frame_times), test.motions()[6]
    a = np.radians(5.0)
    along, across = np.array([-np.sin(a), np.cos(a)]), np.array([np.cos(a), np.sin(a)])
    strains = []
    for t in (-18.0, 0.0, 18.0):
        ends = [np.array(motion(*(test.centre + t * across + h * along))) for h in (-0.5, 0.5)]
        strains.append((ends[1] - ends[0]) @ along - 1)
    axial = state.axial[6]
    # Short lines of a smooth field: central differences are exact for the quadratic bow.
    np.testing.assert_allclose(strains, [axial * 0.98, axial, axial * 1.02], atol=1e-10)
    moved = np.array(motion(*test.centre)) - test.centre
    assert -moved @ along == pytest.approx(3.6 * state.rise_mm[6])
    assert moved @ across == pytest.approx(3.6 * 0.01 * (7.25 - 3.5))


def test_files_are_as_a_laboratory_has_them(folder):
    frames = sorted((folder / "frames").iterdir())
    assert [path.name for path in frames] == [f"cam_{k:05d}.tif" for k in range(1, 13)]
    image = tifffile.imread(frames[0])
    assert image.shape == (64, 48)
    assert image.dtype == np.uint8
    content = tomllib.loads((folder / "test.toml").read_text())
    assert content["frames"] == {"source": "frames", "rate": "1 Hz"}
    test = dic.testfile.load(folder / "test.toml")
    assert test.load_record.force_uncertainty == pytest.approx(0.005)
    assert test.specimen.width_uncertainty == pytest.approx(0.01)
    known = json.loads((folder / "truth.json").read_text())
    # Written with five digits, as a calliper's reading.
    assert test.specimen.width == pytest.approx(10 + known["errors"]["width_mm"], rel=5e-5)
    assert test.specimen.thickness == pytest.approx(1.5 + known["errors"]["thickness_mm"], rel=5e-5)


def test_drawn_errors_have_their_stated_spread():
    """Sixty seeds: the mean square of drawn over stated error is chi-square / 180."""
    drawn = []
    for seed in range(60):
        readings = VirtualTest(scenario().model_copy(update={"seed": seed})).readings()
        drawn += [
            (readings.force_factor - 1) / 0.005,
            (readings.section_mm["width"] - 10) / 0.01,
            (readings.section_mm["thickness"] - 1.5) / 0.004,
        ]
    assert np.mean(np.square(drawn)) == pytest.approx(1.0, abs=4 * np.sqrt(2 / 180))  # four of its sigmas


def contents(folder):
    return {str(path.relative_to(folder)): path.read_bytes() for path in folder.rglob("*") if path.is_file()}


def test_same_seed_same_bytes_for_any_number_of_threads(folder, tmp_path, monkeypatch):
    monkeypatch.setattr(os, "cpu_count", lambda: 5)
    render(scenario(), tmp_path / "again")
    assert contents(tmp_path / "again") == contents(folder)
    monkeypatch.setattr(os, "cpu_count", lambda: 1)
    render(scenario().model_copy(update={"seed": 6}), tmp_path / "other")
    other, first = contents(tmp_path / "other"), contents(folder)
    assert all(other[name] != first[name] for name in first)


def test_render_replaces_an_earlier_render_and_nothing_else(tmp_path):
    done = []
    render(scenario(camera__frames=9), tmp_path, lambda *count: done.append(count))
    assert done == [(k, 9) for k in range(1, 10)]
    (tmp_path / "notes.txt").write_text("mine")
    render(scenario(camera__frames=8), tmp_path)
    assert len(list((tmp_path / "frames").iterdir())) == 8
    assert (tmp_path / "notes.txt").read_text() == "mine"


def test_render_refuses_a_folder_that_is_not_its_own(tmp_path):
    (tmp_path / "truth.json").write_text("[]")
    with pytest.raises(StoreError, match="no render has made"):
        render(scenario(), tmp_path)
    assert contents(tmp_path) == {"truth.json": b"[]"}
    with pytest.raises(StoreError, match="cannot be written"):
        render(scenario(), tmp_path / "truth.json")


def test_a_render_cut_short_leaves_no_test_file_and_can_be_made_anew(tmp_path):
    def stop(done, total):
        raise KeyboardInterrupt

    with pytest.raises(KeyboardInterrupt):
        render(scenario(), tmp_path, stop)
    assert not (tmp_path / "test.toml").exists()
    assert dic.testfile.load(render(scenario(), tmp_path)).frames.rate == 1.0


def test_small_forces_are_recorded_in_newtons_and_sections_passed_on(tmp_path):
    content = {
        **CONTENT,
        "material": {"law": "neo_hookean", "shear_modulus": "0.5 MPa"},
        "gauge": {"region": [4, 5, 20, 30]},
        "properties": {"modulus": {"strain": [0.001, "2 %"]}},
    }
    test = dic.testfile.load(render(Scenario.model_validate(content), tmp_path))
    assert pd.read_csv(tmp_path / "machine.csv").columns[2] == "Force (N)"
    assert test.gauge.region == (4, 5, 20, 30)
    assert test.properties.modulus.strain == (0.001, 0.02)


def test_command_makes_a_shipped_or_own_scenario(tmp_path):
    import tomli_w

    own = tmp_path / "own.toml"
    own.write_text(tomli_w.dumps({**CONTENT, "camera": {"frames": 3, "rate": "0.5 Hz"}}))
    app = typer.Typer()
    app.command()(render_command)
    result = CliRunner().invoke(app, [str(own), str(tmp_path / "out")])
    assert result.exit_code == 0, result.output
    assert "test.toml" in result.output
    assert dic.testfile.load(tmp_path / "out" / "test.toml").frames.rate == 0.5


def with_clip_on(tmp_path, text, keys):
    path = tmp_path / "scenario.toml"
    path.write_text(text.replace("[load_record]", f"[load_record]\n{keys}"))
    return VirtualTest(load_scenario(path))


def test_clip_on_reads_gain_offset_and_noise(tmp_path, small_scenario):
    keys = "extensometer_gain = 1.02\nextensometer_offset = 1e-4\nextensometer_noise = 2e-6"
    test = with_clip_on(tmp_path, small_scenario, keys)
    miss = test.contact_strain() - (1.02 * test.at(test.record_times).axial + 1e-4)
    # A standard deviation of 250 samples is known to 4 %; four times that.
    assert np.std(miss) == pytest.approx(2e-6, rel=0.18)
    assert abs(np.mean(miss)) < 4 * 2e-6 / np.sqrt(len(miss))


def test_clip_on_can_be_taken_off(tmp_path, small_scenario):
    test = with_clip_on(tmp_path, small_scenario, "extensometer_gain = 1\nextensometer_removed = 0.0005")
    strain, true = test.contact_strain(), test.at(test.record_times).axial
    np.testing.assert_array_equal(strain, np.where(true < 0.0005, true, 0.0))
    assert strain[-1] == 0.0 < strain.max()


def test_without_gain_there_is_no_clip_on(tmp_path, small_scenario):
    assert with_clip_on(tmp_path, small_scenario, "").contact_strain() is None
    with pytest.raises(TestFileError, match="needs extensometer_gain"):
        with_clip_on(tmp_path, small_scenario, "extensometer_noise = 1e-6")
