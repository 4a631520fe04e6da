"""Virtual tests drawn at random: six kinds of material, each with other noise, alignment and rates."""

from __future__ import annotations

from typing import Any

import numpy as np

from synthetic_images.scenario import Scenario
from synthetic_images.virtual_test import VirtualTest

#: The kinds of material, in turn.
KINDS = ("steel", "aluminium", "brass", "polymer", "composite", "elastomer")
#: Frames at rest before the pull at the least, and beyond the fracture.
REST, AFTER = 10, 3
#: Frames that are enough for any test while its fracture is looked for.
_ENOUGH = 5000


def varied(seed: int, kind: str | None = None) -> Scenario:
    """Draw a virtual test.

    Parameters
    ----------
    seed
        The same seed gives the same test.
    kind
        One of `KINDS`; by default they follow each other with the seed.

    Returns
    -------
    Scenario
        A coupon that is pulled until it breaks, with a picture as small as its accuracy allows.  Force and
        section are false by what their stated standard uncertainties allow, 0.05 % each.
    """
    kind = kind or KINDS[seed % len(KINDS)]
    draw = np.random.default_rng([seed, KINDS.index(kind)])
    law, window, fracture, section = _material(kind, draw)
    rate = float(draw.uniform(4, 12))
    width, thickness = float(draw.uniform(9, 15)), float(draw.uniform(1, 1.6))
    rest = float(draw.uniform(REST, REST + 4)) / rate
    offset = float(draw.uniform(0.3, 3))
    content: dict[str, Any] = {
        "seed": seed,
        "specimen": {
            "label": f"{kind} {seed}",
            "material": f"invented {kind}",
            "width": width,
            "thickness": thickness,
            "width_uncertainty": 0.0003 * width,
            "thickness_uncertainty": 0.0004 * thickness,
        },
        "material": law,
        "texture": {"kind": "dots", "diameter": float(draw.uniform(3.5, 5)), "cover": 0.5},
        "view": {
            "rows": 360,
            "columns": 170,
            "coupon_width": 130,
            "axis_angle": float(draw.uniform(-2, 2)),
        },
        "camera": {
            "frames": _ENOUGH,
            "rate": rate,
            "offset": offset,
            "bits": 12,
            "noise": float(draw.uniform(0.0015, 0.006)),
            "samples": 2,
        },
        "machine": {
            "free_length": 60,
            "speed": 1.0,
            "start": offset + rest,
            "stiffness": float(draw.uniform(10_000, 14_000)),
            "slack": float(draw.uniform(0, 0.02)),
            "seating_force": 20 if kind != "elastomer" else 0.2,
            "sideways": 0.0,
            "bending": float(draw.uniform(-0.08, 0.08)),
            "fracture_strain": fracture,
        },
        "load_record": {"rate": float(draw.choice([50, 100, 200])), "force_uncertainty": 0.0005},
        "properties": section,
    }
    return _paced(content, window, int(draw.integers(10, 17)), float(draw.uniform(1e-4, 6e-4)))


def _paced(content: dict[str, Any], window: tuple[float, float], frames: int, noise: float) -> Scenario:
    """Choose the speed so that so many frames fall into a window of strain, and the noise of the force."""
    test = VirtualTest(Scenario.model_validate(content))
    low, high = (float(test._travel(np.array(strain))) for strain in window)
    machine, camera = content["machine"], content["camera"]
    machine["speed"] = (high - low) * camera["rate"] / frames
    machine["sideways"] = 0.02 * machine["speed"]
    test = VirtualTest(Scenario.model_validate(content))
    force = float(np.max(test.at(np.linspace(0, test.fracture_time, 500)).force_N))
    content["load_record"]["force_noise"] = noise * force
    camera["frames"] = int(np.ceil((test.fracture_time - camera["offset"]) * camera["rate"])) + AFTER
    return Scenario.model_validate(content)


def _material(
    kind: str, draw: np.random.Generator
) -> tuple[dict[str, Any], tuple[float, float], float, dict[str, Any]]:
    """Return law, window of the modulus in strain, strain at fracture, and what the test file wishes."""
    between = draw.uniform
    if kind == "steel":
        modulus, upper = between(203e3, 213e3), between(300, 420)
        law = {
            "law": "yield_point",
            "youngs_modulus": modulus,
            "poissons_ratio": between(0.27, 0.30),
            "upper_yield": upper,
            "lower_yield": upper * between(0.95, 0.97),
            "saturation": upper * between(1.25, 1.4),
            "level": between(0.002, 0.003),
            "hardening": 0.002,
        }
        return law, _shares(0.96 * upper / modulus), between(0.011, 0.014), {"preset": "metals"}
    if kind in ("aluminium", "brass"):
        light = kind == "aluminium"
        modulus = between(68e3, 74e3) if light else between(98e3, 112e3)
        proof = between(220, 430) if light else between(180, 350)
        law = {
            "law": "ramberg_osgood",
            "youngs_modulus": modulus,
            "poissons_ratio": between(0.31, 0.36),
            "proof_stress": proof,
            "exponent": between(14, 30),
        }
        return law, _shares(proof / modulus), between(0.0105, 0.013), {"preset": "metals"}
    if kind == "polymer":
        law = {
            "law": "ramberg_osgood",
            "youngs_modulus": between(2200, 3600),
            "poissons_ratio": between(0.36, 0.42),
            "proof_stress": between(20, 25),
            "exponent": between(12, 18),
        }
        return law, (0.0005, 0.0025), between(0.0125, 0.015), {"preset": "plastics", "proof": (0.002,)}
    if kind == "composite":
        law = {
            "law": "elastic",
            "youngs_modulus": between(40e3, 130e3),
            "poissons_ratio": between(0.25, 0.34),
        }
        return law, (0.001, 0.003), between(0.006, 0.009), {"preset": "fibre composites"}
    law = {"law": "neo_hookean", "shear_modulus": between(0.4, 1.2)}
    wanted = {"modulus": {"strain": (0.01, 0.06)}, "proof": ()}
    return law, (0.01, 0.06), between(0.12, 0.16), wanted


def _shares(strain: float) -> tuple[float, float]:
    """Return 10 % and 40 % of the strain at yield."""
    return 0.1 * strain, 0.4 * strain
