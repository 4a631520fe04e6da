"""The straight line through the elastic part: window and fit."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

from dic.properties.fits import Kind, Window, bend_of, end_line, fit
from dic.properties.loading import MIN_FRAMES, Loading, Undetermined, passage
from dic.properties.proof import crossing
from dic.testfile import ModulusWindow
from dic.uncertainty import Line

#: Window of ISO 6892-1's annex on the modulus, as shares of the yield point [from memory].
SHARES = (0.1, 0.4)
#: Tops that a window is tried up to, as shares of the yield point or of the largest stress, where the test
#: shows a straight course up to there.
TOPS = (0.5, 0.6, 0.7, 0.8)
#: Before the curve meets the 0.2 % line the stress of a sharp yield point exceeds that proof stress so much.
SHARP = 1.03
#: Standard uncertainties of the bend that a window may show and still count as straight.
STRAIGHT = 2.0
#: Window of ISO 527-1, strain.
PLASTICS = (0.0005, 0.0025)
#: Offset whose proof stress stands for the yield point.
YIELD_OFFSET = 0.002
#: No metal yields at a larger elastic strain (common practice); a curve that bends later bends all along.
LARGEST_YIELD_STRAIN = 0.01
#: Strain at which the search for the yield point begins: elastic and plastic part both 0.2 %.
FIRST_GUESS = 0.004
#: The yield point settles in two or three rounds; more mean that it hops between two frames.
ROUNDS = 10


@dataclass(frozen=True)
class Elastic:
    """The elastic part.

    Attributes
    ----------
    window
        Frames of the `Loading` that were used, and how.
    line
        Strain on stress: slope 1/E in 1/MPa.
    rule
        How the window was chosen, in words.
    notes
        What was assumed, a sentence each.
    """

    window: Window
    line: Line
    rule: str
    notes: tuple[str, ...] = ()

    @property
    def modulus(self) -> float:
        """Young's modulus, MPa."""
        return 1 / self.line.slope

    @property
    def end(self) -> int:
        """First frame after the window."""
        return self.window.frames.stop


def fit_elastic(loading: Loading, wanted: ModulusWindow | Literal["auto"], source: str) -> Elastic:
    """Fit the elastic part.

    Strain is laid over stress, not stress over strain: the force, averaged from a dense record, is the
    quieter of the two relative to its range.  Poisson's ratio uses the same abscissa (ASTM E132), so E, ν
    and G fit together.

    Parameters
    ----------
    loading
        Frames up to the largest force.
    wanted
        A window in strain or stress, or ``"auto"``: 10 % to 40 % of the yield point as ISO 6892-1's
        annex on the modulus has it, the yield point being the 0.2 % proof stress that the line itself
        gives, repeated until the window stays.  Where that cannot be had: the strains of ISO 527-1, or the
        shares of the largest stress where the test does not reach so far, with the reason in the notes.
        Below a sharp yield point, or below the end of a test that shows none, the window by shares goes on
        upwards while the curve is straight, see `_widened`.
    source
        Who asked for the window, in words.

    Returns
    -------
    Elastic
        Window, line and rule.

    Raises
    ------
    Undetermined
        If the window holds too few frames, or strain does not grow with stress in it.
    """
    if wanted == "auto":
        try:
            return _between_shares_of_yield(loading)
        except Undetermined as reason:
            reached = float(loading.strain.max(initial=0.0))
            if 0 < reached < PLASTICS[1]:
                return _between_shares_of_largest(loading, reached)
            return _fit(
                loading,
                passage(loading.strain, *PLASTICS),
                "strain 0.0005 to 0.0025 (ISO 527-1)",
                notes=(f"the window is that for plastics: {reason}",),
            )
    [(bounded, window)] = wanted.given.items()
    low, high = _along(loading, window)
    if bounded == "strain":
        frames, rule = passage(loading.strain, low, high), f"strain {low:g} to {high:g}, {source}"
        return _fit(loading, frames, rule, wanted.kind, strains=(low, high))
    frames, rule = passage(loading.stress, low, high), f"stress {low:g} MPa to {high:g} MPa, {source}"
    return _fit(loading, frames, rule, wanted.kind, stresses=(low, high))


def _along(loading: Loading, window: tuple[float, float]) -> tuple[float, float]:
    """Return a window counted along the loading; in compression either sign may have been written."""
    low, high = window
    return (-high, -low) if loading.sign < 0 and high <= 0 else (low, high)


