"""A gauge of 1500 × 300 px: bias and scatter of its strains, E and ν, against the gauge's own bound."""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray
from scenes import SIGMA, Settings, clean, grid_on, noisy, reference_of, start_at
from scipy.stats import linregress
from table import Bench

from dic.correlation import Grid, Match, Prefilter, Reference
from dic.correlation.matching import match_frame, residual_gain
from dic.correlation.moments import gram
from dic.correlation.noise import probe_noise
from dic.pattern import axes
from dic.strain import GaugeHistory, GaugeReader, Reading, Region, gather
from dic.strain.periodic import HARMONICS
from synthetic_images import homogeneous

SHAPE, MARGIN = (1640, 400), 40
LENGTH, WIDTH = 1500.0, 300.0
MIDDLE = ((SHAPE[1] - 1) / 2, (SHAPE[0] - 1) / 2)
KIND, BEST = "sharp", Settings()
#: True strains; the first ones are those of a modulus.
STRAINS = (0.0, 0.0005, 0.001, 0.002, 0.005, 0.01, 0.02, 0.05, 0.1, 0.2)
PHASES = (0.0, 0.25, 0.5, 0.75)
POISSON = 0.33


class Instrument:
    """Reference, gauge and all that reads a frame as tracking does."""

    def __init__(self, picture: NDArray[Any], frames: int = 1) -> None:
        mask = np.zeros(SHAPE, bool)
        y, x = (round(edge) for edge in (MIDDLE[1] - LENGTH / 2, MIDDLE[0] - WIDTH / 2))
        mask[y : y + int(LENGTH), x : x + int(WIDTH)] = True
        full = grid_on(SHAPE, step=10, margin=8)
        half = full.half
        rows = full.rows[(full.rows - half >= y) & (full.rows + half < y + LENGTH)]
        columns = full.columns[(full.columns - half >= x) & (full.columns + half < x + WIDTH)]
        self.grid = Grid(columns, rows, np.ones((len(rows), len(columns)), bool), full.subset, full.step)
        self.reference: Reference = reference_of(picture, self.grid, BEST, frames)
        self.reader = GaugeReader(
            self.reference, self.grid, Region(np.array(MIDDLE), LENGTH, WIDTH, *axes(0.0))
        )
        self.prefilter = Prefilter(SHAPE, BEST.kind, BEST.smoothing)
        self.probe, self.gain = probe_noise(self.reference), residual_gain(self.reference)

    def match(self, picture: NDArray[Any], motion: Any) -> Match:
        spline = self.prefilter(picture)
        match = match_frame(self.reference, spline, start_at(self.reference, motion))
        felt = self.probe.felt(self.reference, spline, match.parameters, self.gain)
        return match.with_noise(felt)

    def read(self, picture: NDArray[Any], motion: Any) -> Reading:
        return self.reader.read(self.match(picture, motion))


def motion_at(strain: float, phase: float = 0.0) -> Any:
    return homogeneous(strain, -POISSON * strain, centre=MIDDLE, shift=(phase, phase))


def history(readings: list[Reading]) -> GaugeHistory:
    return gather(readings, tuple("" for _ in readings), np.arange(len(readings), dtype=float))


def own_bound(still: NDArray[np.float64], instrument: Instrument) -> tuple[float, float]:
    """Cramér–Rao bounds of axial and transverse strain: all pixels of the gauge, one affine motion."""
    from dic.correlation.splines import flat, gradients, smooth

    grey, (fx, fy) = smooth(still, 0.0), gradients(still, "septic", 0.0)
    half = 150
    ones = flat(np.ones(SHAPE, np.float32))
    total = np.zeros((8, 8))
    # the gauge as a row of large squares, whose sums are shifted to a common centre
    for centre in np.arange(MIDDLE[1] - LENGTH / 2 + half, MIDDLE[1] + LENGTH / 2, 2 * half):
        y = round(centre)
        part = gram(
            flat(grey),
            flat(fx),
            flat(fy),
            ones,
            SHAPE[1],
            np.array([round(MIDDLE[0])]),
            np.array([y]),
            half,
            6,
        )[0]
        shift = np.eye(8)
        shift[4, 2] = shift[7, 5] = y - MIDDLE[1]
        total += shift @ part @ shift.T
    covariance = 2 * SIGMA**2 * np.linalg.inv(total)[2:, 2:]
    return float(np.sqrt(covariance[5, 5])), float(np.sqrt(covariance[1, 1]))


def modulus_and_ratio(found: GaugeHistory, stress: NDArray[np.float64]) -> tuple[float, float]:
    """Return E and ν as the program forms them: both slopes against stress."""
    axial, across = linregress(stress, found.axial).slope, linregress(stress, found.transverse).slope
    return 1 / axial, -across / axial


