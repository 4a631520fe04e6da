"""Force at the instants of the frames, from a record that is denser and noisy."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray
from scipy.interpolate import make_interp_spline
from scipy.ndimage import uniform_filter1d
from scipy.signal import oaconvolve

from dic.errors import LoadRecordError
from dic.sync.record import Clock, LoadRecord

Floats = NDArray[np.float64]

#: Noise from this many standard deviations down is no load: one sample in 10⁹ lies beyond.
NO_LOAD = 6
#: Rows of the record within an exposure from which the force is averaged over it.
EXPOSURE_ROWS = 2


def smoothed_force(record: LoadRecord, width_s: float) -> Floats:
    """Average the force's noise where that cannot distort the force.

    Spikes are bridged (see `LoadRecord.spikes`).  Every sample is replaced by the mean of the widest
    symmetric window, at most `width_s` long, in which the record is a straight line within its own noise;
    the mean is then the line's value at the sample.  At the start of loading, at a sharp yield point and at
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
    t, force, noise = record.time_s, record.sound_N, record.noise_N
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


def has_load(record: LoadRecord) -> bool:
    """Tell whether the force ever changes by more than its noise."""
    return bool(np.ptp(record.sound_N) > 2 * NO_LOAD * float(np.median(record.noise_N)))


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
