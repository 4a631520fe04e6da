"""Materials in tension: nominal stress, strains and what a perfect test would find.

Stress is nominal (force over original section), MPa; strain is engineering strain.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Protocol

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.optimize import brentq

Floats = NDArray[np.float64]


class Material(Protocol):
    """What a virtual test needs to know of a material."""

    @property
    def youngs_modulus(self) -> float:
        """Slope of the curve at zero, MPa."""
        ...

    @property
    def poissons_ratio(self) -> float:
        """Contraction per axial strain at zero."""
        ...

    def stress(self, strain: ArrayLike) -> Floats:
        """Return the nominal stress at an axial strain while loading, MPa."""
        ...

    def strain(self, stress: ArrayLike) -> Floats:
        """Return the axial strain at a nominal stress while loading."""
        ...

    def transverse(self, strain: ArrayLike) -> Floats:
        """Return the transverse strain at an axial strain while loading."""
        ...

    def unloaded(self, strain: float) -> tuple[float, float]:
        """Return the axial and transverse strain left when the load at `strain` has gone."""
        ...


@dataclass(frozen=True)
class Elastic:
    """Hooke's law: σ = E·ε, ε_t = −ν·ε."""

    youngs_modulus: float
    poissons_ratio: float

    def stress(self, strain: ArrayLike) -> Floats:
        """Return the nominal stress, MPa."""
        return self.youngs_modulus * np.asarray(strain, dtype=float)

    def strain(self, stress: ArrayLike) -> Floats:
        """Return the axial strain."""
        return np.asarray(stress, dtype=float) / self.youngs_modulus

    def transverse(self, strain: ArrayLike) -> Floats:
        """Return the transverse strain."""
        return -self.poissons_ratio * np.asarray(strain, dtype=float)

    def unloaded(self, strain: float) -> tuple[float, float]:
        """Return zero strains: nothing is left."""
        return 0.0, 0.0


@dataclass(frozen=True)
class RambergOsgood:
    """ε = σ/E + 0.002·(σ/σ0.2)ⁿ in nominal terms; the 0.2 % proof stress is σ0.2 exactly.

    Across, the elastic part contracts by ν and the plastic part keeps its volume: the transverse
    stretch is (1 − ν·σ/E)·(1 + ε_p)^(−1/2) with the plastic strain ε_p = ε − σ/E.

    Attributes
    ----------
    youngs_modulus, proof_stress
        E and σ0.2, MPa.
    poissons_ratio
        Elastic ν.
    exponent
        n, at least 1.

    Notes
    -----
    Ramberg & Osgood, NACA Technical Note 902 (1943), with the plastic term written by the 0.2 %
    proof stress.
    """

    youngs_modulus: float
    poissons_ratio: float
    proof_stress: float
    exponent: float

    def strain(self, stress: ArrayLike) -> Floats:
        """Return the axial strain."""
        stress = np.asarray(stress, dtype=float)
        return stress / self.youngs_modulus + self._plastic(stress)

    def _plastic(self, stress: Floats) -> Floats:
        return 0.002 * np.sign(stress) * np.abs(stress / self.proof_stress) ** self.exponent

    def stress(self, strain: ArrayLike) -> Floats:
        """Return the nominal stress, MPa, to rounding."""
        strain = np.asarray(strain, dtype=float)
        size = np.abs(strain)
        # Each term alone bounds the stress from above, and from above Newton's steps on this convex
        # curve never overshoot.
        stress = np.minimum(
            self.youngs_modulus * size, self.proof_stress * (size / 0.002) ** (1 / self.exponent)
        )
        for _ in range(100):
            slope = 1 / self.youngs_modulus + 0.002 * self.exponent / self.proof_stress * (
                stress / self.proof_stress
            ) ** (self.exponent - 1)
            step = (self.strain(stress) - size) / slope
            stress = stress - step
            if np.all(np.abs(step) <= 1e-13 * self.proof_stress):
                break
        return np.sign(strain) * stress

    def transverse(self, strain: ArrayLike) -> Floats:
        """Return the transverse strain."""
        strain = np.asarray(strain, dtype=float)
        elastic = self.stress(strain) / self.youngs_modulus
        return (1 - self.poissons_ratio * elastic) / np.sqrt(1 + strain - elastic) - 1

    def unloaded(self, strain: float) -> tuple[float, float]:
        """Return the plastic strains: the elastic part springs back along E."""
        plastic = strain - float(self.stress(strain)) / self.youngs_modulus
        return plastic, float(1 / np.sqrt(1 + plastic) - 1)


