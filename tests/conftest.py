"""Truth images shared by the tests: a texture given by a formula, moved, and photographed."""

import shutil

import numpy as np
import pytest

from dic.correlation import Settings, lay_grid, match_frame, prepare_reference, spline_image
from synthetic_images import Camera, Cosines, Dots, load_scenario, render, rigid

SHAPE = (190, 260)  # lopsided on purpose


def _texture(kind, seed):
    if kind == "dots":
        return Dots(4.5, area=(320, 260), seed=seed)
    return Cosines(4.0, seed=seed)


@pytest.fixture(scope="session")
def photograph():
    """Return a function that photographs a texture after a motion."""

    def take(motion=None, *, kind="dots", noise=0.0, frame=0, seed=1, shape=SHAPE, **camera):
        texture, motion = _texture(kind, seed), motion or rigid(0, 0)
        lens = Camera(noise=noise, **{"bits": 16 if noise == 0 else 8, **camera})
        return lens.photograph(lambda x, y: texture(*motion.inverse(x, y)), shape, frame=frame, seed=seed)

    return take


@pytest.fixture(scope="session")
def prepared():
    """Return a function that lays subsets over a picture and prepares it as reference."""

    def prepare(image, *, subset=31, step=15, margin=8, frames=1, **settings):
        mask = np.zeros(image.shape, bool)
        mask[margin:-margin, margin:-margin] = True
        scale = 255.0 if image.max() < 256 else 65535.0
        grid = lay_grid(mask, subset, step)
        how = Settings(full_scale=scale, **settings)
        return prepare_reference(
            image, grid.x, grid.y, subset=grid.subset, settings=how, mask=mask, frames=frames
        )

    return prepare


@pytest.fixture(scope="session")
def matched():
    """Return a function that matches one picture, from zero motion or a given start."""

    def match(reference, image, start=None):
        settings = reference.settings
        if start is None:
            start = np.zeros((len(reference.x), 2 * len(settings.shape)))
        return match_frame(reference, spline_image(image, settings.kind, settings.smoothing), start)

    return match


@pytest.fixture(scope="session")
def small_scenario():
    """Return a scenario, as text, of a small elastic test that runs in a second or two."""
    return SMALL


@pytest.fixture(scope="session")
def small_test(tmp_path_factory):
    """Render that test once, and return its test file; not to be changed, see `copy`."""
    folder = tmp_path_factory.mktemp("small")
    (folder / "small.toml").write_text(SMALL)
    return render(load_scenario(folder / "small.toml"), folder / "test")


@pytest.fixture
def copy(small_test, tmp_path):
    """Return the test file of a copy that a test may change."""
    shutil.copytree(small_test.parent, tmp_path / "test")
    return tmp_path / "test" / "test.toml"


@pytest.fixture
def without_report(monkeypatch):
    """Leave the report out, half of a small run's time, where a test looks at the numbers only."""
    monkeypatch.setattr("dic.pipeline.write_report", lambda *_: None)


SMALL = """
seed = 3
[specimen]
label = "small"
width = "10 mm"
thickness = "2 mm"
[material]
law = "elastic"
youngs_modulus = "70 GPa"
poissons_ratio = 0.33
[texture]
kind = "dots"
diameter = 4.5
[view]
rows = 260
columns = 180
coupon_width = 130
[camera]
frames = 22
rate = "2 Hz"
offset = "1.5 s"
bits = 8
noise = "1 %"
[machine]
free_length = "60 mm"
speed = "2 mm/min"
start = "4 s"
stiffness = "5 kN/mm"
[load_record]
rate = "20 Hz"
force_noise = "2 N"
"""
