"""Displacement and strain fields on disk, written frame by frame, opened by xarray.

The file gets its final name only when the last frame is in it, so a broken run leaves nothing that
looks like a result.
"""

from __future__ import annotations

import os
from collections.abc import Collection, Iterable, Iterator
from enum import IntEnum
from pathlib import Path
from types import TracebackType
from typing import Any

import h5netcdf
import numpy as np
from numpy.typing import NDArray

from dic.correlation.flags import MEANING, Flag
from dic.correlation.grid import Grid
from dic.correlation.matching import Match
from dic.errors import StoreError
from dic.strain.maps import MEANING as MAP_MEANING
from dic.strain.maps import StrainMap
from dic.strain.measures import GRADIENT
from dic.strain.rates import Moved

NAME = "fields.nc"
#: Frames that are written together.
AT_ONCE = 8
#: Variables that hold the subsets' affine motion, in the order of `Match.affine`.
AFFINE = ("u", "u_x", "u_y", "v", "v_x", "v_y")

#: Variables with their type and what they are.
VARIABLES: dict[str, tuple[str, str, str]] = {
    "u": ("f8", "px", "displacement along x, to the right, in the picture as it is"),
    "v": ("f8", "px", "displacement along y, down, in the picture as it is"),
    "u_x": ("f8", "1", "slope of u along x, as matched"),
    "u_y": ("f8", "1", "slope of u along y, as matched"),
    "v_x": ("f8", "1", "slope of v along x, as matched"),
    "v_y": ("f8", "1", "slope of v along y, as matched"),
    "strain_axial": ("f4", "1", "engineering strain along the pull"),
    "strain_transverse": ("f4", "1", "engineering strain across the pull"),
    "strain_shear": ("f4", "1", "change of the right angle between the coupon axes"),
    "u_strain_axial": ("f4", "1", "standard uncertainty of strain_axial"),
    "gradient_u_x": ("f4", "1", "slope of u along x, fitted over the maps' window"),
    "gradient_u_y": ("f4", "1", "slope of u along y, fitted over the maps' window"),
    "gradient_v_x": ("f4", "1", "slope of v along x, fitted over the maps' window"),
    "gradient_v_y": ("f4", "1", "slope of v along y, fitted over the maps' window"),
    "correlation": ("f4", "1", "zero-mean normalised cross-correlation"),
    "sigma_u": ("f4", "px", "standard uncertainty of u"),
    "sigma_v": ("f4", "px", "standard uncertainty of v"),
    "flag": ("u1", "1", "state of the subset"),
    "map_flag": ("u1", "1", "how the point of the strain maps came about"),
}

#: Variables on (frame), where a still patch is followed.
PATCH = {
    "patch_strain": "apparent strain of the still patch, in both directions alike",
    "u_patch_strain": "standard uncertainty of patch_strain",
}
#: Variables on (frame, station), where the coupon's edges are followed.
EDGES = {
    "edge_width": "distance between the coupon's edges",
    "u_edge_width": "standard uncertainty of edge_width per grey level of noise",
}


