"""Judging errors against a tolerance: reading by reading, then the run.

One comparison serves everywhere: an error is inside when it does not pass the limit by more than `SLACK`,
so that 0.2500000000000002 is not outside 0.25. Errors and limits meet at the output, in % of output span; a
tolerance stated in the input has been turned into output limits I(p - m) and I(p + m) before, which is the
same comparison exactly.

What a run is called
    *pass*, *fail*
        Simple acceptance: every |e| ≤ T, or some |e| > T. At the limit itself the risk that a reading
        judged good is really bad is up to 50 %.
    *conditional pass*, *conditional fail*
        With a guard band w = r·U (ILAC-G8:09/2019): pass ≤ T - w < conditional pass ≤ T < conditional fail
        ≤ T + w < fail. In the two-way form everything beyond T - w fails.
    *not decidable*
        A guard band was asked for, but U is unknown or w leaves nothing of T.
    *incomplete*
        A reading is missing, or it is clipped (NAMUR NE 43) and the bound it gives does not decide.

A failure current fails. Fail beats incomplete. A clipped reading gives a bound of its error: beyond the
limit it fails, else the run is incomplete. The same holds for a tolerance stated in the input where a
square-root output is held at 4 mA: the input is then only known to be no more than zero.

Counts of how many transmitters were found in tolerance go by |e| ≤ T, whatever the rule: that is
`in_tolerance`.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from calibration.metrology.evaluation import RunEvaluation
from calibration.metrology.explaining import explain
from calibration.metrology.signal import (
    SPAN_MA,
    ZERO_MA,
    Signal,
    SignalState,
    classify,
    error_percent,
    saturated,
)
from calibration.metrology.tolerance import OutputLimits, Quantity, Tolerance
from calibration.metrology.verdicts import SIMPLE, VERDICTS, DecisionRule, ReadingJudgement, Rule, Verdict

Floats = NDArray[np.float64]
Codes = NDArray[np.int8]
Truths = NDArray[np.bool_]

SLACK = 1e-9
"""An error passes a limit only by more than this [% of output span]."""

_PASS, _CONDITIONAL_PASS, _NOT_DECIDABLE, _INCOMPLETE, _CONDITIONAL_FAIL, _FAIL = range(len(VERDICTS))


def inside(error: ArrayLike, lower: ArrayLike, upper: ArrayLike) -> Truths:
    """Whether errors lie inside their limits; the one comparison of the whole site.

    Parameters
    ----------
    error, lower, upper : float or array
        Signed errors and limits [% of output span].

    Returns
    -------
    bool or array of bool
        On the limit is inside. False where anything is NaN.
    """
    e = np.asarray(error, dtype=np.float64)
    return (e >= np.asarray(lower) - SLACK) & (e <= np.asarray(upper) + SLACK)


def judge_readings(
    applied: ArrayLike,
    measured: ArrayLike,
    signal: Signal,
    tolerance: Tolerance,
    rule: DecisionRule = SIMPLE,
    expanded: ArrayLike | None = None,
) -> ReadingJudgement:
    """Judge readings one by one: a single field as it is typed, or all of a run.

    Parameters
    ----------
    applied : float or array
        Inputs actually applied, in the unit of `signal`; NaN where missing.
    measured : float or array
        Currents measured [mA]; NaN where missing.
    signal : Signal
        The configured range.
    tolerance : Tolerance
        The tolerance T.
    rule : DecisionRule
        Simple acceptance by default.
    expanded : float or array, optional
        Expanded uncertainty U of each error, in the quantity in which the tolerance is stated; NaN where
        unknown.

    Returns
    -------
    ReadingJudgement
    """
    p, i = np.broadcast_arrays(
        np.atleast_1d(np.asarray(applied, dtype=np.float64)),
        np.atleast_1d(np.asarray(measured, dtype=np.float64)),
    )
    limits = tolerance.limits(p, signal)
    error = error_percent(i, limits.ideal_ma)
    u = None if expanded is None else np.broadcast_to(np.asarray(expanded, dtype=np.float64), p.shape)
    by_value = _codes_by_value(error, limits, rule, u)
    codes, outside = _settle(error, i, limits.least, limits.upper, by_value, _held(i, limits))

    at_output = np.where(error < 0.0, -limits.lower, limits.upper)
    ratio = _ratio(error, i, at_output)
    if tolerance.quantity is Quantity.INPUT:
        judged_error, judged_limit = np.asarray(signal.input_error(p, i)), tolerance.limit(p, signal)
        # Where the input error is not defined, the bound at the output still says how far outside it is at
        # least.
        known = np.isfinite(judged_error)
        ratio = np.where(known, _multiples(judged_error, judged_limit), np.where(outside, ratio, np.nan))
    else:
        judged_error, judged_limit = error, at_output
    return ReadingJudgement(
        applied=p,
        measured=i,
        signal=signal,
        tolerance=tolerance,
        rule=rule,
        expanded=u,
        limits=limits,
        error=error,
        judged_error=judged_error,
        judged_limit=np.asarray(judged_limit),
        ratio=ratio,
        codes=codes,
        outside=outside,
    )


def _codes_by_value(error: Floats, limits: OutputLimits, rule: DecisionRule, expanded: Floats | None) -> Codes:
    """Verdict codes of errors taken at face value."""
    within = inside(error, limits.lower, limits.upper)
    if rule.kind is Rule.SIMPLE:
        return np.where(within, _PASS, _FAIL).astype(np.int8)
    u = np.full(error.shape, np.nan) if expanded is None else expanded
    guard = rule.guard_factor * np.where(u >= 0.0, u, np.nan)
    inner = limits.tolerance.limits(limits.applied, limits.signal, -guard)
    outer = limits.tolerance.limits(limits.applied, limits.signal, guard)
    if limits.tolerance.quantity is Quantity.INPUT:
        left = limits.tolerance.limit(limits.applied, limits.signal) - guard > 0.0
    else:
        left = (inner.upper > SLACK) & (inner.lower < -SLACK)
    accepted = inside(error, inner.lower, inner.upper)
    if rule.kind is Rule.TWO_WAY:
        codes = np.where(accepted, _PASS, _FAIL)
    else:
        codes = np.where(
            accepted,
            _PASS,
            np.where(
                within,
                _CONDITIONAL_PASS,
                np.where(inside(error, outer.lower, outer.upper), _CONDITIONAL_FAIL, _FAIL),
            ),
        )
    return np.where(left, codes, _NOT_DECIDABLE).astype(np.int8)


def _held(measured: Floats, limits: OutputLimits) -> Truths:
    """Readings of a square-root output held at 4 mA that are to be judged in the input."""
    if limits.tolerance.quantity is Quantity.OUTPUT or not limits.signal.is_square_root:
        return np.zeros(measured.shape, dtype=bool)
    return np.asarray(measured <= ZERO_MA + SLACK * SPAN_MA / 100.0)


def _settle(
    error: Floats, measured: Floats, lower: Floats, upper: Floats, by_value: Codes, held: Truths
) -> tuple[Codes, Truths]:
    """Give missing, failed, clipped and held readings their due; the others keep the verdict by value."""
    state, edge = classify(measured), saturated(measured)
    missing = np.isnan(error)
    failed = (state == SignalState.FAILURE_LOW) | (state == SignalState.FAILURE_HIGH)
    bound = (edge != 0) | held
    # A signal limited at the top says only that the error is no less, one limited at the bottom no more.
    beyond = np.where(edge > 0, error > upper + SLACK, error < lower - SLACK)
    codes = np.where(bound, np.where(beyond, _FAIL, _INCOMPLETE), by_value)
    codes = np.where(failed, _FAIL, np.where(missing, _INCOMPLETE, codes))
    outside = failed | (~missing & np.where(bound, beyond, ~inside(error, lower, upper)))
    return codes.astype(np.int8), outside


@dataclass(frozen=True, eq=False)
class Judgement:
    """The verdict on a run and why.

    Attributes
    ----------
    evaluation, tolerance, rule, expanded
        As given to `judge_run`.
    readings : ReadingJudgement
        The readings judged one by one.
    verdict : Verdict
        The verdict by the rule.
    in_tolerance : bool or None
        Whether every |e| ≤ T, whatever the rule; None where it is not known.
    tolerance_words : str
        "in tolerance", "out of tolerance", or empty where it is not known.
    why : str
        One sentence that names the deciding reading, its error and the limit.
    decisive_index : int or None
        The deciding reading.
    worst_index, worst_ratio : int or None, float
        Reading that takes up most of its limit, and its signed error in multiples of it; NaN where none is
        known.
    """

    evaluation: RunEvaluation
    tolerance: Tolerance
    rule: DecisionRule
    expanded: Floats | None
    readings: ReadingJudgement
    verdict: Verdict
    in_tolerance: bool | None
    tolerance_words: str
    why: str
    decisive_index: int | None
    worst_index: int | None
    worst_ratio: float


def judge_run(
    evaluation: RunEvaluation,
    tolerance: Tolerance,
    rule: DecisionRule = SIMPLE,
    expanded: ArrayLike | None = None,
) -> Judgement:
    """Judge a run.

    Parameters
    ----------
    evaluation : RunEvaluation
        The run. As-found is judged against the MPE, as-left against the as-left tolerance.
    tolerance : Tolerance
        The tolerance T.
    rule : DecisionRule
        Simple acceptance by default.
    expanded : float or array, optional
        Expanded uncertainty U of each error, in the quantity in which the tolerance is stated; NaN where
        unknown.

    Returns
    -------
    Judgement
    """
    readings = judge_readings(evaluation.applied, evaluation.measured, evaluation.signal, tolerance, rule, expanded)
    codes, sizes = readings.codes, np.abs(readings.ratio)
    code = int(codes.max()) if codes.size else _INCOMPLETE
    candidates = np.flatnonzero(codes == code)
    decisive = None
    if candidates.size:
        weight = np.where(np.isnan(sizes), np.inf, sizes)[candidates]
        decisive = int(candidates[0] if code == _INCOMPLETE else candidates[np.argmax(weight)])
    known: bool | None = None
    if readings.outside.any():
        known = False
    elif codes.size and not (codes == _INCOMPLETE).any():
        known = True
    worst = int(np.nanargmax(sizes)) if np.isfinite(sizes).any() else None
    return Judgement(
        evaluation=evaluation,
        tolerance=tolerance,
        rule=rule,
        expanded=readings.expanded,
        readings=readings,
        verdict=VERDICTS[code],
        in_tolerance=known,
        tolerance_words={True: "in tolerance", False: "out of tolerance", None: ""}[known],
        why=explain(evaluation, readings, VERDICTS[code], decisive),
        decisive_index=decisive,
        worst_index=worst,
        worst_ratio=float(readings.ratio[worst]) if worst is not None else float("nan"),
    )


@dataclass(frozen=True, eq=False)
class FleetJudgement:
    """Verdicts on many runs by simple acceptance.

    Attributes
    ----------
    error, measured, lower, upper : array
        As given to `judge_runs`.
    codes : array of int8, shape (runs,)
        Index into `VERDICTS`.
    in_tolerance : array of int8, shape (runs,)
        1 in tolerance, 0 out of tolerance, -1 not known.
    worst_ratio : array, shape (runs,)
        Greatest error in multiples of its limit, signed; NaN where none is known.
    """

    error: Floats
    measured: Floats
    lower: Floats
    upper: Floats
    codes: Codes
    in_tolerance: Codes
    worst_ratio: Floats


def judge_runs(
    error: ArrayLike, measured: ArrayLike, lower: ArrayLike, upper: ArrayLike, block: int = 16384
) -> FleetJudgement:
    """Judge many runs by simple acceptance at the output.

    Parameters
    ----------
    error, measured : array, shape (runs, readings)
        Errors [% of output span] and currents [mA]; NaN where missing.
    lower, upper : float or array, broadcast against `error`
        Signed limits [% of output span], as in `OutputLimits`.
    block : int
        Runs judged at a time, which bounds the memory taken beside the results.

    Returns
    -------
    FleetJudgement
    """
    e, i = np.asarray(error, dtype=np.float64), np.asarray(measured, dtype=np.float64)
    low, high = np.asarray(lower, dtype=np.float64), np.asarray(upper, dtype=np.float64)
    lows, highs = np.broadcast_to(low, e.shape), np.broadcast_to(high, e.shape)
    runs = e.shape[0]
    codes, known, worst = np.empty(runs, np.int8), np.empty(runs, np.int8), np.empty(runs)
    for start in range(0, runs, block):
        rows = slice(start, start + block)
        by_value = np.where(inside(e[rows], lows[rows], highs[rows]), _PASS, _FAIL).astype(np.int8)
        here, outside = _settle(e[rows], i[rows], lows[rows], highs[rows], by_value, np.zeros_like(by_value, bool))
        codes[rows] = here.max(axis=1, initial=_PASS)
        known[rows] = np.where(outside.any(axis=1), 0, np.where((here == _INCOMPLETE).any(axis=1), -1, 1))
        ratio = _ratio(e[rows], i[rows], np.where(e[rows] < 0.0, -lows[rows], highs[rows]))
        most, least = np.fmax.reduce(ratio, axis=1), np.fmin.reduce(ratio, axis=1)
        worst[rows] = np.where(most >= -least, most, least)
    return FleetJudgement(e, i, low, high, codes, known, worst)


def _ratio(error: Floats, measured: Floats, limit: Floats) -> Floats:
    """Signed error in multiples of its limit; NaN where the signal is limited on the side that hides it."""
    silent = saturated(measured) * error < 0.0
    return np.where(silent, np.nan, _multiples(error, limit))


def _multiples(error: Floats, limit: Floats) -> Floats:
    """Error over limit; NaN where the limit is nothing."""
    some = limit > 0.0
    return np.where(some, error, np.nan) / np.where(some, limit, 1.0)
