"""What a 4-20 mA signal should be for an input, what it means, and what it says about itself.

Symbols used in the whole package: p applied input; LRV and URV range-values (URV < LRV is legal and
is a reverse-acting range); S = URV - LRV, the signed span; x = (p - LRV)/S the fraction of range; I the
output current in mA. All errors are in % of the 16 mA output span unless said otherwise.

Linear output is I = 4 + 16·x. Square-root output is I = 4 + 16·√x from the low cut upwards; below it
either a straight line through the cut point or the held zero, whichever is configured; for an input
below zero it stays at 4 mA.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from enum import IntEnum, StrEnum
from functools import cached_property

import numpy as np
from numpy.typing import ArrayLike, NDArray

Floats = NDArray[np.float64]

ZERO_MA = 4.0
SPAN_MA = 16.0

FAILURE_LOW_MA = 3.6
MEASURING_LOW_MA = 3.8
MEASURING_HIGH_MA = 20.5
FAILURE_HIGH_MA = 21.0

# Typed decimals do not land on binary limits: a fraction of range this close to a cut is at the cut.
_AT = 1e-12


class Transfer(StrEnum):
    """Transfer function of the range."""

    LINEAR = "linear"
    SQUARE_ROOT = "square root"


class BelowCut(StrEnum):
    """What a square-root output does between zero input and the low cut."""

    LINEAR = "linear"
    ZERO = "zero"


class SignalState(IntEnum):
    """What a loop current says about itself (NAMUR NE 43)."""

    MISSING = 0
    FAILURE_LOW = 1
    CLIPPED_LOW = 2
    MEASURING = 3
    CLIPPED_HIGH = 4
    FAILURE_HIGH = 5


def fraction_of_range(applied: ArrayLike, lrv: ArrayLike, urv: ArrayLike) -> Floats:
    """Fraction x of the range that an input stands for.

    Parameters
    ----------
    applied : float or array
        Applied input, in the unit of the range-values.
    lrv, urv : float or array
        Range-values, broadcast against `applied`.

    Returns
    -------
    float or array
        (p - LRV)/(URV - LRV); below 0 or above 1 outside the range.
    """
    low = np.asarray(lrv, dtype=np.float64)
    return (np.asarray(applied, dtype=np.float64) - low) / (np.asarray(urv, dtype=np.float64) - low)


def output_fraction(
    fraction: ArrayLike, square_root: ArrayLike = False, low_cut: ArrayLike = 0.0, hold: ArrayLike = False
) -> Floats:
    """Ideal fraction of the output span for a fraction of the range.

    Parameters
    ----------
    fraction : float or array
        Fraction x of the range.
    square_root : bool or array of bool
        Square-root transfer; linear where false.
    low_cut : float or array
        Low cut [% of input range]; used by square-root transfer only.
    hold : bool or array of bool
        Below the cut the output is held at zero instead of following a straight line to the cut point.

    Returns
    -------
    float or array
        Ideal output fraction; NaN only where `fraction` is NaN.
    """
    x = np.asarray(fraction, dtype=np.float64)
    if not np.any(square_root):
        return x[()]
    cut = np.asarray(low_cut, dtype=np.float64) / 100.0
    root = np.sqrt(np.maximum(x, 0.0))
    if np.any(cut > 0.0):
        cut_root = np.sqrt(cut)
        line = np.maximum(x, 0.0) / np.where(cut_root > 0.0, cut_root, 1.0)
        root = np.where(x < cut - _AT, np.where(hold, line * 0.0, line), root)
    return np.where(square_root, root, x)[()]


def ideal_current(
    applied: ArrayLike,
    lrv: ArrayLike,
    urv: ArrayLike,
    square_root: ArrayLike = False,
    low_cut: ArrayLike = 0.0,
    hold: ArrayLike = False,
) -> Floats:
    """Ideal output current for the input actually applied.

    Parameters
    ----------
    applied, lrv, urv : float or array
        Applied input and range-values, in one unit.
    square_root, low_cut, hold
        As for `output_fraction`.

    Returns
    -------
    float or array
        Ideal current [mA]; NaN only where `applied` is NaN. Not limited to the 3.8-20.5 mA of NE 43.
    """
    x = fraction_of_range(applied, lrv, urv)
    return ZERO_MA + SPAN_MA * output_fraction(x, square_root, low_cut, hold)


def fraction_of_output(
    output: ArrayLike, square_root: ArrayLike = False, low_cut: ArrayLike = 0.0, hold: ArrayLike = False
) -> Floats:
    """Fraction of the range that a fraction of the output span stands for (the inverse transfer).

    Parameters
    ----------
    output : float or array
        Output fraction (I - 4)/16.
    square_root, low_cut, hold
        As for `output_fraction`.

    Returns
    -------
    float or array
        Fraction of range; NaN where no single input gives this output: below 4 mA for square root, and
        between 4 mA and the current at the cut where the output is held below the cut.

    Notes
    -----
    4 mA exactly is given back as zero input, the greatest input of the held part, so that a table of percents
    and currents reads the same both ways.
    """
    f = np.asarray(output, dtype=np.float64)
    if not np.any(square_root):
        return f[()]
    cut_root = np.sqrt(np.asarray(low_cut, dtype=np.float64) / 100.0)
    below = np.where(hold, np.where(f > _AT, np.nan, 0.0), f * cut_root)
    x = np.where(f < cut_root - _AT, below, f * f)
    x = np.where(np.abs(f) <= _AT, 0.0, np.where(f < 0.0, np.nan, x))
    return np.where(square_root, x, f)[()]


def input_of_current(
    current: ArrayLike,
    lrv: ArrayLike,
    urv: ArrayLike,
    square_root: ArrayLike = False,
    low_cut: ArrayLike = 0.0,
    hold: ArrayLike = False,
) -> Floats:
    """Input that an ideal transmitter would need to put out this current.

    Parameters
    ----------
    current : float or array
        Loop current [mA].
    lrv, urv, square_root, low_cut, hold
        As for `ideal_current`.

    Returns
    -------
    float or array
        Input in the unit of the range-values; NaN where the output is held (see `fraction_of_output`).
    """
    low = np.asarray(lrv, dtype=np.float64)
    x = fraction_of_output((np.asarray(current, dtype=np.float64) - ZERO_MA) / SPAN_MA, square_root, low_cut, hold)
    return low + x * (np.asarray(urv, dtype=np.float64) - low)


def transfer_slope(
    fraction: ArrayLike, square_root: ArrayLike = False, low_cut: ArrayLike = 0.0, hold: ArrayLike = False
) -> Floats:
    """Slope of the ideal transfer: output fraction per fraction of range.

    Parameters
    ----------
    fraction : float or array
        Fraction x of the range.
    square_root, low_cut, hold
        As for `output_fraction`.

    Returns
    -------
    float or array
        1 for linear; 1/(2·√x) for square root (infinite at zero input without a cut), 1/√cut on the
        straight line below the cut, 0 where the output is held.
    """
    x = np.asarray(fraction, dtype=np.float64)
    if not np.any(square_root):
        return np.where(np.isnan(x), np.nan, 1.0)[()]
    cut = np.asarray(low_cut, dtype=np.float64) / 100.0
    with np.errstate(divide="ignore"):
        slope = 0.5 / np.sqrt(np.maximum(x, 0.0))
        line = np.where(hold, 0.0, 1.0 / np.sqrt(cut))
    slope = np.where((cut > 0.0) & (x < cut - _AT), line, slope)
    slope = np.where(x < 0.0, 0.0, slope)
    return np.where(square_root, slope, np.where(np.isnan(x), np.nan, 1.0))[()]


def current_of_percent(percent: ArrayLike) -> Floats:
    """Current [mA] at a percentage of the output span."""
    return ZERO_MA + SPAN_MA * (np.asarray(percent, dtype=np.float64) / 100.0)


def percent_of_current(current: ArrayLike) -> Floats:
    """Percentage of the output span at a current [mA]."""
    return (np.asarray(current, dtype=np.float64) - ZERO_MA) / SPAN_MA * 100.0


def error_percent(measured: ArrayLike, ideal: ArrayLike) -> Floats:
    """Measured error e = (I_measured - I_ideal)/16·100.

    Parameters
    ----------
    measured, ideal : float or array
        Measured current, and the ideal current for the input actually applied (not the nominal one) [mA].

    Returns
    -------
    float or array
        Error [% of output span].
    """
    return (np.asarray(measured, dtype=np.float64) - np.asarray(ideal, dtype=np.float64)) / SPAN_MA * 100.0


def classify(current: ArrayLike) -> NDArray[np.int8]:
    """Say what each current is by NAMUR NE 43.

    Parameters
    ----------
    current : float or array
        Loop current [mA]; NaN is a reading not taken.

    Returns
    -------
    int8 or array of int8
        `SignalState` values. 3.8 and 20.5 mA themselves still measure, 3.6 and 21.0 mA already tell of a
        failure; what lies between carries neither a measurement nor failure information and is called
        clipped here.
    """
    i = np.asarray(current, dtype=np.float64)
    code = np.full(i.shape, SignalState.MEASURING, dtype=np.int8)
    code[i < MEASURING_LOW_MA - _AT] = SignalState.CLIPPED_LOW
    code[i <= FAILURE_LOW_MA + _AT] = SignalState.FAILURE_LOW
    code[i > MEASURING_HIGH_MA + _AT] = SignalState.CLIPPED_HIGH
    code[i >= FAILURE_HIGH_MA - _AT] = SignalState.FAILURE_HIGH
    code[np.isnan(i)] = SignalState.MISSING
    return code[()]


def saturated(current: ArrayLike) -> NDArray[np.int8]:
    """Side on which a current stands at or beyond the edge of the measuring signal.

    Parameters
    ----------
    current : float or array
        Loop current [mA].

    Returns
    -------
    int8 or array of int8
        -1 at or below 3.8 mA, +1 at or above 20.5 mA, else 0 (also for a missing reading). On the edge itself
        the output may already be limited, so an error found there is a bound, not a value.
    """
    i = np.asarray(current, dtype=np.float64)
    high = (i >= MEASURING_HIGH_MA - _AT).astype(np.int8)
    low = (i <= MEASURING_LOW_MA + _AT).astype(np.int8)
    return (high - low)[()]


@dataclass(frozen=True)
class Signal:
    """The configured range of a transmitter: input range-values, transfer function, low cut.

    Parameters
    ----------
    lrv, urv : float
        Lower and upper range-value, in `unit`; URV below LRV is a reverse-acting range.
    transfer : Transfer
        Linear or square root.
    low_cut_percent : float
        Low cut [% of input range], square root only.
    below_cut : BelowCut
        Behaviour of the output between zero input and the low cut.
    unit : str
        Unit of the input, used in words only.

    Raises
    ------
    ValueError
        If the range-values are equal or not finite, or the cut does not lie in 0 to below 100 %.
    """

    lrv: float
    urv: float
    transfer: Transfer = Transfer.LINEAR
    low_cut_percent: float = 0.0
    below_cut: BelowCut = BelowCut.LINEAR
    unit: str = ""

    def __post_init__(self) -> None:
        if not (math.isfinite(self.lrv) and math.isfinite(self.urv)):
            raise ValueError(f"LRV {self.lrv} and URV {self.urv} must both be numbers.")
        if self.lrv == self.urv:
            raise ValueError(f"LRV and URV are both {self.lrv:g}: a range needs two different range-values.")
        if not 0.0 <= self.low_cut_percent < 100.0:
            raise ValueError(
                f"The low cut is {self.low_cut_percent:g} % of the range; it must be 0 or more and below 100."
            )
        object.__setattr__(self, "transfer", Transfer(self.transfer))
        object.__setattr__(self, "below_cut", BelowCut(self.below_cut))

    @property
    def span(self) -> float:
        """Signed span S = URV - LRV, in `unit`."""
        return self.urv - self.lrv

    @property
    def is_square_root(self) -> bool:
        """Whether the output follows the square root of the input."""
        return self.transfer is Transfer.SQUARE_ROOT

    @cached_property
    def shape(self) -> tuple[bool, float, bool]:
        """The arguments `square_root, low_cut, hold` of the array functions of this module."""
        return (self.is_square_root, self.low_cut_percent, self.below_cut is BelowCut.ZERO)

    def fraction(self, applied: ArrayLike) -> Floats:
        """Fraction x of the range for an input in `unit`."""
        return fraction_of_range(applied, self.lrv, self.urv)

    def percent_of_input(self, applied: ArrayLike) -> Floats:
        """Percentage of the input range for an input in `unit`."""
        return self.fraction(applied) * 100.0

    def input_of_percent(self, percent: ArrayLike) -> Floats:
        """Input in `unit` at a percentage of the input range."""
        x = np.asarray(percent, dtype=np.float64) / 100.0
        # This form gives URV itself, not a neighbour of it, at 100 %.
        return self.lrv * (1.0 - x) + self.urv * x

    def ideal_current(self, applied: ArrayLike) -> Floats:
        """Ideal current [mA] for the input actually applied; NaN only where the input is NaN."""
        return ideal_current(applied, self.lrv, self.urv, *self.shape)

    def output_percent(self, applied: ArrayLike) -> Floats:
        """Ideal output [% of output span] for an input in `unit`."""
        return output_fraction(self.fraction(applied), *self.shape) * 100.0

    def input_of_current(self, current: ArrayLike) -> Floats:
        """Input in `unit` that this current [mA] stands for; NaN where the output is held."""
        return input_of_current(current, self.lrv, self.urv, *self.shape)

    def input_error(self, applied: ArrayLike, measured: ArrayLike) -> Floats:
        """Input-referred error, exact: the input that the current stands for, less the input applied.

        Parameters
        ----------
        applied : float or array
            Applied input, in `unit`.
        measured : float or array
            Measured current [mA].

        Returns
        -------
        float or array
            Error in `unit`; for a linear range e·S/100 with the sign of S. NaN where it is not defined: the
            measured current stands at or beyond the edge of the measuring signal, or the square-root output
            is held.
        """
        i = np.asarray(measured, dtype=np.float64)
        p = np.asarray(applied, dtype=np.float64)
        undefined = saturated(i) != 0
        if self.is_square_root:
            undefined = undefined | (i <= ZERO_MA + _AT * SPAN_MA)
        return np.where(undefined, np.nan, self.input_of_current(i) - p)[()]

    def slope(self, applied: ArrayLike) -> Floats:
        """Slope dI/dp [mA per `unit`] of the ideal transfer, signed; 0 where the output is held."""
        return transfer_slope(self.fraction(applied), *self.shape) * (SPAN_MA / self.span)
