"""Force at the instants of the frames, from a record that is denser and noisy."""

from __future__ import annotations

import numpy as np
from numpy.lib.stride_tricks import sliding_window_view
from numpy.typing import NDArray
from scipy.interpolate import make_interp_spline
from scipy.ndimage import median_filter, uniform_filter1d
from scipy.signal import oaconvolve

from dic.errors import LoadRecordError
from dic.sync.record import Clock, LoadRecord

Floats = NDArray[np.float64]

#: Samples around each one that its noise is estimated from: enough to know it to some 10 %, few enough to
#: follow a noise that grows with the force.
NOISE_WINDOW = 301
#: A spike lasts this many samples at most; what lasts longer may have been borne.
SPIKE_SAMPLES = 3
#: Standard deviations of noise by which a spike stands out from either side: prolonging a side by its last
#: two samples makes √6 of them, and four of those come up once in 30 000.
SPIKE_NOISE = 10
#: Noise from this many standard deviations down is no load: one sample in 10⁹ lies beyond.
NO_LOAD = 6
#: Rows of the record within an exposure from which the force is averaged over it.
EXPOSURE_ROWS = 2
#: Median of the absolute value of a standard normal variable.
_NORMAL_MEDIAN = 0.6745


def force_noise(record: LoadRecord) -> Floats:
    """Estimate the standard deviation of the force's noise around every sample.

    Each sample is compared with the straight line between its neighbours, and the root mean square of
    these misses over `NOISE_WINDOW` samples is taken, each held to four times their median: so neither
    the loading nor a fracture looks like noise.

    Parameters
    ----------
    record
        The load record, at least three samples.

    Returns
    -------
    Floats
        Standard deviation, N, shape (n,).
    """
    t, force = record.time_s, record.force_N
    share = (t[1:-1] - t[:-2]) / (t[2:] - t[:-2])
    miss = force[1:-1] - ((1 - share) * force[:-2] + share * force[2:])
    own = np.abs(miss) / np.sqrt(1 + share**2 + (1 - share) ** 2)
    size = min(NOISE_WINDOW, len(own))
    typical = median_filter(own, size=size) / _NORMAL_MEDIAN
    # The filter's running sum can end a rounding error below zero.
    spread = np.sqrt(np.maximum(uniform_filter1d(np.minimum(own, 4 * typical) ** 2, size), 0))
    return np.pad(spread, 1, mode="edge")


def smoothed_force(record: LoadRecord, width_s: float) -> Floats:
    """Average the force's noise where that cannot distort the force.

    Spikes are bridged (see `force_spikes`).  Every sample is replaced by the mean of the widest symmetric
    window, at most `width_s` long, in which the record is a straight line within its own noise; the mean
    is then the line's value at the sample.  At the start of loading, at a sharp yield point and at
    fracture the windows shrink by themselves, down to the sample alone.

    Parameters
    ----------
    record
        The load record.
    width_s
        Longest window, s.

    Returns
    -------
    Floats
        Force, N, shape (n,).
    """
    return _smoothed(record, width_s)[0]


def _smoothed(record: LoadRecord, width_s: float) -> tuple[Floats, Floats]:
    """Return the smoothed force and the standard deviation of the noise that is left in it."""
    t, force, noise = record.time_s, without_spikes(record), force_noise(record)
    noise_variance = noise**2
    best, samples = force.copy(), np.ones(len(t))
    for half in _half_windows(t, width_s):
        size = 2 * half + 1
        mean, variance = _about_line(force, half)
        # Three standard deviations of a variance with that many degrees of freedom.
        straight = variance <= noise_variance * (1 + 3 * np.sqrt(2 / (size - 2)))
        inside = np.zeros(len(t), dtype=bool)
        inside[half:-half] = t[2 * half :] - t[: -2 * half] <= width_s * (1 + 1e-6)
        best = np.where(straight & inside, mean, best)
        samples = np.where(straight & inside, size, samples)
    return best, noise / np.sqrt(samples)


def force_spikes(record: LoadRecord) -> NDArray[np.bool_]:
    """Find samples that stand alone: disturbances of the transducer, not force that the coupon bore.

    A spike is a run of at most `SPIKE_SAMPLES` samples that lies beyond both its neighbours, and beyond
    where the force was heading on either side, by more than noise and the usual change from sample to
    sample can do.  A last sample before fracture, a yield point or a step is joined to one of its sides.
    At the ends of the record, where there is one side only, a jump towards zero may be the fracture.

    Parameters
    ----------
    record
        The load record.

    Returns
    -------
    NDArray
        True where a sample is part of a spike, shape (n,).
    """
    steps = np.abs(np.diff(record.force_N))
    usual = float(np.median(steps[steps > 0])) if steps.any() else 0.0
    allowed = SPIKE_NOISE * force_noise(record) + 2 * usual
    found = np.zeros(len(record.force_N), dtype=bool)
    for width in range(1, SPIKE_SAMPLES + 1):
        for force in (record.force_N, -record.force_N):
            found |= _standing_out(force, width, allowed)
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


