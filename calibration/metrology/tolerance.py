"""Tolerances (maximum permissible errors) in the forms in which they are stated.

A tolerance is judged in the quantity in which it is stated. One stated in % of output span is compared with
the output error; one stated in the input is compared with the input-referred error, which at the input p
means output limits I(p - m) and I(p + m), exact for any transfer function. Where a sum or a choice of two
mixes both quantities, the two are brought together at the output.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass
from enum import StrEnum
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from calibration.metrology.signal import SPAN_MA, ZERO_MA, Signal, error_percent
from calibration.metrology.writing import plain

Floats = NDArray[np.float64]


class Form(StrEnum):
    """How a tolerance is stated."""

    SPAN = "percent of span"
    READING = "percent of reading"
    ABSOLUTE = "absolute"
    LARGER = "larger"
    SUM = "sum"


class Quantity(StrEnum):
    """The quantity in which errors and uncertainty are compared with a tolerance."""

    OUTPUT = "output"
    INPUT = "input"


@dataclass(frozen=True, eq=False)
class OutputLimits:
    """Output limits of a tolerance at applied inputs.

    Attributes
    ----------
    applied : array
        Applied inputs, in the unit of `signal`.
    signal, tolerance, widen
        As given to `Tolerance.limits`.
    ideal_ma, lower_ma, upper_ma : array
        Ideal current and its limits [mA].
    lower, upper : array
        The same limits as errors [% of output span], signed: lower is not above zero unless the tolerance was
        narrowed by more than itself.
    """

    applied: Floats
    signal: Signal
    tolerance: Tolerance
    widen: Floats
    ideal_ma: Floats
    lower_ma: Floats
    upper_ma: Floats
    lower: Floats
    upper: Floats

    @property
    def least(self) -> Floats:
        """`lower`, but -inf where it is the held output of a square-root signal, for a tolerance stated in the input.

        No reading can fall below the held output and mean anything.
        """
        held = self.tolerance.quantity is Quantity.INPUT and self.signal.is_square_root
        return np.where(held & (self.lower_ma <= ZERO_MA), -np.inf, self.lower)


@dataclass(frozen=True)
class Tolerance:
    """A tolerance as stated.

    Parameters
    ----------
    form : Form
        How it is stated.
    percent : float
        % of output span, or % of the input applied.
    amount : float
        In input units: the whole tolerance (absolute) or the floor under a % of reading.
    first, second : Tolerance
        The two parts of a sum or a choice of the larger; these parts are plain forms.

    Raises
    ------
    ValueError
        If a figure is negative or not a number, if nothing is left of the tolerance, or parts do not fit
        the form.
    """

    form: Form
    percent: float = 0.0
    amount: float = 0.0
    first: Tolerance | None = None
    second: Tolerance | None = None

    def __post_init__(self) -> None:
        object.__setattr__(self, "form", Form(self.form))
        for figure, name in ((self.percent, "percentage"), (self.amount, "amount in input units")):
            if not math.isfinite(figure) or figure < 0.0:
                raise ValueError(f"The {name} of a tolerance is {figure:g}; it must be a number of zero or more.")
        if self.is_pair:
            parts = (self.first, self.second)
            if any(part is None or part.is_pair for part in parts):
                raise ValueError("A sum, or the larger, is made of two plain tolerances.")
            if self.percent or self.amount:
                raise ValueError("A sum, or the larger, has no figure beside its two parts.")
        else:
            if self.first is not None or self.second is not None:
                raise ValueError("Only a sum, or the larger, has parts.")
            used = {Form.SPAN: self.percent, Form.READING: self.percent, Form.ABSOLUTE: self.amount}[self.form]
            if used <= 0.0:
                raise ValueError(f"A tolerance stated as “{self.form}” must be above zero.")

    @classmethod
    def of_span(cls, percent: float) -> Tolerance:
        """A percentage of the output span."""
        return cls(Form.SPAN, percent=percent)

    @classmethod
    def of_reading(cls, percent: float, floor: float = 0.0) -> Tolerance:
        """A percentage of the input applied, but not less than `floor` [input units]."""
        return cls(Form.READING, percent=percent, amount=floor)

    @classmethod
    def absolute(cls, amount: float) -> Tolerance:
        """A fixed amount [input units]."""
        return cls(Form.ABSOLUTE, amount=amount)

    @classmethod
    def larger(cls, first: Tolerance, second: Tolerance) -> Tolerance:
        """Whichever of two tolerances is the larger at each point."""
        return cls(Form.LARGER, first=first, second=second)

    @classmethod
    def sum_of(cls, first: Tolerance, second: Tolerance) -> Tolerance:
        """The sum of two tolerances."""
        return cls(Form.SUM, first=first, second=second)

    @classmethod
    def stated(cls, form: str, percent: float = 0.0, amount: float = 0.0) -> Tolerance:
        """A tolerance from one percentage and one amount, as a requirement keeps it.

        Parameters
        ----------
        form : str
            A `Form`; a sum or the larger is taken of % of span and an amount in input units.
        percent : float
            Percentage [%].
        amount : float
            Amount, in the unit of the range-values.

        Returns
        -------
        Tolerance

        Raises
        ------
        ValueError
            As the constructor, and for an unknown form.
        """
        kind = Form(form)
        if kind in (Form.LARGER, Form.SUM):
            return cls(kind, first=cls.of_span(percent), second=cls.absolute(amount))
        return cls(
            kind,
            percent=0.0 if kind is Form.ABSOLUTE else percent,
            amount=0.0 if kind is Form.SPAN else amount,
        )

    @property
    def is_pair(self) -> bool:
        """Whether the tolerance is made of two parts."""
        return self.form in (Form.LARGER, Form.SUM)

    @property
    def parts(self) -> tuple[Tolerance, ...]:
        """The two parts of a pair, else the tolerance itself."""
        if self.first is not None and self.second is not None:
            return (self.first, self.second)
        return (self,)

    @property
    def quantity(self) -> Quantity:
        """The quantity in which the tolerance is stated, and therefore judged."""
        if all(part.form in (Form.READING, Form.ABSOLUTE) for part in self.parts):
            return Quantity.INPUT
        return Quantity.OUTPUT

    def limit(self, applied: ArrayLike, signal: Signal) -> Floats:
        """Half-width of the tolerance in the quantity in which it is stated.

        Parameters
        ----------
        applied : float or array
            Applied inputs, in the unit of `signal`.
        signal : Signal
            The configured range.

        Returns
        -------
        float or array
            Input units if `quantity` is INPUT, else % of output span. A mixed pair on a square-root range
            has limits that differ above and below; this is then the smaller of the two.
        """
        if self.quantity is Quantity.INPUT:
            return self._input_limit(applied)
        limits = self.limits(applied, signal)
        return np.minimum(-limits.lower, limits.upper)[()]

    def _input_limit(self, applied: ArrayLike) -> Floats:
        p = np.asarray(applied, dtype=np.float64)
        if self.form is Form.READING:
            return np.maximum(np.abs(p) * (self.percent / 100.0), self.amount)[()]
        if self.form is Form.ABSOLUTE:
            return np.where(np.isnan(p), np.nan, self.amount)[()]
        one, other = (part._input_limit(p) for part in self.parts)
        return (one + other) if self.form is Form.SUM else np.maximum(one, other)

    def limits(self, applied: ArrayLike, signal: Signal, widen: ArrayLike = 0.0) -> OutputLimits:
        """Output limits at each applied input.

        Parameters
        ----------
        applied : float or array
            Inputs actually applied, in the unit of `signal`.
        signal : Signal
            The configured range.
        widen : float or array
            Added to the tolerance, in the quantity in which it is stated; negative draws the limits in (a
            guard band). A tolerance drawn in to nothing or less becomes NaN limits: no acceptance is left.

        Returns
        -------
        OutputLimits
        """
        p = np.asarray(applied, dtype=np.float64)
        more = np.broadcast_to(np.asarray(widen, dtype=np.float64), p.shape)
        ideal = np.asarray(signal.ideal_current(p))
        if self.quantity is Quantity.INPUT:
            low, high = _around_input(p, self._input_limit(p) + more, signal)
        else:
            low, high = self._output_limits(p, ideal, signal)
            low, high = low - more * (SPAN_MA / 100.0), high + more * (SPAN_MA / 100.0)
            gone = low > high
            low, high = np.where(gone, np.nan, low), np.where(gone, np.nan, high)
        return OutputLimits(
            applied=p,
            signal=signal,
            tolerance=self,
            widen=more,
            ideal_ma=ideal,
            lower_ma=low,
            upper_ma=high,
            lower=error_percent(low, ideal),
            upper=error_percent(high, ideal),
        )

    def _output_limits(self, p: Floats, ideal: Floats, signal: Signal) -> tuple[Floats, Floats]:
        if self.form is Form.SPAN:
            half = self.percent / 100.0 * SPAN_MA
            return ideal - half, ideal + half
        if not self.is_pair:
            return _around_input(p, self._input_limit(p), signal)
        (low_1, high_1), (low_2, high_2) = (part._output_limits(p, ideal, signal) for part in self.parts)
        if self.form is Form.SUM:
            return low_1 + low_2 - ideal, high_1 + high_2 - ideal
        return np.minimum(low_1, low_2), np.maximum(high_1, high_2)

    def words(self, unit: str = "") -> str:
        """The tolerance in words, e.g. "±0.25 % of span" or "±0.5 % of reading, at least 0.2 kPa"."""
        tail = f" {unit}" if unit else " (input units)"
        if self.form is Form.SPAN:
            return f"±{plain(self.percent)} % of span"
        if self.form is Form.ABSOLUTE:
            return f"±{plain(self.amount)}{tail}"
        if self.form is Form.READING:
            floor = f", at least {plain(self.amount)}{tail}" if self.amount else ""
            return f"±{plain(self.percent)} % of reading{floor}"
        one, other = (part.words(unit) for part in self.parts)
        return f"the larger of {one} and {other}" if self.form is Form.LARGER else f"{one} plus {other}"

    def as_dict(self) -> dict[str, Any]:
        """Plain content for a snapshot in JSON; `from_dict` reads it back."""
        if self.is_pair:
            return {"form": str(self.form), "parts": [part.as_dict() for part in self.parts]}
        return {"form": str(self.form), "percent": self.percent, "amount": self.amount}

    @classmethod
    def from_dict(cls, content: Mapping[str, Any]) -> Tolerance:
        """Read what `as_dict` wrote.

        Raises
        ------
        ValueError
            If the content is not a tolerance.
        """
        try:
            if "parts" in content:
                first, second = (cls.from_dict(part) for part in content["parts"])
                return cls(Form(content["form"]), first=first, second=second)
            return cls(Form(content["form"]), float(content["percent"]), float(content["amount"]))
        except (KeyError, TypeError) as wrong:
            raise ValueError(f"This is not the content of a tolerance: {wrong}.") from wrong


def _around_input(p: Floats, half: Floats, signal: Signal) -> tuple[Floats, Floats]:
    """Currents at p - m and p + m, the lower one first whichever way the range runs; NaN where m < 0."""
    m = np.where(half < 0.0, np.nan, half)
    one, other = signal.ideal_current(p - m), signal.ideal_current(p + m)
    return np.minimum(one, other), np.maximum(one, other)
