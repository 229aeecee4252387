"""One reading's error in words and as a bar, for the sheet and for the finished test."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING

from django.utils.safestring import SafeString

from calibration.drawing.marks import error_bar
from calibration.records.basis import Basis
from calibration.records.judging import judge_one
from register.figures import places_of

if TYPE_CHECKING:
    from calibration.metrology.verdicts import ReadingJudgement

DECIMALS_MA = 3
_HELD = "the square-root output is held at 4 mA: the error at the input is not known"
_WORDS = {
    "pass": ("inside", "ok"),
    "conditional pass": ("inside, within the guard band", "near"),
    "conditional fail": ("outside, within the guard band", "out"),
    "fail": ("outside", "out"),
    "not decidable": ("not decidable", "unknown"),
    "incomplete": ("at the edge of the signal: the error is only a bound", "unknown"),
}


@dataclass(frozen=True, slots=True)
class Result:
    """What is said of one reading, ready to print.

    `in_input` only where the tolerance is stated in the input; `input_error` is the same without its unit.
    """

    error: str
    in_input: str
    input_error: str
    expected: str
    limit: str
    limit_unit: str
    word: str
    css: str
    bar: SafeString

    @property
    def outside(self) -> bool:
        return self.css == "out"


def result_of(judged: ReadingJudgement, index: int, *, up: bool | None = None) -> Result:
    """The result of one reading out of those judged together."""
    from calibration.metrology.explaining import shown
    from calibration.metrology.tolerance import Quantity
    from calibration.metrology.verdicts import VERDICTS
    from calibration.metrology.writing import fixed

    said = shown(judged, index)
    ratio = float(judged.ratio[index])
    verdict = VERDICTS[int(judged.codes[index])]
    word, css = _WORDS[verdict]
    measured = float(judged.measured[index])
    if verdict == "incomplete" and not _at_the_edge(measured):
        word = _HELD
    failure = _failure(measured)
    if failure:
        word, css = failure, "out"
    known = judged.tolerance.quantity is Quantity.INPUT and not math.isnan(float(judged.judged_error[index]))
    stated = f"{said.error} {said.unit}" if known else ""
    words = f"error {stated or said.output_error + ' % of span'}, limit {said.limit} {said.unit}: {word}"
    return Result(
        error=said.output_error,
        in_input=stated,
        input_error=said.error if known else "",
        expected=fixed(float(judged.limits.ideal_ma[index]), max(DECIMALS_MA, places_of(said.output_error))),
        limit=said.limit,
        limit_unit=said.unit,
        word=word,
        css=css,
        bar=error_bar(None if math.isnan(ratio) else ratio, words, up=up),
    )


def result_now(basis: Basis, kind: str, applied: float, measured: float, *, up: bool | None = None) -> Result:
    """The result of a reading as it is typed: input in the unit of the range, output in mA."""
    return result_of(judge_one(basis, kind, applied, measured), 0, up=up)


def _at_the_edge(measured: float) -> bool:
    from calibration.metrology.signal import saturated

    return bool(saturated(measured))


def _failure(measured: float) -> str:
    from calibration.metrology.signal import FAILURE_HIGH_MA, FAILURE_LOW_MA

    if measured <= FAILURE_LOW_MA:
        return f"failure current (≤ {FAILURE_LOW_MA:g} mA)"
    if measured >= FAILURE_HIGH_MA:
        return f"failure current (≥ {FAILURE_HIGH_MA:g} mA)"
    return ""
