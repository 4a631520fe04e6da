"""What all frames of a test share: errors of axis and interpolation, and the choice of a window."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from math import nan, radians, sqrt

import numpy as np
from numpy.typing import NDArray

from dic.properties.fits import Window, fit
from dic.properties.loading import MIN_FRAMES, Loading, Undetermined

Floats = NDArray[np.float64]
Read = Callable[[Loading], float]

#: Share of a window's frames by which its ends are moved to see what their choice does.
MOVED_SHARE = 0.1
#: A change counts if it is this many times what the noise of the frames between does.
CLEAR = 2.0


def tried(read: Read, loading: Loading) -> float:
    """Return a reading; NaN where it cannot be had."""
    try:
        return read(loading)
    except Undetermined:
        return nan


def off_axis(loading: Loading, u_axis_deg: float) -> Loading:
    """Return the strains along an axis that is off by its standard uncertainty.

    Strain along a direction that is off by θ lacks (εa - εt)·sin²θ, and the strain across has as much too
    much.  The effect has one sign and no correction is made, so its mean, u², is part of it as much as its
    spread, √2·u²: together √3·u² of a normally distributed θ (JCGM 100:2008, F.2.4.4 on effects of one
    sign).
    """
    lacking = sqrt(3) * radians(u_axis_deg) ** 2 * (loading.strain - loading.transverse)
    return loading.stretched(-lacking, lacking)


def window_choice(loading: Loading, strain: Floats, u_strain: Floats, window: Window) -> float:
    """Return the standard uncertainty of a line's slope from where the window's ends are put.

    The strain is one as for `dic.properties.fits.fit`, or a sum of both.  Each end is moved by a tenth of
    the frames, inwards and outwards.  Fewer frames and more scatter by what the difference of both slopes'
    variances says; only a clearly larger change is that of the curve.  Half the spread bounds a rectangular
    distribution.
    """
    frames = window.frames
    step = max(round(MOVED_SHARE * window.count), 1)
    here = fit(loading, strain, u_strain, window)
    worst = 0.0
    for first, last in ((step, 0), (-step, 0), (0, step), (0, -step)):
        moved = slice(frames.start + first, frames.stop + last)
        if moved.start < 0 or moved.stop > len(strain) or moved.stop - moved.start < MIN_FRAMES:
            continue
        try:
            other = fit(loading, strain, u_strain, replace(window, frames=moved))
        except Undetermined:
            # The transverse strain may be missing in too many frames.
            continue
        off = abs(other.slope - here.slope)
        noise = sqrt(abs(other.u_slope**2 - here.u_slope**2))
        if off > CLEAR * noise:
            worst = max(worst, off)
    return worst / sqrt(3)
