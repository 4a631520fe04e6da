"""The named gauges against time."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from math import sqrt

import numpy as np
from numpy.typing import NDArray

from dic.correlation.matching import Match
from dic.gauges.placing import Placed
from dic.gauges.probes import Subsets
from dic.gauges.reading import FrameReadings, NamedReader
from dic.gauges.silhouette import Silhouette, Widths, pattern_px
from dic.strain.history import GaugeHistory
from dic.strain.periodic import Periodic

Floats = NDArray[np.float64]

#: Why a gauge has no reading in a frame.
LOST = "the gauge's subsets were lost"
UNCLEAR = "the edges are out of view or not clear"
#: Share of an edge's stations that has to be seen.
LEAST_SEEN = 0.5


@dataclass(frozen=True)
class NamedHistory:
    """One named gauge against time, n frames.

    Attributes
    ----------
    gauge
        Where it sits.
    strain, u_strain
        Engineering strain ΔL/L₀ (an angle for ``component = "shear"``) and its standard uncertainty from
        grey noise, between the edges from the pattern on them too, shape (n,);
        the mean where the gauge has several stations.  NaN where lost.
    status
        ``"ok"``, or the reason why there is no reading.
    parts, u_parts
        Strain at each station, shape (n, p), p as `Placed.probes`; empty for a width between the edges.
    length_mm
        Length that the strain refers to, mm; NaN where the scale is unknown.
    """

    gauge: Placed
    strain: Floats
    u_strain: Floats
    status: tuple[str, ...]
    parts: Floats
    u_parts: Floats
    length_mm: float

    def columns(self) -> dict[str, Floats | list[str]]:
        """Return this gauge's columns of the history."""
        name = self.gauge.name
        found: dict[str, Floats | list[str]] = {name: self.strain, f"u_{name}": self.u_strain}
        for number, label in enumerate(self.gauge.labels):
            found[label] = self.parts[:, number]
            found[f"u_{label}"] = self.u_parts[:, number]
        found[f"status_{name}"] = list(self.status)
        return found


