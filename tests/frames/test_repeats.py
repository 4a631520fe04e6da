"""A camera that froze shows one picture twice; a picture drawn without noise may do so by itself."""

import numpy as np
import pytest
import tifffile

import dic
from dic.frames.doubts import RepeatWatch
from synthetic_images import load_scenario, render


def pictures(noise, moves):
    """Frames of a pattern that moves by whole columns, with noise or without."""
    rng = np.random.default_rng(4)
    pattern = rng.integers(40, 200, (80, 90))
    for move in moves:
        frame = np.roll(pattern, move, axis=1)
        yield (frame + rng.normal(0, 3, frame.shape) if noise else frame).round().astype(np.uint8)


def test_a_repeated_picture_is_one_at_rest_and_in_motion():
    frames = list(pictures(True, [0, 0, 0, 0, 1, 2, 3, 4]))
    shown = [0, 1, 1, 3, 4, 4, 4, 7]
    watch = RepeatWatch()
    assert [watch.frozen(frames[k]) for k in shown] == [k == 2 or k in (5, 6) for k in range(8)]


def test_pictures_without_noise_are_left_alone():
    watch = RepeatWatch()
    assert not any(watch.frozen(frame) for frame in pictures(False, [0, 0, 0, 1, 2, 2, 3]))


def test_compression_with_loss_makes_frames_at_rest_alike():
    frames = list(pictures(True, [0, 1]))
    watch = RepeatWatch(alike_at_rest=True)
    assert not any(watch.frozen(frames[k]) for k in (0, 1, 1, 1, 0))


def test_one_pixel_makes_another_picture():
    first, second = pictures(True, [0, 0])
    almost = second.copy()
    almost[37, 51] += 1
    watch = RepeatWatch()
    assert not any(watch.frozen(frame) for frame in (first, second, almost, second))


@pytest.mark.usefixtures("without_report")
def test_frozen_frames_have_no_reading_and_the_rest_is_measured(copy, tmp_path):
    """Four standard uncertainties: the reference is that of the whole test, so only noise differs."""
    test = copy
    whole = dic.measure(test, tmp_path / "whole").history
    frames = sorted((test.parent / "frames").iterdir())
    for k in (13, 14, 18):
        frames[k].write_bytes(frames[12 if k < 15 else 17].read_bytes())
    first = dic.measure(test, tmp_path / "frozen")
    lost = np.isin(first.history.frame, [13, 14, 18])
    assert set(np.array(first.history.status)[lost]) == {"repeated picture"}
    assert set(np.array(first.history.status)[~lost]) == {"ok"}
    assert np.isnan(first.history.axial[lost]).all()
    off = abs(first.history.axial - whole.axial)[~lost]
    assert (off < 4 * first.history.u_axial[~lost]).all()
    (said,) = (notice.text for notice in first.notices if notice.code == "frames_repeated")
    assert "3 of 22 frames" in said
    assert frames[13].name in said
    again = dic.measure(test, tmp_path / "frozen")
    assert again.history.status == first.history.status
    assert again.notices == first.notices


@pytest.mark.usefixtures("without_report")
def test_a_frozen_frame_at_rest_ends_the_reference(copy, tmp_path):
    frames = sorted((copy.parent / "frames").iterdir())
    assert not np.array_equal(tifffile.imread(frames[0]), tifffile.imread(frames[1]))
    frames[3].write_bytes(frames[2].read_bytes())
    result = dic.measure(copy, tmp_path / "results")
    assert result.quality["reference_frames"] == 3
    assert result.history.status[3] == "repeated picture"


@pytest.mark.usefixtures("without_report")
def test_a_drawn_test_without_noise_is_measured_everywhere(tmp_path, small_scenario):
    (tmp_path / "small.toml").write_text(small_scenario.replace('noise = "1 %"', 'noise = "0 %"'))
    test = render(load_scenario(tmp_path / "small.toml"), tmp_path / "test")
    result = dic.measure(test, tmp_path / "results")
    assert set(result.history.status) == {"ok"}
    assert "frames_doubled" in {notice.code for notice in result.notices}
