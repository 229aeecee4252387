"""Errors of a run: definitions of IEC 61298-2 and ISA-51.1, missing and clipped readings, symmetries."""

from __future__ import annotations

import json

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.optimize import linprog
from statsmodels.api import OLS, WLS, add_constant

from calibration.metrology.errors import evaluate_run
from calibration.metrology.evaluation import RunEvaluation
from calibration.metrology.pointlist import SQUARE_ROOT_STANDARD, STANDARD, THREE_CYCLES, UP_ONLY, PointList
from calibration.metrology.signal import Signal, SignalState, Transfer

ERRORS = st.lists(st.floats(-1.0, 1.0), min_size=9, max_size=9)

FIGURES = (
    "inaccuracy",
    "hysteresis",
    "nonlinearity_terminal",
    "nonlinearity_zero_based",
    "nonlinearity_independent",
)


def run_with(errors: list[float], signal: Signal, points: PointList = STANDARD) -> RunEvaluation:
    """A run whose readings have the given errors [% of span]."""
    ideal = np.asarray(signal.ideal_current(points.inputs(signal)))
    return evaluate_run(None, ideal + np.array(errors) * 0.16, signal, points=points)


def test_the_error_is_taken_at_the_input_actually_applied() -> None:
    run = evaluate_run([51.0], [12.16], Signal(0, 100), points=[50.0])
    assert run.error[0] == pytest.approx(0.0, abs=1e-12)


def test_inaccuracy_and_hysteresis_follow_their_definitions() -> None:
    """Source: IEC 61298-2 definitions: greatest error; greatest difference of the up and down averages."""
    run = run_with([0.1, 0.2, 0.0, -0.3, 0.0, 0.1, 0.0, 0.5, 0.1], Signal(0, 10))
    assert run.inaccuracy == pytest.approx(0.5)
    assert run.worst_index == 7
    assert run.hysteresis == pytest.approx(0.4)
    assert run.hysteresis_at == 75.0


def test_the_greater_of_two_hystereses_counts_even_if_neither_holds_the_worst_reading() -> None:
    run = run_with([0.9, 0.2, 0.0, 0.0, 0.0, 0.0, 0.0, -0.1, 0.8], Signal(0, 10))
    assert run.hysteresis == pytest.approx(0.3)
    assert run.hysteresis_at == 25.0


def test_one_cycle_says_nothing_of_repeatability_and_one_way_nothing_of_hysteresis() -> None:
    assert np.isnan(run_with([0.0] * 9, Signal(0, 10)).repeatability)
    assert np.isnan(run_with([0.0] * 5, Signal(0, 10), UP_ONLY).hysteresis)


def test_a_list_without_the_end_points_says_nothing_of_zero_and_span_error() -> None:
    flow = run_with([0.1] * 9, Signal(0, 125, Transfer.SQUARE_ROOT), SQUARE_ROOT_STANDARD)
    assert np.isnan(flow.zero_error)
    assert np.isnan(flow.span_error)
    assert np.isfinite(flow.fit.zero_shift)


def test_up_and_down_weigh_the_same_in_the_mean_curve_however_often_each_was_met() -> None:
    run = run_with([0.4] + [0.0] * 7 + [0.1] + [0.0] * 7 + [0.1] + [0.0] * 7 + [0.1], Signal(0, 10), THREE_CYCLES)
    assert run.levels[0].up == pytest.approx(0.4)
    assert run.levels[0].down == pytest.approx(0.1)
    assert run.zero_error == pytest.approx(0.25)


@settings(max_examples=40)
@given(ERRORS)
def test_independent_non_linearity_is_the_minimax_deviation(errors: list[float]) -> None:
    """Second opinion: linear programming (scipy.optimize.linprog) on the mean curve."""
    run = run_with(errors, Signal(0, 1))
    x = np.array([level.input_percent for level in run.levels]) / 100.0
    y = np.array([level.mean for level in run.levels])
    one = np.ones_like(x)
    above = np.column_stack([-one, -x, -one])
    below = np.column_stack([one, x, -one])
    best = linprog(
        [0, 0, 1], np.vstack([above, below]), np.concatenate([-y, y]), bounds=[(None, None)] * 2 + [(0, None)]
    )
    assert run.nonlinearity_independent == pytest.approx(best.fun, abs=2e-7)
    a, b = run.independent_line
    assert np.abs(y - a - b * x).max() == pytest.approx(run.nonlinearity_independent, abs=1e-9)


