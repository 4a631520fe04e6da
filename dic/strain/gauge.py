"""The virtual gauges: mean strains of a region and the extensometer between its ends.

Every reading is a weighted sum of subset displacements; the same weights, carried down to the
pixels, give its standard uncertainty with the overlap of subsets accounted for.
"""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray
from scipy import ndimage

from dic.correlation.flags import MEANING, Flag
from dic.correlation.grid import Grid
from dic.correlation.matching import Match
from dic.correlation.moments import spread_weights
from dic.correlation.reference import Reference
from dic.correlation.splines import blur
from dic.errors import PatternError
from dic.strain.periodic import PeriodicSums, SmoothField, periodic_error, periodic_sums
from dic.strain.tensors import engineering

Floats = NDArray[np.float64]

#: Subsets below which no mean strain is given: a plane has three unknowns per component.
LEAST_SUBSETS = 6
#: Rounds in which the weights are evened; more change a gauge's scatter by less than 0.1 %.
EVENING_STEPS = 40
#: Bounds of these weights, whose usual value is one.
WEIGHTS = (0.01, 100.0)


@dataclass(frozen=True)
class Region:
    """A rectangle in coupon axes on the reference picture.

    Attributes
    ----------
    centre
        x and y, px.
    length, width
        Along and across the pull, px.
    axial, transverse
        Unit vectors (x, y) along and across.
    """

    centre: Floats
    length: float
    width: float
    axial: Floats
    transverse: Floats

    @classmethod
    def around(cls, mask: NDArray[np.bool_], axial: Floats, transverse: Floats) -> Region:
        """Return the smallest rectangle in coupon axes that holds all of a mask, shape (rows, columns)."""
        y, x = np.nonzero(mask)
        points = np.stack([x, y], axis=1).astype(float)
        along, across = points @ axial, points @ transverse
        middle = (along.min() + along.max()) / 2, (across.min() + across.max()) / 2
        centre = middle[0] * axial + middle[1] * transverse
        return cls(centre, float(np.ptp(along)) + 1, float(np.ptp(across)) + 1, axial, transverse)

    def coordinates(self, x: NDArray[np.generic], y: NDArray[np.generic]) -> tuple[Floats, Floats]:
        """Return the coordinates along and across, from the centre, px."""
        dx, dy = x - self.centre[0], y - self.centre[1]
        return (
            dx * self.axial[0] + dy * self.axial[1],
            dx * self.transverse[0] + dy * self.transverse[1],
        )

    def holds(self, x: NDArray[np.generic], y: NDArray[np.generic]) -> NDArray[np.bool_]:
        """Tell which points lie in the rectangle."""
        along, across = self.coordinates(x, y)
        return (abs(along) <= self.length / 2) & (abs(across) <= self.width / 2)

    def corners(self) -> Floats:
        """Return the four corners in order, shape (4, 2), columns x and y."""
        along, across = self.axial * self.length / 2, self.transverse * self.width / 2
        c = self.centre
        return np.array([c - along - across, c - along + across, c + along + across, c + along - across])


@dataclass(frozen=True)
class Reading:
    """What the gauges read in one frame; see `dic.strain.history.GaugeHistory` for the terms.

    `response` says by how much each reading is false per px of periodic error, and `sums` what the
    frame adds to the determination of that error (`dic.strain.periodic`).
    """

    axial: float
    transverse: float
    shear: float
    extensometer: float
    bending: float
    u_axial: float
    u_transverse: float
    u_shear: float
    u_extensometer: float
    shift_px: tuple[float, float]
    valid_fraction: float
    status: str
    response: dict[str, Floats] = field(default_factory=dict)
    sums: PeriodicSums = field(default_factory=PeriodicSums)


