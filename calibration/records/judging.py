"""Hands readings as typed to the arithmetic: the same function for a field being typed and for a record."""

from __future__ import annotations

import math
from collections import Counter
from collections.abc import Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING

from calibration.records.basis import Basis

if TYPE_CHECKING:
    from calibration.metrology.conformity import Judgement
    from calibration.metrology.evaluation import RunEvaluation
    from calibration.metrology.verdicts import ReadingJudgement

METHOD_VERSION = 1
#: A run without a list reaches an end of the range with a reading this close to it [% of input span] …
END_PERCENT = 10.0
#: … or, at the lower end of a square root, where its slope is steep, with one below this.
ROOT_END_PERCENT = 25.0
LEAST_LEVELS = 3
_PLAUSIBLE_MA = (0.0, 25.0)
_PLAUSIBLE_PERCENT = (-25.0, 131.25)


@dataclass(frozen=True, slots=True)
class Point:
    """One reading as numbers: input in the unit of the range, output in mA; nan where nothing was read."""

    applied: float
    measured: float
    direction: int
    nominal_percent: float | None = None
    cycle: int = 1


@dataclass(frozen=True, slots=True)
class JudgedRun:
    """A run with its arithmetic.

    `missing` counts points of the list without a reading, which stand at the end. `worst_ratio` is the signed error
    that takes up most of the MPE, in multiples of it, whatever the run was judged by: errors of as-found and as-left
    can be compared by it.
    """

    points: tuple[Point, ...]
    missing: int
    evaluation: RunEvaluation
    judgement: Judgement
    worst_ratio: float


def applied_in_range_unit(text: str, unit: str, basis: Basis) -> float:
    """The applied input in the unit of the range.

    Raises
    ------
    ValueError
        Not a number, or a unit of another kind.
    """
    from register.engineering.typed import parse_number

    value = parse_number(text, decimal_comma=basis.decimal_comma)
    if unit in ("", basis.unit):
        return value
    from register.engineering.units import convert

    return float(convert(value, unit, basis.unit))


def measured_in_ma(text: str, unit: str, basis: Basis) -> float:
    """The measured output in mA; percent of span is understood too.

    Raises
    ------
    ValueError
        Not a number, or a unit other than mA, A and percent.
    """
    from register.engineering.typed import parse_number

    if unit in ("", "mA"):
        return parse_number(text, decimal_comma=basis.decimal_comma, plausible=_PLAUSIBLE_MA)
    if unit == "percent":
        percent = parse_number(text, decimal_comma=basis.decimal_comma, plausible=_PLAUSIBLE_PERCENT)
        return 4.0 + 0.16 * percent
    raise ValueError(f"An output is read in mA or in percent of span, not in {unit}.")


def judge(basis: Basis, kind: str, points: Sequence[Point]) -> JudgedRun:
    """Evaluate and judge one run.

    Parameters
    ----------
    basis : Basis
        Range, tolerances, rule and point list of the test.
    kind : str
        "as-found" or "as-left": which tolerance applies.
    points : sequence of Point
        Readings in the order taken; repeated readings all count.

    Notes
    -----
    Points of the list without a reading are added as missing, so that a run with gaps is incomplete. Where no list is
    stated, a run must reach both ends of the range and hold three different levels; what it lacks is added alike.
    """
    from calibration.metrology.conformity import judge_run
    from calibration.metrology.errors import evaluate_run

    missing = _missing(basis, points)
    whole = (*points, *missing)
    nominal = [point.nominal_percent for point in whole if point.nominal_percent is not None]
    signal = basis.signal()
    evaluation = evaluate_run(
        [point.applied for point in whole],
        [point.measured for point in whole],
        signal,
        points=nominal if len(nominal) == len(whole) else None,
        directions=[point.direction for point in whole],
    )
    judgement = judge_run(evaluation, basis.tolerance(kind), basis.decision_rule())
    return JudgedRun(
        points=tuple(whole),
        missing=len(missing),
        evaluation=evaluation,
        judgement=judgement,
        worst_ratio=_worst_of_mpe(basis, judgement),
    )


def _worst_of_mpe(basis: Basis, judgement: Judgement) -> float:
    import numpy as np

    from calibration.metrology.conformity import judge_readings

    mpe = basis.mpe.in_unit(basis.unit)
    if mpe == judgement.tolerance:
        return judgement.worst_ratio
    readings = judgement.readings
    ratios = judge_readings(readings.applied, readings.measured, readings.signal, mpe, readings.rule).ratio
    known = ratios[np.isfinite(ratios)]
    return float(known[np.argmax(np.abs(known))]) if known.size else math.nan


def judge_one(basis: Basis, kind: str, applied: float, measured: float) -> ReadingJudgement:
    """Judge one reading as it is typed: input in the unit of the range, output in mA.

    Notes
    -----
    `judge` judges every reading of a run through the same function, so that both agree to the last digit.
    """
    from calibration.metrology.conformity import judge_readings

    return judge_readings(applied, measured, basis.signal(), basis.tolerance(kind), basis.decision_rule())


def _missing(basis: Basis, points: Sequence[Point]) -> list[Point]:
    asked = basis.point_list()
    if asked is None:
        return _uncovered(basis, points)
    taken = Counter(
        (point.cycle, point.nominal_percent, point.direction) for point in points if not math.isnan(point.measured)
    )
    signal = basis.signal()
    missing = []
    for percent, direction, cycle in zip(asked.points, asked.directions, asked.cycles, strict=True):
        key = (cycle, float(percent), int(direction))
        if taken[key]:
            taken[key] -= 1
        else:
            missing.append(
                Point(
                    applied=float(signal.input_of_percent(percent)),
                    measured=math.nan,
                    direction=int(direction),
                    nominal_percent=float(percent),
                    cycle=cycle,
                )
            )
    return missing


def _uncovered(basis: Basis, points: Sequence[Point]) -> list[Point]:
    """Points that a run without a list lacks to be a test of the whole range."""
    from calibration.metrology.pointlist import points_from_applied

    if not points:
        return []
    signal = basis.signal()
    taken = [float(signal.percent_of_input(point.applied)) for point in points if not math.isnan(point.measured)]
    low, lowest = (ROOT_END_PERCENT, 10.0) if signal.is_square_root else (END_PERCENT, 0.0)
    levels = set(points_from_applied(taken).tolist())
    lacking = []
    if not any(percent <= low for percent in taken):
        lacking.append(lowest)
    if not any(percent >= 100.0 - END_PERCENT for percent in taken):
        lacking.append(100.0)
    if len(levels) + len(lacking) < LEAST_LEVELS:
        lacking.append(50.0)
    return [
        Point(applied=float(signal.input_of_percent(percent)), measured=math.nan, direction=1, nominal_percent=percent)
        for percent in sorted(lacking)
    ]