def run() -> Bench:
    bench = Bench()
    still = clean(KIND, motion_at(0.0), SHAPE)
    exact = Instrument(still)

    # The amplitude of the periodic error, from a noisy test as in life.
    first = Instrument(noisy(still, 0))
    test = [
        first.read(noisy(clean(KIND, motion_at(e, 0.3 * k), SHAPE), 10 + k), motion_at(e, 0.3 * k))
        for k, e in enumerate(np.linspace(0.0, 0.02, 60))
    ]
    periodic = history(test).periodic
    for waves, size, spread in zip(HARMONICS, periodic.amplitudes_px, periodic.u_amplitudes_px, strict=True):
        bench.add(f"periodic error as the test shows it, {waves} per px", 1e3 * size, "mpx")
        bench.add("its standard uncertainty", 1e3 * spread, "mpx")

    worst: dict[str, list[float]] = {"axial": [], "transverse": [], "axial, uncorrected": []}
    for strain in STRAINS:
        off: dict[str, list[float]] = {name: [] for name in worst}
        for phase in PHASES:
            motion = motion_at(strain, phase)
            found = exact.read(clean(KIND, motion, SHAPE), motion)
            taken = {
                name: float(periodic.correction(found.response[name])[0]) for name in ("axial", "transverse")
            }
            off["axial"].append(found.axial - taken["axial"] - strain)
            off["transverse"].append(found.transverse - taken["transverse"] + POISSON * strain)
            off["axial, uncorrected"].append(found.axial - strain)
        for name, values in off.items():
            worst[name].append(1e6 * float(np.abs(values).max()))
    upto5 = [k for k, strain in enumerate(STRAINS) if strain <= 0.05]
    bench.add(
        "axial strain, 0 to 5 %, worst phase: bias", max(worst["axial"][k] for k in upto5), "µm/m", high=0.3
    )
    bench.add(
        "transverse strain, the same: bias", max(worst["transverse"][k] for k in upto5), "µm/m", high=1.0
    )
    bench.add(
        "axial strain without the correction: bias",
        max(worst["axial, uncorrected"][k] for k in upto5),
        "µm/m",
    )
    bench.add("axial strain, 10 and 20 %: bias", max(worst["axial"][-2:]), "µm/m")
    bench.curves.append(
        (
            "Bias of the gauge, worst phase",
            "true strain",
            "bias, µm/m",
            {k: (STRAINS, v) for k, v in worst.items()},
        )
    )

    axial, transverse = own_bound(still, exact)
    motion = motion_at(0.001, 0.37)
    image = clean(KIND, motion, SHAPE)
    draws = [Instrument(noisy(still, 10_000 + k)).read(noisy(image, 20_000 + k), motion) for k in range(400)]
    for name, least, most in (("axial", axial, 1.1), ("transverse", transverse, 1.2)):
        scatter = float(np.std([getattr(one, name) for one in draws], ddof=1))
        stated = float(np.mean([getattr(one, f"u_{name}") for one in draws]))
        bench.add(f"{name} strain: scatter", 1e6 * scatter, "µm/m")
        bench.add(
            f"{name} strain: scatter / the gauge's Cramér–Rao bound (± 3.5 %)", scatter / least, high=most
        )
        bench.add(f"{name} strain: stated / true scatter (± 3.5 %)", stated / scatter, low=0.9, high=1.1)
        bench.add(f"{name} strain: stated / the gauge's Cramér–Rao bound", stated / least)

    strains = np.linspace(0, 0.002, 60)
    motions = [motion_at(e, 400 * e) for e in strains]
    images = [clean(KIND, motion, SHAPE) for motion in motions]
    stress = 70_000 * strains
    plain = history([exact.read(picture, motion) for picture, motion in zip(images, motions, strict=True)])
    modulus, ratio = modulus_and_ratio(plain, stress)
    bench.add("E of 60 frames to 0.2 %: bias without noise", 100 * abs(modulus / 70_000 - 1), "%", high=0.02)
    bench.add("ν, the same: bias without noise", 100 * abs(ratio / POISSON - 1), "%", high=0.1)
    found = []
    for draw in range(6):
        rng = np.random.default_rng(draw)
        one = Instrument(noisy(still, 5000 + draw))
        seen = [
            one.read(noisy(picture, 6000 + 100 * draw + k), motion)
            for k, (picture, motion) in enumerate(zip(images, motions, strict=True))
        ]
        found.append(modulus_and_ratio(history(seen), stress + 0.14 * rng.standard_normal(60)))
    modulus, ratio = np.transpose(found)
    bench.add(
        "E with 1 % grey and 0.1 % force noise: mean error of 6", 100 * (modulus.mean() / 70_000 - 1), "%"
    )
    bench.add("ν, the same", 100 * (ratio.mean() / POISSON - 1), "%")
    bench.add("E, the same: scatter", 100 * modulus.std(ddof=1) / 70_000, "%")
    bench.add("ν, the same: scatter", 100 * ratio.std(ddof=1) / POISSON, "%")
    return bench