@dataclass(frozen=True)
class _Weights:
    """How the m valid subsets' motions enter the readings; `Match.affine` has six numbers for each."""

    motion: Floats  # to the affine motion of the whole gauge, shape (6, m, 6)
    twist: Floats  # to the product term along·across of u and v, shape (m,)
    ends: tuple[Floats, Floats] | None  # means of the two end bands; None where one is lost
    on: dict[str, Floats]  # to each reading, for small strains, shape (m, 6)
    smooth: SmoothField
    gains: dict[str, float]  # standard deviation per grey level of noise


@dataclass
class GaugeReader:
    """Reads the gauges frame by frame.

    Weights depend on which subsets are valid, which rarely changes; they are kept until it does.

    Parameters
    ----------
    reference, grid
        The prepared reference, and the grid that its subsets lie on.
    region
        Where strain is averaged.
    length
        Distance between the extensometer's bands, px; None for the whole region.
    places
        Straight coordinates of the subsets, px, shape (n, 2), where the lens' distortion is known.
    """

    reference: Reference
    grid: Grid
    region: Region
    length: float | None = None
    places: Floats | None = None
    _kept: tuple[bytes, _Weights] | None = field(default=None, repr=False)

    def __post_init__(self) -> None:
        self._member = self.region.holds(self.reference.x, self.reference.y)
        self._places = self.reference.places if self.places is None else self.places
        self._along, self._across = self.region.coordinates(*self._places.T)
        if self._member.sum() < LEAST_SUBSETS:
            raise PatternError(
                f"the gauge region holds only {self._member.sum()} subsets",
                where="gauge.region",
                remedy="make it larger, or the subsets or their step smaller",
            )
        span = float(np.ptp(self._along[self._member]))
        if self.length is not None and self.length > span:
            raise PatternError(
                f"a gauge length of {self.length:.0f} px does not fit: the subsets span {span:.0f} px",
                where="gauge.length",
                remedy="shorten it or enlarge gauge.region",
            )

    @property
    def extensometer_px(self) -> float:
        """Gauge length of the extensometer, px."""
        return 2 * self._half_length()

    def read(self, match: Match) -> Reading:
        """Return the readings of one frame; NaN and the reason where too little is left."""
        valid = self._member & match.converged
        share = float(valid.sum() / self._member.sum())
        if valid.sum() < LEAST_SUBSETS:
            return _lost(_why_lost(match, valid), share)
        weights = self._weights(valid)
        affine = match.affine[valid]
        moved = affine[:, [0, 3]].T
        whole = np.einsum("pmk,mk->p", weights.motion, affine).reshape(2, 3)
        mean, gradient = whole[:, 0], whole[:, 1:]
        axial, transverse, shear = engineering(gradient, self.region.axial, self.region.transverse)
        noise = match.noise_against(self.reference.frames)
        matched = match.as_matched[valid]
        false = periodic_error(matched, self.reference.subset)
        return Reading(
            axial=float(axial),
            transverse=float(transverse),
            shear=float(shear),
            extensometer=self._extensometer(moved, weights),
            bending=float(self.region.axial @ moved @ weights.twist * self.region.width / 2),
            u_axial=weights.gains["axial"] * noise,
            u_transverse=weights.gains["transverse"] * noise,
            u_shear=weights.gains["shear"] * noise,
            u_extensometer=weights.gains["extensometer"] * noise,
            shift_px=(float(mean @ self.region.axial), float(mean @ self.region.transverse)),
            valid_fraction=share,
            status="ok" if weights.ends is not None else "no subsets left at an end of the extensometer",
            response={name: (false * on).sum(axis=(1, 2)) for name, on in weights.on.items()},
            sums=periodic_sums(weights.smooth, matched, false, match.sigma_u[valid], match.sigma_v[valid]),
        )

    def _extensometer(self, moved: Floats, weights: _Weights) -> float:
        """Return ΔL/L₀ between the ends, however the gauge has turned; NaN where an end is lost."""
        if weights.ends is None:
            return float("nan")
        first, last = (moved @ end for end in weights.ends)
        length = 2 * self._half_length()
        return float(np.linalg.norm(length * self.region.axial + last - first) / length - 1.0)

    def _weights(self, valid: NDArray[np.bool_]) -> _Weights:
        key = valid.tobytes()
        if self._kept is None or self._kept[0] != key:
            self._kept = key, self._make_weights(valid)
        return self._kept[1]

    def _make_weights(self, valid: NDArray[np.bool_]) -> _Weights:
        x, y = (self._places[valid] - self.region.centre).T
        along, across, depth = self._along[valid], self._across[valid], self.reference.subset
        information = self.reference.estimator.information()[valid]
        motion = pooled(x, y, information * even_weights(self.grid, valid)[:, None, None])
        twist = np.linalg.pinv(np.column_stack([np.ones(len(x)), along, across, along * across]))[3]
        half = self._half_length()
        first, last = _end(along + half, across, depth), _end(along - half, across, depth)
        ends = (first, last) if first is not None and last is not None else None
        a, t = self.region.axial, self.region.transverse

        def moving(direction: Floats, along: Floats) -> Floats:
            """Weights of how much farther along one direction the gauge moves per length along another."""
            return np.einsum("p,pmk->mk", np.outer(direction, np.append(0.0, along)).ravel(), motion)

        on = {"axial": moving(a, a), "transverse": moving(t, t), "shear": moving(a, t) + moving(t, a)}
        if ends is not None:
            on["extensometer"] = np.zeros((len(x), 6))
            on["extensometer"][:, [0, 3]] = np.outer((ends[1] - ends[0]) / (2 * half), a)
        gains = {"extensometer": float("nan")}
        gains |= {name: noise_gain(self.reference, valid, weights) for name, weights in on.items()}
        return _Weights(motion, twist, ends, on, SmoothField(x, y), gains)

    def _half_length(self) -> float:
        """Return half the gauge length: as given, else what leaves a whole band at either end."""
        span = float(np.ptp(self._along[self._member]))
        return max(self.length if self.length is not None else span - self.reference.subset, 1.0) / 2


