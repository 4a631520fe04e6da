"""Finding the machine's clock from the instant at which loading starts."""

from __future__ import annotations

from math import hypot, sqrt

import numpy as np
from numpy.typing import NDArray
from scipy.optimize import minimize_scalar

from dic.errors import ClockError
from dic.sync.force import frame_interval, smoothed_force
from dic.sync.record import Clock, LoadRecord
from dic.testfile import Sync
from dic.uncertainty import few_readings

Floats = NDArray[np.float64]

#: Strain up to which nearly every solid answers force by a smooth, hardly curved line.
BEGINNING = 0.001
#: Frames wanted while that strain is reached; with fewer, more of the test is used.
LOADED_FRAMES = 6
#: Frames at rest that must lie within the record, so that a start can be told from a mere slope.
REST_FRAMES = 3
#: Share of the beginning's strain below which a frame counts as at rest.
AT_REST = 0.05
#: Misfit (share of the beginning's strain) beyond which strain does not follow force at all.
WORST_MISFIT = 0.1
#: Window in which the force is smoothed, in frame intervals: wide enough that an offset does not win
#: because single samples of noise happen to suit it, narrow enough to keep the start's corner.
SMOOTHING = 0.5
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
    from shifting the clock, and makes a mere slope, which fits at any offset, look as uncertain as
    it is.  Rigid motion while grips seat does not disturb: neither strain nor force knows of it.

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
        If frames and record do not overlap, or the data cannot tell the offset to within one frame.
    """
    if section.offset != "auto":
        clock = Clock(
            section.offset,
            0.0,
            section.drift,
            "given in the test file",
            ("not included: the uncertainty of the given offset",),
        )
        _require_overlap(clock, camera_time_s, record)
        return clock
    time, strain, u = _beginning(camera_time_s, axial, u_axial)
    time = (1 + section.drift) * time
    interval = frame_interval(time)
    misfit = _Misfit(time, strain, record, SMOOTHING * interval)
    offset = misfit.best_offset()
    rounded = _Misfit(time, strain, record, interval).refined(offset)
    uncertainty = hypot(misfit.uncertainty(offset, float(np.median(u))), (rounded - offset) / sqrt(3))
    if uncertainty > interval:
        raise ClockError(
            f"the start of loading tells the offset only to ± {uncertainty:.2g} s, more than one frame",
            where=str(record.path),
            remedy=_REMEDY,
        )
    return Clock(
        offset,
        uncertainty,
        section.drift,
        f"from the start of loading, {len(time)} frames up to a strain of {np.abs(strain).max():.2g}",
        ("strain is taken as a smooth function of force at the beginning of loading",),
    )


def _require_overlap(clock: Clock, camera_time_s: Floats, record: LoadRecord) -> None:
    at = clock.machine_time(camera_time_s)
    if at.max() < record.time_s[0] or at.min() > record.time_s[-1]:
        raise ClockError(
            f"the frames run from {at.min():g} s to {at.max():g} s of the machine's clock, "
            f"the record from {record.time_s[0]:g} s to {record.time_s[-1]:g} s",
            where=str(record.path),
            remedy="correct sync.offset",
        )


def _beginning(time: Floats, axial: Floats, u_axial: Floats) -> tuple[Floats, Floats, Floats]:
    """Return time, strain and its uncertainty of the measured frames up to a small strain."""
    measured = np.isfinite(axial) & np.isfinite(u_axial)
    if measured.sum() < REST_FRAMES + LOADED_FRAMES:
        raise ClockError(
            f"only {measured.sum()} frames were measured, {REST_FRAMES + LOADED_FRAMES} are needed "
            "to find the start of loading",
            where="sync",
            remedy=_REMEDY,
        )
    time, u = time[measured], u_axial[measured]
    strain = axial[measured] - np.median(axial[measured][:REST_FRAMES])
    size = np.abs(strain)
    # A median of three keeps one badly tracked frame from ending the beginning.
    steady = np.median([size, np.append(size[1:], size[-1]), np.append(size[0], size[:-1])], axis=0)
    # Twenty times the noise, so that a short gauge on a stiff coupon still sees a slope.
    limit = max(BEGINNING, 20 * float(np.median(u)))
    last = _first_passage(steady, limit)
    while (steady[:last] > AT_REST * limit).sum() < LOADED_FRAMES and last < len(steady):
        limit *= 1.25
        last = _first_passage(steady, limit)
    if steady.max() < 20 * float(np.median(u)):
        raise ClockError("the strain never rises above its noise", where="sync", remedy=_REMEDY)
    return time[:last], strain[:last], u[:last]


def _first_passage(steady: Floats, limit: float) -> int:
    """Return the number of frames before a limit is first passed (all, if it never is)."""
    above = steady > limit
    return int(np.argmax(above)) if above.any() else len(steady)


class _Misfit:
    """How badly force explains the strain of the first frames, as a function of the offset alone."""

    def __init__(self, time: Floats, strain: Floats, record: LoadRecord, width_s: float) -> None:
        self.time, self.strain, self.record = time, strain, record
        self.interval = frame_interval(time)
        # In units of its largest value, so that force and its square are of one size.
        smooth = smoothed_force(record, width_s)
        self.force = smooth / np.abs(smooth).max(initial=np.finfo(float).tiny)
        self.size = float(np.abs(strain).max())
        self.at_rest = np.abs(strain) < AT_REST * self.size

    def force_at(self, offset: Floats) -> Floats:
        """Return the force of each frame at each offset, NaN outside the record, shape (k, n)."""
        at = np.asarray(offset)[:, None] + self.time
        return np.interp(at, self.record.time_s, self.force, left=np.nan, right=np.nan)

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
        """Return the offset of least misfit."""
        step = self.interval / 2
        grid = np.arange(
            self.record.time_s[0] - self.time[-1], self.record.time_s[-1] - self.time[0] + step, step
        )
        # Blocks bound the memory of a long record.
        found = np.concatenate([self.mean_square(grid[i : i + 5000]) for i in range(0, len(grid), 5000)])
        best = int(np.argmin(found))
        if not np.isfinite(found[best]):
            raise ClockError(
                "at no offset does the record cover the start of loading that the frames show",
                where=str(self.record.path),
                remedy=_REMEDY,
            )
        if not np.isfinite(found[max(best - 1, 0) : best + 2]).all() or found[best] > self._tolerable():
            raise ClockError(
                "the strain of the first frames does not follow the record's force at any offset",
                where=str(self.record.path),
                remedy=_REMEDY,
            )
        return self.refined(float(grid[best]))

    def refined(self, near: float) -> float:
        """Return the offset of least misfit within half a frame of a guess."""
        step = self.interval / 2
        finer = minimize_scalar(
            lambda offset: float(self.mean_square(np.array([offset]))[0]),
            bounds=(near - step, near + step),
            method="bounded",
            options={"xatol": 1e-4 * self.interval},
        )
        return float(finer.x)

    def _tolerable(self) -> float:
        return (WORST_MISFIT * self.size) ** 2

    def uncertainty(self, offset: float, u_strain: float) -> float:
        """Return the offset's standard uncertainty.

        The derivative of strain with respect to the offset is taken over half a frame, because the
        slope between neighbouring samples of the record is mostly noise.  `u_strain` is the least
        that a frame's noise can be, should the few residuals be small by luck.
        """
        step = self.interval / 4
        before, here, after = self.force_at(offset + np.array([-step, 0.0, step]))
        inside = np.isfinite(before + here + after)
        design = np.vander(here[inside], DEGREE + 1)
        strain = self.strain[inside]
        fit = np.linalg.lstsq(design, strain, rcond=None)[0]
        slope = (np.polyval(fit, after[inside]) - np.polyval(fit, before[inside])) / (2 * step)
        own = slope - design @ np.linalg.lstsq(design, slope, rcond=None)[0]
        noise = max(sqrt(float(self.mean_square(np.array([offset]))[0])), u_strain)
        information = float(own @ own)
        spread = noise * few_readings(len(strain) - DEGREE - 2)
        return spread / sqrt(information) if information > 0 else np.inf


def _less_projections(column: Floats, inside: NDArray[np.bool_], basis: list[Floats]) -> Floats:
    """Make a column per row free of constant and basis, of length one; zero where nothing is left."""
    own = (
        column - column.sum(axis=1, keepdims=True) / np.maximum(inside.sum(axis=1, keepdims=True), 1)
    ) * inside
    for known in basis:
        own = own - (own * known).sum(axis=1, keepdims=True) * known
    length = np.sqrt((own**2).sum(axis=1, keepdims=True))
    return np.where(length > 1e-12, own / np.maximum(length, 1e-12), 0.0)
