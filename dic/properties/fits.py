"""How a modulus is read from a window: as a regression, a chord, a tangent or a secant."""

from __future__ import annotations

from dataclasses import dataclass, replace
from math import hypot, sqrt
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from dic.properties.loading import MIN_FRAMES, Loading, Undetermined
from dic.uncertainty import Line, few_readings, line_with_errors_in_both, straight_line

Floats = NDArray[np.float64]
Kind = Literal["regression", "chord", "tangent", "secant"]

#: What each kind does, in words.
WORDS = {
    "regression": "line of strain on stress, noise of both weighed (York 2004)",
    "chord": "chord between the window's ends",
    "tangent": "tangent in the window's middle, by a parabola",
    "secant": "secant from zero to the window's end",
}
#: Frames from which a parabola leaves enough of them to tell the scatter.
BEND_FRAMES = 8
#: A chord's end is read from the frames within this share of the window to either side of it.
END_SHARE = 0.1


@dataclass(frozen=True)
class Window:
    """Which frames are used, and how.

    Attributes
    ----------
    frames
        Frames of the `Loading`, one run in time.
    ends
        Stresses at the window's ends, MPa.
    kind
        How the line is laid.
    """

    frames: slice
    ends: tuple[float, float]
    kind: Kind = "regression"

    @property
    def count(self) -> int:
        """Number of frames."""
        return self.frames.stop - self.frames.start


def fit(loading: Loading, strain: Floats, u_strain: Floats, window: Window) -> Line:
    """Lay the line of a strain over stress.

    Parameters
    ----------
    loading
        The frames, for their stress.
    strain, u_strain
        Axial or transverse strain, or a sum of both, with its standard uncertainty, shape (n,); frames
        without it are left out.
    window
        Frames and kind.

    Returns
    -------
    Line
        Strain on stress.

    Raises
    ------
    Undetermined
        If the strain was measured in too few frames.
    """
    if window.kind == "regression":
        here = _measured(strain, window.frames)
        return _regression(loading.stress[here], strain[here], loading.u_stress[here], u_strain[here])
    if window.kind == "tangent":
        here = _measured(strain, window.frames)
        return _tangent(loading.stress[here], strain[here], sum(window.ends) / 2)
    return _chord(loading, strain, window)


def scatter(loading: Loading, strain: Floats, u_strain: Floats, window: Window) -> float:
    """Return the standard uncertainty of a line's slope from the scatter of its points.

    An even bend of the curve is no scatter: it belongs to what the window's line is, and comes again in the
    next test.  Where there are frames enough it was taken off the regression, at the cost of one more degree
    of freedom.
    """
    line = fit(loading, strain, u_strain, window)
    if window.kind != "regression" or line.n < BEND_FRAMES:
        return line.u_slope * few_readings(line.n - 2)
    return line.u_slope * sqrt((line.n - 2) / (line.n - 3)) * few_readings(line.n - 3)


def _measured(strain: Floats, frames: slice) -> NDArray[np.intp]:
    """Return the frames of a run in which a strain was measured."""
    here = frames.start + np.flatnonzero(np.isfinite(strain[frames]))
    if len(here) < MIN_FRAMES:
        raise Undetermined(
            f"the transverse strain was measured in {len(here)} frames of the window, {MIN_FRAMES} are needed"
        )
    return here


def _regression(stress: Floats, strain: Floats, u_stress: Floats, u_strain: Floats) -> Line:
    """Lay the line through all points, an even bend of the curve taken off first.

    With errors in both, a bend would be shared out among strain and stress as if it were noise, and a curved
    material's slope would depend on how much noise either has.
    """
    try:
        plain = straight_line(stress, strain)
        if not np.all(u_strain > 0):  # nothing is known about the strain's noise
            return plain
        level = strain - _even_bend(stress, strain)
        line = line_with_errors_in_both(stress, level, u_stress, u_strain)
    except ValueError as error:
        raise Undetermined("the stress is the same in all frames of the window") from error
    return replace(line, r_squared=plain.r_squared)


def _even_bend(stress: Floats, strain: Floats) -> Floats:
    """Return the part of a parabola that neither shifts nor turns the line of least squares; none of few."""
    if len(strain) < BEND_FRAMES:
        return np.zeros_like(strain)
    powers = np.vander((stress - stress.mean()) / np.ptp(stress), 3, increasing=True)
    bend = np.linalg.qr(powers)[0][:, 2]
    return np.asarray(bend * (bend @ strain))


