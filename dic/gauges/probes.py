"""One mechanism for all gauges on the pattern: a gauge is a set of weights over the subsets.

A probe knows which subsets it may use.  For those of them that are measured in a frame it gives the
weights with which their affine motion enters the strain; the weights carried down to the pixels give
the uncertainty (`dic.strain.gauge.noise_gain`).
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace
from functools import cached_property
from typing import Protocol

import numpy as np
from numpy.typing import NDArray

from dic.correlation.grid import Grid
from dic.correlation.reference import Reference
from dic.pattern import perpendicular
from dic.strain.gauge import even_weights, pooled
from dic.strain.tensors import engineering

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]

#: Subsets from which an area's strain is formed at the least.
LEAST_IN_AREA = 3


@dataclass(frozen=True)
class Weights:
    """How the affine motion of some subsets enters a strain.

    Attributes
    ----------
    numbers
        Which subsets, shape (m,).
    on
        Weights of u, uₓ, u_y, v, vₓ, v_y for small strains, shape (m, 6).
    strain
        The strain from those six numbers of each of these subsets, shape (m, 6), however large.
    """

    numbers: Ints
    on: Floats
    strain: Callable[[Floats], float]


class Probe(Protocol):
    """One strain that is read from the pattern."""

    @property
    def members(self) -> Ints:
        """Numbers of the subsets that it may use."""

    def weights(self, valid: Ints) -> Weights | None:
        """Return the weights of those members that are measured; None where too few are left."""


@dataclass(frozen=True)
class Subsets:
    """The subsets of a test, as the probes see them; `straight` as the places of `GaugeReader`."""

    reference: Reference
    grid: Grid
    straight: Floats | None = None

    @cached_property
    def places(self) -> Floats:
        """Centres x and y, px, shape (n, 2)."""
        return self.reference.places if self.straight is None else self.straight

    @cached_property
    def information(self) -> Floats:
        """How well each subset's affine parameters are determined, shape (n, 6, 6)."""
        return self.reference.estimator.information()

    @property
    def size(self) -> int:
        """Side of a subset, px."""
        return self.reference.subset

    def even(self, numbers: Ints) -> Floats:
        """Return weights with which all pixels of some subsets count alike, shape (m,)."""
        inside = np.zeros_like(self.grid.inside)
        row, column = np.nonzero(self.grid.inside)
        inside[row[numbers], column[numbers]] = True
        rows = slice(row[numbers].min(), row[numbers].max() + 1)
        columns = slice(column[numbers].min(), column[numbers].max() + 1)
        part = replace(
            self.grid,
            columns=self.grid.columns[columns],
            rows=self.grid.rows[rows],
            inside=inside[rows, columns],
        )
        return even_weights(part, np.ones(len(numbers), bool))

    def in_rectangle(self, centre: Floats, along: Floats, length: float, width: float) -> Ints:
        """Return the subsets whose centres lie in a rectangle `length` long along a unit vector."""
        away = self.places - centre
        across = perpendicular(along)
        inside = (np.abs(away @ along) <= length / 2) & (np.abs(away @ across) <= width / 2)
        return np.flatnonzero(inside & self.reference.usable)


@dataclass(frozen=True)
class Spanning:
    """The change of distance between two places: means of two bands, or two single subsets.

    Attributes
    ----------
    subsets
        All subsets.
    first, last
        The places, x and y, px.
    bands
        Numbers of the subsets around either.
    """

    subsets: Subsets
    first: Floats
    last: Floats
    bands: tuple[Ints, Ints]

    @property
    def members(self) -> Ints:
        """Numbers of the subsets that it may use."""
        return np.concatenate(self.bands)

    def weights(self, valid: Ints) -> Weights | None:
        """Return the weights of those members that are measured; None where a band is lost."""
        bands = [band[np.isin(band, valid)] for band in self.bands]
        if not all(len(band) for band in bands):
            return None
        places = self.subsets.places
        ends = [_at(places[band] - end) for band, end in zip(bands, (self.first, self.last), strict=True)]
        # Weights of value and slopes, alike for u and v.
        moving = np.concatenate([-ends[0], ends[1]])
        span = self.last - self.first
        length = float(np.linalg.norm(span))
        direction = span / length

        def strain(affine: Floats) -> float:
            moved = np.array([np.sum(moving * affine[:, :3]), np.sum(moving * affine[:, 3:])])
            return float(np.linalg.norm(span + moved) / length - 1.0)

        on = np.concatenate([moving * direction[0], moving * direction[1]], axis=1) / length
        return Weights(np.concatenate(bands), on, strain)


def _at(away: Floats) -> Floats:
    """Return the weights of value and slopes with which subsets give the displacement at a place.

    A plane through the subsets, so that a lopsided band does not turn shear into stretch; where they
    do not span one, their mean, carried to the place by their own slopes.

    Parameters
    ----------
    away
        The subsets' centres from the place, px, shape (m, 2).

    Returns
    -------
    ndarray
        Shape (m, 3).
    """
    count = len(away)
    plane = np.column_stack([np.ones(count), away])
    weights = np.zeros((count, 3))
    if count > 3 and np.linalg.matrix_rank(plane - [0, *away.mean(axis=0)]) == 3:
        weights[:, 0] = np.linalg.pinv(plane)[0]
    else:
        weights[:, 0] = 1 / count
        weights[:, 1:] = -away / count
    return weights


@dataclass(frozen=True)
class Stretching:
    """The strain of an area: the affine motion of all its pixels.

    Attributes
    ----------
    subsets
        All subsets.
    members
        Those in the area.
    axial, transverse
        Unit vectors x and y of the gauge.
    component
        ``axial``, ``transverse`` or ``shear``.
    """

    subsets: Subsets
    members: Ints
    axial: Floats
    transverse: Floats
    component: str = "axial"

    def weights(self, valid: Ints) -> Weights | None:
        """Return the weights of those members that are measured; None where too few are left."""
        numbers = self.members[np.isin(self.members, valid)]
        if len(numbers) < LEAST_IN_AREA:
            return None
        centre = self.subsets.places[numbers].mean(axis=0)
        x, y = (self.subsets.places[numbers] - centre).T
        even = self.subsets.even(numbers)[:, None, None]
        motion = pooled(x, y, self.subsets.information[numbers] * even)
        which = ("axial", "transverse", "shear").index(self.component)

        def strain(affine: Floats) -> float:
            whole = np.einsum("pmk,mk->p", motion, affine).reshape(2, 3)
            return float(engineering(whole[:, 1:], self.axial, self.transverse)[which])

        a, t = self.axial, self.transverse
        pairs = {"axial": [(a, a)], "transverse": [(t, t)], "shear": [(a, t), (t, a)]}[self.component]
        outer = sum(np.outer(one, np.append(0.0, other)) for one, other in pairs)
        return Weights(numbers, np.einsum("p,pmk->mk", np.ravel(outer), motion), strain)
