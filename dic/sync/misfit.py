"""How badly the machine's signal explains the camera's, as a function of the clocks' offset alone."""

from __future__ import annotations

from copy import copy
from dataclasses import dataclass, replace
from math import hypot, inf, sqrt

import numpy as np
from numpy.typing import NDArray
from scipy.integrate import cumulative_trapezoid
from scipy.interpolate import make_interp_spline
from scipy.optimize import minimize_scalar

from dic.sync.force import frame_interval, smoothed_force
from dic.sync.record import LoadRecord
from dic.uncertainty import few_readings

Floats = NDArray[np.float64]

#: Frames at rest that must lie within the record, so that a start can be told from a mere slope.
REST_FRAMES = 3
#: Share of the window's largest signal below which a frame counts as at rest, if noise is smaller than that.
AT_REST = 0.01
#: Window in which the force is smoothed, in frame intervals: wide enough that an offset does not win
#: because single samples of noise happen to suit it, narrow enough to keep the start's corner.
SMOOTHING = 1.0
#: Sample spacings over which the force is averaged after that: with two, the noise left does not depend
#: on where between two samples a frame falls (weights 1/4, 1/2, 1/4 on a sample, 1/16, 7/16, 7/16, 1/16
#: midway), so the offset is not drawn to where the noise is least, as it is with one or none.
SPACINGS = 2
#: Share of a frame interval over which it is averaged at the least: near the corner, where the windows
#: shrink, this leaves less noise in the frames that tell most, and rounds no more.
AVERAGED = 1 / 3
#: The machine's signal is a polynomial of this degree in the model: constant, slope and a gentle curvature.
DEGREE = 2
#: Repetitions of the fit with fresh noise: they tell a standard deviation to some 10 %.
REPETITIONS = 48
#: Frames to either side of the offset that the repetitions search, and steps per frame.
REACH, STEPS = 2, 10
#: Offsets tried at once, so that the memory for a long record is bounded.
_BLOCK = 2000


@dataclass(frozen=True)
class Course:
    """What camera and machine saw of the same event, n frames.

    Attributes
    ----------
    time_s
        Camera times of the frames, s.
    signal, noise
        What the camera saw (strain, or motion in px), and the usual standard uncertainty of one frame.
    record
        What the machine saw, in the place of the force.
    same_sign
        Whether one has to rise with the other.
    """

    time_s: Floats
    signal: Floats
    noise: float
    record: LoadRecord
    same_sign: bool = True

    @property
    def interval_s(self) -> float:
        """Usual time between frames, s."""
        return frame_interval(self.time_s)

    def reach(self, words: str) -> str:
        """Return an event's words with the frames that tell it."""
        if not self.same_sign:
            return words
        return f"{words}, {len(self.time_s)} frames up to a strain of {np.abs(self.signal).max():.2g}"


