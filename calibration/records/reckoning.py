"""Turns described readings into rows and numbers, and judged runs into the figures and summaries kept of them."""

from __future__ import annotations

import math
from collections.abc import Mapping
from typing import Final

from calibration.models import Reading, Run, RunFigures, Test, Verdict
from calibration.records.basis import Basis
from calibration.records.content import ReadingContent
from calibration.records.judging import METHOD_VERSION, JudgedRun, Point, applied_in_range_unit, measured_in_ma

_INSIDE: Final = frozenset({Verdict.PASS, Verdict.CONDITIONAL_PASS})


def reading_row(reading: ReadingContent, order: int, basis: Basis) -> tuple[Reading, Point]:
    """An unsaved row for a reading (without its run), and the same reading as numbers for the arithmetic.

    Raises
    ------
    ValueError
        A text is not a number or its unit is of another kind.
    """
    from register.engineering.typed import parse_number
    from register.engineering.units import to_si

    unit = reading.applied_unit or basis.unit
    applied = applied_in_range_unit(reading.applied, unit, basis)
    measured = measured_in_ma(reading.measured, reading.measured_unit, basis)
    digital_si = None
    if reading.digital:
        digital = parse_number(reading.digital, decimal_comma=basis.decimal_comma)
        digital_si = float(to_si(digital, reading.digital_unit or basis.unit))
    row = Reading(
        order=order,
        cycle=reading.cycle,
        direction=reading.direction,
        nominal_percent=reading.nominal_percent,
        applied=reading.applied,
        applied_unit=unit,
        applied_si=float(to_si(applied, basis.unit)),
        measured=reading.measured,
        measured_unit=reading.measured_unit,
        measured_ma=measured,
        digital=reading.digital,
        digital_unit=reading.digital_unit,
        digital_si=digital_si,
        entered_at=reading.entered_at,
    )
    point = Point(
        applied=applied,
        measured=measured,
        direction=-1 if reading.direction == "down" else 1,
        nominal_percent=reading.nominal_percent,
        cycle=reading.cycle,
    )
    return row, point


def figures_row(judged: JudgedRun, run: Run, test: Test, *, current: bool = True) -> RunFigures:
    """An unsaved row with what the arithmetic says of a run."""
    evaluation, judgement = judged.evaluation, judged.judgement
    return RunFigures(
        run=run,
        method_version=METHOD_VERSION,
        plant_id=test.plant_id,
        transmitter_id=test.transmitter_id,
        tag_id=test.tag_id,
        test=test,
        current=current,
        kind=run.kind,
        tested_on=run.tested_on,
        verdict=str(judgement.verdict),
        why=judgement.why[:400],
        complete=_complete(judged),
        worst=_known(evaluation.worst_error),
        worst_ratio=_known(judgement.worst_ratio),
        zero_error=_known(evaluation.zero_error),
        span_error=_known(evaluation.span_error),
        zero_shift=_known(evaluation.fit.zero_shift),
        span_shift=_known(evaluation.fit.span_shift),
        hysteresis=_known(evaluation.hysteresis),
        repeatability=_known(evaluation.repeatability),
        non_linearity=_known(evaluation.nonlinearity_independent),
        point_errors=[
            [float(level.point), float(level.mean)] for level in evaluation.levels if not math.isnan(level.mean)
        ],
    )


def _complete(judged: JudgedRun) -> bool:
    """Whether two runs like this may be compared point by point; a run with gaps may well have failed."""
    undecided = any(str(verdict) == Verdict.INCOMPLETE for verdict in judged.judgement.readings.verdicts)
    return not undecided and not judged.evaluation.one_sided


def summarise(test: Test, *, outcome: str, adjusted: bool, runs: Mapping[str, JudgedRun], counts: bool = True) -> None:
    """Set the summary columns of a test from its judged runs; `counts` is false while it is sent back."""
    verdicts = {kind: str(judged.judgement.verdict) for kind, judged in runs.items()}
    test.outcome = outcome
    test.adjusted = adjusted
    test.accepted = counts and accepted(outcome, adjusted, verdicts)
    found, left = runs.get(Run.Kind.AS_FOUND), runs.get(Run.Kind.AS_LEFT)
    test.as_found_verdict = verdicts.get(Run.Kind.AS_FOUND, "")
    test.as_left_verdict = verdicts.get(Run.Kind.AS_LEFT, "")
    test.as_found_worst = _known(found.evaluation.worst_error) if found else None
    test.as_left_worst = _known(left.evaluation.worst_error) if left else None
    test.as_found_ratio = _known(found.worst_ratio) if found else None
    test.as_left_ratio = _known(left.worst_ratio) if left else None


def verdicts_of(runs: Mapping[str, JudgedRun]) -> dict[str, dict[str, str]]:
    """What the record says of its runs."""
    return {
        kind: {"verdict": str(judged.judgement.verdict), "why": judged.judgement.why[:400]}
        for kind, judged in runs.items()
    }


def accepted(outcome: str, adjusted: bool, verdicts: Mapping[str, str]) -> bool:
    """Whether a test moves the due date: complete, its last run inside its limit (the caller knows its state).

    Parameters
    ----------
    outcome : str
        One of `Test.Outcome`.
    adjusted : bool
        An adjusted transmitter needs an as-left run.
    verdicts : mapping
        Verdict by kind of run.
    """
    if outcome != Test.Outcome.DONE or not verdicts or Verdict.INCOMPLETE in verdicts.values():
        return False
    last = verdicts.get(Run.Kind.AS_LEFT) or ("" if adjusted else verdicts.get(Run.Kind.AS_FOUND, ""))
    return last in _INSIDE


def _known(value: float) -> float | None:
    return None if value is None or math.isnan(value) else float(value)
