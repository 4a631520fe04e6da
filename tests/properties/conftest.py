"""An invented tension test: Ramberg-Osgood coupon, frames and record with noise, everything from formulas."""

from dataclasses import dataclass
from pathlib import Path

import numpy as np
import pytest

from dic.properties import make_curve
from dic.properties.elastic import elastic_entries
from dic.properties.sheet import Sheet
from dic.properties.strength import proof_entries
from dic.strain.history import GaugeHistory
from dic.sync import Clock, LoadRecord
from dic.testfile import Specimen
from synthetic_images.readings import gauge_history

E, NU, RP02, EXPONENT = 70e3, 0.33, 280.0, 20
STRESS = np.linspace(0, 1.3 * RP02, 40_001)
STRAIN = STRESS / E + 0.002 * (STRESS / RP02) ** EXPONENT


def energy(stress):
    """Return the area under the curve up to a stress, by the law's own integral."""
    plastic = 0.002 * (stress / RP02) ** EXPONENT
    return stress**2 / (2 * E) + plastic * stress * EXPONENT / (EXPONENT + 1)


@dataclass(frozen=True)
class Pull:
    """One draw, and what is true of it."""

    history: GaugeHistory
    record: LoadRecord
    clock: Clock
    specimen: Specimen
    truth: dict[str, float]

    @property
    def curve(self):
        return make_curve(self.history, self.record, self.clock, self.specimen.area)

    def first_entries(self, section):
        """Read the elastic constants and proof stresses only, which tests with many draws look at."""
        sheet = Sheet(self.curve, self.specimen, None, self.clock, section)
        return {entry.name: entry for entry in (*elastic_entries(sheet), *proof_entries(sheet))}


@pytest.fixture(scope="session")
def pull():
    """Return a function that draws a test.

    Nominal uncertainties given (relative force and section, clock in s) are also the sizes of the
    errors drawn, so a stated interval can be held against the truth.
    """

    def draw(
        seed=0,
        *,
        sign=1.0,
        rate=4e-4,
        fracture=0.025,
        strain_noise=3e-6,
        force_noise=0.001,
        u_force=0.0,
        u_thickness=0.0,
        u_clock=0.0,
        interval=0.2,
        transverse_bias=0.0,
    ):
        r = np.random.default_rng(seed)
        calibration = 1 + u_force * r.normal()
        thickness = 2.0 + u_thickness * r.normal()
        lag = u_clock * r.normal()
        start, end = 2.0, 2.0 + fracture / rate

        def strain_at(time):
            return np.where(time <= end, rate * np.clip(time - start, 0, None), 0.0)

        def stress_at(time):
            return np.interp(strain_at(time), STRAIN, STRESS)

        machine = np.arange(0, end + 3, 0.02)
        force = 25.0 * stress_at(machine)
        force = calibration * force + r.normal(0, force_noise * force.max(), len(force))
        camera = np.arange(0.05, end + 2, interval) + r.uniform(0, 0.02)
        n = len(camera)
        elastic = stress_at(camera) / E
        plastic = strain_at(camera) - elastic
        across = -(NU * elastic + 0.5 * plastic)
        axial = strain_at(camera) + r.normal(0, strain_noise, n)
        across = across + r.normal(0, strain_noise, n) + transverse_bias
        history = gauge_history(camera, sign * axial, sign * across, strain_noise)
        peak = float(np.interp(fracture, STRAIN, STRESS))
        return Pull(
            history=history,
            record=LoadRecord(Path("machine.csv"), machine, sign * force),
            clock=Clock(lag, u_clock, 0.0, "drawn"),
            specimen=Specimen(
                width=12.5,
                thickness=thickness,
                # The width of these tests is exact.
                width_uncertainty=1e-9 if u_thickness else None,
                thickness_uncertainty=u_thickness or None,
            ),
            truth={
                "youngs_modulus": E,
                "poissons_ratio": NU,
                "shear_modulus": E / (2 * (1 + NU)),
                "bulk_modulus": E / (3 * (1 - 2 * NU)),
                "lame_constant": E * NU / ((1 + NU) * (1 - 2 * NU)),
                "proof_stress_0_2": sign * RP02,
                "proof_stress_0_1": sign * RP02 * 0.5 ** (1 / EXPONENT),
                "tensile_strength": sign * peak,
                "strain_at_maximum": sign * fracture,
                "plastic_strain_at_maximum": sign * (fracture - peak / E),
                "strain_at_break": sign * fracture,
                "ramberg_osgood_exponent": EXPONENT,
                "strain_energy_to_yield": energy(RP02),
                "strain_energy_to_break": energy(peak),
                "strain_rate_elastic": sign * rate,
                "strain_rate_to_proof": sign * rate,
            },
        )

    return draw
