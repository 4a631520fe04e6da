"""Drawn tests are whole, differ, and come again with their seed."""

import pytest

from synthetic_images.variety import KINDS, varied
from synthetic_images.virtual_test import VirtualTest


@pytest.mark.parametrize("seed", range(len(KINDS)))
def test_a_drawn_test_rests_and_breaks_before_the_camera(seed):
    scenario = varied(seed)
    test = VirtualTest(scenario)
    assert scenario.specimen.label == f"{KINDS[seed]} {seed}"
    assert scenario == varied(seed)
    assert scenario != varied(seed + len(KINDS))
    assert (test.frame_times < scenario.machine.start).sum() >= 10
    assert (test.frame_times > test.fracture_time).sum() >= 2
    # Small enough that two hundred of them are rendered in minutes.
    assert scenario.camera.frames < 250
