"""The stress map of an elastic coupon, from its strain map by Hooke's law."""

from __future__ import annotations

from collections.abc import Mapping
from math import isfinite
from typing import TYPE_CHECKING

import numpy as np

from dic.errors import InputError
from dic.properties.hooke import plane_stress
from dic.properties.result import Property

if TYPE_CHECKING:
    import xarray as xr


def elastic_stress(dataset: xr.Dataset, frame: int, properties: Mapping[str, Property]) -> xr.Dataset:
    """Return the plane stresses over the coupon's face in one frame.

    Parameters
    ----------
    dataset
        The fields, as ``fields.nc`` has them: ``strain_axial``, ``strain_transverse`` and
        ``strain_shear`` on (frame, y, x).
    frame
        Number of the frame, counted from 0.
    properties
        The sheet: Young's modulus, Poisson's ratio and, for the end of the elastic range, the lowest
        proof or upper yield stress that was found, or else the end of the modulus' window.

    Returns
    -------
    xarray.Dataset
        ``stress_axial``, ``stress_transverse``, ``stress_shear`` and ``stress_equivalent`` (von Mises),
        MPa, on (y, x); NaN where there is no strain or where the equivalent stress is beyond the
        elastic range, and there ``beyond`` is true.

    Raises
    ------
    InputError
        If a constant is missing, or that frame has no strain, or most of the coupon is beyond the elastic
        range in it.

    Notes
    -----
    Plane stress, an isotropic material and small strains are assumed: a thin sheet of a metal before it
    yields.
    """
    modulus, ratio = (_value(properties, name) for name in ("youngs_modulus", "poissons_ratio"))
    limit = elastic_limit(properties)
    fields = dataset.isel(frame=frame)
    names = ("strain_axial", "strain_transverse", "strain_shear")
    try:
        axial, across, shear = plane_stress(modulus, ratio, *(fields[name].to_numpy() for name in names))
    except ValueError as error:
        raise InputError(str(error), where="properties.poissons_ratio") from error
    equivalent = np.sqrt(axial**2 - axial * across + across**2 + 3 * shear**2)
    measured = np.isfinite(equivalent)
    beyond = measured & (equivalent > limit)
    if not measured.any():
        raise InputError(
            "the strain maps have no point with enough subsets around it for a stress map",
            where=f"frame {frame}",
            remedy="lower correlation.step, or set gauge.subsets to everywhere",
        )
    if beyond.sum() > measured.sum() / 2:
        raise InputError(
            f"most of the coupon is beyond the elastic range of {limit:.4g} MPa, and Hooke's law ends there",
            where=f"frame {frame}",
            remedy="choose an earlier frame",
        )
    stresses = {"axial": axial, "transverse": across, "shear": shear, "equivalent": equivalent}
    like = fields["strain_axial"]
    maps = {
        f"stress_{name}": like.copy(data=np.where(beyond, np.nan, part)) for name, part in stresses.items()
    }
    for one in maps.values():
        one.attrs = {"units": "MPa"}
    found = like.to_dataset(name="_").drop_vars("_").assign(maps)
    return found.assign(beyond=like.copy(data=beyond)).assign_attrs(elastic_limit_MPa=limit)


def elastic_limit(properties: Mapping[str, Property]) -> float:
    """Return the stress up to which the coupon counts as elastic, MPa.

    Raises
    ------
    InputError
        If no property bounds the elastic range.
    """
    bounds = [
        abs(item.value)
        for name, item in properties.items()
        if name.startswith("proof_stress_") or name == "upper_yield"
    ]
    window = properties["youngs_modulus"].window.get("stress_MPa", ())
    known = [value for value in bounds if isfinite(value)] or [abs(value) for value in window]
    if not known:
        raise InputError(
            "the end of the elastic range is not known", where="properties", remedy="give properties.proof"
        )
    return min(known) if any(isfinite(value) for value in bounds) else max(known)


def _value(properties: Mapping[str, Property], name: str) -> float:
    item = properties.get(name)
    if item is None or not isfinite(item.value):
        reason = "; ".join(item.notes) if item is not None else "it was not evaluated"
        plain = name.replace("_", " ").replace("youngs", "Young's").replace("poissons", "Poisson's")
        raise InputError(f"there is no {plain} for a stress map ({reason})", where="properties")
    return item.value