@settings(max_examples=40)
@given(ERRORS)
def test_zero_based_non_linearity_is_the_minimax_deviation_through_zero(errors: list[float]) -> None:
    """Second opinion: linear programming with the line held at the low end point; it is feasible to 1e-7."""
    run = run_with(errors, Signal(0, 1))
    x = np.array([level.input_percent for level in run.levels])[1:] / 100.0
    y = np.array([level.mean for level in run.levels])
    rise = y[1:] - y[0]
    one = np.ones_like(x)
    best = linprog(
        [0, 1],
        np.vstack([np.column_stack([-x, -one]), np.column_stack([x, -one])]),
        np.concatenate([-rise, rise]),
        bounds=[(None, None), (0, None)],
    )
    assert run.nonlinearity_zero_based == pytest.approx(best.fun, abs=2e-7)
    a, b = run.zero_based_line
    assert a == pytest.approx(y[0], abs=1e-12)
    assert np.abs(rise - b * x).max() == pytest.approx(run.nonlinearity_zero_based, abs=1e-9)


@given(ERRORS)
def test_the_independent_line_deviates_least_and_the_zero_based_line_next(errors: list[float]) -> None:
    run = run_with(errors, Signal(0, 1))
    assert run.nonlinearity_independent <= run.nonlinearity_zero_based + 1e-12
    assert run.nonlinearity_zero_based <= run.nonlinearity_terminal + 1e-12


@settings(max_examples=40)
@given(ERRORS)
def test_fitted_shifts_agree_with_ordinary_least_squares(errors: list[float]) -> None:
    """Second opinion: statsmodels OLS."""
    run = run_with(errors, Signal(-20, 80))
    x = np.array(STANDARD.points) / 100.0
    other = OLS(np.array(errors), add_constant(x)).fit()
    assert (run.fit.zero_shift, run.fit.span_shift) == pytest.approx(tuple(other.params), abs=1e-9)
    assert (run.fit.zero_se, run.fit.span_se) == pytest.approx(tuple(other.bse), abs=1e-9)
    assert run.fit.dof == other.df_resid


def test_an_input_side_zero_shift_of_a_square_root_transmitter_is_one_number() -> None:
    """Own arithmetic: +1 inH2O on 0-125 inH2O is 0.8 % of input span, whatever the point."""
    flow = Signal(0, 125, Transfer.SQUARE_ROOT)
    shifted = flow.ideal_current(SQUARE_ROOT_STANDARD.inputs(flow) + 1.0)
    run = evaluate_run(None, shifted, flow, points=SQUARE_ROOT_STANDARD)
    assert run.fit.input_referred
    assert run.fit.zero_shift == pytest.approx(0.8)
    assert run.fit.span_shift == pytest.approx(0.0, abs=1e-9)
    assert run.error.max() > 3 * run.error.min() > 0.0


@settings(max_examples=40)
@given(st.lists(st.floats(-0.5, 0.5), min_size=9, max_size=9))
def test_square_root_shifts_agree_with_weighted_least_squares(errors: list[float]) -> None:
    """Second opinion: statsmodels WLS on the input-referred errors with weights (dI/dp)²."""
    flow = Signal(0, 125, Transfer.SQUARE_ROOT)
    run = run_with(errors, flow, SQUARE_ROOT_STANDARD)
    x = np.array(SQUARE_ROOT_STANDARD.points) / 100.0
    other = WLS(run.input_error / 1.25, add_constant(x), 1.0 / (4.0 * x)).fit()
    assert (run.fit.zero_shift, run.fit.span_shift) == pytest.approx(tuple(other.params), abs=1e-8)
    assert (run.fit.zero_se, run.fit.span_se) == pytest.approx(tuple(other.bse), abs=1e-8)


def test_a_missing_reading_leaves_the_run_incomplete_and_the_rest_standing() -> None:
    signal = Signal(0, 10)
    currents: list[float | None] = list(np.asarray(signal.ideal_current(STANDARD.inputs(signal))))
    currents[5] = None
    run = evaluate_run(None, currents, signal, points=STANDARD)
    assert not run.complete
    assert run.states[5] == SignalState.MISSING
    assert run.inaccuracy == pytest.approx(0.0, abs=1e-12)
    assert run.fit.readings == 8


def test_a_clipped_reading_bounds_the_inaccuracy_and_takes_no_part_in_averages() -> None:
    signal = Signal(0, 10)
    currents = list(np.asarray(signal.ideal_current(STANDARD.inputs(signal))))
    currents[4] = 20.5
    run = evaluate_run(None, currents, signal, points=STANDARD)
    assert run.complete
    assert run.inaccuracy == pytest.approx(3.125)
    assert np.isnan(run.span_error)
    assert run.fit.readings == 8
    assert run.fit.span_shift == pytest.approx(0.0, abs=1e-12)


