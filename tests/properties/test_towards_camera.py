"""What a coupon that may have moved towards the camera adds to the properties."""

from dataclasses import replace

import numpy as np

from dic.properties import Sheet, evaluate
from dic.testfile import Properties


def test_the_budget_holds_what_a_motion_in_the_window_does(pull):
    """A false strain that grows over the elastic part, by the bound's half width: k = 2 holds E and ν."""
    drawn, half = pull(), 200e-6
    plain = evaluate(Sheet(drawn.curve, drawn.specimen, 0.001, drawn.clock, Properties()))
    strain = drawn.curve.axial
    low, high = plain.line.low, plain.line.high
    for way in (half, -half):
        false = way * np.clip((strain - low) / (high - low), 0, 1)
        curve = replace(
            drawn.curve,
            axial=strain + false,
            transverse=drawn.curve.transverse + false,
            u_towards=half / np.sqrt(3),
        )
        window = {"stress": plain.properties["youngs_modulus"].window["stress_MPa"]}
        found = evaluate(
            Sheet(curve, drawn.specimen, 0.001, drawn.clock, Properties(modulus=window))
        ).properties
        for name in ("youngs_modulus", "poissons_ratio"):
            one, true = found[name], plain.properties[name]
            assert one.contributions["motion towards the camera"] > 0
            assert abs(one.value - true.value) < 2 * one.standard_uncertainty
            assert not any("motion towards" in source for source in one.missing)
