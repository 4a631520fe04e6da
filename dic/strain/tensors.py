"""Strain measures from displacement gradients, turned into coupon axes.

A gradient has shape (..., 2, 2): [[∂u/∂x, ∂u/∂y], [∂v/∂x, ∂v/∂y]].
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]


def engineering(
    gradient: Floats, axial: Floats, transverse: Floats
) -> tuple[NDArray[np.float64], NDArray[np.float64], NDArray[np.float64]]:
    """Return what gauges glued along and across the coupon would read.

    Parameters
    ----------
    gradient
        Displacement gradient, shape (..., 2, 2).
    axial, transverse
        Unit vectors (x, y) of the coupon axes in the reference picture.

    Returns
    -------
    axial, transverse, shear
        Change of length per length of material lines along and across, and the change of the right
        angle between them (rad), shape (...).

    Notes
    -----
    Stretches of material lines, √(a·FᵀF·a) − 1, are free of rigid rotation whatever its size;
    ∂u/∂y alone is not.
    """
    deformation = gradient + np.eye(2)
    a, t = deformation @ axial, deformation @ transverse
    length_a, length_t = np.linalg.norm(a, axis=-1), np.linalg.norm(t, axis=-1)
    angle = np.arcsin(np.clip((a * t).sum(axis=-1) / (length_a * length_t), -1.0, 1.0))
    return length_a - 1.0, length_t - 1.0, angle
