"""Numbers as a report states them: rounded to what their uncertainty says about them."""

from __future__ import annotations

from decimal import ROUND_HALF_EVEN, Context, Decimal
from math import isfinite

#: Coverage factor of every expanded uncertainty that is shown: about 95 % for a normal distribution.
COVERAGE_FACTOR = 2.0
#: Probability that an interval of that factor holds the true value, about.
COVERAGE_PROBABILITY = 0.95

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


def fixed(value: float, decimals: int) -> str:
    """Write a finite number with that many decimals, halves to even, never as minus zero."""
    text = _quantize(Decimal(repr(float(value))), decimals)
    return format(abs(text) if text.is_zero() else text, "f")


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
        For example ``70.12 ± 0.21 GPa``; ``not determined`` where there is no value.
    """
    if not isfinite(value):
        return "not determined"
    if not (isfinite(uncertainty) and uncertainty > 0):
        return f"{value:.4g} {unit}".rstrip() + " (uncertainty not determined)"
    decimals = decimals_for(uncertainty)
    return f"{fixed(value, decimals)} ± {fixed(uncertainty, decimals)} {unit}".rstrip()


def uncertainty_alone(uncertainty: float, unit: str = "") -> str:
    """Write an uncertainty with two significant digits, or ``not determined``."""
    if not isfinite(uncertainty):
        return "not determined"
    if uncertainty == 0:
        return f"0 {unit}".rstrip()
    decimals = decimals_for(uncertainty)
    # A row of zeros is hard to count.
    text = fixed(uncertainty, decimals) if decimals <= 6 else f"{uncertainty:.1e}"
    return f"{text} {unit}".rstrip()


def _quantize(number: Decimal, decimals: int) -> Decimal:
    return number.quantize(Decimal(1).scaleb(-decimals, _EXACT), context=_EXACT)


def three_digits(value: float) -> str:
    """Write a number to three significant digits, never with an exponent below a million."""
    return f"{float(f'{value:.3g}'):.6g}"
