"""Finding the machine's clock from the instant at which loading starts."""

from __future__ import annotations

from dataclasses import replace
from math import hypot, inf, sqrt

import numpy as np
from numpy.typing import NDArray
from scipy.interpolate import make_interp_spline
from scipy.optimize import minimize_scalar

from dic.errors import ClockError
from dic.sync.force import frame_interval, has_load, smoothed_force, wrong_sign
from dic.sync.record import Clock, LoadRecord
from dic.testfile import Sync
from dic.uncertainty import few_readings

Floats = NDArray[np.float64]

#: Strain up to which nearly every solid answers force by a smooth, hardly curved line.
BEGINNING = 0.001
#: Share of the largest strain at the most: in a short test the last frames are left out, so that the
#: record still reaches the others when the offset is varied.
LARGEST_SHARE = 0.8
#: Frames wanted while that strain is reached; with fewer, more of the test is used.
LOADED_FRAMES = 6
#: Frames at rest that must lie within the record, so that a start can be told from a mere slope.
REST_FRAMES = 3
#: Share of the beginning's strain below which a frame counts as at rest, if noise is smaller than that.
AT_REST = 0.01
#: Misfit (share of the beginning's strain) beyond which strain does not follow force at all: the worst
#: that a parabola through a rest and a slope leaves is about as much.
WORST_MISFIT = 0.05
#: Frames on either side of the best offset that the record has to allow, so that the best is no mere end.
MARGIN = 1.5
#: Window in which the force is smoothed, in frame intervals: wide enough that an offset does not win
#: because single samples of noise happen to suit it, narrow enough to keep the start's corner.
SMOOTHING = 0.5
#: Sample spacings over which the force is averaged after that: with two, the noise left does not depend
#: on where between two samples a frame falls (weights 1/4, 1/2, 1/4 on a sample, 1/16, 7/16, 7/16, 1/16
#: midway), so the offset is not drawn to where the noise is least, as it is with one or none.
SPACINGS = 2
#: Force is a polynomial of this degree in the model: constant, slope and a gentle curvature.
DEGREE = 2

_REMEDY = 'give sync.offset (machine time of the first camera second, for example "3.4 s")'


def fit_clock(
    camera_time_s: Floats, axial: Floats, u_axial: Floats, record: LoadRecord, section: Sync
) -> Clock:
    """Put the frames on the machine's clock.

    A given offset is used as it is.  With ``"auto"`` it is found from when loading starts: while
    strain is small it is a smooth function of force, strain = a + b·force + c·force², so the right
    offset is the one with which the force explains the strain of the frames best.  a, b and c follow
    for each offset by linear least squares, which leaves one unknown; it is searched on a grid over
    all offsets that overlap, then refined.  The curvature c keeps elastomers and a slightly bent coupon
    from shifting the clock.  A mere slope fits at any offset, so both clocks have to show some frames
    of rest first, and no other offset may do as well.  Rigid motion while grips seat does not disturb:
    neither strain nor force knows of it.

    Parameters
    ----------
    camera_time_s
        Times of the frames on the camera's clock, s, shape (n,).
    axial, u_axial
        Axial strain of the frames and its standard uncertainty; NaN where not measured.
    record
        The load record.
    section
        The test file's wishes: offset and relative drift.

    Returns
    -------
    Clock
        Offset and standard uncertainty: least squares' covariance, scaled by the residuals, which
        contain the noise of strain and of force; and the change that smoothing the force over twice
        the time makes, as half width of a rectangular distribution, because smoothing rounds the
        corner where loading starts.

    Raises
    ------
    ClockError
        If frames and record do not overlap; or if the data cannot tell the offset to within one frame:
        too few frames or no loading, not enough rest before it on either clock, a misfit, several
        offsets that explain the strain alike.
    LoadRecordError
        If the force explains the strain only with its sign turned.
    """
    given = given_clock(camera_time_s, record, section)
    if given is not None:
        return given
    if not has_load(record):
        raise _cannot_tell("the force never rises above its noise")
    time, strain, u = _beginning(camera_time_s, axial, u_axial)
    time = (1 + section.drift) * time
    interval = frame_interval(time)
    noise = float(np.median(u))
    misfit = _Misfit(time, strain, record, noise)
    try:
        offset = misfit.best_offset()
    except ClockError:
        if _fits(_Misfit(time, strain, replace(record, force_N=-record.force_N), noise)):
            raise wrong_sign(record, longer=bool(strain.sum() > 0)) from None
        raise
    rounded = _Misfit(time, strain, record, noise, widening=2).refined(offset)
    uncertainty = hypot(misfit.uncertainty(offset), (rounded - offset) / sqrt(3))
    if uncertainty > interval:
        raise _cannot_tell(f"the start of loading tells the offset only to ± {uncertainty:.2g} s")
    return Clock(
        offset,
        uncertainty,
        section.drift,
        f"from the start of loading, {len(time)} frames up to a strain of {np.abs(strain).max():.2g}",
        ("strain is taken as a smooth function of force at the beginning of loading",),
    )


