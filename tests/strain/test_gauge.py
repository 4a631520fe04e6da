"""Gauges against homogeneous deformations, and their stated uncertainty against true scatter."""

import numpy as np
import pytest

from dic.correlation import Flag, Match, lay_grid
from dic.errors import PatternError
from dic.pattern import axes
from dic.strain import GaugeReader, Region
from synthetic_images import Bending, homogeneous, rigid

CENTRE = np.array([129.5, 94.5])


def region(angle=0.0, length=150.0, width=150.0):
    return Region(CENTRE, length, width, *axes(angle))


def reader_of(reference, where, *, step=15, length=None):
    mask = reference.mask[: np.prod(reference.shape)].reshape(reference.shape) > 0
    grid = lay_grid(mask, reference.subset, step)
    assert np.array_equal(grid.x, reference.x)
    return GaugeReader(reference, grid, where, length)


def exact_match(reference, motion):
    """A match as it would be without any error."""
    x, y = reference.x.astype(float), reference.y.astype(float)
    h = 0.5
    parameters = np.zeros((len(x), 6))
    parameters[:, [0, 3]] = np.transpose(motion(x, y)) - np.stack([x, y], axis=1)
    for column, dx, dy in ((1, h, 0), (2, 0, h)):
        # central differences are exact for the affine and quadratic motions used here
        ahead, behind = (np.transpose(motion(x + s * dx, y + s * dy)) for s in (1, -1))
        parameters[:, [column, column + 3]] = (ahead - behind) / (2 * h) - [dx / h, dy / h]
    ones = np.ones(len(x))
    flag = np.where(reference.usable, Flag.CONVERGED, Flag.LOW_TEXTURE).astype(np.uint8)
    return Match(parameters, ones, ones, ones, flag, flag, 1.0)


@pytest.mark.parametrize("angle", [0.0, 7.0, 90.0, -30.0])
def test_readings_of_a_homogeneous_deformation_are_exact(photograph, prepared, angle):
    """Closed form: material lines along and across become the columns of the deformation gradient.

    The motion's axis points down and the gauge's up, so that the shear changes its sign.  The plane fit
    of a linear field is the field: only rounding is allowed.
    """
    reference = prepared(photograph(noise=0.01))
    motion = homogeneous(0.013, -0.004, 0.002, axis_angle_deg=angle, centre=tuple(CENTRE), shift=(3, -2))
    found = reader_of(reference, region(angle)).read(exact_match(reference, motion))
    along, across = np.array([-0.001, 1.013]), np.array([0.996, -0.001])
    lengths = np.linalg.norm(along), np.linalg.norm(across)
    assert found.axial == pytest.approx(lengths[0] - 1, abs=1e-12)
    assert found.transverse == pytest.approx(lengths[1] - 1, abs=1e-12)
    assert found.shear == pytest.approx(np.arcsin(along @ across / np.prod(lengths)), abs=1e-12)
    assert found.extensometer == pytest.approx(found.axial, abs=1e-12)


@pytest.mark.parametrize(
    ("angle", "along", "across"), [(0.0, 2.0, 3.0), (90.0, 3.0, -2.0), (-90.0, -3.0, 2.0)]
)
def test_the_shift_has_its_sign(photograph, prepared, angle, along, across):
    """Three px to the right and two up, as the gauge's axes see it: up and right, right and down, ..."""
    reference = prepared(photograph(noise=0.01))
    found = reader_of(reference, region(angle)).read(exact_match(reference, rigid(3, -2)))
    assert found.shift_px == pytest.approx((along, across), abs=1e-12)


def test_rigid_rotation_is_no_strain(photograph, prepared):
    from synthetic_images import rotation

    reference = prepared(photograph(noise=0.01))
    found = reader_of(reference, region()).read(exact_match(reference, rotation(8.0, tuple(CENTRE))))
    for strain in (found.axial, found.transverse, found.shear, found.extensometer):
        assert strain == pytest.approx(0.0, abs=1e-12)


