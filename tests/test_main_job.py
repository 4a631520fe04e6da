"""The main job end to end on virtual tests, and each kind of wrong input."""

import json

import numpy as np
import pytest
import xarray as xr

import dic
from dic.errors import InputError
from synthetic_images import compare, load_scenario, render, scenarios

#: Largest error of each property in percent, as required of the program.
DEMO = {"youngs_modulus": 0.3, "poissons_ratio": 1.0, "proof_stress_0_2": 0.5, "tensile_strength": 0.5}
GRAVEL = {"youngs_modulus": 0.5, "poissons_ratio": 1.5}


#: Each on one worker only, where the tests are spread over several.
RENDERED = [pytest.param(name, marks=pytest.mark.xdist_group(name)) for name in ("demo", "gravel")]


#: What each gave; kept here because a worker takes fixtures down while it waits for more tests.
DONE = {}


@pytest.fixture(params=RENDERED)
def rendered(request, tmp_path_factory):
    name = request.param
    if name not in DONE:
        folder = tmp_path_factory.mktemp(name)
        test = render(load_scenario(scenarios()[name]), folder / "test")
        DONE[name] = name, test, dic.measure(test, folder / "results")
    return DONE[name]


def test_properties_are_true_and_their_intervals_hold_the_truth(rendered):
    name, test, result = rendered
    rows = {row.item.name: row for row in compare(result.properties.values(), test.with_name("truth.json"))}
    limits = DEMO if name == "demo" else GRAVEL
    assert limits.keys() <= rows.keys()
    for key, limit in limits.items():
        assert abs(rows[key].off_percent) < limit, key
        assert rows[key].inside, key


def test_strains_follow_the_truth_frame_by_frame(rendered):
    """Against the scenario's own strain at the gauge; 2e-5 allows the reference frame's noise and bias."""
    _, test, result = rendered
    truth = json.loads(test.with_name("truth.json").read_text())["frames"]
    seen = np.isfinite(result.history.axial)
    assert seen.sum() >= 0.9 * len(seen)
    np.testing.assert_allclose(result.history.axial[seen], np.array(truth["strain_axial"])[seen], atol=2e-5)
    np.testing.assert_allclose(
        result.history.transverse[seen], np.array(truth["strain_transverse"])[seen], atol=5e-5
    )


def test_the_clock_is_found(rendered):
    """Three standard uncertainties, none of them above the 20 ms that the machine's record has a row for."""
    _, test, result = rendered
    truth = json.loads(test.with_name("truth.json").read_text())["sync"]["offset_s"]
    clock = result.clock
    assert 0 < clock.offset_standard_uncertainty_s < 0.02
    assert clock.offset_s == pytest.approx(truth, abs=3 * clock.offset_standard_uncertainty_s)


def test_alignment_and_scale_are_true(rendered):
    """0.1 % of bending are 2e-6 at the end of the modulus' window, twice the noise of the slope; 0.4 % of
    the width are what the edges' place is good to, and 0.1° the axis (`tests/pattern`)."""
    _, test, result = rendered
    truth = json.loads(test.with_name("truth.json").read_text())
    assert result.alignment.figures()["bending_percent"] == pytest.approx(
        truth["alignment"]["bending_percent"], abs=0.1
    )
    assert result.scene.axis_angle_deg == pytest.approx(truth["alignment"]["axis_angle_deg"], abs=0.1)
    assert result.scene.scale_mm == pytest.approx(truth["specimen"]["scale_mm_per_px"], rel=0.004)


def test_maps_follow_the_truth_frame_by_frame(rendered):
    """Their mean against the scenario's strain at the gauge, allowed as much as the gauges are; bending
    shows as a slope across, positive and negative halves alike."""
    _, test, result = rendered
    truth = json.loads(test.with_name("truth.json").read_text())["frames"]
    with result.to_xarray() as fields:
        for name, allowed in (("strain_axial", 2e-5), ("strain_transverse", 5e-5)):
            mean = fields[name].mean(("y", "x")).values
            np.testing.assert_allclose(mean, truth[name], atol=allowed)
        assert fields.flag.dtype == np.uint8


def test_everything_promised_lies_in_the_folder(rendered):
    _, _, result = rendered
    for name in ("results.json", "history.csv", "fields.nc", "report.html"):
        assert (result.folder / name).stat().st_size > 0
    with result.to_xarray() as fields:
        assert isinstance(fields, xr.Dataset)
        assert fields.strain_axial.dims == ("frame", "y", "x")
    assert len(result.to_pandas()) == len(result.history)
    assert "Young's modulus" in str(result)