def given_clock(camera_time_s: Floats, record: LoadRecord, section: Sync) -> Clock | None:
    """Return the clock that the test file gives, or None where the offset has to be found.

    Raises
    ------
    ClockError
        If frames and record do not overlap on it.
    """
    if section.offset == "auto":
        return None
    clock = Clock(
        section.offset,
        0.0,
        section.drift,
        "given in the test file",
        ("not included: the uncertainty of the given offset",),
    )
    _require_overlap(clock, camera_time_s, record)
    return clock


def _require_overlap(clock: Clock, camera_time_s: Floats, record: LoadRecord) -> None:
    at = clock.machine_time(camera_time_s)
    if at.max() < record.time_s[0] or at.min() > record.time_s[-1]:
        raise ClockError(
            f"the two clocks do not overlap: the frames run from {at.min():g} s to {at.max():g} s of the "
            f"machine's clock, the record from {record.time_s[0]:g} s to {record.time_s[-1]:g} s",
            where=str(record.path),
            remedy="correct sync.offset",
        )


def _beginning(time: Floats, axial: Floats, u_axial: Floats) -> tuple[Floats, Floats, Floats]:
    """Return time, strain and its uncertainty of the measured frames up to a small strain."""
    measured = np.isfinite(axial) & np.isfinite(u_axial)
    if measured.sum() < REST_FRAMES + LOADED_FRAMES:
        raise _cannot_tell(
            f"only {measured.sum()} frames were measured, {REST_FRAMES + LOADED_FRAMES} are needed "
            "to find the start of loading"
        )
    time, u = time[measured], u_axial[measured]
    strain = axial[measured] - np.median(axial[measured][:REST_FRAMES])
    size = np.abs(strain)
    # A median of three keeps one badly tracked frame from ending the beginning.
    steady = np.median([size, np.append(size[1:], size[-1]), np.append(size[0], size[:-1])], axis=0)
    # Twenty times the noise, so that a short gauge on a stiff coupon still sees a slope.
    limit = min(max(BEGINNING, 20 * float(np.median(u))), LARGEST_SHARE * float(steady.max()))
    last = _first_passage(steady, limit)
    while (steady[:last] > limit / LOADED_FRAMES / 2).sum() < LOADED_FRAMES and last < len(steady):
        limit *= 1.25
        last = _first_passage(steady, limit)
    if steady.max() < 20 * float(np.median(u)):
        raise _cannot_tell("the strain never rises above its noise")
    # What lies above the limit before it is first passed is a badly tracked frame.
    early = np.flatnonzero(size[:last] <= limit)
    return time[early], strain[early], u[early]


def _first_passage(steady: Floats, limit: float) -> int:
    """Return the number of frames before a limit is first passed (all, if it never is)."""
    above = steady > limit
    return int(np.argmax(above)) if above.any() else len(steady)


