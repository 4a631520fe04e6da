"""What lies behind strain that is not even over the coupon: patterns of the causes, and which of them fit.

Let a run along the coupon and t across it, both from the middle of the gauge, ℓ and h half its length and
width, ε the mean axial strain and ν Poisson's ratio.  All figures below are rates, per unit of ε.

*Bent coupon.*  Where the line of pull passes a distance e(a) beside the coupon's middle, a moment P·e
bends it; plane sections stay plane (Timoshenko & Goodier, *Theory of Elasticity*, bending of beams):

    axial strain κ(a)·t,   transverse strain −ν·κ·t,   deflection w'' = −κ,

the edges' strain differs from the mean by κ·h, for a rectangular section 6·e/(2h).  The strain across the
axis has the opposite sign, and the middle line bends: both are seen, and both belong to the coupon alone.

- *offset*: the line of pull runs beside the middle on the same side all along, e constant: κ = κ₀, the
  axis bends to a C.  Grips that are at an angle to each other do the same (ASTM E1012 calls the two
  concentric and angular misalignment).
- *opposed*: the pull enters on opposite sides at both ends, e = e₁·a/ℓ: κ = κ₁·a/ℓ, bending changes sign
  along the length and the axis bends to an S.  The coupon still moves along its own axis.
- *tilt*: the coupon stands askew, so that it moves at an angle φ to its axis; the line of pull crosses
  the axis, e = φ·a, or rigid grips shift its ends sideways by φ per extension: the same S, together with
  *oblique* motion.  How large the S is for a given φ depends on how freely the grips swing, so φ and the S
  are left independent.

*Tilted camera.*  A plane seen at a slant is imaged as x = X + X·(k·X), k the change of magnification per
length.  A motion U = T + G·X then appears, to first order in k, as

    u(x) = T + T·(k·x) + x·(k·T) + G·x + x·(k·G·x):

homogeneous terms, and one that is not, x·(g·x) with g = Gᵀk, which grows with the coupon's rotation and
strain.  Its strains, with g = (g_a, g_t):

    axial 2·g_a·a + g_t·t,   transverse g_a·a + 2·g_t·t,   no a² in the deflection:

across the coupon the transverse strain changes twice as much as the axial one and with the same sign, and
the axis stays straight.  A coupon that turns about its long axis by θ, g_t = θ'/Z, looks the same.

*Taper.*  A section that changes along the length: axial strain s·a/ℓ, transverse −ν·s·a/ℓ.
"""

from __future__ import annotations

from dataclasses import dataclass
from itertools import combinations
from math import isfinite, log

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]

#: What the patterns are held against, in this order: strain at the edge from bending at the gauge's middle,
#: the same from the axis' curvature, transverse strain at the edge; bending at the gauge's end less that at
#: its middle, the same from the axis; axial and transverse strain at the end less those at the middle;
#: angle of the motion to the axis, rad.
OBSERVED = ("bending", "curved", "across", "change", "curved_change", "along", "along_across", "motion")

#: Beam formulas hold to this share of the largest figure: grips are near, and ν is that of the whole gauge.
MODEL_SHARE = 0.1
#: A difference in the Bayesian information criterion from which one explanation counts as clearly better
#: (Kass & Raftery 1995, doi 10.1080/01621459.1995.10476572: 6 is strong evidence).
CLEAR = 6.0
#: More causes at once could make up any figures.
MOST_CAUSES = 3


@dataclass(frozen=True)
class Causes:
    """Which causes the patterns point to.

    Attributes
    ----------
    found
        Causes that every good explanation contains.
    possible
        Causes that some good explanation contains; with nothing found they cannot be told apart.
    straight
        Whether no cause at all is among the good explanations.
    misfit
        χ² of the best explanation per figure that is left over; far above 1 means that none fits.
    """

    found: tuple[str, ...] = ()
    possible: tuple[str, ...] = ()
    straight: bool = False
    misfit: float = float("nan")


def patterns(ratio: float) -> dict[str, Floats]:
    """Return each cause's pattern in the figures of `OBSERVED`, one column per free amount."""

    def columns(*filled: dict[str, float]) -> Floats:
        return np.array([[one.get(name, 0.0) for one in filled] for name in OBSERVED])

    return {
        "offset": columns({"bending": 1.0, "curved": 1.0, "across": -ratio}),
        "opposed": columns({"change": 1.0, "curved_change": 1.0}),
        "oblique": columns({"motion": 1.0}),
        "camera": columns({"bending": 1.0, "across": 2.0}, {"along": 2.0, "along_across": 1.0}),
        "taper": columns({"along": 1.0, "along_across": -ratio}),
    }


def explain(observed: Floats, covariance: Floats, ratio: float) -> Causes:
    """Choose among all combinations of causes by least squares and the Bayesian information criterion.

    Parameters
    ----------
    observed, covariance
        Figures in the order of `OBSERVED`, shapes (8,) and (8, 8); NaN where one is not known.
    ratio
        Poisson's ratio.

    Returns
    -------
    Causes
        Empty where too little is known.
    """
    known = np.isfinite(observed) & np.isfinite(np.diag(covariance))
    if known[:-1].sum() < len(OBSERVED) - 1 or not isfinite(ratio):
        return Causes()
    largest = np.abs(observed[:-1]).max()
    loose = covariance + np.diag([*[(MODEL_SHARE * largest) ** 2] * (len(OBSERVED) - 1), 0.0])
    whiten = np.linalg.inv(np.linalg.cholesky(loose[np.ix_(known, known)]))
    target, shapes = whiten @ observed[known], patterns(ratio)
    scores: dict[tuple[str, ...], tuple[float, float]] = {}
    for names in (one for count in range(MOST_CAUSES + 1) for one in combinations(shapes, count)):
        design = np.hstack([np.empty((int(known.sum()), 0)), *(shapes[name][known] for name in names)])
        design = whiten @ design[:, np.abs(design).any(axis=0)]
        fit = design @ np.linalg.lstsq(design, target, rcond=None)[0] if design.size else 0.0
        chi2 = float(((target - fit) ** 2).sum())
        left = len(target) - design.shape[1]
        scores[names] = chi2 + design.shape[1] * log(len(target)), chi2 / max(left, 1)
    best = min(scores, key=lambda names: scores[names][0])
    good = [names for names in scores if scores[names][0] - scores[best][0] < CLEAR]
    # One that only adds causes to a good explanation explains nothing more.
    good = [one for one in good if not any(set(other) < set(one) for other in good)]
    found = [name for name in shapes if all(name in names for names in good)]
    possible = [name for name in shapes if name not in found and any(name in names for names in good)]
    return Causes(_tilt_named(found), tuple(possible), () in good, scores[best][1])


def _tilt_named(found: list[str]) -> tuple[str, ...]:
    """Return the causes with the S and the oblique motion that make a tilt together called so."""
    parts = ("opposed", "oblique")
    if not set(parts) <= set(found):
        return tuple(found)
    return (*(name for name in found if name not in parts), "tilt")