def edited(path, old, new):
    text = path.read_text()
    assert old in text
    path.write_text(text.replace(old, new))
    return path


def append(path, text):
    with path.open("a") as file:
        file.write(f"\n{text}\n")


class TrackedAgainError(Exception):
    pass


def tracked_again(*_):
    raise TrackedAgainError


@pytest.mark.usefixtures("without_report")
def test_a_second_run_with_other_dimensions_does_not_track_again(copy, monkeypatch):
    first = dic.measure(copy)
    edited(copy, 'thickness = "2 mm"', 'thickness = "4 mm"')

    monkeypatch.setattr("dic.sequence.Tracker", tracked_again)
    second = dic.measure(copy)
    np.testing.assert_array_equal(first.history.axial, second.history.axial)
    ratio = first.properties["youngs_modulus"].value / second.properties["youngs_modulus"].value
    assert ratio == pytest.approx(2.0, rel=1e-6)


def brighter(k, image):
    return image + (k == 5)  # one frame only; no grey value is near the top


@pytest.mark.usefixtures("without_report")
@pytest.mark.parametrize(
    "change",
    [
        lambda test: append(test, "[correlation]\nsubset = 25"),
        lambda test: append(test, "[maps]\nwindow = 7"),
        lambda test: overwrite_frames(test, brighter),
    ],
)
def test_changed_frames_or_settings_are_tracked_again(copy, monkeypatch, change):
    dic.measure(copy)
    change(copy)
    monkeypatch.setattr("dic.sequence.Tracker", tracked_again)
    with pytest.raises(TrackedAgainError):
        dic.measure(copy)


@pytest.mark.usefixtures("without_report")
def test_an_even_subset_is_said(copy):
    append(copy, "[correlation]\nsubset = 24")
    found = dic.measure(copy)
    assert found.scene.subset_px == 25
    (said,) = (notice.text for notice in found.notices if notice.code == "subset_even")
    assert "24 was taken as 25" in said


@pytest.mark.usefixtures("without_report")
def test_the_same_input_gives_the_same_results(copy, tmp_path):
    one, other = dic.measure(copy, tmp_path / "a"), dic.measure(copy, tmp_path / "b")
    assert (one.folder / "history.csv").read_bytes() == (other.folder / "history.csv").read_bytes()


@pytest.mark.usefixtures("without_report")
def test_a_given_offset_is_used_as_it_is(copy):
    with copy.open("a") as file:
        file.write('\n[sync]\noffset = "1.5 s"\n')
    assert dic.measure(copy).clock.offset_s == 1.5


def remove_frames(test, keep):
    for path in sorted((test.parent / "frames").iterdir())[keep:]:
        path.unlink()


def overwrite_frames(test, image_of):
    import tifffile

    for k, path in enumerate(sorted((test.parent / "frames").iterdir())):
        tifffile.imwrite(path, image_of(k, tifffile.imread(path)))


def spoil_force(test):
    record = test.with_name("machine.csv")
    lines = record.read_text().splitlines()
    # A few rows would be left out with a word; a third of them is no record any more.
    lines[1::3] = [line.rsplit(",", 1)[0] + ",overload" for line in lines[1::3]]
    record.write_text("\n".join(lines))


def other_patterns(k, image):
    rng = np.random.default_rng(k)
    return rng.integers(0, 255, image.shape).astype(np.uint8) if k else image


