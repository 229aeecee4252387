"""The arithmetic over many runs gives what the single run gives, in bounded memory."""

from __future__ import annotations

import tracemalloc
from typing import Any

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from calibration.metrology.conformity import judge_run, judge_runs
from calibration.metrology.errors import FIGURES, evaluate_run
from calibration.metrology.evaluation import RunEvaluation
from calibration.metrology.fleet import FleetFigures, evaluate_ragged, evaluate_runs
from calibration.metrology.pointlist import SQUARE_ROOT_STANDARD, STANDARD, THREE_CYCLES, PointList
from calibration.metrology.signal import BelowCut, Signal, Transfer
from calibration.metrology.tolerance import Tolerance
from calibration.metrology.verdicts import VERDICTS

RUNS = 60
CLOSE = 1e-8


def figure(run: RunEvaluation, name: str) -> float:
    if name == "readings_used":
        return float(run.fit.readings)
    return float(getattr(run, name) if hasattr(run, name) else getattr(run.fit, name))


def assert_equal(fleet: FleetFigures, runs: list[RunEvaluation]) -> None:
    for name in FIGURES:
        single = np.array([figure(run, name) for run in runs])
        np.testing.assert_allclose(getattr(fleet, name), single, rtol=CLOSE, atol=CLOSE, err_msg=name)


def invented(
    points: PointList, seed: int, spoil: float, root: float = 0.0
) -> tuple[np.ndarray, np.ndarray, list[Signal]]:
    """Runs with errors, off-nominal inputs, and a share of missing, clipped and failed readings."""
    chance = np.random.default_rng(seed)
    signals = []
    for _ in range(RUNS):
        lrv = float(chance.uniform(-100, 100))
        span = float(chance.uniform(1, 300) * chance.choice([-1, 1]))
        is_root = chance.random() < root
        signals.append(
            Signal(
                lrv,
                lrv + span,
                Transfer.SQUARE_ROOT if is_root else Transfer.LINEAR,
                low_cut_percent=float(chance.choice([0.0, 1.0, 15.0])) if is_root else 0.0,
                below_cut=BelowCut(chance.choice(list(BelowCut))) if is_root else BelowCut.LINEAR,
            )
        )
    shape = (RUNS, len(points))
    applied = np.array([points.inputs(one) for one in signals])
    applied += chance.normal(0, 0.1, shape) * np.array([one.span for one in signals])[:, None] / 100
    measured = np.array([one.ideal_current(p) for one, p in zip(signals, applied, strict=True)])
    measured += chance.normal(0, 0.03, shape)
    for value in (np.nan, 3.5, 3.7, 20.5, 20.8, 22.0):
        measured[chance.random(shape) < spoil / 6] = value
    applied[chance.random(shape) < spoil / 6] = np.nan
    return applied, measured, signals


def columns(signals: list[Signal]) -> dict[str, Any]:
    return {
        "lrv": np.array([one.lrv for one in signals]),
        "urv": np.array([one.urv for one in signals]),
        "square_root": np.array([one.is_square_root for one in signals]),
        "low_cut": np.array([one.low_cut_percent for one in signals]),
        "hold": np.array([one.below_cut is BelowCut.ZERO for one in signals]),
    }


@pytest.mark.parametrize("points", [STANDARD, THREE_CYCLES, SQUARE_ROOT_STANDARD, PointList((0, 100))])
@pytest.mark.parametrize("spoil", [0.0, 0.02, 0.5])
@pytest.mark.parametrize("root", [0.0, 0.4])
def test_many_runs_equal_a_loop_over_single_runs(points: PointList, spoil: float, root: float) -> None:
    applied, measured, signals = invented(points, seed=len(points), spoil=spoil, root=root)
    fleet = evaluate_runs(applied, measured, points=points, block=16, **columns(signals))
    runs = [evaluate_run(p, i, one, points=points) for p, i, one in zip(applied, measured, signals, strict=True)]
    assert_equal(fleet, runs)
    np.testing.assert_array_equal(fleet.inaccuracy, np.abs(fleet.worst_error))


@settings(max_examples=40)
@given(st.lists(st.floats(3.5, 21.5), min_size=9, max_size=9), st.integers(1, 5))
def test_any_currents_give_the_figures_of_a_single_run(currents: list[float], block: int) -> None:
    fleet = evaluate_runs(None, [currents] * 3, 0.0, 10.0, points=STANDARD, block=block)
    assert_equal(fleet, [evaluate_run(None, currents, Signal(0, 10), points=STANDARD)] * 3)


