"""Strain measures of stored fields, with their uncertainties."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from dic.pattern import axes
from dic.strain.maps import StrainMapper, Window
from dic.strain.tensors import MEASURES, components, half_turn

if TYPE_CHECKING:
    import xarray as xr

Floats = NDArray[np.float64]

#: Variables that hold the maps' displacement gradient, by rows.
GRADIENT = ("gradient_u_x", "gradient_u_y", "gradient_v_x", "gradient_v_y")
#: Step of the numerical derivatives by the gradient: rounding and curvature both stay below 1e-9.
_STEP = 1e-6
#: A direction of which nothing is known scatters by this much: 180°/√12.
_ANY_DIRECTION_DEG = 180.0 / np.sqrt(12.0)


def measures(fields: xr.Dataset, measure: str = "engineering") -> xr.Dataset:
    """Work out a strain measure and its uncertainty from stored displacement gradients.

    Parameters
    ----------
    fields
        From ``fields.nc``, on (frame, y, x) or a single frame on (y, x).  All frames of a long test may
        be large: select the ones that are wanted.
    measure
        ``"engineering"``, ``"green_lagrange"`` or ``"hencky"``.

    Returns
    -------
    xarray.Dataset
        The components of `dic.strain.tensors.components`, each with its standard uncertainty
        ``u_<name>`` from the subsets' scatter, on the same coordinates; NaN where the map has none.

    Raises
    ------
    ValueError
        If the measure is unknown.

    Notes
    -----
    Uncertainties are propagated linearly.  Where both principal strains are alike within their scatter
    their direction is open, and the larger one reads high by part of the scatter.
    """
    import xarray as xr

    if measure not in MEASURES:
        raise ValueError(f"unknown strain measure '{measure}'; choose one of {', '.join(MEASURES)}")
    single = "frame" not in fields.dims
    whole = fields.expand_dims("frame") if single else fields
    window, angle = Window.from_attributes(fields.attrs), float(fields.attrs["axis_angle_deg"])
    mapper = StrainMapper(window, axes(angle))
    frames = [_one_frame(whole.isel(frame=k), measure, mapper) for k in range(whole.sizes["frame"])]
    found = xr.Dataset(
        {name: (("frame", "y", "x"), np.stack([one[name] for one in frames])) for name in frames[0]},
        coords={name: whole[name] for name in ("frame", "time", "y", "x") if name in whole.coords},
        attrs={"strain_measure": measure, "axis_angle_deg": angle, "map_gauge_px": window.size_px},
    )
    return found.isel(frame=0) if single else found


def _one_frame(field: xr.Dataset, measure: str, mapper: StrainMapper) -> dict[str, Floats]:
    u, v, sigma_u, sigma_v = (field[name].values.astype(float) for name in ("u", "v", "sigma_u", "sigma_v"))
    gradient = np.stack([field[name].values.astype(float) for name in GRADIENT], axis=-1)
    gradient = gradient.reshape(*u.shape, 2, 2)
    mapper.prepare(np.isfinite(u) & np.isfinite(v))
    values = components(gradient, measure, *mapper.axes)
    return values | _propagated(gradient, measure, mapper, mapper.covariance(sigma_u, sigma_v))


def _propagated(
    gradient: Floats, measure: str, mapper: StrainMapper, covariance: tuple[Floats, Floats]
) -> dict[str, Floats]:
    """Return the standard uncertainties from numerical derivatives by the gradient's components."""
    slopes: dict[str, Floats] = {}
    for row, column in np.ndindex(2, 2):
        step = np.zeros((2, 2))
        step[row, column] = _STEP
        ahead, behind = (components(gradient + s * step, measure, *mapper.axes) for s in (1, -1))
        for name, value in ahead.items():
            change = value - behind[name]
            change = half_turn(change) if name == "principal_angle_deg" else change
            slopes.setdefault(name, np.empty(gradient.shape))[..., row, column] = change / (2 * _STEP)
    found = {}
    for name, slope in slopes.items():
        variance = sum(
            np.einsum("...i,...ij,...j->...", slope[..., row, :], covariance[row], slope[..., row, :])
            for row in (0, 1)
        )
        found[f"u_{name}"] = np.sqrt(variance)
    found["u_principal_angle_deg"] = np.minimum(found["u_principal_angle_deg"], _ANY_DIRECTION_DEG)
    return found