BAD = {
    "no frames": (lambda t: edited(t, 'source = "frames"', 'source = "elsewhere"'), "no frames found"),
    "two frames": (lambda t: remove_frames(t, 2), "at least 3"),
    "unequal size": (
        lambda t: overwrite_frames(t, lambda k, i: i[: -(k > 9) or None]),
        r"cam_00011\.tif: 12 of 22 frames cannot be used; .* is 180 × 259 px",
    ),
    "unreadable": (
        lambda t: (t.parent / "frames" / "cam_00001.tif").write_bytes(b"junk"),
        r"cam_00001\.tif: cannot be read",
    ),
    "unknown key": (lambda t: edited(t, "rate = ", "rte = "), "did you mean 'rate'"),
    "wrong unit": (lambda t: edited(t, '"10 mm"', '"10 kg"'), r"width: 'kg' is not a unit of length"),
    "column not found": (lambda t: edited(t, 'force = "Force"', 'force = "Load"'), "Force"),
    "force not a number": (spoil_force, "overload"),
    "no overlap": (
        lambda t: t.write_text(t.read_text() + '\n[sync]\noffset = "1 h"\n'),
        "overlap",
    ),
    "subset too large": (
        lambda t: t.write_text(t.read_text() + "\n[correlation]\nsubset = 201\n"),
        r"set correlation\.subset to 1[0-3]\d or less",
    ),
    "frames missing": (
        lambda t: [(t.parent / "frames" / f"cam_{k:05d}.tif").unlink() for k in range(8, 15)],
        "Frame numbers jump from cam_00007.tif to cam_00015.tif",
    ),
    "no texture": (
        lambda t: overwrite_frames(t, lambda k, i: np.full_like(i, 90)),
        "one grey value everywhere",
    ),
    "every subset lost": (lambda t: overwrite_frames(t, other_patterns), "every subset was lost"),
}


@pytest.mark.parametrize("kind", BAD)
def test_wrong_input_is_one_clear_sentence_and_leaves_no_result(copy, kind):
    spoil, said = BAD[kind]
    spoil(copy)
    with pytest.raises(InputError, match=said) as caught:
        dic.measure(copy, copy.parent / "out")
    assert str(caught.value).count("\n") == 0
    left = {path.name for path in (copy.parent / "out").glob("*")}
    assert not left & {"results.json", "history.csv", "report.html"}
    assert not any(name.endswith(".part") for name in left)


#: What of a result folder may outlive a run that failed: the fields are no result, and are not used
#: unless they fit.
NO_RESULT = {"fields.nc"}


@pytest.mark.parametrize("mistake", ['[sync]\noffset = "1 h"', "[sink]\noffset = 1", "[sync"])
def test_a_failing_rerun_takes_the_old_results_away(copy, mistake):
    out = copy.parent / "out"
    dic.measure(copy, out)
    assert len(list((out / "figures").iterdir())) > 4
    append(copy, mistake)
    with pytest.raises(InputError):
        dic.measure(copy, out)
    assert {path.name for path in out.rglob("*.*")} <= NO_RESULT


def test_a_load_record_with_a_results_name_survives(copy):
    """A record may be called history.csv, and the results may be wanted beside it."""
    record = copy.with_name("machine.csv").rename(copy.with_name("history.csv"))
    edited(copy, "machine.csv", "history.csv")
    before = record.read_bytes()
    with pytest.raises(InputError, match=r"'history\.csv' is read by the test"):
        dic.measure(copy, copy.parent)
    assert record.read_bytes() == before


@pytest.mark.usefixtures("without_report")
def test_damaged_frames_are_missing_and_the_rest_is_measured(copy, monkeypatch):
    """One cut short, which only reading shows, one empty and one of another size: against the undamaged
    test, the readings of all other frames stay within the noise of a reference of fewer frames."""
    whole = dic.measure(copy, copy.parent / "whole").history
    frames = sorted((copy.parent / "frames").iterdir())
    frames[4].write_bytes(b"")
    frames[12].write_bytes(frames[12].read_bytes()[:-9000])
    overwrite_frame(frames[15], lambda image: image[:-1])
    first = dic.measure(copy)
    history = first.history
    lost = np.isin(history.frame, [4, 12, 15])
    assert set(np.array(history.status)[lost]) == {"the frame could not be read"}
    assert np.isnan(history.axial[lost]).all()
    assert np.isfinite(history.axial[~lost]).all()
    allowed = 4 * np.hypot(history.u_axial, whole.u_axial)[~lost]
    assert (abs(history.axial - whole.axial)[~lost] < allowed).all()
    (said,) = (notice.text for notice in first.notices if notice.code == "frames_unreadable")
    for words in ("3 of 22 frames", "cam_00005.tif cannot be read", "cam_00013.tif", "180 × 259 px"):
        assert words in said
    with first.to_xarray() as fields:
        assert (fields.flag.values[lost] != 0).all()
    monkeypatch.setattr("dic.sequence.Tracker", tracked_again)
    again = dic.measure(copy)
    assert again.notices == first.notices
    assert again.history.status == history.status


