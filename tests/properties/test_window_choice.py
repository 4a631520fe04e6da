"""What the choice of the window does to the elastic constants, against a law whose bend is known."""

from dataclasses import replace
from math import sqrt

import numpy as np
import pytest

from dic.properties.hooke import bulk_modulus, lame_constant, shear_modulus
from dic.testfile import ModulusWindow, Properties

CONSTANTS = ("youngs_modulus", "poissons_ratio", "shear_modulus", "bulk_modulus", "lame_constant")
MU, BULK = 1.0, 5.0
#: Far below that of a camera: the bend shows within the 0.2 % of strain that the automatic window takes.
NOISE, FORCE_NOISE = 3e-8, 1e-6


def neo_hookean(stretch):
    """Return nominal stress and transverse strain of uniaxial tension.

    Energy µ/2·(I₁ - 3 - 2·ln J) + Λ/2·(ln J)² (Bonet and Wood, Nonlinear Continuum Mechanics for Finite
    Element Analysis, 2nd ed. 2008, section 6.4.3 [from memory]).  The sides are free, which gives
    µ·(b² - 1) + Λ·ln(λ·b²) = 0 for their stretch b; Newton's method solves it.
    """
    lame = BULK - 2 * MU / 3
    across = stretch**-0.4
    for _ in range(30):
        rest = MU * (across**2 - 1) + lame * np.log(stretch * across**2)
        across = across - rest / (2 * MU * across + 2 * lame / across)
    volume = stretch * across**2
    return (MU * (stretch**2 - 1) + lame * np.log(volume)) / stretch, across - 1


@pytest.fixture
def rubber(pull):
    """A function that draws a stretched strip; `straight` is the same one by Hooke's law."""

    def draw(seed=0, *, straight=False):
        r = np.random.default_rng(seed)
        drawn = pull(seed)
        camera = drawn.history.time_s
        stop = camera[-1] - 1.0

        def true_at(time):
            return 0.02 * np.clip((time - 2.0) / (stop - 2.0), 0, 1)

        def law(strain):
            if straight:
                modulus, ratio = hooke()
                return modulus * strain, -ratio * strain
            return neo_hookean(1 + strain)

        noise = r.normal(0, NOISE, (2, len(camera)))
        machine = drawn.record.time_s
        force = drawn.specimen.area * law(true_at(machine))[0]
        force = force + r.normal(0, FORCE_NOISE * force.max(), len(force))
        history = replace(
            drawn.history,
            axial=true_at(camera) + noise[0],
            transverse=law(true_at(camera))[1] + noise[1],
            **{f"u_{name}": np.full(len(camera), NOISE) for name in ("axial", "transverse")},
        )
        return replace(drawn, history=history, record=replace(drawn.record, force_N=force))

    return draw


def hooke():
    """Return E and ν of small strains."""
    return 9 * BULK * MU / (3 * BULK + MU), (3 * BULK - 2 * MU) / (2 * (3 * BULK + MU))


def constants(drawn, **keys):
    entries = drawn.first_entries(Properties(**keys))
    return [entries[name].property() for name in CONSTANTS]


def tangents(strain):
    """Return the constants that the law's tangents at a strain give, by central differences."""
    step = 1e-5
    (high, across_high), (low, across_low) = (neo_hookean(1 + strain + by) for by in (step, -step))
    modulus, ratio = (high - low) / (2 * step), -(across_high - across_low) / (2 * step)
    laws = (shear_modulus, bulk_modulus, lame_constant)
    return np.array([modulus, ratio, *(law(modulus, ratio) for law in laws)])


def contributions(draws, source):
    return np.array([[one.contributions[source] for one in constants(drawn)] for drawn in draws])


def test_a_bent_curve_gives_what_its_tangents_say(rubber):
    """Moving an end by a tenth of 0.2 % of strain moves the window's middle by half of that.

    A line over a small bend has the slope of the tangent in its middle.  E and ν fall together: G, whose
    fall is less than that of E, holds their correlation against the law.
    """
    draws = [rubber(seed) for seed in range(5)]
    choice, noise = (np.median(contributions(draws, of), axis=0) for of in ("window choice", "scatter"))
    by = 0.5 * 0.1 * 0.002
    told = np.abs(tangents(0.0015 + by) - tangents(0.0015)) / sqrt(3)
    # Frames are whole, which moves the ends by up to 5 %, and the largest of four changes has the noise of
    # one of them on top, about 10 % of ν's.
    assert choice == pytest.approx(told, rel=0.25)
    assert (choice > 2 * noise).all()


def test_a_straight_curve_gives_nothing(rubber):
    draws = [rubber(seed, straight=True) for seed in range(9)]
    choice, noise = (contributions(draws, of) for of in ("window choice", "scatter"))
    # Four changes are held against two standard deviations each, so one draw in six or so passes by chance.
    assert (np.median(choice, axis=0) == 0).all()
    assert (choice < 2 * noise).all()


def test_a_window_that_was_asked_for_is_no_choice(rubber):
    found = constants(rubber(), modulus=ModulusWindow(strain=(0.0005, 0.0025)))
    assert not any("window choice" in one.contributions for one in found)


def test_frames_without_transverse_strain_beside_the_window(rubber):
    """The ends can then be moved inwards only; the bend still shows."""
    drawn = rubber()
    axial = drawn.history.axial
    lost = np.where((axial > 0.0005) & (axial < 0.0026), drawn.history.transverse, np.nan)
    drawn = replace(drawn, history=replace(drawn.history, transverse=lost))
    ratio = constants(drawn)[CONSTANTS.index("poissons_ratio")]
    assert ratio.contributions["window choice"] > ratio.contributions["scatter"]
