"""Pressure ratings that fall with temperature.

A rating is known between the temperatures for which its maker lists it, linearly from one to the next, and
nowhere else: it is never extrapolated.
"""

from __future__ import annotations

import math
from collections.abc import Iterable, Sequence
from functools import lru_cache
from itertools import pairwise
from typing import Any

import numpy as np
from numpy.typing import ArrayLike

from register.engineering.broadcasting import numbers, plain
from register.engineering.margins import ON_THE_LIMIT
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
    return _read(tuple(tuple(map(str, pair)) for pair in pairs), temperature_unit, pressure_unit)


@lru_cache(maxsize=1024)
def _read(pairs: tuple[tuple[str, ...], ...], temperature_unit: str, pressure_unit: str) -> Table:
    table: list[tuple[float, float]] = []
    for line, pair in enumerate(pairs, start=1):
        if len(pair) != 2:
            raise RatingError(f"Line {line} of the body rating needs a temperature and a pressure.")
        try:
            temperature, pressure = (parse_number(text) for text in pair)
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
    if type(temperature_k) is float:
        return _one_rating(temperature_k, table)
    (temperature,) = numbers(temperature_k)
    if not table:
        return plain(np.full_like(temperature, np.nan))
    listed, ratings = np.array(table, dtype=float).T
    found = np.interp(_onto(temperature, listed), listed, ratings, left=np.nan, right=np.nan)
    # With a single listed temperature numpy takes one that is not a number for it.
    return plain(np.where(np.isnan(temperature), np.nan, found))


def least_rating(min_k: ArrayLike | None, max_k: ArrayLike | None, table: Table) -> Any:
    """Give the lowest rating anywhere between two temperatures [K]; nan where a part lies outside the table."""
    ratings = [rating_at(min_k, table), rating_at(max_k, table)]
    low, high = numbers(min_k, max_k)
    ratings += [np.where((low < listed) & (listed < high), pressure, np.inf) for listed, pressure in table]
    return plain(np.minimum.reduce(np.broadcast_arrays(*ratings)))


def _one_rating(temperature: float, table: Table) -> float:
    """Interpolate for one temperature; numpy takes ten times as long for a single number."""
    for (low_k, low_pa), (high_k, high_pa) in pairwise((*table, *table[-1:])):
        if abs(temperature - low_k) <= ON_THE_LIMIT * low_k:
            return low_pa
        if low_k < temperature < high_k - ON_THE_LIMIT * high_k:
            return low_pa + (high_pa - low_pa) * (temperature - low_k) / (high_k - low_k)
    return math.nan


def _onto(temperature: Any, listed: Any) -> Any:
    """Put a temperature that misses a listed one by rounding alone (100 °C against 212 °F) onto it."""
    nearest = listed[np.abs(temperature[..., np.newaxis] - listed).argmin(axis=-1)]
    return np.where(np.abs(temperature - nearest) <= ON_THE_LIMIT * nearest, nearest, temperature)
