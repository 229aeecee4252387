"""What a range is, and where it lies in its head: signed span, turndown, fractions for drawing.

Every function takes floats or arrays and broadcasts; None or nan stands for a number that is not recorded
and makes whatever depends on it nan.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import ArrayLike

from register.engineering.broadcasting import numbers, plain


@dataclass(frozen=True, slots=True)
class RangeFacts:
    """Facts of a range; floats or arrays as given, pressures in one unit.

    Notes
    -----
    `elevated_zero` and `suppressed_zero` are in the sense of ISA-51.1: elevated where the zero of the measured
    value lies above the lower range-value, suppressed where it lies below. Sources use the two words in opposite
    senses, so pages show LRV, URV and the sign beside them.
    """

    lrv: Any
    urv: Any
    lrl: Any
    url: Any
    span: Any
    magnitude: Any
    reverse: Any
    lower: Any
    upper: Any
    zero_fraction: Any
    elevated_zero: Any
    suppressed_zero: Any
    turndown: Any


@dataclass(frozen=True, slots=True)
class RangeStrip:
    """A range drawn in its head: positions with 0 at LRL and 1 at URL, not clipped; nan where unknown.

    `inside_from` and `inside_to` bound the part that the head can carry (nan where there is none); `below` and
    `above` are the lengths that lie outside, in widths of the head. `least_span` is a length as well.
    """

    lrv: Any
    urv: Any
    least_span: Any
    inside_from: Any
    inside_to: Any
    below: Any
    above: Any
    reverse: Any


@dataclass(frozen=True, slots=True)
class StaticStrip:
    """Static pressures drawn against the body rating: 0 at zero gauge, 1 at the rating, not clipped.

    `beyond` is the length past the rating; nan where unknown.
    """

    operating: Any
    design: Any
    beyond: Any


def span(lrv: ArrayLike | None, urv: ArrayLike | None) -> Any:
    """Give the signed span URV − LRV; negative for a reverse-acting range."""
    low, high = numbers(lrv, urv)
    return plain(high - low)


def turndown(lrv: ArrayLike | None, urv: ArrayLike | None, lrl: ArrayLike | None, url: ArrayLike | None) -> Any:
    """Give the greater of |LRL| and |URL| divided by |span|.

    Notes
    -----
    Common practice, no source: makers state turndown as URL over span. The greater limit stands in for URL, so
    that a head reaching further below zero than above it is not flattered. nan where the span is zero.
    """
    low, high, bottom, top = numbers(lrv, urv, lrl, url)
    return plain(_ratio(np.maximum(np.abs(bottom), np.abs(top)), np.abs(high - low)))


def range_facts(
    lrv: ArrayLike | None, urv: ArrayLike | None, lrl: ArrayLike | None = None, url: ArrayLike | None = None
) -> RangeFacts:
    """Collect what can be said about a range.

    Parameters
    ----------
    lrv, urv : float or array
        Range-values, in one unit; URV below LRV is a reverse-acting range.
    lrl, url : float or array, optional
        Limits of the head, same unit; needed for the turndown only.

    Returns
    -------
    RangeFacts
        `zero_fraction` is the fraction of range at which the measured value is zero.
    """
    low, high, bottom, top = numbers(lrv, urv, lrl, url)
    lower = np.minimum(low, high)
    return RangeFacts(
        lrv=plain(low),
        urv=plain(high),
        lrl=plain(bottom),
        url=plain(top),
        span=plain(high - low),
        magnitude=plain(np.abs(high - low)),
        reverse=plain(high < low),
        lower=plain(lower),
        upper=plain(np.maximum(low, high)),
        zero_fraction=plain(_ratio(0.0 - low, high - low)),
        elevated_zero=plain(lower < 0),
        suppressed_zero=plain(lower > 0),
        turndown=turndown(lrv, urv, lrl, url),
    )


def range_strip(
    lrv: ArrayLike | None,
    urv: ArrayLike | None,
    lrl: ArrayLike | None,
    url: ArrayLike | None,
    least_span: ArrayLike | None = None,
) -> RangeStrip:
    """Give the positions of a range in its head, for drawing.

    Parameters
    ----------
    lrv, urv, lrl, url, least_span : float or array
        Range-values, limits and least span of the head, all in one unit.
    """
    low, high, bottom, top, least = numbers(lrv, urv, lrl, url, least_span)
    width = np.where(top > bottom, top - bottom, np.nan)
    first, second = (low - bottom) / width, (high - bottom) / width
    lower, upper = np.minimum(first, second), np.maximum(first, second)
    from_, to = np.clip(lower, 0.0, 1.0), np.clip(upper, 0.0, 1.0)
    apart = (upper < 0.0) | (lower > 1.0)
    return RangeStrip(
        lrv=plain(first),
        urv=plain(second),
        least_span=plain(least / width),
        inside_from=plain(np.where(apart, np.nan, from_)),
        inside_to=plain(np.where(apart, np.nan, to)),
        below=plain(np.minimum(upper, 0.0) - np.minimum(lower, 0.0)),
        above=plain(np.maximum(upper, 1.0) - np.maximum(lower, 1.0)),
        reverse=plain(high < low),
    )


def static_strip(rating: ArrayLike | None, operating: ArrayLike | None, design: ArrayLike | None) -> StaticStrip:
    """Give static pressures as fractions of the body rating, for drawing; all gauge, in one unit."""
    limit, working, highest = numbers(rating, operating, design)
    limit = np.where(limit > 0, limit, np.nan)
    at_work, at_most = working / limit, highest / limit
    return StaticStrip(
        operating=plain(at_work),
        design=plain(at_most),
        beyond=plain(np.maximum(np.fmax(at_work, at_most) - 1.0, 0.0)),
    )


def known(value: float) -> float | None:
    """Turn nan into None, for what is drawn or stored only where it is known."""
    return None if math.isnan(value) else float(value)


def _ratio(numerator: Any, denominator: Any) -> Any:
    with np.errstate(divide="ignore", invalid="ignore"):
        return np.where(denominator == 0, np.nan, numerator / denominator)
