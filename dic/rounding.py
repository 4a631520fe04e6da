"""Numbers as a report states them: rounded to what their uncertainty says about them."""

from __future__ import annotations

from decimal import ROUND_HALF_EVEN, Context, Decimal
from math import isfinite

#: Coverage factor of every expanded uncertainty that is shown: about 95 % for a normal distribution.
COVERAGE_FACTOR = 2.0
#: Probability that an interval of that factor holds the true value, about.
COVERAGE_PROBABILITY = 0.95

#: From more decimals on, a row of zeros is hard to count, and a power of ten takes its place.
_MOST_DECIMALS = 6
_RAISED = str.maketrans("-0123456789", "⁻⁰¹²³⁴⁵⁶⁷⁸⁹")

# A double reaches from 1e-324 to 1e308, so 700 digits hold every value beside every uncertainty.
_EXACT = Context(prec=700, rounding=ROUND_HALF_EVEN)


def decimals_for(uncertainty: float) -> int:
    """Return the decimals at which an uncertainty has two significant digits.

    Parameters
    ----------
    uncertainty
        A positive, finite number.

    Returns
    -------
    int
        Decimals after the point; negative where whole tens, hundreds, ... are rounded away.

    Notes
    -----
    Two significant digits follow JCGM 100:2008 (GUM), 7.2.6.  0.0996 rounds to 0.10 and so keeps two
    decimals, not three.
    """
    exact = Decimal(repr(float(uncertainty)))
    decimals = 1 - exact.adjusted()
    # Rounding may carry into the next power of ten.
    return decimals - (_quantize(exact, decimals).adjusted() - exact.adjusted())


def fixed(value: float, decimals: int, power: int = 0) -> str:
    """Write a finite number with that many decimals, halves to even, never as minus zero.

    With a `power` of ten, the number that stands before that power; the rounding stays where it is.
    """
    text = _quantize(Decimal(repr(float(value))), decimals).scaleb(-power, _EXACT)
    return format(abs(text) if text.is_zero() else text, "f")


def power_of_ten(value: float, uncertainty: float) -> int:
    """Return the power of ten that a value and its uncertainty are written with; 0 for none.

    Parameters
    ----------
    value, uncertainty
        In the same unit; where either is not known, none is needed.

    Returns
    -------
    int
        That of the larger one's first digit, where the uncertainty's digits stand more than six places
        behind the point.
    """
    if not (isfinite(value) and isfinite(uncertainty) and uncertainty > 0):
        return 0
    decimals = decimals_for(uncertainty)
    if decimals <= _MOST_DECIMALS:
        return 0
    return _quantize(Decimal(repr(float(max(abs(value), uncertainty)))), decimals).adjusted()


def times_ten_to(power: int, unit: str = "") -> str:
    """Write a power of ten, 0 for none, and a unit as they stand behind a number, each after its space."""
    factor = f" × 10{str(power).translate(_RAISED)}" if power else ""
    # Of all units only the degree follows its number at once (SI brochure, 5.4.3) [from memory].
    return factor + (f" {unit}" if unit and unit != "°" else unit)


def with_uncertainty(value: float, uncertainty: float, unit: str = "") -> str:
    """Write ``value ± uncertainty unit``, both rounded to two significant digits of the uncertainty.

    Parameters
    ----------
    value
        The value; not finite where it could not be determined.
    uncertainty
        Its uncertainty, in the same unit; zero or not finite where none can be stated.
    unit
        The unit, empty for none.

    Returns
    -------
    str
        For example ``70.12 ± 0.21 GPa``, or ``(8.3914 ± 0.0093) × 10⁻⁴ 1/s``; ``not determined`` where
        there is no value.
    """
    if not isfinite(value):
        return "not determined"
    if not (isfinite(uncertainty) and uncertainty > 0):
        return f"{value:.4g}{times_ten_to(0, unit)} (uncertainty not determined)"
    decimals, power = decimals_for(uncertainty), power_of_ten(value, uncertainty)
    both = f"{fixed(value, decimals, power)} ± {fixed(uncertainty, decimals, power)}"
    return (f"({both})" if power else both) + times_ten_to(power, unit)


def uncertainty_alone(uncertainty: float, unit: str = "", power: int = 0) -> str:
    """Write an uncertainty with two significant digits, or ``not determined``.

    With `power`, the power of ten that its value is written with (`power_of_ten`); else with its own where
    it needs one.
    """
    if not isfinite(uncertainty):
        return "not determined"
    if uncertainty == 0:
        return f"0{times_ten_to(0, unit)}"
    power = power or power_of_ten(0.0, uncertainty)
    return fixed(uncertainty, decimals_for(uncertainty), power) + times_ten_to(power, unit)


def _quantize(number: Decimal, decimals: int) -> Decimal:
    return number.quantize(Decimal(1).scaleb(-decimals, _EXACT), context=_EXACT)


def three_digits(value: float) -> str:
    """Write a number to three significant digits, without an exponent from a ten-thousandth to a million."""
    mantissa, _, exponent = f"{value:.2e}".partition("e")
    if exponent and int(exponent) < -4:
        return f"{float(mantissa):g}{times_ten_to(int(exponent))}"
    return f"{float(f'{value:.3g}'):.6g}"
