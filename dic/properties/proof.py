"""Where the curve meets the modulus line shifted along the strain axis."""

from __future__ import annotations

from dataclasses import dataclass
from math import inf, sqrt

import numpy as np
from numpy.typing import NDArray
from scipy.interpolate import PchipInterpolator
from scipy.optimize import brentq

from dic.properties.loading import Loading, Undetermined
from dic.uncertainty import Line, few_readings

Floats = NDArray[np.float64]

#: Half widths of the local fit that are tried, in frames.
HALF_WIDTHS = (4, 3)
#: An offset has to exceed this many standard deviations of the elastic part's strain.
NOISE = 3


@dataclass(frozen=True)
class Crossing:
    """The point where curve and shifted line meet.

    Attributes
    ----------
    stress, strain
        The point; stress in MPa.
    u_curve
        Standard uncertainty of the stress from the scatter of the curve around the point, MPa.
    u_line
        The same from the scatter of the modulus line's slope and intercept, MPa.
    low, high
        Strains between which the curve was fitted.
    """

    stress: float
    strain: float
    u_curve: float
    u_line: float
    low: float
    high: float


def crossing(loading: Loading, line: Line, start: int, offset: float) -> Crossing:
    """Find where the curve meets the modulus line shifted by `offset` in strain.

    The line keeps its own intercept, so a toe, or a strain that was not zero at zero force, does not
    count as plastic (ISO 6892-1; ASTM E8/E8M).  Around the first frame beyond the line, and the one
    after it, a parabola through eight frames takes the noise out; where it does not fit (a sharp yield
    point, few frames), a narrower one or a monotone cubic through the frames is used.

    Parameters
    ----------
    loading
        Frames up to the largest force.
    line
        The modulus line, strain on stress.
    start
        First frame after the elastic window.
    offset
        Plastic strain, for example 0.002.

    Returns
    -------
    Crossing
        The point and its statistical uncertainties.

    Raises
    ------
    Undetermined
        If the curve does not reach the shifted line before the largest force, or the offset is lost in
        noise.
    """
    plastic = loading.strain - offset - line.intercept - line.slope * loading.stress
    beyond = plastic[start:] >= 0
    # Two frames in a row (or the last one), so that one frame's noise is not taken for yielding.
    lasting = np.flatnonzero(beyond & np.append(beyond[1:], True))
    if plastic[start - 1] >= 0 or offset < NOISE * line.residual_s:
        raise Undetermined(f"an offset of {100 * offset:g} % lies within the noise of the elastic part")
    if not lasting.size:
        raise Undetermined(f"the curve never reaches the line at {100 * offset:g} % before the largest force")
    after = start + int(lasting[0])
    for half in HALF_WIDTHS:
        here = slice(max(start, after - half), after + half)
        found = _on_parabola(loading, line, here, offset)
        if found is not None:
            return found
    return _between_frames(loading, line, after, plastic, offset)


def _on_parabola(loading: Loading, line: Line, here: slice, offset: float) -> Crossing | None:
    """Meet the line with a local parabola; None where it does not fit or does not meet."""
    stress, strain = loading.stress[here], loading.strain[here]
    free = len(strain) - 3
    if free < 3:
        return None
    middle, width = float(strain.mean()), float(np.ptp(strain))
    if width == 0:
        return None
    design = np.vander((strain - middle) / width, 3)
    fit = np.linalg.lstsq(design, stress, rcond=None)[0].astype(np.float64)
    variance = float(np.sum((stress - design @ fit) ** 2)) / free
    # The elastic part's residuals, as stress, are the largest that noise alone can do here.
    allowed = (line.residual_s / line.slope) ** 2
    if variance > allowed * (1 + 3 * sqrt(2 / free)):
        return None
    at = _meeting(fit, line, middle, width, offset)
    if at is None or not strain.min() <= middle + at * width <= strain.max():
        return None
    place = np.vander([at], 3)[0]
    leverage = float(place @ np.linalg.pinv(design.T @ design) @ place)
    strain_there = middle + at * width
    tangent = float(np.polyval(np.polyder(fit), at)) / width
    return _crossing(
        line,
        offset,
        strain_there,
        tangent,
        sqrt(variance * leverage) * few_readings(free),
        (float(strain.min()), float(strain.max())),
    )


def _meeting(fit: Floats, line: Line, middle: float, width: float, offset: float) -> float | None:
    """Return where the parabola meets the line, in its own coordinate, nearest to the frames' middle."""
    shifted = np.array([width, middle - offset - line.intercept]) / line.slope
    roots = np.roots(np.polysub(fit, shifted))
    inside = [float(root.real) for root in roots if root.imag == 0]
    return min(inside, key=abs, default=None)


def _between_frames(loading: Loading, line: Line, after: int, plastic: Floats, offset: float) -> Crossing:
    """Meet the line between the two frames around it, on a monotone cubic in time.

    A chord would lie below any curve that bends; a monotone cubic bends with it but adds no hump beside a
    sharp yield point (Fritsch and Butland, SIAM J. Sci. Stat. Comput. 5, 1984, doi:10.1137/0905021).
    """
    pair = slice(after - 1, after + 1)
    near = slice(max(after - 3, 0), after + 3)
    time = loading.time_s[near]
    course = PchipInterpolator(time, np.column_stack([plastic, loading.strain, loading.stress])[near])
    when = brentq(lambda at: float(course(at)[0]), *loading.time_s[pair])
    strain = float(course(when)[1])
    _, stretching, rising = course.derivative()(when)
    tangent = float(rising / stretching) if stretching else 0.0
    scatter = line.residual_s / line.slope
    bounds = (float(loading.strain[pair].min()), float(loading.strain[pair].max()))
    return _crossing(line, offset, strain, tangent, scatter, bounds)


def _crossing(
    line: Line, offset: float, strain: float, tangent: float, u_stress: float, bounds: tuple[float, float]
) -> Crossing:
    """Carry the uncertainties of curve and line to the point where they meet."""
    modulus = 1 / line.slope
    stress = (strain - offset - line.intercept) * modulus
    # A curve as steep as the line meets it nowhere in particular.
    lever = modulus / (modulus - tangent) if tangent < modulus else inf
    return Crossing(
        stress=stress,
        strain=strain,
        u_curve=u_stress * lever,
        u_line=line.u_at(stress) * max(tangent, 0.0) * lever,
        low=bounds[0],
        high=bounds[1],
    )
