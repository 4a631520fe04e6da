"""A still patch, a lens and a stand-off in the test file, through the whole job."""

import json

import numpy as np
import pytest
import tifffile

import dic
from synthetic_images import Dots, homogeneous
from synthetic_images.camera import picture

SIDE = 120


def growth(frame):
    """Return what the strip seems to have grown by; only later, so that the clock is found."""
    return 20e-6 * np.maximum(frame - 14, 0)


def beside(path, frame):
    """Add a strip of still pattern, which seems to grow, to a frame's right."""
    image = tifffile.imread(path)
    shape = (image.shape[0], SIDE)
    texture = Dots(4.5, area=(2 * SIDE, 2 * shape[0]), seed=9)
    motion = homogeneous(growth(frame), growth(frame), centre=(SIDE / 2, shape[0] / 2))
    grey = 25 + 190 * picture(lambda x, y: texture(*motion.inverse(x, y)), shape)
    grey += 2.55 * np.random.default_rng(frame).standard_normal(shape)
    tifffile.imwrite(path, np.hstack([image, np.clip(np.rint(grey), 0, 255).astype(np.uint8)]))


@pytest.fixture
def with_patch(copy):
    for number, path in enumerate(sorted((copy.parent / "frames").iterdir())):
        beside(path, number)
    camera = '[camera]\nstill_patch = [190, 5, 100, 250]\nstand_off = "500 mm"\n'
    camera += "[camera.distortion]\nfocal = 2000\nk1 = -0.05\n"
    camera += "[coupon]\nedges = [[24.5, 0, 24.5, 259], [154.5, 0, 154.5, 259]]\n"
    copy.write_text(copy.read_text() + camera)
    return copy


def test_patch_and_lens_come_back_from_the_store(with_patch, monkeypatch, without_report):
    first = dic.measure(with_patch)
    truth = json.loads(with_patch.with_name("truth.json").read_text())["frames"]
    frames = np.arange(len(first.history))
    # The strip grows, the coupon was rendered without: its strain now lacks what the strip shows.
    expected = (1 + np.array(truth["strain_axial"])) / (1 + growth(frames)) - 1
    miss = (first.history.axial - expected) / first.history.u_axial
    # The lens that the frames do not have adds 2·k1·r²: below 1 % of the strain, half a µm/m per frame.
    assert np.nanmax(np.abs(miss)) < 6
    assert first.optics["thinning_corrected"]
    assert first.optics["distortion"]["k1"] == -0.05
    assert not any("lens" in one for one in first.properties["youngs_modulus"].missing)

    monkeypatch.setattr("dic.sequence.Tracker", None)
    second = dic.measure(with_patch)
    np.testing.assert_array_equal(first.history.axial, second.history.axial)