def noise_gain(reference: Reference, which: NDArray[np.bool_ | np.integer], on: Floats) -> float:
    """Return a reading's standard deviation for pixel noise of one grey level in one frame.

    Parameters
    ----------
    reference
        The prepared reference.
    which
        The m subsets that the reading uses, as numbers or as a mask.
    on
        Their weights on u, uₓ, u_y, v, vₓ, v_y, shape (m, 6).
    """
    kit = reference.estimator
    x, y, half = reference.x[which], reference.y[which], reference.half
    pixels = np.zeros(reference.shape)
    spread_weights(
        reference.f, reference.fx, reference.fy, reference.mask, reference.shape[1],
        kit.mean[which], kit.norm[which], kit.average[which], kit.along[which], kit.inverse[which],
        x, y, half, np.ascontiguousarray(on), pixels,
    )  # fmt: skip
    # Only what the subsets cover, and as much around it as smoothing reaches.
    reach = half + 1 + round(5 * reference.settings.smoothing)
    rows = slice(max(int(y.min()) - reach, 0), int(y.max()) + reach + 1)
    columns = slice(max(int(x.min()) - reach, 0), int(x.max()) + reach + 1)
    part = np.ascontiguousarray(pixels[rows, columns], np.float32)
    # Raw noise is smoothed before it meets these weights, so the weights are smoothed instead.
    return float(np.linalg.norm(blur(part, reference.settings.smoothing)))


