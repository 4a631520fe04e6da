"""What aliasing of this very pattern leaves in a gauge: one error for all frames, not one per frame.

A camera's pixels do not show sharp edges wholly, and what is missing changes as the pattern moves across
them.  Each subset is false by a·(sin(2πu + φ) − sin φ), u its motion in px, with a phase of its own.  What
all subsets have in common the test shows, see `dic.strain.periodic`; the rest does not vanish in a gauge,
and no repetition of frames averages it out.  But the residuals of the matching show how large it is: they
are larger as soon as the coupon has moved than at rest, where there is nothing but the camera's noise.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]

#: Frames up to this strain show the size: at larger ones the residuals hold more than aliasing.
SMALL = 0.01
#: While the waves' squares add up to less, 2 for each frame on the mean, they tell no size.
LEAST_SEEN = 0.1


def aliasing(u: Floats, shift_px: Floats, axial: Floats, averaged: range) -> Floats:
    """Return what aliasing may leave in a strain, one standard uncertainty, the same error in all frames.

    Parameters
    ----------
    u
        Standard uncertainty of the strain in each frame as the matching's residuals say, shape (n,); NaN
        where the frame was lost.
    shift_px
        Mean motion of the gauge in the strain's direction, px, shape (n,); what motion across does to it is
        small.
    axial
        Axial strain, shape (n,).
    averaged
        Frames that were averaged into the reference.

    Returns
    -------
    ndarray
        Its two parts, independent of each other, shape (n, 2): those of the sine and of the cosine.
    """
    phase = 2 * np.pi * np.nan_to_num(shift_px)
    waves = np.stack([np.sin(phase), np.cos(phase) - 1.0], axis=1)
    shown = np.isfinite(u) & (np.abs(axial) < SMALL)
    shown[averaged.start : averaged.stop] = False
    excess = float(np.sum(u[shown] ** 2 - _at_rest(u, averaged) ** 2))
    seen = float(np.sum(waves[shown] ** 2))
    return np.asarray(np.sqrt(max(excess, 0.0) / max(seen, LEAST_SEEN)) * waves)


def _at_rest(u: Floats, averaged: range) -> float:
    """Return the uncertainty from the camera's noise alone: that of the frames at rest, else the least."""
    there, n = u[averaged.start : averaged.stop], len(averaged)
    if n > 1 and np.isfinite(there).any():
        # A frame's own noise is in the mean that it is compared with, so its residual is too small.
        return float(np.nanmedian(there) * np.sqrt((n + 1) / (n - 1)))
    others = np.delete(u, averaged)
    return float(np.nanmin(others)) if np.isfinite(others).any() else 0.0