class NamedReadings:
    """Collects what the named gauges read, frame after frame.

    Parameters
    ----------
    subsets
        All subsets of the test.
    gauges
        As placed.
    silhouette
        The coupon's edges, where they are followed.
    """

    def __init__(self, subsets: Subsets, gauges: Sequence[Placed], silhouette: Silhouette | None) -> None:
        self._gauges, self._silhouette = list(gauges), silhouette
        self._frames_averaged = subsets.reference.frames
        self._reader = NamedReader(subsets, [gauge for gauge in gauges if gauge.probes])
        self._readings: list[FrameReadings] = []
        self._widths: list[Widths] = []
        self._noise: list[float] = []

    def read(self, match: Match, widths: Widths | None) -> None:
        """Take up one frame; `widths` between the edges, where they are followed."""
        self._readings.append(self._reader.read(match))
        self._noise.append(match.noise_grey * sqrt(1.0 + 1.0 / self._frames_averaged))
        if widths is not None:
            self._widths.append(widths)

    def histories(self, periodic: Periodic, scale_mm: float) -> list[NamedHistory]:
        """Put the frames' readings one below the other, corrected as the gauge region's are.

        Parameters
        ----------
        periodic
            The interpolation's periodic error, as determined from the gauge region.
        scale_mm
            mm per px.
        """
        strain, u = (np.array([getattr(one, key) for one in self._readings]) for key in ("strain", "u"))
        means = np.array([one.u_mean for one in self._readings])
        size, spread = periodic.correction(np.array([one.response for one in self._readings]))
        strain, u = strain - size, np.hypot(u, spread)
        histories, first, number = [], 0, 0
        for gauge in self._gauges:
            length_mm = gauge.length_px * scale_mm
            if gauge.along_px is not None:
                histories.append(self._between_edges(gauge, gauge.along_px, length_mm))
                continue
            here = slice(first, first + len(gauge.probes))
            first = here.stop
            parts, u_parts = strain[:, here], u[:, here]
            # The correction's uncertainty is common to all stations.
            u_mean = np.hypot(means[:, number], spread[:, here].mean(axis=1))
            number += 1
            lost = np.isnan(parts).sum(axis=1)
            status = tuple(_said(count, len(gauge.probes)) for count in lost.tolist())
            histories.append(
                NamedHistory(gauge, parts.mean(axis=1), u_mean, status, parts, u_parts, length_mm)
            )
        return histories

    def _between_edges(self, gauge: Placed, along_px: tuple[float, float], length_mm: float) -> NamedHistory:
        strain, u, _, lost = self._edge_strain(along_px)
        status = tuple(
            _said(count, len(self._stations(along_px))) if np.isfinite(one) else UNCLEAR
            for one, count in zip(strain, lost, strict=True)
        )
        nothing = np.empty((len(strain), 0))
        return NamedHistory(gauge, strain, u, status, nothing, nothing, length_mm)

    def of_round_bar(self, history: GaugeHistory) -> GaugeHistory:
        """Take the transverse strain from the width between the edges, where it is followed.

        On a round bar the pattern's own transverse strain is that of a narrow, curved band; the edges show
        the diameter.  Before a cluttered background they do not, and nothing stands in for them.  What the
        pattern does to the edges stays with it from frame to frame, so that it is an error of all frames as
        much as a scatter of each.
        """
        if self._silhouette is None:
            return history
        if not self._silhouette.plain:
            nowhere = np.full_like(history.transverse, np.nan)
            return replace(history, transverse=nowhere, u_transverse=nowhere)
        strain, u, pattern, _ = self._edge_strain(self._silhouette.range_px)
        # The interpolation between pixels has no part in it.
        left = None if history.left_transverse is None else np.zeros_like(history.left_transverse)
        return replace(
            history,
            transverse=strain,
            u_transverse=u,
            left_transverse=left,
            left_edges=np.nan_to_num(pattern),
        )

    def _stations(self, along_px: tuple[float, float]) -> NDArray[np.intp]:
        """Return the stations between two places at which the reference shows both edges clearly."""
        assert self._silhouette is not None  # noqa: S101  (gauges between edges are placed on it)
        seen = np.isfinite(self._silhouette.reference.px)
        return np.flatnonzero(seen & self._silhouette.stations(*along_px))

    def _edge_strain(self, along_px: tuple[float, float]) -> tuple[Floats, Floats, Floats, list[int]]:
        """Return the mean change of width per width, its u, the pattern's part in that, and stations lost."""
        assert self._silhouette is not None  # noqa: S101  (gauges between edges are placed on it)
        here = self._stations(along_px)
        first = self._silhouette.reference.px[here]
        measured = np.array([one.px[here] for one in self._widths])
        own = np.array([one.u_per_grey[here] for one in self._widths])
        seen = np.isfinite(measured)
        count = seen.sum(axis=1)
        enough = count >= max(LEAST_SEEN * len(here), 1)
        # Each station against itself: what the pattern does to the edge's place stays out of it.
        change = np.where(seen, measured - first, np.nan)
        noise = np.where(seen, own, np.nan) * np.array(self._noise)[:, None]
        few = np.maximum(count, 1)
        strain = np.nansum(change / first, axis=1) / few
        grey = np.sqrt(np.nansum((noise / first) ** 2, axis=1)) / few
        along, width = self._silhouette.along[here], float(first.mean()) if here.size else np.nan
        pattern = np.array([pattern_px(along, *one) for one in zip(change, noise, strict=True)]) / width
        return (
            np.where(enough, strain, np.nan),
            np.where(enough, np.hypot(grey, pattern), np.nan),
            np.where(enough, pattern, np.nan),
            (len(here) - count).tolist(),
        )


def _said(lost: int, probes: int) -> str:
    if lost == 0:
        return "ok"
    return LOST if probes == 1 else f"{lost} of {probes} stations were lost or out of view"