def even_weights(grid: Grid, valid: NDArray[np.bool_]) -> Floats:
    """Return weights of the valid subsets with which all pixels count alike, shape (m,).

    Overlapping subsets use the pixels in the middle of a gauge many times and those at its ends, which
    have the longest lever, once.  Weights are raised where the coverage that they add up to is low, and
    lowered where it is high, until it is even (the multiplicative scheme of Richardson 1972,
    doi 10.1364/JOSA.62.000055).
    """
    across = max(round(grid.subset / grid.step), 1)
    box = np.ones(across)
    weights = np.zeros(grid.shape)
    weights[grid.inside] = valid
    weights = np.pad(weights, across // 2)  # the outermost subsets reach beyond their centres

    def summed(values: Floats) -> Floats:
        rows = ndimage.correlate1d(values, box, axis=1, mode="constant")
        return np.asarray(ndimage.correlate1d(rows, box, axis=0, mode="constant"))

    share = np.maximum(summed((summed(weights) > 0).astype(float)), 1.0)
    for _ in range(EVENING_STEPS):
        coverage = summed(weights)
        wanting = np.divide(1.0, coverage, out=np.zeros_like(coverage), where=coverage > 1e-12)
        # A subset that lies alone would grow without end, and one among many vanish.
        weights = np.where(weights > 0, np.clip(weights * summed(wanting) / share, *WEIGHTS), 0.0)
    inner = weights[across // 2 : across // 2 + grid.shape[0], across // 2 : across // 2 + grid.shape[1]]
    return np.asarray(inner[grid.inside][valid])


def pooled(x: Floats, y: Floats, information: Floats) -> Floats:
    """Return the weights with which subsets' motions join to the affine motion of the whole gauge.

    Least squares over displacements and gradients of all subsets, each with the weight that its
    texture gives it: with subsets side by side that is the fit of one motion to all the gauge's
    pixels, and no other use of them scatters less.  The motion has quadratic terms, which are left
    out of the result: a bent coupon's would else leak into the slopes wherever the weights are
    lopsided.

    Parameters
    ----------
    x, y
        Centres from the gauge's centre, shape (m,).
    information
        Inverse covariances of the subsets' affine parameters, shape (m, 6, 6).

    Returns
    -------
    ndarray
        Shape (6, m, 6): for u and then v the value at the centre, slope along x and along y.
    """
    one, none = np.ones_like(x), np.zeros_like(x)
    half = np.array(
        [
            [one, x, y, x**2, x * y, y**2],
            [none, one, none, 2 * x, y, none],
            [none, none, one, none, x, 2 * y],
        ]
    ).transpose(2, 0, 1)
    # u takes the first six columns, v the others.
    model = np.concatenate(
        [np.concatenate([half, 0 * half], axis=2), np.concatenate([0 * half, half], axis=2)], axis=1
    )
    weighted = np.einsum("mki,mkl->mil", model, information)
    normal = np.einsum("mil,mlj->ij", weighted, model)
    # Centred and scaled by their diagonal, the equations are well conditioned.
    scale = np.diag(normal).copy()
    scale = 1 / np.sqrt(np.where(scale > 0, scale, 1.0))
    # Subsets in a single line leave a curvature open, which then counts as none.
    inverse = np.linalg.pinv(normal * np.outer(scale, scale), rcond=1e-12) * np.outer(scale, scale)
    return np.einsum("ij,mjl->iml", inverse[[0, 1, 2, 6, 7, 8]], weighted)


def _end(along: Floats, across: Floats, depth: int) -> Floats | None:
    """Return the weights of the mean displacement at an end of the gauge, from a band one subset deep.

    A plane through the band, taken on the gauge's axis at the end itself, so that a band whose
    subsets lie lopsided does not turn shear into stretch.
    """
    band = np.flatnonzero(abs(along) <= depth / 2)
    if not len(band):
        return None
    weights = np.zeros(len(along))
    weights[band] = np.linalg.pinv(np.column_stack([np.ones(len(band)), along[band], across[band]]))[0]
    return weights


def _why_lost(match: Match, valid: NDArray[np.bool_]) -> str:
    for flag in (Flag.NO_PICTURE, Flag.REPEATED_PICTURE):
        if (match.flag == flag).all():
            return MEANING[flag]
    return "every subset lost" if not valid.any() else "too few subsets left"


def _lost(reason: str, share: float) -> Reading:
    nan = float("nan")
    return Reading(nan, nan, nan, nan, nan, nan, nan, nan, nan, (nan, nan), share, reason)
