from contextlib import suppress

import numpy as np
import xarray as xr

from dic.correlation import Flag, Grid
from dic.correlation.matching import Match
from dic.store import fields
from dic.strain import MapFlag, StrainMap

GRID = Grid(np.array([20, 30, 40]), np.array([15, 25]), np.array([[1, 1, 0], [1, 1, 1]], bool), 15, 10)


def match(k):
    n = int(GRID.inside.sum())
    parameters = np.full((n, 6), float(k)) + np.arange(n)[:, None] / 10
    flag = np.zeros(n, np.uint8)
    parameters[1], flag[1] = np.nan, Flag.DECORRELATED
    sigma = np.full(n, 0.003)
    return Match(parameters, np.full(n, 0.99), sigma, 2 * sigma, flag, flag, 2.5 + k)


def strains():
    part = np.where(GRID.inside, 0.001, np.nan)
    gradient = np.stack([0 * part, part, part, 2 * part], axis=-1).reshape(*part.shape, 2, 2)
    return StrainMap(gradient, part, -0.3 * part, 0 * part, 0.1 * part, np.uint8(3) * ~GRID.inside)


def write(folder, frames=3):
    with fields.FieldsWriter(folder, GRID, np.arange(frames) / 5, {"tracking_key": "abc"}) as writer:
        for k in range(frames):
            writer.put(match(k), strains())


def test_xarray_opens_what_was_written(tmp_path):
    write(tmp_path)
    with xr.open_dataset(tmp_path / fields.NAME) as found:
        assert found.u.dims == ("frame", "y", "x")
        assert found.u.shape == (3, 2, 3)
        np.testing.assert_allclose(found.x, GRID.columns)
        np.testing.assert_allclose(found.time, [0, 0.2, 0.4])
        assert float(found.u.sel(frame=2, y=15, x=20)) == 2.0
        assert found.flag.dtype == np.uint8
        assert found.flag.attrs["flag_meanings"].split()[Flag.SATURATED] == "saturated"
        assert float(found.gradient_v_y.sel(frame=1, y=15, x=20)) == np.float32(0.002)
        assert found.map_flag.attrs["flag_meanings"].split()[MapFlag.ONE_SIDED] == "one_sided"
        assert np.isnan(found.u.values[:, ~GRID.inside]).all()
        assert (found.flag.values[:, ~GRID.inside] == Flag.MASKED).all()
        assert np.isnan(found.u.values[found.flag.values == Flag.DECORRELATED]).all()


def test_stored_matches_are_the_written_ones(tmp_path):
    write(tmp_path)
    for k, found in enumerate(fields.stored_matches(tmp_path, GRID)):
        expected = match(k)
        np.testing.assert_array_equal(found.u, expected.u)
        np.testing.assert_array_equal(found.v, expected.v)
        np.testing.assert_array_equal(found.flag, expected.flag)
        assert found.noise_grey == expected.noise_grey
    assert fields.median_noise(tmp_path) == 3.5


def test_a_broken_run_leaves_nothing_that_looks_like_a_result(tmp_path):
    with suppress(RuntimeError), fields.FieldsWriter(tmp_path, GRID, np.arange(3.0), {}) as writer:
        writer.put(match(0), strains())
        assert (tmp_path / "fields.nc.part").exists()
        raise RuntimeError
    assert list(tmp_path.iterdir()) == []
    assert fields.stored_attributes(tmp_path) == {}


def test_something_else_under_the_name_is_not_used(tmp_path):
    (tmp_path / fields.NAME).write_text("not a field")
    assert fields.stored_attributes(tmp_path) == {}
