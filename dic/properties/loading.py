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


@dataclass(frozen=True)
class Loading:
    """Frames up to the largest force, with the direction of loading counted positive.

    Attributes
    ----------
    sign
        +1 in tension, -1 in compression; what is read from here is multiplied by it.
    time_s, stress, strain, transverse
        Shape (n,); stress (MPa) and strain are finite, the transverse strain may be NaN.
    """

    sign: float
    time_s: Floats
    stress: Floats
    strain: Floats
    transverse: Floats

    def later(self, seconds: float) -> Loading:
        """Return the same strains with the stress read that much later."""
        rate = np.gradient(self.stress, self.time_s)
        return replace(self, stress=self.stress + seconds * rate)


def loading_of(curve: Curve) -> Loading:
    """Return a curve's frames up to the largest force; those after it belong to a necked or broken coupon."""
    sign = 1.0 if curve.peak_force_N >= 0 else -1.0
    use = np.isfinite(curve.stress_MPa) & np.isfinite(curve.axial) & (curve.time_s <= curve.peak_time_s)
    return Loading(
        sign=sign,
        time_s=curve.time_s[use],
        stress=sign * curve.stress_MPa[use],
        strain=sign * curve.axial[use],
        transverse=sign * curve.transverse[use],
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
