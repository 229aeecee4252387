"""Verdicts, decision rules, and the shape of judged readings; `conformity` does the judging."""

from __future__ import annotations

from dataclasses import dataclass
from enum import StrEnum

import numpy as np
from numpy.typing import NDArray

from calibration.metrology.signal import Signal
from calibration.metrology.tolerance import OutputLimits, Quantity, Tolerance

Floats = NDArray[np.float64]
Codes = NDArray[np.int8]
Truths = NDArray[np.bool_]


class Verdict(StrEnum):
    """Verdicts, in the order in which the later one decides a run."""

    PASS = "pass"
    CONDITIONAL_PASS = "conditional pass"
    NOT_DECIDABLE = "not decidable"
    INCOMPLETE = "incomplete"
    CONDITIONAL_FAIL = "conditional fail"
    FAIL = "fail"


VERDICTS = tuple(Verdict)
"""Verdicts by code: code k of an array stands for VERDICTS[k]."""


class Rule(StrEnum):
    """Kinds of decision rule."""

    SIMPLE = "simple acceptance"
    TWO_WAY = "guard band, two-way"
    FOUR_WAY = "guard band, four-way"


@dataclass(frozen=True)
class DecisionRule:
    """A decision rule.

    Parameters
    ----------
    kind : Rule
        Simple acceptance, or a guard band with two or four verdicts.
    guard_factor : float
        r in w = r·U.
    """

    kind: Rule = Rule.SIMPLE
    guard_factor: float = 1.0

    def __post_init__(self) -> None:
        object.__setattr__(self, "kind", Rule(self.kind))
        if not self.guard_factor >= 0.0:
            raise ValueError(f"The guard factor is {self.guard_factor:g}; it must be zero or more.")


SIMPLE = DecisionRule()


@dataclass(frozen=True, eq=False)
class ReadingJudgement:
    """Readings judged one by one.

    Attributes
    ----------
    applied, measured : array
        Inputs applied [unit of `signal`] and currents [mA].
    signal, tolerance, rule, expanded
        As given to `judge_readings`.
    limits : OutputLimits
        Output limits of the tolerance.
    error : array
        Measured errors [% of output span].
    judged_error, judged_limit : array
        Errors and tolerance in the quantity in which the tolerance is stated: input units, or % of output
        span.
    ratio : array
        Signed error in multiples of its limit; NaN where it is not known.
    codes : array of int8
        Index into `VERDICTS`.
    outside : array of bool
        Known to be outside the tolerance (|e| > T), whatever the rule.
    """

    applied: Floats
    measured: Floats
    signal: Signal
    tolerance: Tolerance
    rule: DecisionRule
    expanded: Floats | None
    limits: OutputLimits
    error: Floats
    judged_error: Floats
    judged_limit: Floats
    ratio: Floats
    codes: Codes
    outside: Truths

    @property
    def verdicts(self) -> tuple[Verdict, ...]:
        """The verdict of each reading."""
        return tuple(VERDICTS[code] for code in np.ravel(self.codes))

    @property
    def unit(self) -> str:
        """Unit of `judged_error` and `judged_limit`, as written after a figure."""
        if self.tolerance.quantity is Quantity.OUTPUT:
            return "% of span"
        return self.signal.unit or "input units"
