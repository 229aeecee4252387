"""Pressure ratings that fall with temperature.

A rating is known between the temperatures for which its maker lists it, linearly from one to the next, and
nowhere else: it is never extrapolated.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from typing import Any

import numpy as np
from numpy.typing import ArrayLike

from register.engineering.broadcasting import numbers, plain
from register.engineering.typed import NumberError, parse_number
from register.engineering.units import to_si

Table = tuple[tuple[float, float], ...]


class RatingError(ValueError):
    """A rating as typed cannot be used; the message is fit for the person who typed it."""


def rating_table(pairs: Iterable[Sequence[str]], temperature_unit: str, pressure_unit: str) -> Table:
    """Read a rating as typed.

    Parameters
    ----------
    pairs : iterable of (str, str)
        Temperature and gauge pressure as typed, lowest temperature first.
    temperature_unit, pressure_unit : str
        Keys of the units of both columns.

    Returns
    -------
    tuple of (float, float)
        Temperature [K] and gauge pressure [Pa].

    Raises
    ------
    RatingError
        A line is no pair of numbers, a pressure is not above zero, or the temperatures do not rise.
    UnitError
        A unit is unknown.
    """
    table: list[tuple[float, float]] = []
    for line, pair in enumerate(pairs, start=1):
        if len(pair) != 2:
            raise RatingError(f"Line {line} of the body rating needs a temperature and a pressure.")
        try:
            temperature, pressure = (parse_number(str(text)) for text in pair)
        except NumberError as error:
            raise RatingError(f"Line {line} of the body rating: {error}") from None
        if pressure <= 0:
            raise RatingError(f"Line {line} of the body rating: the pressure “{pair[1]}” must be above zero.")
        kelvin = to_si(temperature, temperature_unit)
        if table and kelvin <= table[-1][0]:
            raise RatingError(
                f"Line {line} of the body rating: “{pair[0]}” is not above the temperature of the line before; "
                "list each temperature once, the lowest first."
            )
        table.append((kelvin, to_si(pressure, pressure_unit)))
    return tuple(table)


def rating_at(temperature_k: ArrayLike | None, table: Table) -> Any:
    """Give the rating at a temperature.

    Parameters
    ----------
    temperature_k : float or array
        Temperature [K].
    table : tuple of (float, float)
        Temperature [K], rising, and gauge pressure [Pa].

    Returns
    -------
    float or array
        Gauge pressure [Pa], linear between listed temperatures; nan outside them and for an empty table.
    """
    (temperature,) = numbers(temperature_k)
    if not table:
        return plain(np.full_like(temperature, np.nan))
    listed, ratings = np.array(table, dtype=float).T
    found = np.interp(_onto(temperature, listed), listed, ratings, left=np.nan, right=np.nan)
    return plain(found)


def least_rating(min_k: ArrayLike | None, max_k: ArrayLike | None, table: Table) -> Any:
    """Give the lowest rating anywhere between two temperatures [K]; nan where a part lies outside the table."""
    low, high = np.broadcast_arrays(*numbers(min_k, max_k))
    least = np.minimum(rating_at(low, table), rating_at(high, table))
    for listed, pressure in table:
        least = np.where((low < listed) & (listed < high), np.minimum(least, pressure), least)
    return plain(np.asarray(least))


def _onto(temperature: Any, listed: Any) -> Any:
    """Put a temperature that misses a listed one by rounding alone (100 °C against 212 °F) onto it."""
    nearest = listed[np.abs(temperature[..., np.newaxis] - listed).argmin(axis=-1)]
    return np.where(np.abs(temperature - nearest) <= 1e-9 * nearest, nearest, temperature)
