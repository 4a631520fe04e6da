"""An even rate through stamps that tell whole seconds only."""

from __future__ import annotations

from dataclasses import dataclass
from math import sqrt

import numpy as np
from numpy.typing import NDArray


@dataclass(frozen=True)
class EvenRate:
    """Frames at even distances that explain every stamp.

    Attributes
    ----------
    first_s
        Time of the first frame, s, on the stamps' own scale.
    interval_s, u_interval_s
        Time from frame to frame, s, and its standard uncertainty.
    """

    first_s: float
    interval_s: float
    u_interval_s: float


def even_rate(seconds: NDArray[np.int64], frames: NDArray[np.int64] | None = None) -> EvenRate | None:
    """Find the even distance of frames whose stamps are whole seconds, rounded down.

    Each stamp s of frame k bounds the first time t and the interval d by s ≤ t + k·d < s + 1.  All
    bounds together leave a narrow range of d (two linear programmes); its middle is taken, and the
    standard uncertainty of a value that may lie anywhere in it, half the width over √3 (JCGM 100:2008,
    4.3.7).

    Parameters
    ----------
    seconds
        Stamps in the frames' order, s, shape (n,), n ≥ 2.
    frames
        Numbers of the frames that they belong to, rising, the first 0; by default all, one by one.

    Returns
    -------
    EvenRate or None
        None where no even distance explains the stamps: frames are missing or were not taken evenly.
    """
    from scipy.optimize import linprog

    k = np.arange(len(seconds)) if frames is None else frames
    stamps = (seconds - seconds[0]).astype(float)
    above = np.column_stack([-np.ones(len(k)), -k])
    bounds = np.concatenate([above, -above]), np.concatenate([-stamps, stamps + 1])
    ends = []
    for sign in (1, -1):
        found = linprog([0, sign], A_ub=bounds[0], b_ub=bounds[1], bounds=[(None, None), (0, None)])
        if not found.success:
            return None
        ends.append(float(found.x[1]))
    interval = sum(ends) / 2
    if not interval > 0:
        return None
    first = (np.max(stamps - k * interval) + np.min(stamps + 1 - k * interval)) / 2
    return EvenRate(float(seconds[0] + first), interval, (ends[1] - ends[0]) / 2 / sqrt(3))
