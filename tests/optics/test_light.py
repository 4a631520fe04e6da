"""Light that is uneven and drifts leaves the strains as they are."""

import numpy as np
import pytest

from dic.correlation import Settings, Tracker, lay_grid, prepare_reference
from dic.pattern import axes
from dic.strain import GaugeReader, Region
from synthetic_images import Camera, Dots, homogeneous

SHAPE, TRUE = (260, 200), (0.002, -0.0006)
#: Exposed so that the brightest corner is not clipped.
LIGHTS = {
    "even": Camera(bits=8, white=0.6, noise=0.01),
    "dark corners": Camera(bits=8, white=0.6, noise=0.01, vignette=0.5),
    "from one side": Camera(bits=8, white=0.6, noise=0.01, gradient=0.5),
    "fading": Camera(bits=8, white=0.6, noise=0.01, drift=-0.2),
    "all of it": Camera(bits=8, white=0.6, noise=0.01, vignette=0.4, gradient=0.4, drift=-0.2),
}


@pytest.mark.parametrize("light", LIGHTS)
def test_uneven_and_drifting_light_do_no_harm(light):
    """Four stated standard uncertainties, which follow the light, and 2 µm/m for the interpolation's bias."""
    camera, texture = LIGHTS[light], Dots(4.5, area=(500, 500), seed=4)
    motion = homogeneous(*TRUE, centre=(100, 130), shift=(2.3, -3.4))
    first = camera.photograph(texture, SHAPE, frame=0, seed=1)
    second = camera.photograph(lambda x, y: texture(*motion.inverse(x, y)), SHAPE, frame=1, seed=1)
    mask = np.zeros(SHAPE, bool)
    mask[20:-20, 20:-20] = True
    grid = lay_grid(mask, 31, 10)
    reference = prepare_reference(
        first.astype(float), grid.x, grid.y, subset=31, settings=Settings(), mask=mask
    )
    reader = GaugeReader(reference, grid, Region.around(mask, *axes(0.0)))
    read = reader.read(Tracker(reference, grid.neighbours()).follow(second))
    assert read.valid_fraction == 1
    assert abs(read.axial - TRUE[0]) < 4 * read.u_axial + 2e-6
    assert abs(read.transverse - TRUE[1]) < 4 * read.u_transverse + 2e-6
