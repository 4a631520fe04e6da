"""A virtual tensile test: what machine, coupon and camera do at each instant.

The lower grip is fixed; after an idle time the upper one moves up at constant speed.  Its travel is
taken up by slack in the seating, by the spring of machine and grips, and by the coupon:

    travel = slack·(1 − exp(−F / seating force)) + F / stiffness + strain·free length

(with no seating force the slack is free travel before any force).  The middle of the view is half
way between the grips, so it rises by half of the coupon's extension and by the lower grip's share
of the rest.  All times here are the machine's.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from synthetic_images.coupon import Coupon
from synthetic_images.materials import proof_stress
from synthetic_images.motions import Bending, Motion, _cos_sin, homogeneous
from synthetic_images.scenario import Scenario

Floats = NDArray[np.float64]

#: Halvings that take a bracket down to the spacing of floats.
_HALVINGS = 70
#: The realisation of a texture is larger than the picture by this, px, for what moves into view.
_MARGIN = 64
#: Each random thing draws from its own stream, so that changing one leaves the others as they were.
_STREAMS = {"texture": 1, "noise": 2, "force": 3, "crosshead": 4, "errors": 5, "extensometer": 6}


@dataclass(frozen=True)
class State:
    """The test at some instants, shape (n,) each.

    Attributes
    ----------
    crosshead_mm
        Travel of the upper grip.
    force_N
        True force.
    axial, transverse
        Engineering strains at the middle of the view.
    rise_mm
        How far the middle of the view has moved up the coupon's axis.
    sideways_mm
        How far it has moved across.
    """

    crosshead_mm: Floats
    force_N: Floats
    axial: Floats
    transverse: Floats
    rise_mm: Floats
    sideways_mm: Floats


@dataclass(frozen=True)
class Readings:
    """What was drawn for this test's systematic errors.

    Attributes
    ----------
    force_factor
        Indicated over true force.
    section_mm
        The section as the calliper gave it: width and thickness, or diameter.
    """

    force_factor: float
    section_mm: dict[str, float]


class VirtualTest:
    """The physics of one scenario.

    Parameters
    ----------
    scenario
        Its description.
    """

    def __init__(self, scenario: Scenario) -> None:
        self.scenario = scenario
        self.material = scenario.material.make()
        self.camera = scenario.camera.make()
        self.area_mm2 = scenario.specimen.area
        view = scenario.view
        self.centre = ((view.columns - 1) / 2, (view.rows - 1) / 2)
        self.texture = scenario.texture.make(
            (view.columns + 2 * _MARGIN, view.rows + 2 * _MARGIN), self.seed("texture")
        )

    def seed(self, stream: str) -> int:
        """Return the seed of one of the test's random things."""
        mixed = np.random.SeedSequence([self.scenario.seed, _STREAMS[stream]])
        return int(mixed.generate_state(1, np.uint64)[0])

    @property
    def frame_times(self) -> Floats:
        """When the frames are taken, s."""
        camera = self.scenario.camera
        return camera.offset + np.arange(camera.frames) / camera.rate

    @property
    def record_times(self) -> Floats:
        """When the load record is sampled, s."""
        rate = self.scenario.load_record.rate
        return np.arange(int(self.scenario.record_end * rate) + 1) / rate

    @property
    def fracture_time(self) -> float:
        """When the coupon breaks, s; infinite where it does not."""
        strain, machine = self.scenario.machine.fracture_strain, self.scenario.machine
        if strain is None:
            return np.inf
        return machine.start + float(self._travel(np.array(strain))) / machine.speed

    def at(self, time_s: ArrayLike) -> State:
        """Return the state at times on the machine's clock, s, shape (n,)."""
        time = np.asarray(time_s, dtype=float)
        machine = self.scenario.machine
        pulled = np.clip(time - machine.start, 0, None)
        travel = machine.speed * np.minimum(pulled, self.fracture_time - machine.start)
        axial = self._strain(travel)
        transverse, force = self.material.transverse(axial), self.area_mm2 * self.material.stress(axial)
        taken = travel - axial * machine.free_length
        broken = time >= self.fracture_time
        if machine.fracture_strain is not None:
            # The spring of the grip returns; what was slack stays taken up.
            taken = np.where(broken, taken - force / machine.stiffness, taken)
            force = np.where(broken, 0.0, force)
            left = self.material.unloaded(machine.fracture_strain)
            axial, transverse = (
                np.where(broken, s, e) for s, e in zip(left, (axial, transverse), strict=True)
            )
        return State(
            crosshead_mm=machine.speed * pulled,
            force_N=force,
            axial=axial,
            transverse=transverse,
            rise_mm=machine.lower_share * taken + axial * machine.free_length / 2,
            sideways_mm=machine.sideways * pulled,
        )

    def _travel(self, strain: Floats) -> Floats:
        machine = self.scenario.machine
        force = self.area_mm2 * self.material.stress(strain)
        with np.errstate(divide="ignore", invalid="ignore"):
            seated = np.where(force > 0, -np.expm1(-force / machine.seating_force), 0.0)
        return machine.slack * seated + force / machine.stiffness + strain * machine.free_length

    def _strain(self, travel: Floats) -> Floats:
        """Solve `_travel` for the strain by halving, as it only ever rises."""
        low, high = np.zeros_like(travel), travel / self.scenario.machine.free_length
        for _ in range(_HALVINGS):
            middle = (low + high) / 2
            above = self._travel(middle) > travel
            low, high = np.where(above, low, middle), np.where(above, middle, high)
        return low

    def motions(self) -> list[Motion]:
        """Return the motion of the coupon in the picture, frame by frame."""
        state, view = self.at(self.frame_times), self.scenario.view
        c, s = _cos_sin(view.axis_angle)
        return [self._motion(state, k, c, s) for k in range(len(state.axial))]

    def _motion(self, state: State, k: int, c: float, s: float) -> Motion:
        up, across = -state.rise_mm[k] / self.scenario.scale, state.sideways_mm[k] / self.scenario.scale
        axial, transverse, angle = state.axial[k], state.transverse[k], self.scenario.view.axis_angle
        straight = homogeneous(
            float(axial),
            float(transverse),
            axis_angle_deg=angle,
            centre=self.centre,
            shift=(float(c * across - s * up), float(s * across + c * up)),
        )
        curvature = self.scenario.machine.bending * axial / (self.scenario.view.coupon_width / 2)
        if curvature == 0:
            return straight
        return Bending(straight, angle, float(curvature), float(-transverse / axial))

    def scene(self, motion: Motion) -> Coupon:
        """Return what the camera sees when the coupon has moved so."""
        view = self.scenario.view
        return Coupon(
            self.texture,
            motion,
            self.centre,
            view.coupon_width,
            view.axis_angle,
            view.background,
            cylinder=self.scenario.specimen.shape == "round",
        )

    def frame(self, k: int, motion: Motion) -> NDArray:
        """Return frame k, grey levels, shape (rows, columns)."""
        shape = (self.scenario.view.rows, self.scenario.view.columns)
        return self.camera.photograph(self.scene(motion), shape, frame=k, seed=self.seed("noise"))

    def readings(self) -> Readings:
        """Draw the systematic errors from their stated standard uncertainties."""
        specimen = self.scenario.specimen
        draw = np.random.default_rng(self.seed("errors")).standard_normal(3)
        return Readings(
            force_factor=1 + self.scenario.load_record.force_uncertainty * float(draw[0]),
            section_mm={
                name: getattr(specimen, name) + (getattr(specimen, f"{name}_uncertainty") or 0.0) * float(one)
                for name, one in zip(specimen.dimensions, draw[1:], strict=False)
            },
        )

    def record(self) -> tuple[Floats, Floats, Floats]:
        """Return the load record: time (s), crosshead (mm) and force (N) as the machine indicates them."""
        settings = self.scenario.load_record
        time = self.record_times
        state = self.at(time)
        noise = {
            name: np.random.default_rng(self.seed(name)).standard_normal(time.size)
            for name in ("force", "crosshead")
        }
        force = self.readings().force_factor * state.force_N + settings.force_noise * noise["force"]
        crosshead = state.crosshead_mm + settings.crosshead_noise * noise["crosshead"]
        return time, crosshead, force

    def contact_strain(self) -> Floats | None:
        """Return the clip-on extensometer's strain at the record's times; None where there is none.

        It is taken off when the strain reaches `extensometer_removed`, and then reads nothing but noise.
        """
        settings = self.scenario.load_record
        if settings.extensometer_gain is None:
            return None
        axial = self.at(self.record_times).axial
        strain = settings.extensometer_gain * axial + settings.extensometer_offset
        if settings.extensometer_removed is not None:
            strain[np.maximum.accumulate(axial) >= settings.extensometer_removed] = 0.0
        noise = np.random.default_rng(self.seed("extensometer")).standard_normal(axial.size)
        return strain + settings.extensometer_noise * noise

    def properties(self) -> dict[str, tuple[float, str]]:
        """Return the true properties, (value, unit) by the names of a result; NaN where none is reached.

        The tensile strength is the largest stress that the coupon has borne by the record's last sample.
        """
        last = min(self.fracture_time, float(self.record_times[-1]))
        machine = self.scenario.machine
        strain = float(self._strain(np.array(machine.speed * max(last - machine.start, 0.0))))
        modulus, ratio = self.material.youngs_modulus, self.material.poissons_ratio
        return {
            "youngs_modulus": (modulus, "MPa"),
            "poissons_ratio": (ratio, ""),
            "shear_modulus": (modulus / (2 * (1 + ratio)), "MPa"),
            "proof_stress_0_2": (proof_stress(self.material, strain), "MPa"),
            "tensile_strength": (float(np.max(self.material.stress(np.linspace(0, strain, 2001)))), "MPa"),
        }
