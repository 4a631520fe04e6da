"""Where strain counts from: rest, preload, and the toe at the foot of a curve."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from dic.errors import Notice
from dic.properties.loading import MIN_FRAMES, Loading, Undetermined, passage
from dic.properties.modulus import Elastic
from dic.uncertainty import few_readings, straight_line

Floats = NDArray[np.float64]

#: Standard uncertainties by which a frame may be off and still be at rest.
REST = 5
#: Frames that say what the strain is at rest; fewer are no better than the reference frame itself.
MIN_REST = 3
#: A force at rest below this share of the largest one is not worth a word.
SMALL_FORCE = 0.005
#: A toe below this strain cannot be told from the camera's own errors (common practice).
SMALLEST_TOE = 5e-5
#: Standard uncertainties by which a toe has to stand out.
CLEAR = 5
#: A toe shifts a window in strain, which shifts the toe; two or three rounds settle it.
ROUNDS = 10
#: Slack is worth a word from this share of the travel that the elastic part takes.
SLACK_SHARE = 0.1
#: ... and from this travel, mm.
SLACK_MM = 0.01


@dataclass(frozen=True)
class Zero:
    """The place on the curve that strain counts from.

    Attributes
    ----------
    loading
        The frames with their strains counted from there.
    strain, transverse
        The strains, as measured, that count as zero.
    notices
        What people should know about it.
    """

    loading: Loading
    strain: float = 0.0
    transverse: float = 0.0
    notices: tuple[Notice, ...] = ()


def zero_of(loading: Loading, preload_MPa: float | None) -> Zero:
    """Count strain from rest, or from where a preload is reached.

    Parameters
    ----------
    loading
        Frames up to the largest force, strains as measured.
    preload_MPa
        Stress at which strain begins to count, or None.

    Returns
    -------
    Zero
        Without a toe.  Without frames at rest the reference frame stays the zero.

    Raises
    ------
    Undetermined
        If the preload is never reached.
    """
    if preload_MPa is not None:
        return _from_preload(loading, preload_MPa)
    rest = frames_at_rest(loading)
    if rest < MIN_REST:
        return Zero(loading)
    strain = float(loading.strain[:rest].mean())
    there = np.isfinite(loading.transverse[:rest])
    across = float(loading.transverse[:rest][there].mean()) if there.any() else 0.0
    return Zero(loading.counted_from(strain, across), strain, across, notices=_force_at_rest(loading, rest))


def frames_at_rest(loading: Loading) -> int:
    """Return how many frames at the beginning show neither force nor strain changing beyond their noise."""
    count = len(loading.stress)
    for values, noise in ((loading.stress, loading.u_stress), (loading.strain, loading.u_strain)):
        first = values[:MIN_REST]
        if len(first) < MIN_REST:
            return 0
        # Rounding alone may lie between noise-free values.
        allowed = REST * float(np.median(noise)) + 1e-12 * float(np.abs(values).max())
        moved = np.flatnonzero(np.abs(values - np.median(first)) > allowed)
        # The last frame may lie anywhere between rest and the first that shows motion.
        count = min(count, max(int(moved[0]) - 1, 0) if moved.size else len(values))
    return count


def _force_at_rest(loading: Loading, rest: int) -> tuple[Notice, ...]:
    stress = float(loading.stress[:rest].mean())
    noise = REST * float(np.median(loading.u_stress[:rest]))
    if abs(stress) <= max(noise, SMALL_FORCE * float(loading.stress.max())):
        return ()
    return (
        Notice(
            "force_at_rest",
            f"Before loading the record shows {loading.sign * stress:.3g} MPa on the coupon; strain "
            "counts from there. If it is a preload, state it as properties.preload; if not, zero the force.",
        ),
    )


def _from_preload(loading: Loading, preload: float) -> Zero:
    start = passage(loading.stress, preload, np.inf).start
    if start >= len(loading.stress):
        raise Undetermined(f"the stress never reaches the preload of {preload:.3g} MPa (properties.preload)")
    around = loading.part(slice(max(start - 2, 0), start + 3))
    strain = _at_stress(around, around.strain, preload)
    across = _at_stress(around, around.transverse, preload)
    return Zero(
        loading.part(slice(start, None)).counted_from(strain, across),
        strain,
        across,
        notices=(
            Notice(
                "preload",
                f"Strain counts from a preload of {preload:.3g} MPa (properties.preload), reached at "
                f"{loading.sign * strain:.3g} strain after the reference.",
            ),
        ),
    )


def _at_stress(loading: Loading, strain: Floats, stress: float) -> float:
    """Read a strain at a stress from a line through a few frames."""
    there = np.isfinite(strain)
    try:
        return straight_line(loading.stress[there], strain[there]).at(stress)
    except ValueError:
        return float(np.nanmean(strain)) if there.any() else 0.0


def take_off_toe(
    zero: Zero, lay: Callable[[Loading], Elastic], asked: Literal["auto"] | bool, u_clock_s: float
) -> tuple[Zero, Elastic]:
    """Lay the modulus line, and count strain from where it meets zero stress if there is a toe.

    Parameters
    ----------
    zero
        Zero at rest or preload.
    lay
        Fits the elastic part.
    asked
        True takes off whatever lies between zero and the line, False nothing, ``"auto"`` a toe that is
        clearly there.
    u_clock_s
        Standard uncertainty of the clock's offset, which looks like a shift in strain.

    Returns
    -------
    tuple
        The zero, and the elastic part in strains that count from it.

    Notes
    -----
    The construction is that of ASTM D638's annex [from memory].
    """
    elastic = lay(zero.loading)
    found = _has_toe(zero.loading, elastic, u_clock_s)
    if asked is not True and not (asked == "auto" and found):
        told = (_LEFT_IN,) if found else ()
        return replace(zero, notices=zero.notices + told), elastic
    loading, toe, across = zero.loading, 0.0, 0.0
    for _ in range(ROUNDS):
        step, frames = elastic.line.intercept, elastic.window.frames
        aside = _at_stress(loading.part(frames), loading.transverse[frames], 0.0)
        loading, toe, across = loading.counted_from(step, aside), toe + step, across + aside
        elastic = lay(loading)
        if elastic.window.frames == frames:
            break
    told = (
        Notice(
            "toe_compensated",
            f"The curve begins with a toe: strain counts from where the modulus line meets zero stress, "
            f"{loading.sign * toe:.3g} strain from the zero at rest (ASTM D638's annex); "
            "properties.toe = false leaves it in.",
        ),
    )
    return (
        Zero(loading, zero.strain + toe, zero.transverse + across, zero.notices + told),
        elastic,
    )


_LEFT_IN = Notice(
    "toe_left_in",
    "The curve begins with a toe that was left in as asked; strains count from the reading at rest.",
)


def _has_toe(loading: Loading, elastic: Elastic, u_clock_s: float) -> bool:
    """Tell whether the foot of the curve clearly bends away from the modulus line.

    A clock that is off shifts the whole loaded part along the line; in a toe the frames between rest
    and window lie short of the line.
    """
    line, start = elastic.line, elastic.window.frames.start
    rate = _strain_rate(loading, elastic)
    u_toe = line.u_at(0.0) * few_readings(line.n - 2)
    if not line.intercept > max(SMALLEST_TOE, CLEAR * u_toe, CLEAR * rate * u_clock_s):
        return False
    loaded = loading.stress[:start] > REST * loading.u_stress[:start]
    foot = (loading.strain[:start] - line.intercept - line.slope * loading.stress[:start])[loaded]
    if len(foot) < MIN_REST:
        return False
    # Half the frames between rest and line have to be short of it by what noise cannot do.
    return float(np.median(foot)) < -max(CLEAR * line.residual_s / np.sqrt(len(foot)), 0.1 * SMALLEST_TOE)


def _strain_rate(loading: Loading, elastic: Elastic) -> float:
    here = elastic.window.frames
    return float(np.ptp(loading.strain[here]) / np.ptp(loading.time_s[here]))


def seating_slack(
    loading: Loading, elastic: Elastic, displacement_mm: np.ndarray | None
) -> tuple[Notice, ...]:
    """Say how far the crosshead travelled before the coupon took the load.

    Parameters
    ----------
    loading, elastic
        Frames and elastic part.
    displacement_mm
        The crosshead's travel at the frames of the loading, or None.
    """
    if displacement_mm is None or not np.isfinite(displacement_mm).all():
        return ()
    travel, here = loading.sign * displacement_mm, elastic.window.frames
    if here.stop - here.start < MIN_FRAMES or not np.ptp(loading.stress[here]):
        return ()
    # Rest in strain and force is no rest of the crosshead: the slack itself is taken up in it.
    began = float(np.median(travel[:MIN_REST]))
    line = straight_line(loading.stress[here], travel[here])
    slack, taken = line.intercept - began, float(travel[here.stop - 1]) - line.intercept
    if slack <= max(SLACK_MM, SLACK_SHARE * taken):
        return ()
    return (
        Notice(
            "seating_slack",
            f"The crosshead travelled {slack:.2g} mm before the coupon took the load in full: slack in the "
            "grips or couplings; strain is measured on the coupon and does not contain it.",
        ),
    )