class Misfit:
    """The residuals of signal = a + b·force + c·force² over the offset.

    `widening` doubles the smoothing, to see what it does to the corner where loading starts; `degree` is that
    of the polynomial.
    """

    def __init__(self, course: Course, *, widening: int = 1, degree: int = DEGREE) -> None:
        self.course, self.widening, self.degree = course, widening, degree
        self.interval = course.interval_s
        record = course.record
        smooth = smoothed_force(record, widening * SMOOTHING * self.interval)
        # In units of its largest value, so that force and its square are of one size.
        self.unit = float(np.abs(smooth).max(initial=np.finfo(float).tiny))
        self.force = smooth / self.unit
        rows = SPACINGS * float(np.median(np.diff(record.time_s)))
        self.spacing = widening * max(rows, AVERAGED * self.interval)
        self._integral = make_interp_spline(record.time_s, self.force, k=1).antiderivative()

    @property
    def size(self) -> float:
        """Largest signal of the camera."""
        return float(np.abs(self.course.signal).max())

    @property
    def at_rest(self) -> NDArray[np.bool_]:
        """True for frames at rest, shape (n,)."""
        return np.abs(self.course.signal) < max(AT_REST * self.size, 3 * self.course.noise)

    def over(self, course: Course, degree: int = DEGREE) -> Misfit:
        """Return the misfit over more or fewer frames of the same event, with the same smoothed force."""
        other = copy(self)
        other.course, other.degree = course, degree
        return other

    def force_at(self, offset: Floats) -> Floats:
        """Return the force of each frame at each offset, NaN outside the record, shape (k, n)."""
        at = np.asarray(offset)[:, None] + self.course.time_s
        half = self.spacing / 2
        force = (self._integral(at + half) - self._integral(at - half)) / self.spacing
        time = self.course.record.time_s
        return np.where((at >= time[0]) & (at <= time[-1]), force, np.nan)

    def residuals(self, offset: Floats) -> tuple[Floats, Floats]:
        """Return the sum of squares at each offset, inf where the signs differ, and the frames in it."""
        blocks = [
            _squares(self.force_at(offset[k : k + _BLOCK]), self.course, self.degree)
            for k in range(0, len(offset), _BLOCK)
        ]
        return np.concatenate([one[0] for one in blocks]), np.concatenate([one[1] for one in blocks])

    def mean_square(self, offset: Floats) -> Floats:
        """Return the residual variance at each offset, inf where rest or loading are not all recorded."""
        time = self.course.record.time_s
        at = offset[:, None] + self.course.time_s
        inside = (at >= time[0]) & (at <= time[-1])
        enough = (inside | self.at_rest).all(axis=1) & ((inside & self.at_rest).sum(axis=1) >= REST_FRAMES)
        square = np.full(len(offset), np.inf)
        if enough.any():
            total, count = self.residuals(offset[enough])
            square[enough] = _mean(total, count, self.degree)
        return square

    def refined(self, near: float) -> float:
        """Return the offset of least misfit within half a frame of a guess."""
        # Noise makes shallow hollows, so the deepest is picked before the search descends into it.
        fine = near + np.linspace(-0.5, 0.5, 41) * self.interval
        deepest = fine[np.argmin(self.mean_square(fine))]
        finer = minimize_scalar(
            lambda offset: float(self.mean_square(np.array([offset]))[0]),
            bounds=(deepest - self.interval / 40, deepest + self.interval / 40),
            method="bounded",
            options={"xatol": 1e-4 * self.interval},
        )
        return float(finer.x)

    def uncertainty(self, offset: float) -> float:
        """Return the offset's standard uncertainty: noise of strain and force, and the rounded corner.

        The fit is repeated on a test that is this one as far as it is known (force smoothed over twice
        the time, strain by the fitted curve), with fresh noise in both, and the misses are taken
        (parametric bootstrap).  Nothing is made linear, so noise that draws the fit to a wrong hollow
        counts.
        """
        near = _around(self.course, offset)
        wide = Misfit(near, widening=2 * self.widening)
        rounded = wide.refined(offset) - offset
        spread = hypot(wide._repeated(Misfit(near, widening=self.widening), offset), rounded / sqrt(3))
        return spread * few_readings(len(near.time_s) - DEGREE - 2)

    def _repeated(self, own: Misfit, offset: float) -> float:
        """Return the root mean square of the misses of repeated fits."""
        course, r = self.course, np.random.default_rng(0)
        tried = offset + np.arange(-REACH * STEPS, REACH * STEPS + 1) / STEPS * self.interval
        truth = self.force_at(np.array([offset]))[0]
        inside = np.isfinite(truth)
        if inside.sum() < DEGREE + 4:
            return inf
        fit = np.polyfit(truth[inside], course.signal[inside], DEGREE)
        signal = np.where(inside, np.polyval(fit, np.where(inside, truth, 0.0)), 0.0)
        noise = self._smooth_noise(own, tried, r)
        here = noise[:, len(tried) // 2]
        slope = np.polyval(np.polyder(fit), np.where(inside, truth, 0.0))
        by_force = float(np.mean((slope * here)[:, inside] ** 2))
        seen = float(own.mean_square(np.array([offset]))[0])
        # What the residuals show beyond the force's noise is the strain's, and at least its grey noise.
        spread = sqrt(max(seen - by_force, course.noise**2)) if np.isfinite(seen) else course.noise
        force = self.force_at(tried)
        misses = []
        for one in noise:
            again = signal + r.normal(0.0, spread, len(signal))
            total, count = _squares(force + one, replace(course, signal=again), self.degree)
            misses.append(_lowest(tried, _mean(total, count, self.degree)) - offset)
        return float(np.sqrt(np.mean(np.square(misses)))) * few_readings(REPETITIONS - 1)

    def _smooth_noise(self, own: Misfit, tried: Floats, r: np.random.Generator) -> Floats:
        """Return draws of the noise that smoothing leaves in the force, shape (draws, offsets, frames)."""
        record, course = self.course.record, self.course
        time, sigma = record.time_s, record.noise_N / self.unit
        spacing = float(np.median(np.diff(record.time_s)))
        half = max(int((SMOOTHING * self.interval / spacing - 1) / 2), 0)
        at = tried[:, None] + course.time_s
        draws = []
        for _ in range(REPETITIONS):
            noise = r.normal(0.0, 1.0, len(time)) * sigma
            total = np.concatenate([[0.0], np.cumsum(noise)])
            low = np.maximum(np.arange(len(time)) - half, 0)
            high = np.minimum(np.arange(len(time)) + half + 1, len(time))
            smooth = (total[high] - total[low]) / (high - low)
            integral = cumulative_trapezoid(smooth, time, initial=0.0)
            reach = own.spacing / 2
            draws.append(
                (np.interp(at + reach, time, integral) - np.interp(at - reach, time, integral)) / own.spacing
            )
        return np.array(draws)


def _around(course: Course, offset: float) -> Course:
    """Return a course with no more of the record than the frames reach when the offset varies a little."""
    time, pad = course.record.time_s, (REACH + 4) * course.interval_s
    first, last = np.searchsorted(time, [offset + course.time_s[0] - pad, offset + course.time_s[-1] + pad])
    part = slice(max(int(first) - 1, 0), int(last) + 1)
    cut = replace(course.record, time_s=time[part], force_N=course.record.force_N[part])
    return replace(course, record=cut)


def turned(course: Course) -> Course:
    """Return a course with the machine's sign turned."""
    return replace(course, record=replace(course.record, force_N=-course.record.force_N))


def _lowest(x: Floats, y: Floats) -> float:
    """Return where the least of equally spaced values lies, by the parabola through it and its neighbours."""
    k = int(np.argmin(y))
    if not 0 < k < len(x) - 1 or not np.isfinite(y[k - 1 : k + 2]).all():
        return float(x[k])
    bend = y[k - 1] - 2 * y[k] + y[k + 1]
    return float(x[k] + (0.5 * (y[k - 1] - y[k + 1]) / bend if bend > 0 else 0.0) * (x[1] - x[0]))


def _mean(total: Floats, count: Floats, degree: int) -> Floats:
    """Return residual variances: a curve's coefficients and the offset are fitted."""
    return total / (np.maximum(count, degree + 3) - degree - 2)


def _squares(force: Floats, course: Course, degree: int) -> tuple[Floats, Floats]:
    """Return residual sums of squares per row of forces, inf where signal falls with force, and frames."""
    inside = np.isfinite(force)
    n = inside.sum(axis=1)
    there = np.where(inside, course.signal, 0.0)
    left = (there - there.sum(axis=1, keepdims=True) / np.maximum(n, 1)[:, None]) * inside
    rises = np.ones(len(n), dtype=bool)
    basis: list[Floats] = []
    for power in range(1, degree + 1):
        column = _less_projections(np.where(inside, force, 0.0) ** power, inside, basis)
        basis.append(column)
        share = (left * column).sum(axis=1, keepdims=True)
        if power == 1 and course.same_sign:
            rises = share[:, 0] > 0
        left = left - share * column
    return np.where(rises, (left**2).sum(axis=1), np.inf), n


def _less_projections(column: Floats, inside: NDArray[np.bool_], basis: list[Floats]) -> Floats:
    """Make a column per row free of constant and basis, of length one; zero where nothing is left."""
    own = (
        column - column.sum(axis=1, keepdims=True) / np.maximum(inside.sum(axis=1, keepdims=True), 1)
    ) * inside
    for known in basis:
        own = own - (own * known).sum(axis=1, keepdims=True) * known
    length = np.sqrt((own**2).sum(axis=1, keepdims=True))
    return np.where(length > 1e-12, own / np.maximum(length, 1e-12), 0.0)