@dataclass(frozen=True)
class YieldPoint:
    """Mild steel: elastic up to an upper yield point, a drop, a level at the lower one, then hardening.

    From the level's end on, σ = ReL + (Rs − ReL)·(1 − exp(−Δε/h)).  Across, the elastic part contracts by
    ν and the plastic part keeps its volume, as in `RambergOsgood`.

    Attributes
    ----------
    youngs_modulus, upper_yield, lower_yield, saturation
        E, ReH, ReL and Rs, to which hardening tends, MPa; ReL < ReH < Rs.
    poissons_ratio
        Elastic ν.
    drop, level, hardening
        Strains over which the stress drops and stays level, and h.

    Notes
    -----
    One coupon-wide strain; the bands that travel along a real coupon are left out.
    """

    youngs_modulus: float
    poissons_ratio: float
    upper_yield: float
    lower_yield: float
    saturation: float
    drop: float = 0.001
    level: float = 0.015
    hardening: float = 0.04

    def _corners(self) -> tuple[float, float, float]:
        upper = self.upper_yield / self.youngs_modulus
        return upper, upper + self.drop, upper + self.drop + self.level

    def stress(self, strain: ArrayLike) -> Floats:
        """Return the nominal stress, MPa."""
        strain = np.asarray(strain, dtype=float)
        upper, lower, end = self._corners()
        up_to_level = np.interp(
            strain, [-upper, upper, lower], [-self.upper_yield, self.upper_yield, self.lower_yield]
        )
        beyond = np.clip(strain - end, 0, None)
        return up_to_level - (self.saturation - self.lower_yield) * np.expm1(-beyond / self.hardening)

    def strain(self, stress: ArrayLike) -> Floats:
        """Return the strain at which a stress is first reached."""
        stress = np.asarray(stress, dtype=float)
        with np.errstate(invalid="ignore", divide="ignore"):
            share = (stress - self.lower_yield) / (self.saturation - self.lower_yield)
            beyond = self._corners()[2] - self.hardening * np.log1p(-share)
        return np.where(stress <= self.upper_yield, stress / self.youngs_modulus, beyond)

    def transverse(self, strain: ArrayLike) -> Floats:
        """Return the transverse strain."""
        strain = np.asarray(strain, dtype=float)
        elastic = self.stress(strain) / self.youngs_modulus
        return (1 - self.poissons_ratio * elastic) / np.sqrt(1 + strain - elastic) - 1

    def unloaded(self, strain: float) -> tuple[float, float]:
        """Return the plastic strains: the elastic part springs back along E."""
        plastic = strain - float(self.stress(strain)) / self.youngs_modulus
        return plastic, float(1 / np.sqrt(1 + plastic) - 1)


@dataclass(frozen=True)
class NeoHookean:
    """Incompressible neo-Hookean rubber: σ = μ·(λ − λ⁻²), λ_t = λ^(−1/2); E = 3μ and ν = 1/2 at zero.

    Attributes
    ----------
    shear_modulus
        μ, MPa.

    Notes
    -----
    Treloar, *The Physics of Rubber Elasticity*; Rivlin, Phil. Trans. R. Soc. A 240 (1948) 459-490,
    doi 10.1098/rsta.1948.0002.
    """

    shear_modulus: float

    @property
    def youngs_modulus(self) -> float:
        """Initial slope 3μ, MPa."""
        return 3 * self.shear_modulus

    @property
    def poissons_ratio(self) -> float:
        """Initial contraction."""
        return 0.5

    def stress(self, strain: ArrayLike) -> Floats:
        """Return the nominal stress, MPa."""
        stretch = 1 + np.asarray(strain, dtype=float)
        return self.shear_modulus * (stretch - stretch**-2)

    def strain(self, stress: ArrayLike) -> Floats:
        """Return the axial strain, to rounding."""
        ratio = np.asarray(stress, dtype=float) / self.shear_modulus
        # λ³ − r·λ² − 1 has one positive root and is convex from a bound above it on.
        stretch = 1 + np.maximum(ratio, 0.0)
        for _ in range(100):
            step = (stretch**3 - ratio * stretch**2 - 1) / (3 * stretch**2 - 2 * ratio * stretch)
            stretch = stretch - step
            if np.all(np.abs(step) <= 1e-15 * stretch):
                break
        return stretch - 1

    def transverse(self, strain: ArrayLike) -> Floats:
        """Return the transverse strain."""
        return (1 + np.asarray(strain, dtype=float)) ** -0.5 - 1

    def unloaded(self, strain: float) -> tuple[float, float]:
        """Return zero strains: nothing is left."""
        return 0.0, 0.0


def proof_stress(material: Material, limit: float, offset: float = 0.002) -> float:
    """Return where the line of slope E through an offset meets the curve, MPa.

    Parameters
    ----------
    material
        The material; its curve must not be steeper than its beginning.
    limit
        Largest axial strain that is reached.
    offset
        Strain at which the line starts.

    Returns
    -------
    float
        Proof stress to better than 1e-9 of itself; NaN where the line does not meet the curve
        before the limit.
    """

    def above(strain: float) -> float:
        return float(material.stress(strain)) - material.youngs_modulus * (strain - offset)

    if limit <= offset or above(limit) > 0:
        return float("nan")
    strain = brentq(above, offset, limit, xtol=1e-16, rtol=1e-14)
    return float(material.stress(strain))
