"""A plate with a hole: strain maps up to its edge against Kirsch's closed form, and what maps cost."""

from __future__ import annotations

import time

import numpy as np
from numpy.typing import NDArray
from scenes import Settings, clean, matched, noisy, rigid, start_at
from table import Bench

from dic.correlation import lay_grid, prepare_reference
from dic.pattern import axes
from dic.store.fields import spread
from dic.strain import MapFlag, StrainMap, StrainMapper, Window
from synthetic_images import HoledPlate

SHAPE = (720, 860)
#: Lopsided, beside the subsets' grid.
PLATE = HoledPlate((401.0, 352.0), radius=100.0, strain=0.002)
SUBSET, STEP, WINDOW = 31, 10, 5
#: Pixels between the hole and the mask: what the hole's edge moves, and its blur.
CLEARANCE = 1.5
#: Where the hole adds less than a fifth to the strain.
FAR = 250.0


class Maps:
    """Maps of the plate by one way of fitting, and the closed form at their points."""

    def __init__(self, degree: int, weighting: str = "even") -> None:
        y, x = np.mgrid[0 : SHAPE[0], 0 : SHAPE[1]]
        self.mask = np.hypot(x - PLATE.centre[0], y - PLATE.centre[1]) > PLATE.radius + CLEARANCE
        self.grid = lay_grid(self.mask, SUBSET, STEP)
        self.mapper = StrainMapper(Window(WINDOW, STEP, SUBSET, degree, weighting), axes(0.0))
        self.gauge = self.mapper.window.size_px
        x, y = np.meshgrid(self.grid.columns.astype(float), self.grid.rows.astype(float))
        self.across, self.along = x - PLATE.centre[0], y - PLATE.centre[1]
        self.truth = PLATE.axial(x, y)

    def strain(self, still: NDArray[np.generic], pulled: NDArray[np.generic]) -> StrainMap:
        grid = self.grid
        settings = Settings()
        reference = prepare_reference(
            still, grid.x, grid.y, subset=grid.subset, settings=settings, mask=self.mask
        )
        match = matched(reference, pulled, start_at(reference, PLATE.motion()))
        parts = (match.u, match.v, match.sigma_u, match.sigma_v)
        return self.mapper.strain(*(spread(part, grid.inside) for part in parts))

    def touching(self, side: int) -> tuple[int, int]:
        """Return the point on the ligament whose virtual gauge just touches the hole's edge."""
        away = abs(side * self.across - PLATE.radius - self.gauge / 2) + abs(self.along)
        row, column = np.unravel_index(np.argmin(away), away.shape)
        return int(row), int(column)

    def over_the_gauge(self, point: tuple[int, int]) -> float:
        """Return the closed form averaged over a point's virtual gauge, where there is material."""
        places = (np.arange(200) + 0.5) / 200 - 0.5
        x, y = (places * self.gauge + float(self.grid.columns[point[1]]), places * self.gauge)
        return float(np.nanmean(PLATE.axial(x[None], y[:, None] + float(self.grid.rows[point[0]]))))

    def errors(self, found: StrainMap) -> dict[str, float]:
        """Return relative errors, %, the worse of both sides of the hole, and of the far field."""
        touching, near, worst = [], [], []
        for side in (1, -1):
            point = self.touching(side)
            touching.append(found.axial[point] / self.over_the_gauge(point) - 1)
            beside = side * self.across - PLATE.radius
            here = (beside > 0) & (beside <= self.gauge) & (abs(self.along) <= self.gauge / 2)
            here &= np.isfinite(found.axial)
            near.append(found.axial[here].mean() / self.truth[here].mean() - 1)
            worst.append(np.abs(found.axial[here] / self.truth[here] - 1).max())
        far = (np.hypot(self.across, self.along) > FAR) & np.isfinite(found.axial)
        return {
            "touching": 100 * max(touching, key=abs),
            "near": 100 * max(near, key=abs),
            "worst": 100 * max(worst),
            "far": 100 * (found.axial[far].mean() / self.truth[far].mean() - 1),
        }


def cost(bench: Bench) -> None:
    """Time the maps of one frame with as many subsets as a whole run has at its most."""
    rng = np.random.default_rng(0)
    y, x = np.mgrid[0:131, 0:157] * 15.0
    u, v = (slope * place + rng.normal(0, 0.005, x.shape) for slope, place in ((-3e-4, x), (1e-3, y)))
    sigma = np.full_like(u, 0.005)
    mapper = StrainMapper(Window(WINDOW, 15, SUBSET), axes(0.0))
    times: dict[str, list[float]] = {"always the same ones valid": [], "others valid in every frame": []}
    for _ in range(30):
        changed = u.copy()
        changed[rng.integers(131, size=20), rng.integers(157, size=20)] = np.nan
        mapper.strain(u, v, sigma, sigma)
        for name, one in zip(times, (u, changed), strict=True):
            begin = time.perf_counter()
            mapper.strain(one, v, sigma, sigma)
            times[name].append(time.perf_counter() - begin)
    for name, took in times.items():
        bench.add(f"maps of {x.size} subsets, {name}", 1e3 * min(took), "ms per frame")


def run() -> Bench:
    bench = Bench()
    still, pulled = clean("sharp", rigid(0, 0), SHAPE), clean("sharp", PLATE.motion(), SHAPE)
    curves = {}
    for degree in (1, 2):
        maps = Maps(degree)
        found = maps.strain(still, pulled)
        errors = maps.errors(found)
        name = f"degree {degree}, {maps.gauge} px gauge"
        bench.add(
            f"{name}: gauge that touches the edge, against its mean", abs(errors["touching"]), "%", high=3
        )
        bench.add(f"{name}: all points within a gauge of the edge, mean", abs(errors["near"]), "%", high=3)
        bench.add(f"{name}: the worst of them, against the strain at that very point", errors["worst"], "%")
        bench.add(f"{name}: far field", abs(errors["far"]), "%", high=0.5)
        noise = [maps.errors(maps.strain(noisy(still, 2 * k), noisy(pulled, 2 * k + 1))) for k in range(6)]
        for key, text in (("touching", "gauge that touches the edge"), ("far", "far field")):
            size = float(np.sqrt(np.mean([one[key] ** 2 for one in noise])))
            bench.add(f"{name}: {text}, one frame with 1 % noise, root mean square", size, "%")
        row = int(np.argmin(abs(maps.along[:, 0])))
        curves[f"degree {degree}"] = maps.across[row], 100 * found.axial[row]
        curves["closed form"] = maps.across[row], 100 * maps.truth[row]
        one_sided = found.flag == MapFlag.ONE_SIDED
        bench.add(f"{name}: one-sided points", 100 * one_sided.sum() / np.isfinite(found.axial).sum(), "%")
    cost(bench)
    bench.curves.append(("Axial strain across the hole", "px from its middle", "%", curves))
    return bench
