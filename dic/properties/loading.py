"""The part of a curve that properties may be read from, and where in it a bound is passed."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from dic.properties.result import Curve

Floats = NDArray[np.float64]

#: Frames that a window has to hold: a line's scatter from fewer says next to nothing.
MIN_FRAMES = 5


class Undetermined(Exception):  # noqa: N818  (no error: a test that does not give a property is a result)
    """A property cannot be had from this test; the message is the reason, as the sheet gives it."""


@dataclass(frozen=True, eq=False)
class Loading:
    """Frames up to the largest force, with the direction of loading counted positive.

    It is itself and no other one, so that what was laid through it can be kept by it.

    Attributes
    ----------
    sign
        +1 in tension, -1 in compression; what is read from here is multiplied by it.
    rows
        The frames' places in the curve, shape (n,), like all that follow.
    time_s, stress, strain, transverse
        Stress (MPa) and strain are finite, the transverse strain may be NaN.
    u_stress, u_strain, u_transverse
        Standard uncertainties from the noise of force and camera, zero where unknown.
    """

    sign: float
    rows: NDArray[np.intp]
    time_s: Floats
    stress: Floats
    strain: Floats
    transverse: Floats
    u_stress: Floats
    u_strain: Floats
    u_transverse: Floats

    def later(self, seconds: float | Floats) -> Loading:
        """Return the same strains with the stress read that much later, by one time or by each frame's."""
        rate = np.gradient(self.stress, self.time_s)
        return replace(self, stress=self.stress + seconds * rate)

    def stretched(self, axial: Floats | float, transverse: Floats | float) -> Loading:
        """Return the same frames with false strains, shape (n,)."""
        return replace(self, strain=self.strain + axial, transverse=self.transverse + transverse)

    def counted_from(self, strain: float, transverse: float = 0.0) -> Loading:
        """Return the same frames with the strains counted from other zeros."""
        return replace(self, strain=self.strain - strain, transverse=self.transverse - transverse)

    def part(self, which: slice) -> Loading:
        """Return some of the frames."""
        arrays = {name: value[which] for name, value in vars(self).items() if name != "sign"}
        return replace(self, **arrays)


def loading_of(curve: Curve, *, whole: bool = False) -> Loading:
    """Return a curve's frames up to the largest force, or all of the `whole` test.

    Frames after the largest force belong to a necked or broken coupon.

    Raises
    ------
    Undetermined
        If the frames' times do not grow, or the section is none.
    """
    sign = 1.0 if curve.peak_force_N >= 0 else -1.0
    use = np.isfinite(curve.stress_MPa) & np.isfinite(curve.axial)
    if not whole:
        use &= curve.time_s <= curve.peak_time_s
    require_section(curve)
    back = np.flatnonzero(~(np.diff(curve.time_s) > 0))
    if back.size:
        raise Undetermined(
            f"the times do not grow from frame {back[0]} to frame {back[0] + 1}; correct the frames' times"
        )
    u_stress = np.zeros(len(use)) if curve.u_stress_MPa is None else curve.u_stress_MPa
    return Loading(
        sign=sign,
        rows=np.flatnonzero(use),
        time_s=curve.time_s[use],
        stress=sign * curve.stress_MPa[use],
        strain=sign * curve.axial[use],
        transverse=sign * curve.transverse[use],
        u_stress=u_stress[use],
        u_strain=np.nan_to_num(curve.u_axial[use]),
        u_transverse=np.nan_to_num(curve.u_transverse[use]),
    )


def require_section(curve: Curve) -> None:
    """Raise unless the coupon has a section."""
    if not curve.area_mm2 > 0:
        raise Undetermined(
            f"the section of {curve.area_mm2:g} mm² is none; correct the specimen's dimensions"
        )


def passage(values: Floats, low: float, high: float) -> slice:
    """Return the frames from first reaching `low` to first passing `high`.

    Frames are taken as one run in time rather than one by one by their value, because picking by a
    noisy value would cut off the noise on one side and bend the line.
    """
    reached = np.flatnonzero(values >= low)
    first = int(reached[0]) if reached.size else len(values)
    passed = np.flatnonzero(values[first:] > high)
    return slice(first, first + int(passed[0]) if passed.size else len(values))
