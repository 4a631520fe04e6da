"""A pulled coupon seen by camera and clip-on, everything from formulas, all errors drawn as stated."""

from dataclasses import dataclass
from pathlib import Path

import numpy as np
import pytest

from dic.comparison import compare
from dic.properties.result import Curve, Property
from dic.strain.history import GaugeHistory
from dic.sync import Clock, LoadRecord
from synthetic_images.readings import gauge_history

REST, RATE, FRAMES, REFERENCE = 3.0, 4e-4, 120, 12


@dataclass(frozen=True)
class Bench:
    record: LoadRecord
    clock: Clock
    history: GaugeHistory
    curve: Curve

    def compared(self, length_mm=25.0):
        window = {"time_s": (REST + 1.0, REST + 5.0)}
        modulus = Property("youngs_modulus", "E", 7e4, "MPa", 1.0, "", window)
        return compare(
            self.record, self.clock, self.history, self.curve, modulus,
            reference=slice(0, REFERENCE), length_mm=length_mm,
        )  # fmt: skip


@pytest.fixture(scope="session")
def bench():
    """Return a function that draws a test; `spoil(time, strain)` may change the clip-on's column."""

    def draw(
        seed=0, *, gain=1.0, offset=0.0, u_camera=4e-6, noise=1e-5, u_clock=0.0, sign=1.0, spoil=None,
        contact=True, curved=0.0,
    ):  # fmt: skip
        r = np.random.default_rng(seed)
        lag = u_clock * r.normal()

        def strain_at(time):
            # loading gets faster half way, as it does when a metal yields
            pulled = np.clip(time - REST, 0, None)
            return sign * RATE * (pulled + 2 * np.clip(pulled - 10, 0, None))

        camera = 0.1 + 0.2 * np.arange(FRAMES)
        axial = strain_at(camera) + r.normal(0, u_camera, FRAMES)
        axial -= axial[:REFERENCE].mean()
        u = np.full(FRAMES, u_camera * np.sqrt(1 + 1 / REFERENCE))
        machine = np.arange(0, 26, 0.02)
        true = strain_at(machine)
        clip = gain * true + curved * true**2 + offset + r.normal(0, noise, len(machine))
        if spoil is not None:
            clip = spoil(machine, clip)
        force = 25.0 * 7e4 * true
        history = gauge_history(camera, axial, -0.3 * axial, u)
        clock = Clock(lag, u_clock, 0.0, "drawn")
        time = clock.machine_time(camera)
        curve = Curve(
            time_s=time, force_N=25.0 * 7e4 * strain_at(time), stress_MPa=7e4 * strain_at(time), axial=axial,
            transverse=-0.3 * axial, u_axial=u, u_transverse=u, area_mm2=25.0,
            peak_force_N=float(force[-1]), u_peak_force_N=1.0, peak_time_s=float(machine[-1]),
        )  # fmt: skip
        record = LoadRecord(Path("machine.csv"), machine, force, extensometer=clip if contact else None)
        return Bench(record, clock, history, curve)

    return draw
