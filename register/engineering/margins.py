"""Margins of demands against limits, for one tag or a whole fleet.

A margin is zero or more inside the limit, negative beyond it, nan where a number is missing. Floats and
arrays broadcast; both sides of a comparison are in one unit and against one pressure reference.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import ArrayLike

from register.engineering.broadcasting import numbers, plain

CLEAR, CANNOT_CHECK, CAUTION, VIOLATION = range(4)

# Conversion leaves dust in the last digits; a demand that sits on its limit is not beyond it.
ON_THE_LIMIT = 1e-9


@dataclass(frozen=True, slots=True)
class RangeMargins:
    """Distance of the lower range-value above LRL and of the upper range-value below URL."""

    lower: Any
    upper: Any


@dataclass(frozen=True, slots=True)
class SpanMargins:
    """Span less the least span, and greatest span less the span."""

    least: Any
    greatest: Any


def upper_margin(value: ArrayLike | None, limit: ArrayLike | None) -> Any:
    """Give limit − value: how far a value stays below a limit that it must not exceed."""
    demanded, allowed = numbers(value, limit)
    return plain(allowed - demanded)


def lower_margin(value: ArrayLike | None, limit: ArrayLike | None) -> Any:
    """Give value − limit: how far a value stays above a limit that it must not go under."""
    demanded, allowed = numbers(value, limit)
    return plain(demanded - allowed)


def range_margins(
    lrv: ArrayLike | None, urv: ArrayLike | None, lrl: ArrayLike | None, url: ArrayLike | None
) -> RangeMargins:
    """Give the margins of a range in its head: LRL ≤ both range-values ≤ URL, in either direction."""
    low, high = numbers(lrv, urv)
    return RangeMargins(lower=lower_margin(np.minimum(low, high), lrl), upper=upper_margin(np.maximum(low, high), url))


def span_margins(
    lrv: ArrayLike | None, urv: ArrayLike | None, least_span: ArrayLike | None, greatest_span: ArrayLike | None
) -> SpanMargins:
    """Give the margins of |URV − LRV| between the least and the greatest span of the head."""
    low, high = numbers(lrv, urv)
    magnitude = np.abs(high - low)
    return SpanMargins(least=lower_margin(magnitude, least_span), greatest=upper_margin(magnitude, greatest_span))


def severity_codes(margin: ArrayLike | None, scale: ArrayLike, narrow: ArrayLike = 0.0) -> Any:
    """Classify margins.

    Parameters
    ----------
    margin : float or array
        Margin, nan where it cannot be computed.
    scale : float or array
        Size of the numbers compared, in the unit of the margin; 1e-9 of it is taken for rounding.
    narrow : float or array
        A margin inside the limit but below this is a caution; 0 gives none, even on the limit.

    Returns
    -------
    int or array of int
        CLEAR 0, CANNOT_CHECK 1, CAUTION 2, VIOLATION 3.
    """
    if type(margin) is type(scale) is type(narrow) is float:
        return _code(margin, scale, narrow)
    distance, size, close = numbers(margin, scale, narrow)
    dust = ON_THE_LIMIT * np.abs(size)
    codes = np.where(distance < -dust, VIOLATION, np.where(distance < close - dust, CAUTION, CLEAR))
    return plain(np.where(np.isnan(distance), CANNOT_CHECK, codes))


def _code(margin: float, scale: float, narrow: float) -> int:
    """Classify one margin; a tag has a dozen of them, and numpy takes twenty times as long for a single number."""
    dust = ON_THE_LIMIT * abs(scale)
    if margin != margin:
        return CANNOT_CHECK
    return VIOLATION if margin < -dust else CAUTION if margin < narrow - dust else CLEAR