@dataclass(frozen=True)
class _Bend:
    """A parabola of strain over stress: value and slope at a stress, and how it scatters.

    `clear` is how much it bends, in standard uncertainties of that.
    """

    value: float
    slope: float
    u_value: float
    u_slope: float
    clear: float
    residual_s: float
    r_squared: float
    n: int


def bend_of(loading: Loading, frames: slice) -> float:
    """Return the bend of strain over stress in some frames, either way, in standard uncertainties of it."""
    stress = loading.stress[frames]
    return _bend(stress, loading.strain[frames], float(stress.mean())).clear


def _bend(stress: Floats, strain: Floats, at: float) -> _Bend:
    width = float(np.ptp(stress))
    if width == 0:
        raise Undetermined("the stress is the same in all frames of the window")
    design = np.vander((stress - at) / width, 3)
    found = np.linalg.lstsq(design, strain, rcond=None)[0]
    residuals = strain - design @ found
    square = float(residuals @ residuals)
    variance = square / max(len(strain) - 3, 1)
    u = np.sqrt(np.diag(np.linalg.inv(design.T @ design)) * variance)
    spread = float(np.sum((strain - strain.mean()) ** 2))
    return _Bend(
        value=float(found[2]),
        slope=float(found[1]) / width,
        u_value=float(u[2]),
        u_slope=float(u[1]) / width,
        clear=abs(float(found[0] / u[0])) if u[0] else 0.0,
        residual_s=sqrt(variance),
        r_squared=1 - square / spread if spread else 1.0,
        # One coefficient more than a line's two.
        n=len(strain) - 1,
    )


def _tangent(stress: Floats, strain: Floats, at: float) -> Line:
    """Lay the tangent of a parabola at a stress."""
    bend = _bend(stress, strain, at)
    return _line(bend, slope=bend.slope, u_slope=bend.u_slope, at=(at, bend.value, bend.u_value))


def _chord(loading: Loading, strain: Floats, window: Window) -> Line:
    """Lay a line through the curve's points at the window's ends; a secant's first one is the zero."""
    here = _measured(strain, window.frames)
    # The window's own scatter about a parabola: it rests on more frames than an end has.
    bend = _bend(loading.stress[here], strain[here], window.ends[1])
    low, u_low = (0.0, 0.0) if window.kind == "secant" else _end(loading, strain, window, 0)
    high, u_high = _end(loading, strain, window, 1)
    length = window.ends[1] - window.ends[0]
    slope = (high - low) / length
    variances = (u_low**2 + u_high**2) * bend.residual_s**2
    # The point at which slope and value are uncorrelated lies nearer to the better known end.
    share = u_low**2 / (u_low**2 + u_high**2)
    u_there = u_low * u_high / hypot(u_low, u_high) * bend.residual_s
    return _line(
        bend, slope=slope, u_slope=sqrt(variances) / length,
        at=(window.ends[0] + share * length, low + slope * share * length, u_there),
    )  # fmt: skip


def _end(loading: Loading, strain: Floats, window: Window, which: Literal[0, 1]) -> tuple[float, float]:
    """Read the strain at one of the window's ends, and its standard uncertainty per unit of scatter."""
    line, stress = end_line(loading, strain, window.frames, which), window.ends[which]
    spread = line.u_slope / line.residual_s if line.residual_s else 0.0
    return line.at(stress), hypot(line.n**-0.5, spread * (stress - line.mean_x))


def end_line(loading: Loading, strain: Floats, frames: slice, which: Literal[0, 1]) -> Line:
    """Lay a line through the frames around the first (0) or the last (1) of a window."""
    place = frames.start if which == 0 else frames.stop - 1
    half = max(MIN_FRAMES // 2, round(END_SHARE * (frames.stop - frames.start)))
    here = _measured(strain, slice(max(place - half, 0), min(place + half + 1, len(strain))))
    nothing = np.zeros(len(here))
    return _regression(loading.stress[here], strain[here], nothing, nothing)


def _line(bend: _Bend, *, slope: float, u_slope: float, at: tuple[float, float, float]) -> Line:
    """Return a line by its slope and a point at which its value is independent of the slope."""
    x, value, u_value = at
    u_intercept = hypot(u_value, x * u_slope)
    return Line(
        slope=slope,
        intercept=value - slope * x,
        u_slope=u_slope,
        u_intercept=u_intercept,
        correlation=-x * u_slope / u_intercept if u_intercept else 0.0,
        residual_s=bend.residual_s,
        r_squared=bend.r_squared,
        mean_x=x,
        u_mean=u_value,
        n=bend.n,
    )
