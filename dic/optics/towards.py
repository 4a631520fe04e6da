"""Motion towards the camera: what it falsifies, taken off where it is known and bounded where it is not."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from math import sqrt
from typing import Any

import numpy as np
from numpy.typing import NDArray

from dic.gauges import NamedHistory
from dic.optics.patch import Apparent
from dic.strain import GaugeHistory
from dic.testfile import Camera, Specimen

Floats = NDArray[np.float64]

PATCH_LOST = "the still patch was lost"
_STRAINS = ("axial", "transverse", "extensometer")


def false_strain(towards_mm: float, per_mm: float) -> float:
    """Return the false strain of a coupon that comes so much nearer, the same in both directions.

    For a lens at distance Z that is Δz/Z: 1250 µm/m per mm at 800 mm (Sutton et al. 2008,
    doi 10.1016/j.optlaseng.2008.05.005 [from memory]).
    """
    return towards_mm * per_mm


def bound(camera: Camera) -> float | None:
    """Return the standard uncertainty of the false strain; 0 where a patch shows it, None where unknown.

    `camera.out_of_plane` is the half width of a rectangular distribution (JCGM 100:2008, 4.3.7).
    """
    if camera.still_patch is not None:
        return 0.0
    per_mm = camera.false_strain_per_mm
    if camera.out_of_plane is None or per_mm is None:
        return None
    return false_strain(camera.out_of_plane, per_mm) / sqrt(3.0)


def receding(camera: Camera, specimen: Specimen) -> float:
    """Return the false strain per transverse strain, as the coupon's face recedes while it thins.

    The face of a flat coupon lies half its thickness before the middle plane; with a thickness strain like
    the transverse one, as in an isotropic material, it recedes by −εt·t/2.  Zero where stand-off or
    thickness is not known, for a telecentric lens, and where it is switched off.
    """
    if camera.thinning == "off" or camera.telecentric is not False:
        return 0.0
    if camera.stand_off is None or specimen.thickness is None:
        return 0.0
    return specimen.thickness / 2 / camera.stand_off


def corrected(
    history: GaugeHistory, seen: Sequence[Apparent] | None, per_transverse: float
) -> tuple[GaugeHistory, Floats, Floats]:
    """Take the patch' apparent strain and the coupon's own receding off the gauge.

    Parameters
    ----------
    history
        As the gauge reads, n frames.
    seen
        The patch in every frame; None where there is none.
    per_transverse
        From `receding`.

    Returns
    -------
    history, apparent, u_apparent
        The history corrected, and what every length in the picture was too long by, with its standard
        uncertainty, shape (n,).
    """
    count = len(history)
    apparent, u = np.zeros(count), np.zeros(count)
    if seen is not None:
        apparent, u = np.array(seen, float).T
    transverse = (1.0 + history.transverse) / (1.0 + apparent) - 1.0
    # A frame without transverse strain is not corrected for a part in 10⁵ of it.
    apparent = (1.0 + apparent) / (1.0 - per_transverse * np.nan_to_num(transverse)) - 1.0
    changed: dict[str, Any] = {}
    for name in _STRAINS:
        changed[name] = without(getattr(history, name), apparent)
        changed[f"u_{name}"] = np.hypot(getattr(history, f"u_{name}"), u)
    lost = np.isnan(apparent)
    status = tuple(
        PATCH_LOST if gone and said == "ok" else said
        for gone, said in zip(lost.tolist(), history.status, strict=True)
    )
    return replace(history, status=status, **changed), apparent, u


def corrected_gauges(gauges: list[NamedHistory], apparent: Floats, u: Floats) -> list[NamedHistory]:
    """Take the same off the named gauges; an angle is not changed by it."""
    return [
        one
        if one.gauge.is_angle
        else replace(
            one,
            strain=without(one.strain, apparent),
            u_strain=np.hypot(one.u_strain, u),
            parts=without(one.parts, apparent[:, None]),
            u_parts=np.hypot(one.u_parts, u[:, None]),
        )
        for one in gauges
    ]


def without(strain: Floats, apparent: Floats) -> Floats:
    """Return an engineering strain without the growth that all lengths share."""
    return (1.0 + strain) / (1.0 + apparent) - 1.0