def without_spikes(record: LoadRecord) -> Floats:
    """Return the force with straight lines across its spikes, N, shape (n,)."""
    sound = ~force_spikes(record)
    return np.interp(record.time_s, record.time_s[sound], record.force_N[sound])


def has_load(record: LoadRecord) -> bool:
    """Tell whether the force ever changes by more than its noise."""
    return bool(np.ptp(without_spikes(record)) > 2 * NO_LOAD * float(np.median(force_noise(record))))


def wrong_sign(record: LoadRecord, *, longer: bool) -> LoadRecordError:
    """Return the error for a force that goes against the strain."""
    seen, force = ("longer", "negative") if longer else ("shorter", "positive")
    return LoadRecordError(
        f"the coupon gets {seen} while the force is {force}",
        where=str(record.path),
        remedy="export the force with tension positive, from a machine zeroed before the test",
    )


def _half_windows(t: Floats, width_s: float) -> list[int]:
    """Return the half widths to try, in samples: doubling, then the widest."""
    # The millionth keeps a window that fits exactly from hanging on the last bit of a time.
    samples = min(width_s / float(np.median(np.diff(t))) + 1e-6, len(t))
    widest = int((samples - 1) / 2)
    doubling = [2**k for k in range(20) if 2**k < widest]
    return [*doubling, widest] if widest >= 1 else []


def _about_line(force: Floats, half: int) -> tuple[Floats, Floats]:
    """Return each window's mean and its residual variance about a straight line."""
    size = 2 * half + 1
    mean = uniform_filter1d(force, size)
    # A line's least-squares slope; by Fourier transform, because windows may be ten thousand samples long.
    places = np.arange(half, -half - 1, -1.0)
    slope = oaconvolve(np.pad(force - force[0], half, mode="edge"), places, "valid") / np.sum(places**2)
    total = uniform_filter1d(force**2, size) - mean**2
    explained = slope**2 * half * (half + 1) / 3
    return mean, np.maximum(total - explained, 0) * size / (size - 2)


def force_at(
    record: LoadRecord, clock: Clock, camera_time_s: Floats, exposure_s: float | None = None
) -> Floats:
    """Return the force at the instants of the frames.

    The record is smoothed over at most one frame interval (see `smoothed_force`), then interpolated
    linearly.  One interval uses every sample of a dense record once, so the remaining noise of
    different frames stays independent, as a regression over frames assumes.

    Parameters
    ----------
    record
        The load record.
    clock
        The machine's time of the frames.
    camera_time_s
        Times of the frames on the camera's clock, s, shape (n,): the middle of their exposures.
    exposure_s
        Exposure time of a frame, s, over which the force is averaged where the record has at least
        `EXPOSURE_ROWS` rows in it: there a frame shows the mean of what happened.

    Returns
    -------
    Floats
        Force, N, shape (n,); NaN outside the record.
    """
    return force_and_noise_at(record, clock, camera_time_s, exposure_s)[0]


def force_and_noise_at(
    record: LoadRecord, clock: Clock, camera_time_s: Floats, exposure_s: float | None = None
) -> tuple[Floats, Floats]:
    """Return what `force_at` does, and the standard deviation of the noise that is left in it, N."""
    at = clock.machine_time(camera_time_s)
    smooth, spread = _smoothed(record, frame_interval(at))
    force, noise = (
        np.interp(at, record.time_s, values, left=np.nan, right=np.nan) for values in (smooth, spread)
    )
    if exposure_s is not None and exposure_s >= EXPOSURE_ROWS * float(np.median(np.diff(record.time_s))):
        force = _mean_over(record.time_s, smooth, at, exposure_s, force)
    return force, noise


def _mean_over(time: Floats, force: Floats, at: Floats, width_s: float, elsewhere: Floats) -> Floats:
    """Return the mean about each instant; `elsewhere` where the width is not wholly within the record."""
    integral = make_interp_spline(time, force, k=1).antiderivative()
    half = width_s / 2
    whole = (at - half >= time[0]) & (at + half <= time[-1])
    mean = elsewhere.copy()
    mean[whole] = (integral(at[whole] + half) - integral(at[whole] - half)) / width_s
    return mean


def frame_interval(times_s: Floats) -> float:
    """Return the usual time between frames, s; 0 for a single frame."""
    return float(np.median(np.diff(times_s))) if len(times_s) > 1 else 0.0