class FieldsWriter:
    """Writes one frame after the other; use as a context manager.

    Parameters
    ----------
    folder
        Result folder.
    grid
        The subsets.
    time_s
        Camera time of every frame, s.
    attributes
        Settings that readers of the file need, and the ``tracking_key`` of `dic.sequence`.
    stations
        Where the width between the coupon's edges is measured, along the axis, px; None for nowhere.
    patch
        Whether a still patch is followed.
    """

    def __init__(
        self,
        folder: Path,
        grid: Grid,
        time_s: NDArray[np.float64],
        attributes: dict[str, Any],
        stations: NDArray[np.float64] | None = None,
        patch: bool = False,
    ) -> None:
        self._final = folder / NAME
        self._partial = folder / (NAME + ".part")
        self._grid = grid
        self._next = 0
        self._waiting: list[dict[str, NDArray[Any]]] = []
        try:
            self._partial.unlink(missing_ok=True)  # a link would be followed
            self._file = h5netcdf.File(self._partial, "w")
        except OSError as error:
            raise StoreError(
                f"cannot be written ({error})", where=str(folder), remedy="choose another --out"
            ) from error
        _lay_out(self._file, grid, time_s)
        if patch:
            _lay_out_patch(self._file)
        if stations is not None:
            _lay_out_edges(self._file, stations)
        self._file.attrs.update(attributes)

    def __enter__(self) -> FieldsWriter:
        return self

    def put(
        self,
        match: Match,
        strains: StrainMap,
        edges: tuple[NDArray[Any], NDArray[Any]] | None = None,
        patch: tuple[float, float] | None = None,
    ) -> None:
        """Append the next frame; `edges` as `EDGES` and `patch` as `PATCH`, where they are followed."""
        inside = self._grid.inside
        values: dict[str, NDArray[Any]] = {
            **{name: spread(part, inside) for name, part in zip(AFFINE, match.as_matched.T, strict=True)},
            "strain_axial": strains.axial,
            "strain_transverse": strains.transverse,
            "strain_shear": strains.shear,
            "u_strain_axial": strains.u_axial,
            **{name: strains.gradient[..., k // 2, k % 2] for k, name in enumerate(GRADIENT)},
            "map_flag": strains.flag,
            "correlation": spread(match.correlation, inside),
            "sigma_u": spread(match.sigma_u, inside),
            "sigma_v": spread(match.sigma_v, inside),
        }
        flag = np.full(inside.shape, Flag.MASKED, np.uint8)
        flag[inside] = match.flag
        single = {"noise_grey": np.array(match.noise_grey), "links": np.array(match.links)}
        if edges is not None:
            single |= dict(zip(EDGES, edges, strict=True))
        if patch is not None:
            single |= dict(zip(PATCH, map(np.array, patch), strict=True))
        self._waiting.append({**values, "flag": flag, **single})
        if len(self._waiting) == AT_ONCE:
            self._flush()

    def _flush(self) -> None:
        """Write the frames that wait: each call into the file costs more than its data."""
        if self._waiting:
            rows = slice(self._next, self._next + len(self._waiting))
            for name in self._waiting[0]:
                self._file[name][rows] = np.stack([frame[name] for frame in self._waiting])
            self._next = rows.stop
            self._waiting.clear()

    def note(self, name: str, value: str) -> None:
        """Add an attribute that is known only at the end."""
        self._file.attrs[name] = value

    def __exit__(
        self, kind: type[BaseException] | None, value: BaseException | None, trace: TracebackType | None
    ) -> None:
        if kind is None:
            self._flush()
        self._file.close()
        if kind is None:
            os.replace(self._partial, self._final)
        else:
            self._partial.unlink(missing_ok=True)


def _lay_out(file: h5netcdf.File, grid: Grid, time_s: NDArray[np.float64]) -> None:
    """Make the variables that every test has."""
    file.dimensions = {"frame": len(time_s), "y": grid.shape[0], "x": grid.shape[1]}
    file.create_variable("frame", ("frame",), data=np.arange(len(time_s)))
    file.create_variable("time", ("frame",), data=time_s).attrs["long_name"] = "camera time in seconds"
    file.create_variable("y", ("y",), data=grid.rows).attrs["units"] = "px"
    file.create_variable("x", ("x",), data=grid.columns).attrs["units"] = "px"
    for name, (dtype, unit, meaning) in VARIABLES.items():
        # A fill value would make xarray read the flags as floats, and every frame is written whole.
        fill = None if dtype == "u1" else np.nan
        variable = file.create_variable(
            name, ("frame", "y", "x"), dtype, fillvalue=fill, chunks=(1, *grid.shape)
        )
        variable.attrs.update({"units": unit, "long_name": meaning})
    _explain(file["flag"], MEANING)
    _explain(file["map_flag"], MAP_MEANING)
    noise = file.create_variable("noise_grey", ("frame",), "f8", fillvalue=np.nan)
    noise.attrs["long_name"] = "grey noise of one frame, median over the subsets, in grey levels"
    links = file.create_variable("links", ("frame",), "i4")
    links.attrs["long_name"] = "references between the first one and the frame"


def _explain(variable: h5netcdf.Variable, flags: Collection[IntEnum]) -> None:
    """Say what the values of a flag mean, as the CF conventions have it."""
    variable.attrs["flag_values"] = np.array(list(flags), np.uint8)
    variable.attrs["flag_meanings"] = " ".join(flag.name.lower() for flag in flags)


def _lay_out_patch(file: h5netcdf.File) -> None:
    for name, meaning in PATCH.items():
        file.create_variable(name, ("frame",), "f8", fillvalue=np.nan).attrs["long_name"] = meaning


def _lay_out_edges(file: h5netcdf.File, stations: NDArray[np.float64]) -> None:
    file.dimensions["station"] = len(stations)
    place = file.create_variable("station", ("station",), data=stations)
    place.attrs.update({"units": "px", "long_name": "along the axis from the gauge region's middle"})
    for name, meaning in EDGES.items():
        variable = file.create_variable(name, ("frame", "station"), "f8", fillvalue=np.nan)
        variable.attrs.update({"units": "px", "long_name": meaning})


def spread(values: NDArray[np.float64], inside: NDArray[np.bool_]) -> NDArray[np.float64]:
    """Lay the inside subsets' values out on the grid, shape (ny, nx), NaN elsewhere."""
    field = np.full(inside.shape, np.nan)
    field[inside] = values
    return field


def stored_attributes(folder: Path) -> dict[str, Any]:
    """Return the attributes of the fields in a folder; empty where there are none that can be used."""
    try:
        with h5netcdf.File(folder / NAME, "r") as file:
            return dict(file.attrs)
    except OSError:
        return {}


def median_noise(folder: Path) -> float:
    """Return the grey noise of one frame, median over the frames, grey levels."""
    with h5netcdf.File(folder / NAME, "r") as file:
        return float(np.nanmedian(file["noise_grey"][:]))


def stored_edges(folder: Path) -> Iterator[tuple[NDArray[np.float64], NDArray[np.float64]]]:
    """Yield the variables of `EDGES` frame by frame."""
    with h5netcdf.File(folder / NAME, "r") as file:
        yield from zip(*(file[name][:] for name in EDGES), strict=True)


def stored_patch(folder: Path) -> Iterator[tuple[float, float]]:
    """Yield the variables of `PATCH` frame by frame."""
    with h5netcdf.File(folder / NAME, "r") as file:
        yield from zip(*(file[name][:].tolist() for name in PATCH), strict=True)


def stored_matches(folder: Path, grid: Grid) -> Iterator[Match]:
    """Yield what tracking once found, frame by frame, as tracking itself would."""
    inside = grid.inside
    with h5netcdf.File(folder / NAME, "r") as file:
        for frame, (noise, links) in enumerate(zip(file["noise_grey"][:], file["links"][:], strict=True)):
            parameters = np.stack([file[name][frame][inside] for name in AFFINE], axis=1).astype(float)
            flag = file["flag"][frame][inside]
            yield Match(
                parameters=parameters,
                correlation=file["correlation"][frame][inside].astype(float),
                sigma_u=file["sigma_u"][frame][inside].astype(float),
                sigma_v=file["sigma_v"][frame][inside].astype(float),
                flag=flag,
                iterations=np.zeros(len(flag), np.uint8),
                noise_grey=float(noise),
                links=int(links),
            )


def stored_motion(folder: Path, frames: Iterable[int]) -> Iterator[Moved]:
    """Yield displacements, their uncertainties and the axial strain map of some frames, one at a time."""
    names = ("u", "v", "sigma_u", "sigma_v", "strain_axial")
    with h5netcdf.File(folder / NAME, "r") as file:
        for frame in frames:
            yield Moved(*(file[name][frame].astype(float) for name in names))
