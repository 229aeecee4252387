"""The shape in which the evaluation of one run is handed on; `errors` says how it comes about."""

from __future__ import annotations

from dataclasses import dataclass, fields
from typing import Any

import numpy as np
from numpy.typing import NDArray

from calibration.metrology.signal import Signal

Floats = NDArray[np.float64]


@dataclass(frozen=True)
class Level:
    """One point of a run with its averages; errors in % of output span, NaN where there is no reading.

    Attributes
    ----------
    point : float
        Nominal point [% of input range].
    input_percent : float
        Mean of the inputs actually applied there [% of input range], up and down weighing the same.
    up, down, mean : float
        Average error up and down, and the mean curve (the mean of the two where both exist).
    hysteresis : float
        |up - down|.
    spread_up, spread_down : float
        Highest less lowest error from the same side; NaN with fewer than two readings.
    """

    point: float
    input_percent: float
    up: float
    down: float
    mean: float
    hysteresis: float
    spread_up: float
    spread_down: float


@dataclass(frozen=True)
class ShiftFit:
    """Zero and span shift fitted to all readings that carry a measurement.

    Attributes
    ----------
    zero_shift, span_shift : float
        a and b of e = a + b·x [% of output span; % of input span where `input_referred`].
    zero_se, span_se : float
        Their standard errors, from the residuals; NaN with fewer than three readings.
    residual_sd : float
        Standard deviation of the residuals [% of output span].
    readings : int
        Readings that took part.
    dof : int
        `readings` - 2.
    input_referred : bool
        Whether the input-referred error was fitted (square root).
    """

    zero_shift: float
    span_shift: float
    zero_se: float
    span_se: float
    residual_sd: float
    readings: int
    dof: int
    input_referred: bool


@dataclass(frozen=True, eq=False)
class RunEvaluation:
    """A run and everything that follows from its readings; see `errors` for the definitions.

    Attributes
    ----------
    applied, measured : array, shape (n,)
        Inputs applied [unit of `signal`] and currents measured [mA]; NaN where missing.
    signal : Signal
        The configured range.
    points, directions : array, shape (n,)
        Nominal points [% of input range] and +1 / -1 for up / down.
    ideal, error, input_error : array, shape (n,)
        Ideal current [mA], measured error [% of output span], input-referred error [unit], the last NaN
        where undefined.
    states : array of int8
        `SignalState` of each reading.
    usable : array of bool
        Readings that carry a measurement: neither missing nor clipped nor a failure current.
    complete : bool
        Whether every reading was taken.
    levels : tuple of Level
        The points in ascending order.
    worst_index : int or None
        Reading with the greatest |e|.
    worst_error, inaccuracy, zero_error, span_error, hysteresis, repeatability : float
        [% of output span]; NaN where it cannot be said.
    hysteresis_at : float
        Point at which the hysteresis is greatest [%].
    nonlinearity_terminal, nonlinearity_zero_based, nonlinearity_independent : float
        [% of output span].
    independent_line : tuple of float
        Intercept and slope, as errors [% of output span], of the line for independent non-linearity.
    zero_based_line : tuple of float
        The same of the line for zero-based non-linearity, through the mean error at the lowest point.
    fit : ShiftFit
        Fitted zero and span shift.
    """

    applied: Floats
    measured: Floats
    signal: Signal
    points: Floats
    directions: NDArray[np.int8]
    ideal: Floats
    error: Floats
    input_error: Floats
    states: NDArray[np.int8]
    usable: NDArray[np.bool_]
    complete: bool
    levels: tuple[Level, ...]
    worst_index: int | None
    worst_error: float
    inaccuracy: float
    zero_error: float
    span_error: float
    hysteresis: float
    hysteresis_at: float
    repeatability: float
    nonlinearity_terminal: float
    nonlinearity_zero_based: float
    nonlinearity_independent: float
    independent_line: tuple[float, float]
    zero_based_line: tuple[float, float]
    fit: ShiftFit

    @property
    def one_sided(self) -> bool:
        """Whether a point asked for on the way up and down carries a measurement from one side only.

        Its mean error then holds half of the hysteresis and cannot be compared with that of another run.
        """
        for level in self.levels:
            asked = {int(way) for way in self.directions[self.points == level.point]}
            if len(asked) == 2 and np.isnan(level.up) != np.isnan(level.down):
                return True
        return False

    def as_dict(self) -> dict[str, Any]:
        """The figures as plain JSON content, None for what cannot be said; without the readings."""
        plain: dict[str, Any] = {}
        for field in fields(self):
            value = getattr(self, field.name)
            if isinstance(value, float):
                plain[field.name] = _number(value)
        plain |= {f.name: _number(getattr(self.fit, f.name)) for f in fields(ShiftFit)}
        plain["complete"] = self.complete
        plain["point_errors"] = [[level.point, _number(level.mean)] for level in self.levels]
        return plain


def _number(value: float) -> float | None:
    return None if value != value else value
