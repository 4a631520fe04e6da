"""How the gauge's subsets move per unit of mean axial strain, over the frames of the elastic part."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass, field, replace
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray
from scipy import ndimage

from dic.correlation.grid import Grid
from dic.strain.gauge import Region
from dic.strain.maps import Window

Floats = NDArray[np.float64]
Bools = NDArray[np.bool_]

#: Stations along the gauge and points across it, at the most; fewer where subsets are few.
MOST_STATIONS, MOST_POINTS = 5, 7
#: Rows of subsets that a station needs.
LEAST_ROWS = 4
#: Rows and columns of subsets without which nothing is said about the shape of the motion.
LEAST_LENGTH, LEAST_WIDTH = 8, 3


class Moved(NamedTuple):
    """One frame's displacements, their standard uncertainties (px) and its axial strain map, (ny, nx)."""

    u: Floats
    v: Floats
    sigma_u: Floats
    sigma_v: Floats
    strain: Floats


@dataclass(frozen=True)
class Rates:
    """Motion per mean axial strain of the m subsets of the gauge that were measured in every frame.

    Attributes
    ----------
    region
        The gauge.
    columns, rows
        Places of the subsets' grid in the reference picture, px.
    member
        Which of its points these subsets are, shape (ny, nx).
    along, across
        Where they are in coupon axes, px from the gauge's centre, shape (m,).
    moved_along, moved_across
        Their motion per strain, px, shape (m,).
    u_along, u_across
        Its standard uncertainty, root mean square over the subsets, px.
    strain
        Local axial strain per mean axial strain, shape (ny, nx).
    overlap
        Correlation of subsets by their distance in rows and columns, from `Window.overlap`.
    step
        Pitch of the grid, px.
    """

    region: Region
    columns: Floats
    rows: Floats
    member: Bools
    along: Floats
    across: Floats
    moved_along: Floats
    moved_across: Floats
    u_along: float
    u_across: float
    strain: Floats
    overlap: Floats
    step: int

    @property
    def enough(self) -> bool:
        """Whether the subsets span length and width."""
        long, wide = _levels(self.along, self.step), _levels(self.across, self.step)
        return long >= LEAST_LENGTH and wide >= LEAST_WIDTH

    def fit(
        self, values: Floats, u: float, design: Floats, which: Bools | None = None
    ) -> tuple[Floats, Floats]:
        """Fit a linear model by least squares.

        Parameters
        ----------
        values, u
            One component of the motion, shape (m,), and its standard uncertainty.
        design
            Terms at the subsets, shape (m, p).
        which
            The subsets to use, shape (m,); None for all.

        Returns
        -------
        coefficients, covariance
            Shapes (p,) and (p, p); the subsets' shared noise is accounted for.
        """
        which = np.ones(len(values), bool) if which is None else which
        solving = np.linalg.pinv(design[which])
        place = self.member.copy()
        place[self.member] = which
        kernel = np.pad(
            self.overlap, ((len(self.overlap) - 1, 0), (len(self.overlap) - 1, 0)), mode="reflect"
        )
        shared = np.empty_like(solving)
        for k, weights in enumerate(solving):
            spread = np.zeros(place.shape)
            spread[place] = weights
            shared[k] = ndimage.convolve(spread, kernel, mode="constant")[place]
        return solving @ values[which], u**2 * (shared @ solving.T)


@dataclass(frozen=True)
class Stations:
    """Axial strain across the width at n stations along the gauge, per mean axial strain of the gauge.

    Attributes
    ----------
    along_px
        Middle of each station, from the gauge's centre, shape (n,).
    strain, u_strain
        Mean at each station, and its standard uncertainty; NaN where no two rows of subsets are.
    bending, u_bending
        (ε_edge − ε_mean)/ε_mean at the edge on the side of the transverse axis.
    across_px
        Points across the width, shape (k,).
    profile, u_profile
        Strain at these points, shape (n, k); NaN where too few subsets are.
    """

    along_px: Floats = field(default_factory=lambda: np.empty(0))
    strain: Floats = field(default_factory=lambda: np.empty(0))
    u_strain: Floats = field(default_factory=lambda: np.empty(0))
    bending: Floats = field(default_factory=lambda: np.empty(0))
    u_bending: Floats = field(default_factory=lambda: np.empty(0))
    across_px: Floats = field(default_factory=lambda: np.empty(0))
    profile: Floats = field(default_factory=lambda: np.empty((0, 0)))
    u_profile: Floats = field(default_factory=lambda: np.empty((0, 0)))

    def rows(self) -> list[dict[str, float]]:
        """Return the stations in plain types, bending in percent."""
        names = ("along_px", "strain_per_mean", "u_strain_per_mean", "bending_percent", "u_bending_percent")
        values = self.along_px, self.strain, self.u_strain, 100 * self.bending, 100 * self.u_bending
        return [dict(zip(names, map(float, one), strict=True)) for one in zip(*values, strict=True)]


