"""Hooke's law of an isotropic solid: the other constants, and stress from strain and back."""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

Floats = NDArray[np.float64]


def _check(poissons_ratio: float, *, below: float = np.inf) -> None:
    if not -1 < poissons_ratio < below:
        raise ValueError(f"no isotropic solid of that kind has a Poisson's ratio of {poissons_ratio:g}")


def shear_modulus(youngs_modulus: float, poissons_ratio: float) -> float:
    """Return G = E / 2(1 + ν), in the unit of E.

    Raises
    ------
    ValueError
        If ν ≤ -1.
    """
    _check(poissons_ratio)
    return youngs_modulus / (2 * (1 + poissons_ratio))


def bulk_modulus(youngs_modulus: float, poissons_ratio: float) -> float:
    """Return K = E / 3(1 - 2ν), in the unit of E.

    Raises
    ------
    ValueError
        Unless -1 < ν < 0.5.
    """
    _check(poissons_ratio, below=0.5)
    return youngs_modulus / (3 * (1 - 2 * poissons_ratio))


def lame_constant(youngs_modulus: float, poissons_ratio: float) -> float:
    """Return Lamé's first constant λ = Eν / ((1 + ν)(1 - 2ν)), in the unit of E.

    Raises
    ------
    ValueError
        Unless -1 < ν < 0.5.
    """
    _check(poissons_ratio, below=0.5)
    return youngs_modulus * poissons_ratio / ((1 + poissons_ratio) * (1 - 2 * poissons_ratio))


def principal_strains(youngs_modulus: float, poissons_ratio: float, stress: ArrayLike) -> Floats:
    """Return the principal strains of principal stresses, ε₁ = (σ₁ - ν(σ₂ + σ₃))/E and cyclic.

    Parameters
    ----------
    youngs_modulus
        E, in the unit of the stresses.
    poissons_ratio
        ν.
    stress
        Principal stresses, shape (..., 3).

    Returns
    -------
    Floats
        Strains, shape (..., 3), in the same order.

    Raises
    ------
    ValueError
        If ν ≤ -1.
    """
    _check(poissons_ratio)
    stress = np.asarray(stress, dtype=np.float64)
    others = stress.sum(axis=-1, keepdims=True) - stress
    return (stress - poissons_ratio * others) / youngs_modulus


def plane_stress(
    youngs_modulus: float, poissons_ratio: float, strain_x: Any, strain_y: Any, shear_angle: Any
) -> tuple[Floats, Floats, Floats]:
    """Return the stresses in a thin sheet from the strains in its plane.

    Parameters
    ----------
    youngs_modulus, poissons_ratio
        E (the stresses have its unit) and ν.
    strain_x, strain_y, shear_angle
        Engineering strains and engineering shear angle, any one shape.

    Returns
    -------
    tuple
        σx, σy and τxy, of that shape.

    Raises
    ------
    ValueError
        Unless -1 < ν < 0.5.
    """
    _check(poissons_ratio, below=0.5)
    x, y = np.asarray(strain_x, dtype=np.float64), np.asarray(strain_y, dtype=np.float64)
    stiffness = youngs_modulus / (1 - poissons_ratio**2)
    shear = shear_modulus(youngs_modulus, poissons_ratio) * np.asarray(shear_angle, dtype=np.float64)
    return stiffness * (x + poissons_ratio * y), stiffness * (y + poissons_ratio * x), shear


def thickness_strain(
    youngs_modulus: float, poissons_ratio: float, stress_x: ArrayLike, stress_y: ArrayLike
) -> Floats:
    """Return the strain through a thin sheet's thickness, εz = -ν(σx + σy)/E.

    Raises
    ------
    ValueError
        If ν ≤ -1.
    """
    _check(poissons_ratio)
    total = np.asarray(stress_x, dtype=np.float64) + np.asarray(stress_y, dtype=np.float64)
    return -poissons_ratio * total / youngs_modulus
