"""Reading the named gauges frame by frame."""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from dic.correlation.matching import Match
from dic.gauges.placing import Placed
from dic.gauges.probes import Probe, Subsets, Weights
from dic.strain.gauge import noise_gain
from dic.strain.periodic import HARMONICS, periodic_error

Floats = NDArray[np.float64]


@dataclass(frozen=True)
class FrameReadings:
    """What all probes of all gauges, p in number, read in one frame.

    Attributes
    ----------
    strain, u
        Strain and its standard uncertainty from grey noise, shape (p,); NaN where lost.
    response
        By how much each strain is false per px of periodic error, shape (p, h).
    u_mean
        Standard uncertainty of each gauge's mean over its probes, shape (g,).
    """

    strain: Floats
    u: Floats
    response: Floats
    u_mean: Floats


@dataclass
class NamedReader:
    """Reads the named gauges; weights are kept until other subsets are measured.

    Parameters
    ----------
    subsets
        All subsets.
    gauges
        The gauges, those between the coupon's edges left out.
    """

    subsets: Subsets
    gauges: list[Placed]
    _kept: dict[int, tuple[bytes, Weights | None, float]] = field(default_factory=dict, repr=False)
    _means: dict[int, tuple[bytes, float]] = field(default_factory=dict, repr=False)

    def read(self, match: Match) -> FrameReadings:
        """Return the readings of one frame."""
        reference = self.subsets.reference
        noise = match.noise_against(reference.frames)
        probes = [probe for gauge in self.gauges for probe in gauge.probes]
        strain, u = np.full(len(probes), np.nan), np.full(len(probes), np.nan)
        response = np.full((len(probes), len(HARMONICS)), np.nan)
        valid = match.converged
        affine = match.affine
        found: list[Weights | None] = []
        for place, probe in enumerate(probes):
            weights, gain = self._weights(place, probe, valid)
            found.append(weights)
            if weights is None:
                continue
            own = affine[weights.numbers]
            strain[place], u[place] = weights.strain(own), gain * noise
            false = periodic_error(match.as_matched[weights.numbers], reference.subset)
            response[place] = (false * weights.on).sum(axis=(1, 2))
        return FrameReadings(strain, u, response, noise * self._mean_gains(found))

    def _weights(self, place: int, probe: Probe, valid: NDArray[np.bool_]) -> tuple[Weights | None, float]:
        members = probe.members
        key = valid[members].tobytes()
        if place not in self._kept or self._kept[place][0] != key:
            weights = probe.weights(members[valid[members]])
            gain = np.nan
            if weights is not None:
                gain = noise_gain(self.subsets.reference, weights.numbers, weights.on)
            self._kept[place] = key, weights, gain
        return self._kept[place][1:]

    def _mean_gains(self, found: list[Weights | None]) -> Floats:
        """Return the standard deviation of each gauge's mean per grey level of noise."""
        gains, first = np.full(len(self.gauges), np.nan), 0
        for number, gauge in enumerate(self.gauges):
            parts = found[first : first + len(gauge.probes)]
            key = b"".join(self._kept[first + k][0] for k in range(len(parts)))
            first += len(parts)
            if number not in self._means or self._means[number][0] != key:
                self._means[number] = key, self._gain_of_mean(parts)
            gains[number] = self._means[number][1]
        return gains

    def _gain_of_mean(self, parts: list[Weights | None]) -> float:
        whole = [part for part in parts if part is not None]
        if len(whole) < len(parts) or not whole:
            return float("nan")
        on = np.zeros((len(self.subsets.reference.x), 6))
        for part in whole:
            np.add.at(on, part.numbers, part.on / len(whole))
        numbers = np.flatnonzero(on.any(axis=1))
        return noise_gain(self.subsets.reference, numbers, on[numbers])
