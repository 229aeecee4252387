"""The sentence that says why a run was judged as it was."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from calibration.metrology.evaluation import RunEvaluation
from calibration.metrology.pointlist import UP, percent_text
from calibration.metrology.signal import SignalState, classify, saturated
from calibration.metrology.tolerance import Quantity
from calibration.metrology.verdicts import ReadingJudgement, Verdict
from calibration.metrology.writing import beside, fixed, places_for, plain


@dataclass(frozen=True)
class Shown:
    """Error and limit of a reading as they are written, without their unit.

    Attributes
    ----------
    error : str
        In the quantity in which the tolerance is stated, or "–" where it is not defined there.
    output_error : str
        In % of output span.
    limit : str
        "±0.25", or "−0.24 to +0.26" where the limits differ above and below.
    side : str
        The limit on the side on which the error lies: "±0.25" or "+0.26".
    unit : str
        Unit of `error` and `limit`.
    """

    error: str
    output_error: str
    limit: str
    side: str
    unit: str


def shown(reading: ReadingJudgement, index: int) -> Shown:
    """How error and limit of a reading are written, so that a reader comes to the same verdict."""
    error, judged = float(reading.error[index]), float(reading.judged_error[index])
    lower, upper = -float(reading.limits.lower[index]), float(reading.limits.upper[index])
    near, far = (upper, lower) if error > 0.0 else (lower, upper)
    if reading.tolerance.quantity is Quantity.INPUT:
        judged_error, limit = beside(judged, float(reading.judged_limit[index]))
        return Shown(judged_error, beside(error, near)[0], f"±{limit}", f"±{limit}", reading.unit)
    places = places_for(near)
    if fixed(lower, places) == fixed(upper, places):
        output_error, limit = beside(error, near)
        return Shown(output_error, output_error, f"±{limit}", f"±{limit}", reading.unit)
    output_error, limit = beside(error, near, more=0)
    other = plain(far, 3)
    if error > 0.0:
        return Shown(output_error, output_error, f"−{other} to +{limit}", f"+{limit}", reading.unit)
    return Shown(output_error, output_error, f"−{limit} to +{other}", f"−{limit}", reading.unit)


def _error_and_limit(reading: ReadingJudgement, index: int) -> tuple[str, str]:
    """Error and limit at a reading, in the quantity in which the tolerance is stated if it is defined."""
    said = shown(reading, index)
    if said.error != "–":
        return f"{said.error} {said.unit}", f"{said.side} {said.unit}"
    error = float(reading.error[index])
    side = float(reading.limits.upper[index] if error > 0.0 else -reading.limits.lower[index])
    written, limit = beside(error, side)
    return f"{written} % of span", f"{'+' if error > 0.0 else '−'}{limit} % of span"


def _beyond_acceptance(reading: ReadingJudgement, index: int) -> str:
    """Words for an error beyond the acceptance limit T - w."""
    limit = float(reading.judged_limit[index])
    guard = reading.rule.guard_factor * float(reading.expanded[index]) if reading.expanded is not None else 0.0
    return f"beyond the acceptance limit ±{plain(limit - guard)} {reading.unit}"


def _more(count: int, what: str) -> str:
    return f" {count} readings {what}." if count > 1 else ""


def explain(evaluation: RunEvaluation, readings: ReadingJudgement, verdict: Verdict, decisive: int | None) -> str:
    """Say in a sentence or two why a run got its verdict.

    Parameters
    ----------
    evaluation : RunEvaluation
        The run.
    readings : ReadingJudgement
        Its readings, judged.
    verdict : Verdict
        The verdict on the run.
    decisive : int or None
        The deciding reading.

    Returns
    -------
    str
        Names the reading, its error and the limit.
    """
    if decisive is None:
        return "No reading was taken."
    point, way = float(evaluation.points[decisive]), int(evaluation.directions[decisive])
    place = f" ({percent_text(point)} % {'up' if way == UP else 'down'})" if math.isfinite(point) else ""
    name = f"Reading {decisive + 1}{place}"
    alike = int(np.count_nonzero(readings.codes == readings.codes[decisive]))
    if verdict is Verdict.INCOMPLETE:
        return _why_incomplete(readings, decisive, name)
    if verdict is Verdict.NOT_DECIDABLE:
        return _why_not_decidable(readings, decisive, name)
    if verdict is Verdict.FAIL:
        return _why_failed(readings, decisive, name) + _more(alike, "fail")
    error, limit = _error_and_limit(readings, decisive)
    if verdict is Verdict.CONDITIONAL_FAIL:
        return f"{name}: error {error} is outside {limit}, but by no more than the guard band."
    if verdict is Verdict.CONDITIONAL_PASS:
        return f"{name}: error {error} is within {limit}, but {_beyond_acceptance(readings, decisive)}."
    closest = name[0].lower() + name[1:]
    return f"Every error is within its limit; closest to it is {closest}: {error} within {limit}."


def _why_incomplete(readings: ReadingJudgement, decisive: int, name: str) -> str:
    current = float(readings.measured[decisive])
    gone = int(np.count_nonzero(np.isnan(readings.error)))
    if math.isnan(float(readings.error[decisive])):
        what = "output" if math.isnan(current) else "input"
        return f"{name} has no {what}." + _more(gone, "are missing")
    if saturated(current):
        return (
            f"{name}: {plain(current)} mA is at or beyond the edge of the measuring signal (3.8 to 20.5 mA, "
            "NAMUR NE 43), so its error is only known as a bound, which does not decide." + _more(gone, "are missing")
        )
    return (
        f"{name}: the square-root output is held at 4 mA, so the input error is not known there; "
        "take this point further above zero." + _more(gone, "are missing")
    )


def _why_not_decidable(readings: ReadingJudgement, decisive: int, name: str) -> str:
    if readings.expanded is None or math.isnan(float(readings.expanded[decisive])):
        return f"{name}: the rule asks for a guard band, but the uncertainty of the error is not known."
    guard = readings.rule.guard_factor * float(readings.expanded[decisive])
    _, limit = _error_and_limit(readings, decisive)
    return f"{name}: the guard band of {plain(guard)} {readings.unit} leaves nothing of the limit {limit}."


def _why_failed(readings: ReadingJudgement, decisive: int, name: str) -> str:
    current = float(readings.measured[decisive])
    if int(classify(current)) in (SignalState.FAILURE_LOW, SignalState.FAILURE_HIGH):
        return f"{name}: {plain(current)} mA is a failure current (NAMUR NE 43: 3.6 mA or less, 21 mA or more)."
    error, limit = _error_and_limit(readings, decisive)
    if saturated(current):
        return (
            f"{name}: {plain(current)} mA is at or beyond the edge of the measuring signal (NAMUR NE 43); "
            f"the error is at least as large as {error}, outside {limit}."
        )
    if not readings.outside[decisive]:
        return f"{name}: error {error} is within {limit}, but {_beyond_acceptance(readings, decisive)}."
    return f"{name}: error {error} is outside {limit}."
