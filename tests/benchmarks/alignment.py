"""Bending in the picture's plane from virtual pictures, and which cause is named for which motion."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import numpy as np
from gauge import LENGTH, MIDDLE, POISSON, SHAPE, WIDTH, Instrument, history
from scenes import clean, noisy
from table import Bench

from dic.store.fields import spread
from dic.strain.alignment import Alignment, find_alignment
from dic.strain.maps import StrainMapper, Window
from dic.strain.rates import Moved, gather_rates
from synthetic_images import Bending, Displacement, homogeneous

#: An elastic part up to the strain that the target names.
STRAINS = np.linspace(0.0, 0.001, 11)
MODULUS_N = 7e6  # force per strain, N


def bent(percent: float) -> Callable[[float], Any]:
    """Return the motion at a strain with so much uniform bending, and some travel."""

    def at(strain: float) -> Any:
        straight = homogeneous(strain, -POISSON * strain, centre=MIDDLE, shift=(0.0, -4000 * strain))
        curvature = percent / 100 * strain / (WIDTH / 2)
        return Bending(straight, 0.0, curvature, POISSON) if percent else straight

    return at


def s_shaped(percent: float, angle_deg: float) -> Callable[[float], Any]:
    """Return bending that changes sign along the coupon, `percent` at the gauge's upper end."""

    def at(strain: float) -> Any:
        def field(X: Any, Y: Any) -> Any:
            a, t = MIDDLE[1] - Y, X - MIDDLE[0]  # up, right
            rate, half, long = percent / 100 * strain, WIDTH / 2, LENGTH / 2
            size = rate / (half * long)
            travel = 4000 * strain
            along = strain * a + size * a**2 * t / 2 - size * (1 + POISSON) * t**3 / 6 + travel
            across = -POISSON * strain * t - size * (a**3 / 6 + POISSON * a * t**2 / 2)
            return across + travel * np.tan(np.radians(angle_deg)), -along

        return Displacement(field)

    return at


def tilted_camera(percent: float) -> Callable[[float], Any]:
    """Return a straight coupon that turns before a tilted camera, apparent bending `percent`."""

    def at(strain: float) -> Any:
        def field(X: Any, Y: Any) -> Any:
            a, t = MIDDLE[1] - Y, X - MIDDLE[0]
            apparent = percent / 100 * strain / (WIDTH / 2)
            along = strain * a + apparent * t * a + 4000 * strain
            across = -POISSON * strain * t + apparent * t * t
            return across, -along

        return Displacement(field)

    return at


def measured(motion: Callable[[float], Any], draw: int) -> Alignment:
    """Measure a virtual elastic part with 1 % grey noise."""
    instrument = Instrument(noisy(clean("sharp", motion(0.0), SHAPE), 1000 * draw))
    grid, region = instrument.grid, instrument.reader.region
    window = Window(5, grid.step, grid.subset)
    mapper = StrainMapper(window, (region.axial, region.transverse))
    readings, moved = [], []
    for k, strain in enumerate(STRAINS):
        picture = noisy(clean("sharp", motion(strain), SHAPE), 1000 * draw + 1 + k)
        match = instrument.match(picture, motion(strain))
        readings.append(instrument.reader.read(match))
        parts = [spread(one, grid.inside) for one in (match.u, match.v, match.sigma_u, match.sigma_v)]
        moved.append(Moved(*parts, mapper.strain(*parts).axial))
    found = history(readings)
    rates = gather_rates(moved, found.axial, grid, region, window)
    return find_alignment(found, MODULUS_N * STRAINS, np.ones(len(STRAINS), bool), rates)


def run() -> Bench:
    bench = Bench()
    for percent in (2.0, 5.0, 10.0):
        found = measured(bent(percent), int(percent))
        name = f"bending of {percent:g} %"
        bench.add(f"{name}: error", abs(100 * found.bending.value - percent), "points", high=0.3)
        bench.add(f"{name}: stated uncertainty", 100 * found.bending.u, "points")
        worst = np.abs(100 * found.stations.bending - percent).max()
        bench.add(f"{name}: worst of {len(found.stations.bending)} stations", worst, "points")
        bench.add(f"{name}: their stated uncertainty", 100 * found.stations.u_bending.mean(), "points")
        bench.add(
            f"{name}: named {', '.join(found.causes.found) or 'nothing'}", named(found, "offset"), low=1
        )
    for motion, cause, text in (
        (bent(0.0), "", "pulled straight"),
        (s_shaped(5.0, 0.0), "opposed", "S-shape of 5 %, motion along the axis"),
        (s_shaped(5.0, 1.0), "tilt", "S-shape of 5 %, motion at 1° to the axis"),
        (tilted_camera(5.0), "camera", "tilted camera, 5 % apparent"),
    ):
        found = measured(motion, 20)
        bench.add(f"{text}: {said(found)}", named(found, cause), low=1)
    return bench


def named(found: Alignment, cause: str) -> float:
    """Return 1 where just this cause is named."""
    return float(found.causes.found == ((cause,) if cause else ()))


def said(found: Alignment) -> str:
    """Return the causes in words."""
    causes = found.causes
    maybe = f", perhaps {', '.join(causes.possible)}" if causes.possible else ""
    return f"named {', '.join(causes.found) or 'nothing'}{maybe}"