class _Misfit:
    """How badly force explains the strain of the first frames, as a function of the offset alone.

    `widening` doubles the smoothing, to see what it does to the corner where loading starts.
    """

    def __init__(
        self, time: Floats, strain: Floats, record: LoadRecord, noise: float, *, widening: int = 1
    ) -> None:
        self.time, self.strain, self.record, self.noise = time, strain, record, noise
        self.interval = frame_interval(time)
        smooth = smoothed_force(record, widening * SMOOTHING * self.interval)
        # In units of its largest value, so that force and its square are of one size.
        force = smooth / np.abs(smooth).max(initial=np.finfo(float).tiny)
        self.integral = make_interp_spline(record.time_s, force, k=1).antiderivative()
        self.spacing = widening * SPACINGS * float(np.median(np.diff(record.time_s)))
        self.size = float(np.abs(strain).max())
        self.at_rest = np.abs(strain) < max(AT_REST * self.size, 3 * noise)

    def force_at(self, offset: Floats) -> Floats:
        """Return the force of each frame at each offset, NaN outside the record, shape (k, n)."""
        at = np.asarray(offset)[:, None] + self.time
        half = self.spacing / 2
        force = (self.integral(at + half) - self.integral(at - half)) / self.spacing
        inside = (at >= self.record.time_s[0]) & (at <= self.record.time_s[-1])
        return np.where(inside, force, np.nan)

    def mean_square(self, offset: Floats) -> Floats:
        """Return the residual variance of strain at each offset, inf where the record says too little."""
        force = self.force_at(offset)
        inside = np.isfinite(force)
        enough = (inside | self.at_rest).all(axis=1) & ((inside & self.at_rest).sum(axis=1) >= REST_FRAMES)
        n = np.maximum(inside.sum(axis=1), DEGREE + 3)
        strain = np.where(inside, self.strain, 0.0)
        left = (strain - strain.sum(axis=1, keepdims=True) / n[:, None]) * inside
        rises = None
        basis: list[Floats] = []
        for power in range(1, DEGREE + 1):
            column = _less_projections(np.where(inside, force, 0.0) ** power, inside, basis)
            basis.append(column)
            share = (left * column).sum(axis=1, keepdims=True)
            rises = share[:, 0] > 0 if rises is None else rises
            left = left - share * column
        square = (left**2).sum(axis=1) / (n - DEGREE - 2)
        return np.where(enough & rises, square, np.inf)

    def best_offset(self) -> float:
        """Return the offset of least misfit; raise where there is none, or more than one."""
        step = self.interval / 2
        margin = int(MARGIN * self.interval / step)
        grid = np.arange(
            self.record.time_s[0] - self.time[-1], self.record.time_s[-1] - self.time[0] + step, step
        )
        # Blocks bound the memory of a long record.
        found = np.concatenate([self.mean_square(grid[i : i + 5000]) for i in range(0, len(grid), 5000)])
        best = int(np.argmin(found))
        around = np.arange(best - margin, best + margin + 1)
        if around[0] < 0 or around[-1] >= len(grid) or not np.isfinite(found[around]).all():
            raise _cannot_tell("record and frames do not both begin some frames before the loading")
        if found[best] > (WORST_MISFIT * self.size) ** 2:
            raise _cannot_tell(
                "the strain of the first frames does not follow the force",
                f"check frames.rate, and whether frames or rows are missing, or {_REMEDY}",
            )
        # Three standard deviations of a variance with that many degrees of freedom.
        rivals = found < found[best] * (1 + 3 * sqrt(2 / max(len(self.time) - DEGREE - 2, 1)))
        if np.ptp(grid[rivals]) > 2 * self.interval:
            raise _cannot_tell(
                f"offsets from {grid[rivals][0]:.4g} s to {grid[rivals][-1]:.4g} s explain the strain alike"
            )
        return self.refined(float(grid[best]))

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
        """Return the offset's standard uncertainty.

        The derivative of strain with respect to the offset is taken over a frame to either side, because
        the slope between neighbouring samples of the record is mostly noise; what noise is left in it is
        no information and is subtracted.  A frame's noise is at least its grey noise, should the few
        residuals be small by luck.
        """
        step = self.interval
        before, here, after = self.force_at(offset + np.array([-step, 0.0, step]))
        inside = np.isfinite(before + here + after)
        design = np.vander(here[inside], DEGREE + 1)
        fit = np.linalg.lstsq(design, self.strain[inside], rcond=None)[0]
        slope = (np.polyval(fit, after[inside]) - np.polyval(fit, before[inside])) / (2 * step)
        own = slope - design @ np.linalg.lstsq(design, slope, rcond=None)[0]
        noise = max(sqrt(float(self.mean_square(np.array([offset]))[0])), self.noise)
        information = float(own @ own) - len(own) * noise**2 / (2 * step**2)
        if information <= 0:
            return inf
        return noise * few_readings(len(own) - DEGREE - 2) / sqrt(information)


def _fits(misfit: _Misfit) -> bool:
    """Tell whether there is one offset with which the force explains the strain."""
    try:
        misfit.best_offset()
    except ClockError:
        return False
    return True


def _cannot_tell(why: str, remedy: str = _REMEDY) -> ClockError:
    return ClockError(why, where="sync.offset", remedy=remedy)


def _less_projections(column: Floats, inside: NDArray[np.bool_], basis: list[Floats]) -> Floats:
    """Make a column per row free of constant and basis, of length one; zero where nothing is left."""
    own = (
        column - column.sum(axis=1, keepdims=True) / np.maximum(inside.sum(axis=1, keepdims=True), 1)
    ) * inside
    for known in basis:
        own = own - (own * known).sum(axis=1, keepdims=True) * known
    length = np.sqrt((own**2).sum(axis=1, keepdims=True))
    return np.where(length > 1e-12, own / np.maximum(length, 1e-12), 0.0)