def test_a_bound_from_the_wrong_side_does_not_enter_the_inaccuracy() -> None:
    """At 104 % the ideal is 20.64 mA: a current limited at 20.5 mA says only that the error is −0.9 % or
    more.
    """
    run = evaluate_run(None, [4.0, 20.5], Signal(0, 10), points=[0.0, 104.0])
    assert run.inaccuracy == pytest.approx(0.0, abs=1e-12)


def test_a_run_of_nothing_but_missing_readings_says_nothing() -> None:
    run = evaluate_run(None, [None] * 9, Signal(0, 10), points=STANDARD)
    assert run.worst_index is None
    assert all(np.isnan(getattr(run, name)) for name in FIGURES)
    assert json.loads(json.dumps(run.as_dict()))["inaccuracy"] is None


def test_points_that_were_not_written_down_are_found_from_the_inputs() -> None:
    run = evaluate_run(
        [0.02, 24.9, 50.1, 75.0, 99.8, 75.2, 50.0, 25.1, -0.05],
        [4.0, 8.0, 12.0, 16.0, 20.0, 16.0, 12.0, 8.0, 4.0],
        Signal(0, 100),
    )
    assert list(run.points) == list(STANDARD.points)
    assert tuple(run.directions) == STANDARD.directions


def test_series_of_different_length_are_refused_in_words() -> None:
    with pytest.raises(ValueError, match="2 inputs, 1 outputs"):
        evaluate_run([0.0, 1.0], [4.0], Signal(0, 1))
    with pytest.raises(ValueError, match="needs the inputs that were applied, or its nominal points"):
        evaluate_run(None, [4.0], Signal(0, 1))


@given(ERRORS, st.floats(-500, 500), st.floats(0.5, 1e3), st.booleans())
def test_figures_do_not_depend_on_the_unit_nor_the_zero_of_the_input(
    errors: list[float], lrv: float, span: float, reverse: bool
) -> None:
    plain = run_with(errors, Signal(0, 1))
    other = run_with(errors, Signal(lrv, lrv - span if reverse else lrv + span))
    for name in (*FIGURES, "zero_error", "span_error", "worst_error"):
        assert getattr(other, name) == pytest.approx(getattr(plain, name), abs=1e-7)
    assert other.fit.zero_shift == pytest.approx(plain.fit.zero_shift, abs=1e-7)


@given(ERRORS)
def test_exchanging_up_and_down_changes_no_figure(errors: list[float]) -> None:
    signal = Signal(0, 1)
    here = run_with(errors, signal)
    there = evaluate_run(
        None, here.measured, signal, points=STANDARD.points, directions=[-d for d in STANDARD.directions]
    )
    for name in (*FIGURES, "zero_error", "span_error"):
        assert getattr(there, name) == pytest.approx(getattr(here, name), abs=1e-12)


@given(ERRORS, st.floats(0.1, 5.0))
def test_figures_scale_with_the_errors_and_zero_error_turns_with_their_sign(errors: list[float], factor: float) -> None:
    here = run_with(errors, Signal(0, 1))
    there = run_with([-factor * e / 5.0 for e in errors], Signal(0, 1))
    for name in FIGURES:
        assert getattr(there, name) == pytest.approx(factor / 5.0 * getattr(here, name), abs=1e-9)
    assert there.zero_error == pytest.approx(-factor / 5.0 * here.zero_error, abs=1e-9)


@given(ERRORS, st.floats(-0.1, 0.1), st.floats(-0.1, 0.1))
def test_a_straight_line_added_to_the_errors_moves_the_fit_and_no_non_linearity(
    errors: list[float], zero: float, span: float
) -> None:
    x = np.array(STANDARD.points) / 100.0
    here = run_with(errors, Signal(0, 1))
    there = run_with(list(np.array(errors) + zero + span * x), Signal(0, 1))
    assert there.fit.zero_shift == pytest.approx(here.fit.zero_shift + zero, abs=1e-9)
    assert there.fit.span_shift == pytest.approx(here.fit.span_shift + span, abs=1e-9)
    assert there.nonlinearity_independent == pytest.approx(here.nonlinearity_independent, abs=1e-9)
    assert there.nonlinearity_terminal == pytest.approx(here.nonlinearity_terminal, abs=1e-9)
    assert there.hysteresis == pytest.approx(here.hysteresis, abs=1e-9)