@pytest.mark.usefixtures("without_report")
def test_a_film_without_loss_gives_what_its_frames_give(copy):
    """The very same grey values on the same clock, so the very same readings; the film brings its times."""
    import av
    import tifffile

    pictures = [tifffile.imread(path) for path in sorted((copy.parent / "frames").iterdir())]
    with av.open(str(copy.parent / "film.mkv"), "w") as container:
        stream = container.add_stream("ffv1", rate=2)
        stream.height, stream.width = pictures[0].shape
        stream.pix_fmt = "gray"
        for picture in pictures:
            container.mux(stream.encode(av.VideoFrame.from_ndarray(picture, format="gray")))
        container.mux(stream.encode(None))
    frames = dic.measure(copy, copy.parent / "a").history
    edited(copy, 'source = "frames"\nrate = "2 Hz"', 'source = "film.mkv"')
    film = dic.measure(copy, copy.parent / "b").history
    np.testing.assert_allclose(film.time_s, frames.time_s, atol=1e-9)
    np.testing.assert_array_equal(film.axial, frames.axial)


def overwrite_frame(path, change):
    import tifffile

    tifffile.imwrite(path, change(tifffile.imread(path)))


def test_results_may_lie_beside_the_inputs(copy):
    dic.measure(copy, copy.parent)
    again = dic.measure(copy, copy.parent)
    assert np.isfinite(again.properties["youngs_modulus"].value)


def test_a_clip_on_in_the_record_is_compared(tmp_path, small_scenario):
    """Gain and offset as the scenario has them, within three stated standard uncertainties."""
    scenario = tmp_path / "clip.toml"
    keys = "extensometer_gain = 1.02\nextensometer_offset = 5e-5\nextensometer_noise = 5e-6"
    scenario.write_text(small_scenario.replace("[load_record]", f"[load_record]\n{keys}"))
    whole = dic.measure(render(load_scenario(scenario), tmp_path / "test"), tmp_path / "out").clip_on.whole
    assert whole.slope == pytest.approx(1.02, abs=3 * whole.u_slope)
    assert whole.offset == pytest.approx(5e-5, abs=3 * whole.u_offset)
    # 5 µm/m and the frames' own 3 µm/m on 12 frames evenly over 780 µm/m: 6 / (√12 · 780/√12) = 0.8 %.  What
    # the clocks bring on top is theirs.
    assert whole.contributions["slope"]["scatter"] < 0.008
    said = json.loads((tmp_path / "out" / "results.json").read_text())["clip_on"]
    assert said["slope"] == whole.slope


GAUGES = """
[gauges.ext]
kind = "extensometer"
length = 150
[gauges.edges]
kind = "edge_width"
[gauges.middle]
kind = "line"
from = [90, 40]
to = [90, 220]
"""


def test_named_gauges_read_the_truth_and_come_back_from_the_store(copy, monkeypatch):
    """Five stated standard uncertainties of 22 frames; the width between the edges within 0.02 px of 130 px,
    as 200 px of speckled edge allow."""
    append(copy, GAUGES)
    first = dic.measure(copy)
    truth = json.loads(copy.with_name("truth.json").read_text())["frames"]
    found = {one.gauge.name: one for one in first.gauges}
    for name in ("ext", "middle"):
        miss = (found[name].strain - truth["strain_axial"]) / found[name].u_strain
        assert np.abs(miss).max() < 5, name
    assert set(found["ext"].status) == {"ok"}
    width = (found["edges"].strain - truth["strain_transverse"]) * found["edges"].gauge.length_px
    assert np.abs(np.mean(width)) < 0.02
    assert found["edges"].gauge.length_px == pytest.approx(130, rel=0.004)  # as the scale is good to

    monkeypatch.setattr("dic.sequence.Tracker", tracked_again)
    second = dic.measure(copy)
    for one, other in zip(first.gauges, second.gauges, strict=True):
        np.testing.assert_array_equal(one.strain, other.strain)


def test_a_round_bar_takes_its_middle_and_its_edges(copy):
    """Patches within half the radius, transverse strain from the width; a flat coupon looks the same."""
    text = copy.read_text().replace('shape = "flat"', 'shape = "round"')
    text = text.replace('width = "10 mm"', 'diameter = "10 mm"').replace('thickness = "2 mm"\n', "")
    copy.write_text(text)
    found = dic.measure(copy)
    assert np.ptp(found.scene.region[:, 0]) == pytest.approx(130 / 2, abs=3)
    truth = json.loads(copy.with_name("truth.json").read_text())["frames"]["strain_transverse"]
    assert abs(np.mean(found.history.transverse - truth)) < 0.02 / 130
    assert np.median(found.history.u_transverse) < 0.015 / 130
