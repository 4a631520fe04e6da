"""The named gauges against time."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from math import sqrt

import numpy as np
from numpy.typing import NDArray

from dic.correlation.matching import Match
from dic.gauges.between import Between
from dic.gauges.placing import Placed
from dic.gauges.probes import Subsets
from dic.gauges.reading import FrameReadings, NamedReader
from dic.gauges.silhouette import Silhouette, Widths
from dic.strain.history import GaugeHistory
from dic.strain.periodic import Periodic

Floats = NDArray[np.float64]

#: Why a gauge has no reading in a frame.
LOST = "the gauge's subsets were lost"
UNCLEAR = "the edges are out of view or not clear"


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
            if gauge.between is not None:
                histories.append(self._between_edges(gauge, gauge.between, length_mm))
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

    def _between_edges(self, gauge: Placed, between: Between, length_mm: float) -> NamedHistory:
        strain, u, _, lost = between.strain(self._widths, self._noise)
        stations = len(between.stations)
        status = tuple(
            _said(count, stations) if np.isfinite(one) else UNCLEAR
            for one, count in zip(strain, lost.tolist(), strict=True)
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
        edges = Between(self._silhouette, *self._silhouette.range_px)
        strain, u, pattern, _ = edges.strain(self._widths, self._noise)
        # The interpolation between pixels has no part in it.
        left = None if history.left_transverse is None else np.zeros_like(history.left_transverse)
        return replace(
            history,
            transverse=strain,
            u_transverse=u,
            left_transverse=left,
            left_edges=np.nan_to_num(pattern),
        )


def _said(lost: int, probes: int) -> str:
    if lost == 0:
        return "ok"
    return LOST if probes == 1 else f"{lost} of {probes} stations were lost or out of view"
