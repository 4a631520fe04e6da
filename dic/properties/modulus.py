"""The straight line through the elastic part: window and fit."""

from __future__ import annotations

from dataclasses import dataclass

from dic.properties.loading import MIN_FRAMES, Loading, Undetermined, passage
from dic.properties.proof import crossing
from dic.testfile import ModulusWindow
from dic.uncertainty import Line, straight_line

#: Window of ISO 6892-1's annex on the modulus, as shares of the yield point [from memory].
SHARES = (0.1, 0.4)
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
        Frames of the `Loading` that were used.
    line
        Strain on stress: slope 1/E in 1/MPa.
    rule
        How the window was chosen, in words.
    notes
        What was assumed, a sentence each.
    """

    window: slice
    line: Line
    rule: str
    notes: tuple[str, ...] = ()

    @property
    def modulus(self) -> float:
        """Young's modulus, MPa."""
        return 1 / self.line.slope


def fit_elastic(loading: Loading, wanted: ModulusWindow | str) -> Elastic:
    """Fit the elastic part.

    Strain is regressed on stress, not stress on strain: the force, averaged from a dense record, is
    the quieter of the two relative to its range, and noise in the abscissa would pull the slope low by
    var(noise)/var(signal).  Poisson's ratio uses the same abscissa (ASTM E132), so E, ν and G fit
    together.

    Parameters
    ----------
    loading
        Frames up to the largest force.
    wanted
        A window in strain or stress, or ``"auto"``: 10 % to 40 % of the yield point as ISO 6892-1's
        annex on the modulus has it, the yield point being the 0.2 % proof stress that the line itself
        gives, repeated until the window stays.  Where that cannot be had: the strains of ISO 527-1, with
        the reason in the notes.

    Returns
    -------
    Elastic
        Window, line and rule.

    Raises
    ------
    Undetermined
        If the window holds too few frames, or strain does not grow with stress in it.
    """
    if isinstance(wanted, str):
        try:
            return _between_shares_of_yield(loading)
        except Undetermined as reason:
            return _fit(
                loading,
                passage(loading.strain, *PLASTICS),
                "strain 0.0005 to 0.0025 (ISO 527-1)",
                (f"the window is that for plastics: {reason}",),
            )
    if wanted.strain is not None:
        low, high = _along(loading, wanted.strain)
        return _fit(loading, passage(loading.strain, low, high), f"strain {low:g} to {high:g}, as given")
    assert wanted.stress is not None  # noqa: S101  (the model holds one of the two)
    low, high = _along(loading, wanted.stress)
    return _fit(loading, passage(loading.stress, low, high), f"stress {low:g} MPa to {high:g} MPa, as given")


def _along(loading: Loading, window: tuple[float, float]) -> tuple[float, float]:
    """Return a window counted along the loading; in compression either sign may have been written."""
    low, high = window
    return (-high, -low) if loading.sign < 0 and high <= 0 else (low, high)


def _between_shares_of_yield(loading: Loading) -> Elastic:
    """Fit between shares of the yield point; raise with the reason why that cannot be."""
    yield_point = _first_guess(loading)
    found: Elastic | None = None
    for _ in range(ROUNDS):
        window = passage(loading.stress, *(share * yield_point for share in SHARES))
        if found is not None and window == found.window:
            break
        found = _fit(
            loading, window, "10 % to 40 % of the 0.2 % proof stress (ISO 6892-1, annex on the modulus)"
        )
        yield_point = crossing(loading, found.line, window.stop, YIELD_OFFSET).stress
    assert found is not None  # noqa: S101  (there is a first round)
    if yield_point / found.modulus >= LARGEST_YIELD_STRAIN:
        raise Undetermined("the curve bends all along and shows no yield point like a metal's")
    return found


def _first_guess(loading: Loading) -> float:
    """Return a stress that is below, or not far above, any metal's yield point, with frames beneath it."""
    early = loading.stress[passage(loading.strain, -1.0, FIRST_GUESS)]
    highest = float(loading.stress.max(initial=0.0))
    guess = float(early.max(initial=0.0))
    while 0 < guess < highest:
        window = passage(loading.stress, *(share * guess for share in SHARES))
        if window.stop - window.start >= MIN_FRAMES:
            break
        guess *= 1.25
    return guess


def _fit(loading: Loading, window: slice, rule: str, notes: tuple[str, ...] = ()) -> Elastic:
    count = window.stop - window.start
    if count < MIN_FRAMES:
        raise Undetermined(
            f"{count} frames lie in the window ({rule}), {MIN_FRAMES} are needed: "
            "take frames more often, or give properties.modulus a wider window"
        )
    line = straight_line(loading.stress[window], loading.strain[window])
    if not line.slope > 0:
        raise Undetermined(f"strain does not grow with stress in the window ({rule})")
    return Elastic(window, line, rule, notes)
