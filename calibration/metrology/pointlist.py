"""The inputs of a run and their order.

A point list is written in percent of the input range, in the order in which the points are applied:
"0 25 50 75 100 75 50 25 0". A bar starts a new cycle. A point reached from below is an up reading, one
reached from above a down reading; the turning point belongs to the direction in which it was reached, and the
first point to the direction that follows.
"""

from __future__ import annotations

import math
import re
from dataclasses import dataclass
from functools import cached_property
from itertools import pairwise

import numpy as np
from numpy.typing import ArrayLike, NDArray

from calibration.metrology.signal import Signal, Transfer

UP = 1
DOWN = -1

MOST_POINTS = 200
LEAST_PERCENT = -10.0
GREATEST_PERCENT = 110.0


def percent_text(percent: float) -> str:
    """Shortest plain text of a percentage: 25, 12.5, −5 (with a true minus sign)."""
    return f"{percent:.6f}".rstrip("0").rstrip(".").replace("-", "−")


def directions_of(points: ArrayLike, starts: ArrayLike = (0,)) -> NDArray[np.int8]:
    """Direction in which each point of a list is reached.

    Parameters
    ----------
    points : array, shape (n,)
        Points [% of input range] in the order applied.
    starts : array of int
        Indices at which a cycle starts; a cycle that starts where the last one ended counts its first point
        to the direction that follows.

    Returns
    -------
    array of int8, shape (n,)
        +1 up, -1 down.
    """
    p = np.asarray(points, dtype=np.float64)
    if p.size == 0:
        return np.zeros(0, dtype=np.int8)
    step = np.sign(np.diff(p, prepend=p[0])).astype(np.int8)
    if p.size > 1:
        first = np.asarray(starts, dtype=np.intp)
        first = first[(first < p.size - 1) & (step[np.minimum(first, p.size - 1)] == 0)]
        step[first] = np.sign(p[first + 1] - p[first]).astype(np.int8)
    # A point repeated within a cycle keeps the direction in which it was first reached.
    known = np.where(step != 0, np.arange(p.size), 0)
    step = step[np.maximum.accumulate(known)]
    return np.where(step == 0, UP, step).astype(np.int8)


def points_from_applied(applied_percent: ArrayLike, window: float = 1.0) -> NDArray[np.float64]:
    """Name the points of a run whose nominal points were not written down.

    Parameters
    ----------
    applied_percent : array, shape (n,)
        Inputs applied [% of input range]; NaN where missing.
    window : float
        Inputs next to each other in size and no more than this apart [% of range] are one point.

    Returns
    -------
    array, shape (n,)
        The point of each reading: the nearest multiple of 5, else of 12.5, if it lies within `window` of
        the mean of the group, else that mean to a tenth of a percent. NaN where the input is missing.
    """
    x = np.asarray(applied_percent, dtype=np.float64)
    order = np.argsort(x, kind="stable")
    ranked = x[order]
    here = np.isfinite(ranked)
    group = np.concatenate(([0], np.cumsum(np.diff(ranked[here]) > window))) if here.any() else np.zeros(0, int)
    mean = np.bincount(group, ranked[here]) / np.bincount(group) if group.size else np.zeros(0)
    name = np.round(mean, 1)
    for step in (12.5, 5.0):
        usual = np.round(mean / step) * step
        name = np.where(np.abs(mean - usual) <= window, usual, name)
    name += 0.0
    points = np.full(x.shape, np.nan)
    points[order[here]] = name[group]
    return points


def _decimal_or_list(word: str) -> list[str]:
    """One comma between digits is a decimal comma; several can only part points."""
    return [p for p in (word.split(",") if word.count(",") > 1 else [word]) if p]


