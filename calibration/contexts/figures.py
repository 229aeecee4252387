"""The figures of a run with the arithmetic behind them, so that a reader can add them up again by hand."""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING

from register.figures import signed

if TYPE_CHECKING:
    from calibration.metrology.evaluation import Level, RunEvaluation
    from calibration.records.judging import JudgedRun

DIGITS = 3


@dataclass(frozen=True, slots=True)
class Figure:
    """One figure in % of span, how it comes about, and what it means."""

    name: str
    value: str
    arithmetic: str
    meaning: str


def figures_of(judged: JudgedRun) -> list[Figure]:
    """Zero and span error, fitted shifts, hysteresis, repeatability and non-linearity of a run."""
    return list(_each(judged.evaluation))


def _each(run: RunEvaluation) -> Iterator[Figure]:
    by_point = {level.point: _errors_at(run, level.point) for level in run.levels}
    zero, full = by_point.get(0.0), by_point.get(100.0)
    yield Figure(
        "Greatest error",
        _said(run.worst_error),
        "" if run.worst_index is None else f"at {_point(run, run.worst_index)}",
        "the error of greatest size, with its sign",
    )
    yield Figure(
        "Zero error",
        _said(run.zero_error),
        _mean(zero) if zero else _none_at(run, 0.0),
        "mean error at 0 %",
    )
    if zero and full:
        span = f"{_mean(full)} at 100 %, less {_said(run.zero_error)} at 0 %"
    else:
        span = "; ".join(_none_at(run, point) for point, held in ((0.0, zero), (100.0, full)) if not held)
    yield Figure("Span error", _said(run.span_error), span, "mean error at 100 % less mean error at 0 %")
    yield from _shifts(run)
    yield _hysteresis(run)
    yield _repeatability(run.levels, run.repeatability)
    yield from _nonlinearity(run)


def _shifts(run: RunEvaluation) -> Iterator[Figure]:
    fit = run.fit
    unit = "% of input span" if fit.input_referred else "% of span"
    how = (
        f"least squares e = a + b·x over {fit.readings} readings"
        f"{', input-referred, weighted by the slope' if fit.input_referred else ''}"
    )
    for name, value, error, letter in (
        ("Fitted zero shift", fit.zero_shift, fit.zero_se, "a"),
        ("Fitted span shift", fit.span_shift, fit.span_se, "b"),
    ):
        known = "" if math.isnan(error) else f"; standard error {error:.{DIGITS}f}"
        yield Figure(name, _said(value), f"{letter}: {how}{known}", f"{letter} in {unit}")


def _hysteresis(run: RunEvaluation) -> Figure:
    level = next((level for level in run.levels if level.point == run.hysteresis_at), None)
    how = "needs a point read both upwards and downwards"
    if level is not None and not math.isnan(level.hysteresis):
        how = f"at {level.point:g} %: up {signed(level.up, DIGITS)}, down {signed(level.down, DIGITS)}"
    meaning = "greatest |mean up − mean down| at one point, dead band included"
    return Figure("Hysteresis", _size(run.hysteresis), how, meaning)


def _repeatability(levels: Sequence[Level], value: float) -> Figure:
    spreads = [
        (spread, level.point, way)
        for level in levels
        for spread, way in ((level.spread_up, "up"), (level.spread_down, "down"))
        if not math.isnan(spread)
    ]
    how = "needs the same point twice from the same side"
    if spreads:
        _, point, way = max(spreads)
        how = f"at {point:g} % {way}, highest less lowest"
    return Figure("Repeatability", _size(value), how, "greatest spread of readings taken from the same side")


def _nonlinearity(run: RunEvaluation) -> Iterator[Figure]:
    means = ", ".join(
        f"{signed(level.mean, DIGITS)} at {level.point:g} %" for level in run.levels if not math.isnan(level.mean)
    )
    yield Figure(
        "Non-linearity, terminal-based",
        _size(run.nonlinearity_terminal),
        f"mean curve {means}, from the line through its ends" if means else "",
        "greatest distance of the mean curve from that line",
    )
    yield Figure(
        "Non-linearity, zero-based",
        _size(run.nonlinearity_zero_based),
        _line(run.zero_based_line),
        "line through the mean error at the lowest point that makes the greatest distance least",
    )
    yield Figure(
        "Non-linearity, independent",
        _size(run.nonlinearity_independent),
        _line(run.independent_line),
        "line that makes the greatest distance least (not least squares)",
    )


def _line(line: tuple[float, float]) -> str:
    intercept, slope = line
    if math.isnan(intercept):
        return ""
    equation = f"{signed(intercept, 4)} {_term(slope)}·x"
    return f"from the line {equation}, where x is the expected output, 0 at 4 mA and 1 at 20 mA"


def _none_at(run: RunEvaluation, point: float) -> str:
    """Why there is no mean error at a point."""
    if any(level.point == point for level in run.levels):
        return f"no reading at {point:g} % carries a measurement: it is missing, or at the edge of the signal"
    return f"the list has no reading at {point:g} %"


def _term(slope: float) -> str:
    return f"+ {slope:.4f}" if slope >= 0 else f"− {-slope:.4f}"


def _errors_at(run: RunEvaluation, point: float) -> list[tuple[float, int]]:
    return [
        (float(error), int(way))
        for error, at, way, usable in zip(run.error, run.points, run.directions, run.usable, strict=True)
        if at == point and usable
    ]


def _mean(errors: Sequence[tuple[float, int]]) -> str:
    """The mean of the readings at a point as a sum a reader can add up; up and down weigh the same."""
    up = [error for error, way in errors if way > 0]
    down = [error for error, way in errors if way < 0]
    if up and down and len(up) != len(down):
        return f"mean of {_average(up)} (up) and {_average(down)} (down)"
    return _average([error for error, _ in errors])


def _average(errors: Sequence[float]) -> str:
    if len(errors) == 1:
        return signed(errors[0], DIGITS)
    terms = " ".join(f"{signed(error, DIGITS)}" if place == 0 else _added(error) for place, error in enumerate(errors))
    return f"({terms})/{len(errors)}"


def _added(error: float) -> str:
    return f"+ {abs(error):.{DIGITS}f}" if error >= 0 else f"− {abs(error):.{DIGITS}f}"


def _point(run: RunEvaluation, index: int) -> str:
    return f"{run.points[index]:g} % {'up' if run.directions[index] > 0 else 'down'}"


def _said(value: float) -> str:
    return "–" if math.isnan(value) else signed(value, DIGITS)


def _size(value: float) -> str:
    return "–" if math.isnan(value) else f"{value:.{DIGITS}f}"
