"""Named gauges: an elastomer to 150 %, a coupon turned in the picture, the width between edges and its u."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray
from table import Bench

from dic.correlation import Settings, Tracker, lay_grid, prepare_reference
from dic.gauges import NamedHistory, NamedReadings, Silhouette, place_gauges
from dic.gauges.probes import Subsets
from dic.gauges.silhouette import Widths, clear, mean_motion, pattern_px
from dic.pattern import axes, find_coupon
from dic.strain import GaugeHistory, GaugeReader, Region, gather
from dic.testfile import NamedGauge
from synthetic_images import Camera, Dots, homogeneous
from synthetic_images.coupon import Coupon as Scene

SHAPE, WIDTH, NOISE = (1100, 320), 220.0, 0.01
CENTRE = ((SHAPE[1] - 1) / 2, (SHAPE[0] - 1) / 2)
SPECKLE = Dots(5.0, area=(500, 1300), seed=11)
#: Standard deviation of one grey value, grey levels: the noise, and rounding.
GREY = float(np.hypot(255 * NOISE, 1 / np.sqrt(12)))
#: Nominal strains of the elastomer, frame by frame; the first four frames are at rest.
STRAINS = np.concatenate([np.zeros(4), np.arange(1, 81) * 0.025])
GAUGES = {
    "extensometer": {"kind": "extensometer", "length": 240},
    "area": {"kind": "area"},
    "transverse": {"kind": "transverse"},
    "points": {"kind": "points", "from": [CENTRE[0], CENTRE[1] - 120], "to": [CENTRE[0], CENTRE[1] + 120]},
    "line": {"kind": "line", "from": [CENTRE[0], CENTRE[1] - 120], "to": [CENTRE[0], CENTRE[1] + 120]},
    "edge width": {"kind": "edge_width", "length": 280},
}


@dataclass
class Camcorder:
    """Photographs the coupon after a motion, with camera noise; `plain` leaves the speckle out."""

    angle: float = 0.0
    plain: bool = False

    def picture(self, motion: Any, frame: int) -> NDArray[Any]:
        scene = Scene(self.texture, motion, CENTRE, WIDTH, self.angle, 0.1)
        return Camera(bits=8, noise=NOISE).photograph(scene, SHAPE, frame=frame, seed=3)

    def texture(self, x: Any, y: Any) -> Any:
        return np.full(np.broadcast(x, y).shape, 0.8) if self.plain else SPECKLE(x, y)

    def motion(self, axial: float, transverse: float, shift: tuple[float, float] = (0.0, 0.0)) -> Any:
        return homogeneous(axial, transverse, axis_angle_deg=self.angle, centre=CENTRE, shift=shift)


class Instrument:
    """Finds the coupon in frames at rest and follows a region of it."""

    def __init__(self, camera: Camcorder, length: float, averaged: int = 4) -> None:
        still = [camera.picture(camera.motion(0.0, 0.0), 10_000 + k).astype(float) for k in range(averaged)]
        image = np.mean(still, axis=0)
        a, t = axes(camera.angle)
        y, x = np.mgrid[: SHAPE[0], : SHAPE[1]]
        along = (x - CENTRE[0]) * a[0] + (y - CENTRE[1]) * a[1]
        self.coupon = find_coupon(image, camera.angle, np.abs(along) <= length / 2)
        mask = self.coupon.mask
        self.region = Region.around(mask, a, t)
        grid = lay_grid(mask, 31, 10)
        self.reference = prepare_reference(
            image, grid.x, grid.y, subset=31, settings=Settings(), mask=mask, frames=averaged
        )
        self.subsets = Subsets(self.reference, grid)
        self.silhouette = Silhouette(image, self.coupon, self.region)

    def follow(
        self, frames: Any, gauges: dict[str, dict[str, Any]]
    ) -> tuple[GaugeHistory, dict[str, NamedHistory]]:
        named = {name.replace(" ", "_"): NamedGauge.model_validate(keys) for name, keys in gauges.items()}
        placed = place_gauges(named, self.subsets, self.region, 0.05, self.silhouette)
        readings, own = NamedReadings(self.subsets, placed, self.silhouette), []
        reader = GaugeReader(self.reference, self.subsets.grid, self.region)
        tracker = Tracker(self.reference, self.subsets.grid.neighbours())
        for frame in frames:
            match = tracker.follow(frame)
            found = match.converged
            moved = np.stack([match.u, match.v], axis=1)[found]
            motion = mean_motion(self.subsets.places[found], moved, self.region.centre)
            readings.read(match, clear(self.silhouette.measure(frame, motion), match.noise_grey))
            own.append(reader.read(match))
        history = gather(own, ("",) * len(own), np.arange(len(own), dtype=float))
        found = readings.histories(history.periodic, 0.05)
        return history, {one.gauge.name.replace("_", " "): one for one in found}


def run() -> Bench:
    bench = Bench()
    elastomer(bench)
    turned(bench)
    for plain in (True, False):
        edges(bench, plain)
    bars(bench)
    return bench


def elastomer(bench: Bench) -> None:
    """Incompressible: the transverse stretch is λ^(−1/2)."""
    camera = Camcorder()
    instrument = Instrument(camera, 300.0)
    across = (1 + STRAINS) ** -0.5 - 1
    frames = (
        camera.picture(camera.motion(axial, transverse), k)
        for k, (axial, transverse) in enumerate(zip(STRAINS, across, strict=True))
    )
    history, found = instrument.follow(frames, GAUGES)
    far = (STRAINS >= 0.25) & (STRAINS <= 1.5 + 1e-9)
    truths = {name: STRAINS if name not in ("transverse", "edge width") else across for name in found}

    def add(what: str, strain: NDArray[np.float64], truth: NDArray[np.float64], limit: float) -> None:
        worst = np.max(np.abs(strain / np.where(far, truth, 1.0) - 1)[far])
        bench.add(f"elastomer to 150 %, {what}: largest error from 25 % on", 100 * worst, "%", high=limit)

    add("gauge region, axial", history.axial, STRAINS, 0.1)
    add("gauge region, transverse", history.transverse, across, 0.3)
    for name, one in found.items():
        add(name, one.strain, truths[name], 0.3 if truths[name] is across else 0.1)
    lost = sum(np.isnan(one.strain).sum() for one in found.values()) + np.isnan(history.axial).sum()
    bench.add("elastomer, readings lost", float(lost), high=0)
    for what, strain, truth in (
        ("axial", history.axial, STRAINS),
        ("transverse", history.transverse, across),
    ):
        error = 100 * (strain[-1] / truth[-1] - 1)
        bench.add(f"elastomer at 200 %, gauge region, {what}: error", error, "%")
    bench.add("elastomer, subsets left at 200 %", 100 * history.valid_fraction[-1], "%")
    z = [np.abs(one.strain - truths[name])[far] / one.u_strain[far] for name, one in found.items()]
    bench.add("elastomer, errors over stated uncertainty, median", float(np.median(z)))
    bench.curves.append(
        (
            "Elastomer: error of each gauge",
            "nominal strain, %",
            "error, % of value",
            {
                name: (100 * STRAINS[far], 100 * (one.strain[far] / truths[name][far] - 1))
                for name, one in found.items()
            },
        )
    )


def turned(bench: Bench, angle: float = 5.0, strain: float = 0.002) -> None:
    """The same coupon upright and turned: axial strain, noise and all, mean of eight frames."""
    read = {}
    for axis in (0.0, angle):
        camera = Camcorder(axis)
        frames = (
            camera.picture(camera.motion(strain, -0.33 * strain, (0.23 * k, 0.11 * k)), k) for k in range(8)
        )
        history, found = Instrument(camera, 800.0).follow(frames, {"area": {"kind": "area"}})
        read[axis] = history.axial.mean(), found["area"].strain.mean()
        error = 100 * (read[axis][0] / strain - 1)
        bench.add(f"axis at {axis:g}°, 0.2 % strain: error of gauge region", error, "%", low=-0.1, high=0.1)
    for place, name in enumerate(("gauge region", "area")):
        change = 100 * (read[angle][place] / read[0.0][place] - 1)
        bench.add(f"turned by {angle:g}°, {name}: change of axial strain", change, "%", low=-0.1, high=0.1)


def edges(bench: Bench, plain: bool) -> None:
    """Change of width from 300 px of edge: mean and scatter over sub-pixel places, at several strains."""
    name = "plain" if plain else "speckled"
    for axis in (0.0, 0.5, 3.0):
        camera = Camcorder(axis, plain)
        instrument = Instrument(Camcorder(axis), 304.0)
        still = np.mean(
            [camera.picture(camera.motion(0.0, 0.0), 20_000 + k).astype(float) for k in range(8)], axis=0
        )
        silhouette = Silhouette(still, instrument.coupon, instrument.region)
        worst, variances, over_u = 0.0, [], []
        for number, strain in enumerate((0.0, 0.001, 0.005, 0.02)):
            misses = []
            for k in range(12):
                motion = camera.motion(strain, -0.33 * strain, (0.13 * k, 0.07 * k))
                places = instrument.subsets.places
                moved = np.stack(motion(*places.T), axis=1) - places
                affine = mean_motion(places, moved, instrument.region.centre)
                found = silhouette.measure(camera.picture(motion, 100 * number + k), affine)
                misses.append(np.mean(found.px - silhouette.reference.px) + 0.33 * strain * WIDTH)
                over_u.append(misses[-1] / stated(silhouette, found, 8))
            worst = max(worst, abs(float(np.mean(misses))))
            variances.append(np.var(misses, ddof=1))
        length = f"{name} edges at {axis:g}°, {len(silhouette.along) * 16} px long"
        bench.add(f"{length}: bias of a change of width", worst, "px", high=0.01)
        bench.add(
            f"{length}: scatter from frame to frame", float(np.sqrt(np.mean(variances))), "px", high=0.01
        )
        bench.add(f"{length}: errors over stated uncertainty, rms", rms(over_u), high=1.3)


def bars(bench: Bench) -> None:
    """Round bars of eight patterns: their rims squeeze the pattern together and draw the edges aside."""
    size, diameter, shape = 10, 130.0, (260, 180)
    centre = ((shape[1] - 1) / 2, (shape[0] - 1) / 2)
    misses, over_u = [], []
    for seed in range(1, 9):
        speckle, camera = Dots(4.5, area=(440, 380), seed=seed), Camera(bits=8, noise=NOISE)

        def picture(motion: Any, frame: int, texture: Any = speckle, camera: Camera = camera) -> NDArray[Any]:
            scene = Scene(texture, motion, centre, diameter, 0.0, 0.1, cylinder=True)
            return camera.photograph(scene, shape, frame=frame, seed=3)

        still = np.mean(
            [picture(homogeneous(0, 0, centre=centre), 1000 + k).astype(float) for k in range(4)], axis=0
        )
        region = Region(np.array(centre), 240.0, diameter / 2, *axes(0.0))
        silhouette = Silhouette(still, find_coupon(still, 0.0), region)
        for k in range(1, size + 1):
            axial = 0.006 * k / size
            motion = homogeneous(axial, -0.33 * axial, centre=centre, shift=(0.0, 0.18 * k))
            known = np.array([[0.0, -0.33 * axial, 0.0], [0.18 * k, 0.0, axial]])
            found = silhouette.measure(picture(motion, k), known)
            misses.append(float(np.nanmean(found.px - silhouette.reference.px)) + 0.33 * axial * diameter)
            over_u.append(misses[-1] / stated(silhouette, found, 4))
    name = "round bars, 240 px long"
    bench.add(f"{name}: errors of the diameter, rms", rms(misses), "px")
    bench.add(f"{name}: errors over stated uncertainty, rms", rms(over_u), high=1.3)


def stated(silhouette: Silhouette, found: Widths, averaged: int) -> float:
    """Return the stated standard uncertainty of the mean change of width, px."""
    change = found.px - silhouette.reference.px
    noise = found.u_per_grey * GREY * np.sqrt(1 + 1 / averaged)
    grey = np.sqrt(np.nansum(noise**2)) / np.isfinite(change).sum()
    return float(np.hypot(grey, pattern_px(silhouette.along, change, noise)))


def rms(values: list[float]) -> float:
    return float(np.sqrt(np.mean(np.square(values))))