def _between_shares_of_yield(loading: Loading) -> Elastic:
    """Fit between shares of the yield point; raise with the reason why that cannot be."""
    yield_point = _first_guess(loading)
    last = None
    for _ in range(ROUNDS):
        frames = passage(loading.stress, *(share * yield_point for share in SHARES))
        if frames == last:
            break
        last = frames
        found = _fit(
            loading, frames, "10 % to 40 % of the 0.2 % proof stress (ISO 6892-1, annex on the modulus)"
        )
        yield_point = crossing(loading, found.line, found.end, YIELD_OFFSET).stress
    if yield_point / found.modulus >= LARGEST_YIELD_STRAIN:
        raise Undetermined("the curve bends all along and shows no yield point like a metal's")
    # A gradual yield leaves plastic strain below its bend, too little to see and enough to falsify ν.
    met = found.line.at(yield_point) + YIELD_OFFSET
    if _highest_before(loading, met) < SHARP * yield_point:
        return found
    return _widened(loading, found, yield_point, "the 0.2 % proof stress (ISO 6892-1, annex on the modulus)")


def _highest_before(loading: Loading, strain: float) -> float:
    return float(loading.stress[passage(loading.strain, -1.0, strain)].max(initial=0.0))


def _between_shares_of_largest(loading: Loading, reached: float) -> Elastic:
    """Fit the elastic part that there is in a test that ends before the window of any standard does."""
    largest = float(loading.stress.max())
    whole = "the largest stress"
    narrow = _fit(
        loading,
        passage(loading.stress, *(share * largest for share in SHARES)),
        f"10 % to 40 % of {whole}",
        notes=(f"the test reached only {100 * reached:.2g} % strain: the window is taken of {whole}",),
    )
    return _widened(loading, narrow, largest, whole)


def _widened(loading: Loading, narrow: Elastic, full: float, of: str) -> Elastic:
    """Widen a window upwards as long as the curve is straight.

    A window counts as straight if a parabola of strain over stress bends by no more than `STRAIGHT` of its
    own standard uncertainties: the check of the residuals that ISO 6892-1's annex asks for [from memory].
    The first window that bends ends the search.
    """
    found = narrow
    for top in TOPS:
        frames = passage(loading.stress, SHARES[0] * full, top * full)
        rule = f"10 % to {100 * top:.0f} % of {of}, as far as the curve is straight"
        wider = _fit(loading, frames, rule, notes=narrow.notes)
        if bend_of(loading, frames) > STRAIGHT:
            break
        found = wider
    return found


def _first_guess(loading: Loading) -> float:
    """Return a stress that is below, or not far above, any metal's yield point, with frames beneath it."""
    highest = float(loading.stress.max(initial=0.0))
    guess = _highest_before(loading, FIRST_GUESS)
    while 0 < guess < highest:
        window = passage(loading.stress, *(share * guess for share in SHARES))
        if window.stop - window.start >= MIN_FRAMES:
            break
        guess *= 1.25
    return guess


def _fit(
    loading: Loading,
    frames: slice,
    rule: str,
    kind: Kind = "regression",
    *,
    strains: tuple[float, float] | None = None,
    stresses: tuple[float, float] | None = None,
    notes: tuple[str, ...] = (),
) -> Elastic:
    count = frames.stop - frames.start
    if count < MIN_FRAMES:
        raise Undetermined(
            f"{count} frames lie in the window ({rule}), {MIN_FRAMES} are needed: "
            "take frames more often, or give properties.modulus a wider window"
        )
    window = Window(frames, _ends(loading, frames, strains, stresses, kind), kind)
    line = fit(loading, loading.strain, loading.u_strain, window)
    if not line.slope > 0:
        raise Undetermined(f"strain does not grow with stress in the window ({rule})")
    return Elastic(window, line, rule, notes)


def _ends(
    loading: Loading,
    frames: slice,
    strains: tuple[float, float] | None,
    stresses: tuple[float, float] | None,
    kind: Kind,
) -> tuple[float, float]:
    """Return the stresses at the window's ends; a strain is turned into stress by the curve around it."""
    if stresses is not None:
        return stresses
    if strains is None or kind == "regression":
        return float(loading.stress[frames.start]), float(loading.stress[frames.stop - 1])
    high = end_line(loading, loading.strain, frames, 1)
    top = (strains[1] - high.intercept) / high.slope
    if kind == "secant":
        return 0.0, top
    low = end_line(loading, loading.strain, frames, 0)
    return (strains[0] - low.intercept) / low.slope, top