@pytest.mark.parametrize("curvature", [1e-6, -1e-6])
def test_bending_is_read_at_the_edge(photograph, prepared, curvature):
    """Bending adds κ·t; the reading is its value half the region's width to the right of the axis."""
    reference = prepared(photograph(noise=0.01), step=8)
    bent = Bending(homogeneous(1e-3, -3e-4, centre=tuple(CENTRE)), 0.0, curvature, 0.3)
    found = reader_of(reference, region(width=120), step=8).read(exact_match(reference, bent))
    assert found.bending == pytest.approx(curvature * 60, rel=1e-3)
    # subsets weigh by their texture, so their middle lies up to 3 px beside the axis: κ·3 px
    assert found.axial == pytest.approx(1e-3, abs=3e-6)


def test_stated_uncertainty_is_the_true_scatter(photograph, prepared, matched):
    """Thirty draws: the scatter of a standard deviation is 13 %, three of them allowed."""
    readings = []
    for draw in range(30):
        reference = prepared(photograph(noise=0.01, frame=2 * draw), step=10)
        frame = photograph(rigid(0.3, 0.2), noise=0.01, frame=2 * draw + 1)
        readings.append(reader_of(reference, region(), length=100, step=10).read(matched(reference, frame)))
    for name in ("axial", "transverse", "shear", "extensometer"):
        scatter = np.std([getattr(r, name) for r in readings], ddof=1)
        stated = np.mean([getattr(r, f"u_{name}") for r in readings])
        assert stated == pytest.approx(scatter, rel=0.39), name


def test_lost_subsets_leave_the_mean_strain_true(photograph, prepared):
    reference = prepared(photograph(noise=0.01))
    motion = homogeneous(0.01, -0.003, centre=tuple(CENTRE))
    match = exact_match(reference, motion)
    match.flag[::3] = Flag.DECORRELATED
    match.parameters[::3] = np.nan
    found = reader_of(reference, region()).read(match)
    assert found.axial == pytest.approx(0.01, abs=1e-9)
    assert found.valid_fraction == pytest.approx(2 / 3, abs=0.07)


def test_a_frame_without_subsets_is_nan_with_its_reason(photograph, prepared):
    reference = prepared(photograph(noise=0.01))
    match = exact_match(reference, rigid(0, 0))
    match.flag[:] = Flag.DECORRELATED
    match.parameters[:] = np.nan
    found = reader_of(reference, region()).read(match)
    assert np.isnan([found.axial, found.transverse, found.shear, found.extensometer]).all()
    assert found.status == "every subset lost"


def test_a_region_without_subsets_is_refused(photograph, prepared):
    with pytest.raises(PatternError, match="holds only"):
        reader_of(prepared(photograph(noise=0.01)), region(length=10, width=10))


def test_a_gauge_longer_than_the_region_is_refused(photograph, prepared):
    with pytest.raises(PatternError, match="does not fit"):
        reader_of(prepared(photograph(noise=0.01)), region(), length=500)


def test_the_region_around_a_mask_holds_it(photograph):
    mask = np.zeros((190, 260), bool)
    mask[20:170, 60:200] = True
    around = Region.around(mask, *axes(0.0))
    assert around.length == 150
    assert around.width == 140
    np.testing.assert_allclose(around.centre, [129.5, 94.5])


def test_one_row_of_subsets_is_enough_for_a_gauge(photograph, matched):
    """A strip one subset wide: the subsets' own gradients tell what their places cannot."""
    from dic.correlation import Grid, Settings, prepare_reference

    mask = np.zeros((190, 260), bool)
    mask[10:180, 114:145] = True
    rows = np.arange(26, 165, 10)
    grid = Grid(np.array([129]), rows, np.ones((len(rows), 1), bool), 31, 10)
    motion = homogeneous(0.01, -0.003, centre=tuple(CENTRE))
    settings = Settings(full_scale=65535.0)
    reference = prepare_reference(photograph(), grid.x, grid.y, subset=31, settings=settings, mask=mask)
    where = Region.around(mask, *axes(0.0))
    found = GaugeReader(reference, grid, where).read(matched(reference, photograph(motion)))
    assert found.axial == pytest.approx(0.01, abs=3e-5)
    assert found.transverse == pytest.approx(-0.003, abs=3e-4)  # from 31 px across
    assert found.status == "ok"
