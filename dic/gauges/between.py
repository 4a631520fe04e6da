"""The strain of the distance between the coupon's edges."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from dic.gauges.silhouette import Silhouette, Widths, pattern_px

Floats = NDArray[np.float64]

#: Share of an edge's stations that has to be seen.
LEAST_SEEN = 0.5


class EdgeStrain(NamedTuple):
    """Mean change of width per width in n frames, NaN where too little of the edges is seen.

    Shape (n,) each: the strain, its standard uncertainty, the part of that which comes from the pattern on
    the edges, and how many stations are lost.
    """

    strain: Floats
    u: Floats
    pattern: Floats
    lost: NDArray[np.intp]


@dataclass(frozen=True)
class Between:
    """The stretch of the coupon in which the distance between its edges is read.

    Attributes
    ----------
    silhouette
        The edges.
    first, last
        From and to, along the axis from the gauge region's middle, px.
    """

    silhouette: Silhouette
    first: float
    last: float

    @property
    def stations(self) -> NDArray[np.intp]:
        """Numbers of the stations at which the reference shows both edges clearly."""
        seen = np.isfinite(self.silhouette.reference.px)
        return np.flatnonzero(seen & self.silhouette.stations(self.first, self.last))

    def strain(self, widths: Sequence[Widths], noise_grey: Sequence[float]) -> EdgeStrain:
        """Return the strain in frames with these widths and so much grey noise."""
        here = self.stations
        first = self.silhouette.reference.px[here]
        measured = np.array([one.px[here] for one in widths])
        own = np.array([one.u_per_grey[here] for one in widths])
        seen = np.isfinite(measured)
        count = seen.sum(axis=1)
        enough = count >= max(LEAST_SEEN * len(here), 1)
        # Each station against itself: what the pattern does to the edge's place stays out of it.
        change = np.where(seen, measured - first, np.nan)
        noise = np.where(seen, own, np.nan) * np.array(noise_grey)[:, None]
        few = np.maximum(count, 1)
        strain = np.nansum(change / first, axis=1) / few
        grey = np.sqrt(np.nansum((noise / first) ** 2, axis=1)) / few
        along, width = self.silhouette.along[here], float(first.mean()) if here.size else np.nan
        pattern = np.array([pattern_px(along, *one) for one in zip(change, noise, strict=True)]) / width
        return EdgeStrain(
            np.where(enough, strain, np.nan),
            np.where(enough, np.hypot(grey, pattern), np.nan),
            np.where(enough, pattern, np.nan),
            len(here) - count,
        )