@dataclass(frozen=True)
class PointList:
    """Points of a run in the order applied, in one or more cycles.

    Parameters
    ----------
    points : tuple of float
        Points [% of input range].
    starts : tuple of int
        Indices at which cycles start; the first is 0. Empty: a new cycle starts each time the input turns
        back to the direction in which the list began.

    Raises
    ------
    ValueError
        If there are fewer than two points, more than 200, two that are not different, or one beyond -10 to
        110 %.
    """

    points: tuple[float, ...]
    starts: tuple[int, ...] = ()

    def __post_init__(self) -> None:
        points = tuple(float(p) for p in self.points)
        object.__setattr__(self, "points", points)
        if len(points) < 2:
            raise ValueError("A point list needs at least two points, for example 0 50 100 50 0.")
        if len(points) > MOST_POINTS:
            raise ValueError(f"This list has {len(points)} points; at most {MOST_POINTS} can be kept.")
        for point in points:
            if not math.isfinite(point) or not LEAST_PERCENT <= point <= GREATEST_PERCENT:
                raise ValueError(
                    f"{point:g} is not a point: points are percentages of the input range, from −10 to 110."
                )
        if len(set(points)) < 2:
            raise ValueError(f"All points are {points[0]:g} %: a run needs at least two different inputs.")
        starts = tuple(int(s) for s in self.starts) or self._turning_back()
        if starts[0] != 0 or any(b <= a for a, b in pairwise(starts)) or starts[-1] >= len(points):
            raise ValueError("Cycles must start at the first point and follow one another.")
        object.__setattr__(self, "starts", starts)

    def _turning_back(self) -> tuple[int, ...]:
        way = directions_of(self.points)
        back = np.flatnonzero((way[1:] == way[0]) & (way[:-1] != way[0])) + 1
        return (0, *(int(b) for b in back))

    @classmethod
    def parse(cls, text: str) -> PointList:
        """Read a point list as typed: points apart by spaces, semicolons or commas, cycles by a bar.

        Parameters
        ----------
        text : str
            For example "0 25 50 75 100 75 50 25 0". A comma between digits is taken as a decimal comma.

        Returns
        -------
        PointList

        Raises
        ------
        ValueError
            Says which piece cannot be read, or which rule of a point list is broken.
        """
        points: list[float] = []
        starts: list[int] = []
        for cycle in text.split("|"):
            pieces = [p for word in re.split(r"[\s;%]+|,(?!\d)", cycle) for p in _decimal_or_list(word)]
            if not pieces and "|" in text:
                raise ValueError("There is a cycle without points: write points on both sides of each bar.")
            starts.append(len(points))
            for piece in pieces:
                try:
                    points.append(float(piece.replace(",", ".").replace("−", "-")))
                except ValueError:
                    raise ValueError(
                        f"“{piece}” is not a percentage. Write the points in order, apart by spaces: 0 25 50 75 100."
                    ) from None
        return cls(tuple(points), tuple(starts) if len(starts) > 1 else ())

    @property
    def text(self) -> str:
        """The list as it is typed, with a bar before each further cycle."""
        pieces = []
        for index, point in enumerate(self.points):
            if index and index in self.starts:
                pieces.append("|")
            pieces.append(percent_text(point))
        return " ".join(pieces)

    @cached_property
    def directions(self) -> tuple[int, ...]:
        """+1 for each point reached from below, -1 for each reached from above."""
        return tuple(int(d) for d in directions_of(self.points, self.starts))

    @cached_property
    def cycles(self) -> tuple[int, ...]:
        """Number of the cycle of each point, counted from 1."""
        return tuple(int(c) for c in np.searchsorted(self.starts, np.arange(len(self.points)), side="right"))

    @property
    def is_multi_cycle(self) -> bool:
        """Whether the list holds more than one cycle, so that repeatability can be said."""
        return len(self.starts) > 1

    @property
    def labels(self) -> tuple[str, ...]:
        """Words for each reading, e.g. "50 % down", with the cycle where there are several."""
        words = [
            f"{percent_text(p)} % {'up' if d == UP else 'down'}"
            for p, d in zip(self.points, self.directions, strict=True)
        ]
        if self.is_multi_cycle:
            words = [f"{w}, cycle {c}" for w, c in zip(words, self.cycles, strict=True)]
        return tuple(words)

    def inputs(self, signal: Signal) -> NDArray[np.float64]:
        """Nominal inputs of the points, in the unit of `signal`."""
        return np.asarray(signal.input_of_percent(self.points), dtype=np.float64)

    def __len__(self) -> int:
        return len(self.points)

    def __str__(self) -> str:
        return self.text


STANDARD = PointList((0, 25, 50, 75, 100, 75, 50, 25, 0))
UP_ONLY = PointList((0, 25, 50, 75, 100))
THREE_CYCLES = PointList((0, *(25, 50, 75, 100, 75, 50, 25, 0) * 3))

# Near zero input the square root is so steep that an input error far too small to matter becomes a large
# output error: +1 inH2O on 0-125 inH2O puts out 5.431 mA at zero, +8.94 % of span, and only 20.064 mA at
# full scale. A square-root run therefore starts at 5 to 10 % of the input (common practice, no source).
SQUARE_ROOT_STANDARD = PointList((10, 25, 50, 75, 100, 75, 50, 25, 10))
SQUARE_ROOT_THREE_CYCLES = PointList((10, *(25, 50, 75, 100, 75, 50, 25, 10) * 3))


def default_for(transfer: Transfer, cycles: int = 1) -> PointList:
    """The point list offered first for a transfer function.

    Parameters
    ----------
    transfer : Transfer
        Linear starts at zero; square root starts at 10 % of the input, where its slope is still moderate.
    cycles : int
        1 or 3.

    Returns
    -------
    PointList

    Raises
    ------
    ValueError
        If `cycles` is neither 1 nor 3.
    """
    if cycles not in (1, 3):
        raise ValueError(f"Point lists are offered for 1 or 3 cycles, not {cycles}.")
    if Transfer(transfer) is Transfer.SQUARE_ROOT:
        return SQUARE_ROOT_STANDARD if cycles == 1 else SQUARE_ROOT_THREE_CYCLES
    return STANDARD if cycles == 1 else THREE_CYCLES
