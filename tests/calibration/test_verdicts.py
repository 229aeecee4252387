"""Verdicts on readings and runs, and the sentence that says why."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from calibration.metrology.conformity import SLACK, Judgement, inside, judge_readings, judge_run
from calibration.metrology.errors import evaluate_run
from calibration.metrology.pointlist import STANDARD, PointList
from calibration.metrology.signal import Signal, Transfer
from calibration.metrology.tolerance import Quantity, Tolerance
from calibration.metrology.verdicts import DecisionRule, Rule, Verdict

RANGE = Signal(0, 200, unit="kPa")
T = Tolerance.of_span(0.25)
UP_DOWN = PointList((0, 50, 100, 50, 0))


def judged(
    errors: list[float | None],
    tolerance: Tolerance = T,
    rule: Rule = Rule.SIMPLE,
    u: float | None = None,
    currents: dict[int, float] | None = None,
) -> Judgement:
    """Judge a run over 0 50 100 50 0 % with these errors [% of span]; `currents` replaces single outputs
    [mA].
    """
    ideal = np.asarray(RANGE.ideal_current(UP_DOWN.inputs(RANGE)))
    measured = ideal + 0.16 * np.array([np.nan if e is None else e for e in errors])
    for index, current in (currents or {}).items():
        measured[index] = current
    run = evaluate_run(None, measured, RANGE, points=UP_DOWN)
    return judge_run(run, tolerance, DecisionRule(rule), u)


@pytest.mark.parametrize(
    ("error", "expected"),
    [
        (0.25, True),
        (-0.25, True),
        (0.2500000000000002, True),
        (0.25 + 0.9 * SLACK, True),
        (0.25 + 1.1 * SLACK, False),
        (-0.25 - 1.1 * SLACK, False),
        (0.251, False),
        (float("nan"), False),
    ],
)
def test_on_the_limit_is_inside(error: float, expected: bool) -> None:
    assert bool(inside(error, -0.25, 0.25)) is expected


@pytest.mark.parametrize("current", [4.04, 3.96, 12.04, 11.96, 20.04, 19.96])
def test_typed_currents_exactly_on_the_limit_pass(current: float) -> None:
    applied = round((current - 4.0) / 16.0 * 2.0) * 100.0
    result = judge_readings(applied, current, RANGE, T)
    assert result.verdicts == (Verdict.PASS,)


def test_a_run_within_its_limits_passes_and_says_what_came_closest() -> None:
    result = judged([0.0, 0.1, -0.2, 0.05, 0.0])
    assert result.verdict is Verdict.PASS
    assert result.in_tolerance is True
    assert result.tolerance_words == "in tolerance"
    assert result.worst_index == 2
    assert result.worst_ratio == pytest.approx(-0.8)
    assert result.why == (
        "Every error is within its limit; closest to it is reading 3 (100 % up): "
        "−0.200 % of span within ±0.25 % of span."
    )


def test_one_error_beyond_its_limit_fails_the_run_and_is_named() -> None:
    result = judged([0.0, 0.1, 0.31, 0.0, 0.0])
    assert result.verdict is Verdict.FAIL
    assert result.in_tolerance is False
    assert result.why == "Reading 3 (100 % up): error +0.310 % of span is outside ±0.25 % of span."


def test_several_errors_beyond_their_limits_are_counted() -> None:
    assert judged([0.0, 0.4, 0.31, 0.0, -0.3]).why.endswith("±0.25 % of span. 3 readings fail.")


def test_an_error_hardly_beyond_is_shown_with_enough_places_to_tell() -> None:
    assert "+0.2500001 % of span is outside ±0.25" in judged([0.2500001, 0, 0, 0, 0]).why


def test_an_input_tolerance_is_judged_and_said_in_input_units() -> None:
    result = judged([0.0, 0.1, 0.31, 0.0, 0.0], Tolerance.absolute(0.5))
    assert result.why == "Reading 3 (100 % up): error +0.620 kPa is outside ±0.5 kPa."
    assert result.worst_ratio == pytest.approx(1.24)


def test_a_missing_reading_leaves_a_good_run_incomplete() -> None:
    result = judged([0.0, None, 0.1, None, 0.0])
    assert result.verdict is Verdict.INCOMPLETE
    assert result.in_tolerance is None
    assert result.tolerance_words == ""
    assert result.why == "Reading 2 (50 % up) has no output. 2 readings are missing."


def test_fail_beats_incomplete() -> None:
    assert judged([0.0, None, 0.6, 0.0, 0.0]).verdict is Verdict.FAIL


def test_an_empty_run_is_incomplete() -> None:
    assert judge_run(evaluate_run([], [], RANGE), T).why == "No reading was taken."


@pytest.mark.parametrize("current", [3.6, 3.2, 21.0, 22.5])
def test_a_failure_current_fails_whatever_the_tolerance(current: float) -> None:
    result = judged([0.0] * 5, Tolerance.of_span(500.0), currents={1: current})
    assert result.verdict is Verdict.FAIL
    assert result.in_tolerance is False
    assert f"{current:g} mA is a failure current" in result.why


def test_a_clipped_reading_beyond_the_limit_fails() -> None:
    """At full scale 20.5 mA is +3.1 % at least."""
    result = judged([0.0] * 5, currents={2: 20.5})
    assert result.verdict is Verdict.FAIL
    assert "at least as large as +3.125 % of span" in result.why


def test_a_clipped_reading_within_the_limit_leaves_the_run_incomplete() -> None:
    result = judged([0.0] * 5, Tolerance.of_span(4.0), currents={2: 20.6})
    assert result.verdict is Verdict.INCOMPLETE
    assert result.in_tolerance is None
    assert "only known as a bound" in result.why


def test_a_clipped_reading_beyond_the_range_decides_nothing_from_the_wrong_side() -> None:
    """At 104 % the ideal is 20.64 mA; 20.5 mA would be −0.9 %, but the output may only be limited."""
    run = evaluate_run(None, [4.0, 20.5], RANGE, points=[0.0, 104.0])
    assert judge_run(run, T).verdict is Verdict.INCOMPLETE


@pytest.mark.parametrize(
    ("error", "expected"),
    [
        (0.20, Verdict.PASS),
        (0.21, Verdict.CONDITIONAL_PASS),
        (0.25, Verdict.CONDITIONAL_PASS),
        (0.26, Verdict.CONDITIONAL_FAIL),
        (0.30, Verdict.CONDITIONAL_FAIL),
        (0.31, Verdict.FAIL),
        (-0.21, Verdict.CONDITIONAL_PASS),
        (-0.31, Verdict.FAIL),
    ],
)
def test_four_verdicts_part_at_the_guard_band(error: float, expected: Verdict) -> None:
    """Source: ILAC-G8:09/2019, non-binary statement with guard band w = U; here T = 0.25 %, U = 0.05 %."""
    result = judged([0.0, error, 0.0, 0.0, 0.0], rule=Rule.FOUR_WAY, u=0.05)
    assert result.verdict is expected
    assert result.in_tolerance is (abs(error) <= 0.25)


@pytest.mark.parametrize(("error", "expected"), [(0.2, Verdict.PASS), (0.21, Verdict.FAIL), (0.3, Verdict.FAIL)])
def test_two_verdicts_part_at_the_acceptance_limit(error: float, expected: Verdict) -> None:
    """Source: ILAC-G8:09/2019, binary statement with guard band."""
    result = judged([0.0, error, 0.0, 0.0, 0.0], rule=Rule.TWO_WAY, u=0.05)
    assert result.verdict is expected
    assert result.in_tolerance is (error <= 0.25)


def test_an_error_between_the_acceptance_limit_and_the_tolerance_says_so() -> None:
    why = judged([0.0, 0.21, 0.0, 0.0, 0.0], rule=Rule.TWO_WAY, u=0.05).why
    assert why == (
        "Reading 2 (50 % up): error +0.210 % of span is within ±0.25 % of span, "
        "but beyond the acceptance limit ±0.2 % of span."
    )


@pytest.mark.parametrize(("u", "words"), [(None, "is not known"), (0.25, "leaves nothing"), (0.4, "leaves nothing")])
@pytest.mark.parametrize("rule", [Rule.TWO_WAY, Rule.FOUR_WAY])
def test_without_uncertainty_or_with_too_much_of_it_nothing_is_decided(rule: Rule, u: float | None, words: str) -> None:
    result = judged([0.0] * 5, rule=rule, u=u)
    assert result.verdict is Verdict.NOT_DECIDABLE
    assert words in result.why
    assert result.in_tolerance is True


def test_a_failure_current_fails_even_where_nothing_else_is_decidable() -> None:
    assert judged([0.0] * 5, rule=Rule.FOUR_WAY, currents={0: 3.5}).verdict is Verdict.FAIL


def test_the_guard_band_of_an_input_tolerance_is_in_input_units() -> None:
    flow = Signal(0, 125, Transfer.SQUARE_ROOT, unit="kPa")
    rule = DecisionRule(Rule.FOUR_WAY)
    inputs = [50.79, 50.81, 51.01, 51.21]
    result = judge_readings([50.0] * 4, flow.ideal_current(inputs), flow, Tolerance.absolute(1.0), rule, expanded=0.2)
    assert result.verdicts == (
        Verdict.PASS,
        Verdict.CONDITIONAL_PASS,
        Verdict.CONDITIONAL_FAIL,
        Verdict.FAIL,
    )
    assert list(result.judged_error) == pytest.approx([0.79, 0.81, 1.01, 1.21])


def test_a_held_square_root_output_bounds_the_input_and_no_more() -> None:
    """The output stays at 4 mA for every input of zero or less, so it says only that the input is not above
    zero.
    """
    flow = Signal(0, 125, Transfer.SQUARE_ROOT, unit="kPa")
    m = Tolerance.absolute(1.0)
    at_zero = judge_run(evaluate_run([0.0, 60.0], [4.0, float(flow.ideal_current(60.0))], flow), m)
    assert at_zero.verdict is Verdict.INCOMPLETE
    assert "held at 4 mA" in at_zero.why
    further_up = judge_readings(12.5, 4.0, flow, m)
    assert further_up.verdicts == (Verdict.FAIL,)
    at_output = judge_readings(0.0, 4.0, flow, T)
    assert at_output.verdicts == (Verdict.PASS,)


def test_a_reading_is_judged_alone_as_it_is_in_its_run() -> None:
    ideal = np.asarray(RANGE.ideal_current(STANDARD.inputs(RANGE)))
    currents = ideal + np.linspace(-0.06, 0.06, 9)
    run = judge_run(evaluate_run(None, currents, RANGE, points=STANDARD), T)
    for index, current in enumerate(currents):
        alone = judge_readings(run.evaluation.applied[index], current, RANGE, T)
        assert alone.verdicts[0] is run.readings.verdicts[index]
        assert alone.error[0] == run.readings.error[index]


@given(
    st.floats(-3, 3),
    st.floats(0.05, 2),
    st.floats(0.01, 1),
    st.floats(12, 88),
    st.booleans(),
    st.sampled_from(["percent of span", "percent of reading", "absolute", "larger", "sum"]),
)
def test_judging_at_the_output_is_judging_in_the_stated_quantity(
    ratio: float, percent: float, amount: float, point: float, root: bool, form: str
) -> None:
    """An error of so many times its limit is inside exactly if that is not more than one."""
    signal = Signal(-20, 105, Transfer.SQUARE_ROOT if root else Transfer.LINEAR)
    tolerance = Tolerance.stated(form, percent, amount)
    p = float(signal.input_of_percent(point))
    if tolerance.quantity is Quantity.INPUT:
        limit = float(tolerance.limit(p, signal))
        measured = float(signal.ideal_current(p + ratio * limit))
    else:
        limits = tolerance.limits(p, signal)
        side = float(limits.upper if ratio > 0 else -limits.lower)
        measured = float(limits.ideal_ma) + 0.16 * ratio * side
    if not 4.1 < measured < 20.4 or abs(abs(ratio) - 1.0) < 1e-6:
        return
    result = judge_readings(p, measured, signal, tolerance)
    assert (result.verdicts[0] is Verdict.PASS) is (abs(ratio) < 1.0)
    assert result.ratio[0] == pytest.approx(ratio, abs=1e-6)


@given(st.lists(st.floats(-1, 1), min_size=5, max_size=5), st.floats(0.01, 0.24), st.floats(0.01, 0.99))
def test_more_uncertainty_never_betters_a_verdict(errors: list[float], u: float, share: float) -> None:
    order = [Verdict.PASS, Verdict.CONDITIONAL_PASS]
    less = judged(list(errors), rule=Rule.FOUR_WAY, u=u * share).verdict
    more = judged(list(errors), rule=Rule.FOUR_WAY, u=u).verdict
    if more in order:
        assert order.index(less) <= order.index(more)
    assert (less in order) is (more in order)


def test_a_negative_guard_factor_is_refused() -> None:
    with pytest.raises(ValueError, match="zero or more"):
        DecisionRule(Rule.TWO_WAY, -1.0)