def test_inputs_shared_by_all_runs_may_be_given_once() -> None:
    applied = np.array(STANDARD.points) / 10.0
    currents = 4.0 + 1.6 * applied + np.random.default_rng(5).normal(0, 0.01, (RUNS, 9))
    once = evaluate_runs(applied, currents, 0.0, 10.0, points=STANDARD)
    each = evaluate_runs(np.tile(applied, (RUNS, 1)), currents, 0.0, 10.0, points=STANDARD)
    for name in FIGURES:
        np.testing.assert_allclose(getattr(once, name), getattr(each, name), rtol=CLOSE, atol=CLOSE)


def test_runs_of_different_length_given_end_to_end_equal_single_runs() -> None:
    lists = [STANDARD, THREE_CYCLES, PointList((0, 50, 100)), SQUARE_ROOT_STANDARD]
    chance = np.random.default_rng(11)
    applied: list[float] = []
    measured: list[float] = []
    points: list[float] = []
    ways: list[int] = []
    starts: list[int] = []
    signals: list[Signal] = []
    runs: list[RunEvaluation] = []
    for index in range(40):
        mine = lists[int(chance.integers(len(lists)))]
        kind = Transfer.SQUARE_ROOT if index % 3 == 0 else Transfer.LINEAR
        signal = Signal(float(index), float(index) + 20.0, kind)
        inputs = mine.inputs(signal) + chance.normal(0, 0.02, len(mine))
        current = np.asarray(signal.ideal_current(inputs)) + chance.normal(0, 0.02, len(mine))
        if index % 7 == 0:
            current[1] = np.nan
        starts.append(len(measured))
        signals.append(signal)
        runs.append(evaluate_run(inputs, current, signal, points=mine))
        applied.extend(inputs)
        measured.extend(current)
        points.extend(mine.points)
        ways.extend(mine.directions)
    fleet = evaluate_ragged(applied, measured, points, ways, starts, **columns(signals))
    assert_equal(fleet, runs)


def test_verdicts_on_many_runs_equal_single_verdicts() -> None:
    applied, measured, signals = invented(STANDARD, seed=3, spoil=0.05)
    tolerance = Tolerance.of_span(0.45)
    singles = [
        judge_run(evaluate_run(p, i, one, points=STANDARD), tolerance)
        for p, i, one in zip(applied, measured, signals, strict=True)
    ]
    errors = np.array([one.readings.error for one in singles])
    fleet = judge_runs(errors, measured, -0.45, 0.45, block=7)
    assert [VERDICTS[code] for code in fleet.codes] == [one.verdict for one in singles]
    known = {True: 1, False: 0, None: -1}
    assert list(fleet.in_tolerance) == [known[one.in_tolerance] for one in singles]
    np.testing.assert_allclose(fleet.worst_ratio, [one.worst_ratio for one in singles], rtol=1e-9)
    assert len(set(fleet.codes)) == 3


def test_evaluation_takes_memory_for_one_block_beside_its_results() -> None:
    runs, block = 60_000, 2048
    chance = np.random.default_rng(1)
    measured = 4.0 + 16.0 * np.array(STANDARD.points) / 100.0 + chance.normal(0, 0.01, (runs, 9))
    tracemalloc.start()
    figures = evaluate_runs(None, measured, 0.0, 10.0, points=STANDARD, block=block)
    _, peak = tracemalloc.get_traced_memory()
    tracemalloc.stop()
    results = sum(getattr(figures, name).nbytes for name in FIGURES)
    assert peak - results < 20 * block * 9 * 8


def test_shapes_that_do_not_fit_are_refused_in_words() -> None:
    with pytest.raises(ValueError, match=r"shape \(runs, 9\)"):
        evaluate_runs(None, np.zeros((2, 5)), 0.0, 1.0, points=STANDARD)
    with pytest.raises(ValueError, match="Inputs have shape"):
        evaluate_runs(np.zeros((3, 9)), np.zeros((2, 9)), 0.0, 1.0, points=STANDARD)
    with pytest.raises(ValueError, match="start at 0"):
        evaluate_ragged(None, [4.0, 8.0], [0, 25], [1, 1], [1], 0.0, 1.0)
