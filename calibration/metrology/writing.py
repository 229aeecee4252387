"""Figures in words: no exponent, a true minus sign, an error beside its limit so that both can be compared."""

from __future__ import annotations

import math
from decimal import ROUND_HALF_UP, Context, Decimal

_AMPLE = Context(prec=800)
#: An error that passes its limit by a smaller share than this lies on it.
_SHARE = 1e-8


def _rounded(value: float, places: int) -> Decimal:
    return Decimal(repr(float(value))).quantize(Decimal(1).scaleb(-places), ROUND_HALF_UP, context=_AMPLE)


def fixed(value: float, places: int, *, signed: bool = False) -> str:
    """A figure to so many places; with `signed` its sign is shown unless it rounds to zero."""
    rounded = _rounded(value, places)
    sign = "−" if rounded < 0 else "+" if signed and rounded > 0 else ""
    return f"{sign}{abs(rounded):f}"


def plain(value: float, digits: int = 6) -> str:
    """A figure without trailing zeros, to so many significant digits."""
    if not math.isfinite(value) or value == 0.0:
        return "0" if value == 0.0 else "–"
    text = fixed(value, digits - 1 - math.floor(math.log10(abs(value))))
    return _without_zeros(text)


def places_for(limit: float) -> int:
    """Decimal places of an error that its limit deserves: three digits of the limit."""
    return max(0, 2 - math.floor(math.log10(limit))) if math.isfinite(limit) and limit > 0.0 else 3


def beside(error: float, limit: float, more: int = 1) -> tuple[str, str]:
    """An error and its limit as a reader compares them.

    Parameters
    ----------
    error, limit : float
        Both in one unit; the limit is not negative.
    more : int
        Places that the limit has more than the error: one for a limit that somebody stated.

    Returns
    -------
    tuple of str
        For example "+0.310" and "0.25", with as many places more as it takes that the error shown passes the limit
        shown just where the error itself passes the limit.
    """
    if not math.isfinite(error):
        return "–", plain(limit, 4)
    if not (math.isfinite(limit) and limit > 0.0):
        return fixed(error, places_for(limit), signed=True), plain(limit, 4)
    start = places_for(limit)
    outside = abs(error) > limit * (1.0 + _SHARE)
    for places in range(start, start + 9):
        shown = _rounded(limit, max(places, start + more))
        if (abs(_rounded(error, places)) > shown) == outside:
            break
    return fixed(error, places, signed=True), _without_zeros(f"{shown:f}")


def _without_zeros(text: str) -> str:
    return text.rstrip("0").rstrip(".") if "." in text else text
