"""Motion towards the camera: bounds, what is taken off, and its place in the budget."""

from dataclasses import replace

import numpy as np
import pytest
from pydantic import ValidationError

from dic.optics import Apparent, bound, corrected, receding
from dic.optics.towards import PATCH_LOST, false_strain, without
from dic.testfile import Camera, Specimen
from synthetic_images.readings import gauge_history

FLAT = Specimen(width="10 mm", thickness="2 mm")


@pytest.fixture
def drawn():
    """Return twenty readings of a coupon that stretches by 2 % and contracts by 0.6 %."""
    n = 20
    strain = np.linspace(0, 0.02, n)
    return gauge_history(np.arange(n, dtype=float), strain, -0.3 * strain, 3e-6)


def test_the_published_case_is_met():
    """Sutton et al. 2008 (doi 10.1016/j.optlaseng.2008.05.005 [from memory]): 1250 µm/m per mm for a 55 mm
    lens, which by Δz/Z stood at 800 mm; 25 µm/m per mm for a telecentric one."""
    near, telecentric = Camera(stand_off="800 mm"), Camera(telecentric=True)
    assert false_strain(1.0, near.false_strain_per_mm) == pytest.approx(1250e-6)
    assert telecentric.false_strain_per_mm == pytest.approx(25e-6)
    assert Camera(telecentric="10 µm/m per mm").false_strain_per_mm == pytest.approx(10e-6)


def test_the_bound_is_that_of_a_rectangular_distribution():
    """JCGM 100:2008, 4.3.7: half width over √3."""
    said = Camera(stand_off="500 mm", out_of_plane="0.5 mm")
    assert bound(said) == pytest.approx(1000e-6 / np.sqrt(3))
    assert bound(Camera(stand_off="500 mm")) is None
    assert bound(Camera(still_patch=(0, 0, 90, 90))) == 0.0


def test_a_bound_without_a_distance_is_refused():
    with pytest.raises(ValidationError, match="out_of_plane needs stand_off"):
        Camera(out_of_plane="0.2 mm")
    with pytest.raises(ValidationError, match="is not a strain per mm"):
        Camera(telecentric="25 µm/m")


def test_thinning_recedes_by_half_the_thickness():
    """A sheet that thins by εt·t moves its face by half that: strain εt·t/2Z."""
    assert receding(Camera(stand_off="500 mm"), FLAT) == pytest.approx(2 / 2 / 500)
    assert receding(Camera(stand_off="500 mm", thinning="off"), FLAT) == 0
    assert receding(Camera(stand_off="500 mm", telecentric=True), FLAT) == 0
    assert receding(Camera(), FLAT) == 0


def test_both_corrections_give_the_true_strains_back(drawn):
    """A pinhole's picture of a coupon that thins and comes nearer, exact."""
    true, across, nearer = drawn.axial, drawn.transverse, np.linspace(0, 1e-3, len(drawn))
    grown = (1 + nearer) / (1 - across * 2 / 2 / 500)  # recedes by −εt·t/2 of 500 mm
    seen = replace(drawn, axial=(1 + true) * grown - 1, transverse=(1 + across) * grown - 1)
    patch = [Apparent(one, 2e-6) for one in nearer.tolist()]
    found, _, _ = corrected(seen, patch, receding(Camera(stand_off="500 mm"), FLAT))
    # Left over is what receding falsifies in the transverse strain that foretells it: (t/2Z)²·εt.
    assert found.axial == pytest.approx(true, abs=3e-8)
    assert found.transverse == pytest.approx(across, abs=3e-8)
    assert found.u_axial == pytest.approx(np.hypot(drawn.u_axial, 2e-6))


def test_a_frame_without_its_patch_has_no_strain(drawn):
    patch = [Apparent(0.0, 1e-6)] * len(drawn)
    patch[3] = Apparent(np.nan, np.nan)
    found, _, _ = corrected(drawn, patch, 0.0)
    assert found.status[3] == PATCH_LOST
    assert np.isnan([found.axial[3], found.transverse[3]]).all()
    assert np.isfinite(found.axial[2])


def test_without_undoes_growth():
    assert without(np.array([1.1 * 1.05 - 1]), np.array([0.05])) == pytest.approx([0.1])