def gather_rates(
    frames: Iterable[Moved], strain: Floats, grid: Grid, region: Region, window: Window
) -> Rates:
    """Join frames to the slope of each subset's motion against the mean axial strain.

    Parameters
    ----------
    frames
        The frames of the elastic part, taken one at a time.
    strain
        Mean axial strain of each, shape (n,), not all alike.
    grid
        The subsets.
    region
        The gauge.
    window
        Says how far subsets overlap.

    Returns
    -------
    Rates
        Least squares with intercept.
    """
    weights = (strain - strain.mean()) / ((strain - strain.mean()) ** 2).sum()
    sums, variances = np.zeros((3, *grid.shape)), np.zeros((2, *grid.shape))
    for weight, frame in zip(weights, frames, strict=True):
        sums += weight * np.stack([frame.u, frame.v, frame.strain])
        variances += weight**2 * np.square([frame.sigma_u, frame.sigma_v])
    places = np.meshgrid(grid.columns, grid.rows)
    along, across = region.coordinates(*places)
    member = region.holds(*places) & np.isfinite(sums[:2]).all(axis=0)
    moved = sums[:2, member]
    spread = variances[:, member].mean(axis=1) if member.any() else np.full(2, np.nan)
    # A window as wide as can be, so that every overlap is in it.
    wide = replace(window, window=99)
    return Rates(
        region=region,
        columns=grid.columns.astype(float),
        rows=grid.rows.astype(float),
        member=member,
        along=along[member],
        across=across[member],
        moved_along=region.axial @ moved,
        moved_across=region.transverse @ moved,
        u_along=float(np.sqrt(region.axial**2 @ spread)),
        u_across=float(np.sqrt(region.transverse**2 @ spread)),
        strain=sums[2],
        overlap=wide.overlap(),
        step=grid.step,
    )


def _levels(places: Floats, pitch: int) -> int:
    """Return how many steps of the grid some places span."""
    return int(np.ptp(places) / pitch + 1.001) if len(places) else 0


def read_stations(rates: Rates) -> Stations:
    """Read axial strain and bending at stations along the gauge, and strain across each."""
    length, width = np.ptp(rates.along), np.ptp(rates.across)
    count = int(np.clip(_levels(rates.along, rates.step) // LEAST_ROWS, 1, MOST_STATIONS))
    points = int(np.clip(_levels(rates.across, rates.step), 1, MOST_POINTS))
    middles = rates.along.min() + (np.arange(count) + 0.5) * length / count
    places = rates.across.min() + (np.arange(points) + 0.5) * width / points
    mean = np.full((2, count), np.nan)
    bending = np.full((2, count), np.nan)
    profile = np.full((2, count, points), np.nan)
    for k, middle in enumerate(middles):
        a, t = rates.along - middle, rates.across
        here = abs(a) <= length / (2 * count) * (1 + 1e-9)
        if _levels(a[here], rates.step) < 2:  # no length to measure a strain over
            continue
        design = np.column_stack([np.ones_like(a), a, t, a * t, t**2])
        value, covariance = rates.fit(rates.moved_along, rates.u_along, design, here)
        half = rates.region.width / 2
        mean[:, k] = value[1], np.sqrt(covariance[1, 1])
        bending[:, k] = half * value[3] / value[1], half * np.sqrt(covariance[3, 3]) / value[1]
        for j, place in enumerate(places):
            cell = here & (abs(t - place) <= width / (2 * points) * (1 + 1e-9))
            if _levels(a[cell], rates.step) < LEAST_ROWS - 1:
                continue
            value, covariance = rates.fit(rates.moved_along, rates.u_along, design[:, :2], cell)
            profile[:, k, j] = value[1], np.sqrt(covariance[1, 1])
    return Stations(
        along_px=middles,
        strain=mean[0],
        u_strain=mean[1],
        bending=bending[0],
        u_bending=bending[1],
        across_px=places,
        profile=profile[0],
        u_profile=profile[1],
    )


def mirrored(rates: Rates, *, across: bool) -> Floats:
    """Return half the difference of the strain map and its mirror image, shape (ny, nx).

    Parameters
    ----------
    rates
        Their strain map.
    across
        Mirrored across the coupon's axis (one side against the other), or along it (end against end).
    """
    region = rates.region
    x, y = np.meshgrid(rates.columns, rates.rows)
    along, sideways = region.coordinates(x, y)
    along, sideways = (along, -sideways) if across else (-along, sideways)
    there = [region.centre[k] + along * region.axial[k] + sideways * region.transverse[k] for k in (0, 1)]
    index = [
        (there[1] - rates.rows[0]) / rates.step,
        (there[0] - rates.columns[0]) / rates.step,
    ]
    image = ndimage.map_coordinates(rates.strain, index, order=1, mode="constant", cval=np.nan)
    return np.asarray((rates.strain - image) / 2)
