"""What in a record of force is noise, and what is a disturbance."""

from __future__ import annotations

import numpy as np
from numpy.lib.stride_tricks import sliding_window_view
from numpy.typing import NDArray
from scipy.ndimage import median_filter, uniform_filter1d

Floats = NDArray[np.float64]

#: Samples around each one that its noise is estimated from: enough to know it to some 10 %, few enough to
#: follow a noise that grows with the force.
NOISE_WINDOW = 301
#: A spike lasts this many samples at most; what lasts longer may have been borne.
SPIKE_SAMPLES = 3
#: Standard deviations of noise by which a spike stands out from either side: prolonging a side by its last
#: two samples makes √6 of them, and four of those come up once in 30 000.
SPIKE_NOISE = 10
#: Median of the absolute value of a standard normal variable.
NORMAL_MEDIAN = 0.6745


def noise_of(time_s: Floats, force: Floats) -> Floats:
    """Estimate the standard deviation of the force's noise around every sample.

    Each sample is compared with the straight line between its neighbours, and the root mean square of
    these misses over `NOISE_WINDOW` samples is taken, each held to four times their median: so neither
    the loading nor a fracture looks like noise.

    Parameters
    ----------
    time_s, force
        The record, shape (n,), at least three samples.

    Returns
    -------
    Floats
        Standard deviation, in the force's unit, shape (n,).
    """
    share = (time_s[1:-1] - time_s[:-2]) / (time_s[2:] - time_s[:-2])
    miss = force[1:-1] - ((1 - share) * force[:-2] + share * force[2:])
    own = np.abs(miss) / np.sqrt(1 + share**2 + (1 - share) ** 2)
    size = min(NOISE_WINDOW, len(own))
    typical = median_filter(own, size=size) / NORMAL_MEDIAN
    # The filter's running sum can end a rounding error below zero.
    spread = np.sqrt(np.maximum(uniform_filter1d(np.minimum(own, 4 * typical) ** 2, size), 0))
    return np.pad(spread, 1, mode="edge")


def spikes_of(force: Floats, noise: Floats) -> NDArray[np.bool_]:
    """Find samples that stand alone: disturbances of the transducer, not force that the coupon bore.

    A spike is a run of at most `SPIKE_SAMPLES` samples that lies beyond both its neighbours, and beyond
    where the force was heading on either side, by more than noise and the usual change from sample to
    sample can do.  A last sample before fracture, a yield point or a step is joined to one of its sides.
    At the ends of the record, where there is one side only, a jump towards zero may be the fracture.

    Parameters
    ----------
    force, noise
        The record and the standard deviation of its noise, shape (n,).

    Returns
    -------
    NDArray
        True where a sample is part of a spike, shape (n,).
    """
    steps = np.abs(np.diff(force))
    usual = float(np.median(steps[steps > 0])) if steps.any() else 0.0
    allowed = SPIKE_NOISE * noise + 2 * usual
    found = np.zeros(len(force), dtype=bool)
    for width in range(1, SPIKE_SAMPLES + 1):
        for way in (force, -force):
            found |= _standing_out(way, width, allowed)
    return found


def _standing_out(force: Floats, width: int, allowed: Floats) -> NDArray[np.bool_]:
    """Return the samples of those runs of a width that lie above both sides."""
    n = len(force)
    before, after = _heading(force), _heading(force[::-1])[::-1]
    lowest = sliding_window_view(force, width).min(axis=1)
    first = np.arange(n - width + 1)
    last = first + width - 1
    side = np.fmax(before[first], after[last])
    one_sided = np.isnan(before[first]) | np.isnan(after[last])
    alone = (lowest - side > allowed[first]) & (~one_sided | (lowest > np.abs(side)))
    found = np.zeros(n, dtype=bool)
    for shift in range(width):
        found[first[alone] + shift] = True
    return found


def _heading(force: Floats) -> Floats:
    """Return what the samples before each one reach, or are rising to; NaN for the first."""
    previous = np.concatenate([[np.nan], force[:-1]])
    return previous + np.concatenate([[0.0, 0.0], np.maximum(np.diff(force)[:-1], 0)])
