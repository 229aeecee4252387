"""The 4-20 mA signal: ideal output, its inverse, and what a current says about itself."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import assume, given
from hypothesis import strategies as st

from calibration.metrology import signal as s
from calibration.metrology.signal import BelowCut, Signal, SignalState, Transfer
from tests.published import read_csv, read_json

FINITE = st.floats(-1e4, 1e4, allow_nan=False)


@st.composite
def signals(draw: st.DrawFn) -> Signal:
    lrv = draw(FINITE)
    span = draw(st.floats(0.1, 1e4)) * draw(st.sampled_from([1.0, -1.0]))
    cut = draw(st.sampled_from([0.0, 0.6, 1.0, 5.0]))
    assume(lrv + span != lrv)
    return Signal(
        lrv,
        lrv + span,
        draw(st.sampled_from(list(Transfer))),
        low_cut_percent=cut,
        below_cut=draw(st.sampled_from(list(BelowCut))),
    )


def test_square_root_extraction_agrees_with_the_published_table() -> None:
    """Source: square-root extraction table, `sqrt_extraction.csv`; printed to four decimals."""
    for row in read_csv("sqrt_extraction.csv"):
        percent = float(row["DP_percent"])
        linear, root = Signal(0, 100), Signal(0, 100, Transfer.SQUARE_ROOT)
        assert linear.ideal_current(percent) == pytest.approx(float(row["mA_linear_DP"]), abs=5e-5)
        assert root.ideal_current(percent) == pytest.approx(float(row["mA_sqrt_flow"]), abs=5e-5)
        assert root.output_percent(percent) == pytest.approx(float(row["flow_percent"]), abs=5e-5)


def test_five_points_of_a_flow_transmitter_agree_with_the_textbook() -> None:
    """Source: Lessons In Industrial Instrumentation, flow chapter, square-root characterisation."""
    table = read_json("liii_flow_examples.json")["sqrt_4_20"]
    lrv, urv = table["range_inWC"]
    flow = Signal(lrv, urv, Transfer.SQUARE_ROOT, unit="inH2O")
    for pressure, percent, current in table["rows"]:
        assert flow.ideal_current(pressure) == pytest.approx(current, abs=0.005)
        assert flow.output_percent(pressure) == pytest.approx(percent, abs=0.006)
        assert flow.input_of_current(flow.ideal_current(pressure)) == pytest.approx(pressure, abs=1e-9)


@pytest.mark.parametrize(
    ("case", "lrv", "urv", "applied"),
    [
        ("digital: sensed 96 psi (of 0-100) gives mA", 0, 100, 96),
        ("0-50 inWC at 25.00: ideal mA", 0, 50, 25.0),
        ("case A: PV 24.781 inWC implies AO mA", 0, 50, 24.781),
        ("case B: PV 25.002 implies AO mA (printed 12.001)", 0, 50, 25.002),
        ("0-1400 l/min at 816 -> mA", 0, 1400, 816),
        ("50-140 C at 79 -> mA", 50, 140, 79),
        ("reverse I/P 12.7 psi -> mA", 3, 15, 12.7),
    ],
)
def test_currents_agree_with_the_textbook(case: str, lrv: float, urv: float, applied: float) -> None:
    """Source: Lessons In Industrial Instrumentation, calibration and analog signals chapters."""
    (row,) = (c for c in read_json("liii_scaling_and_level.json")["cases"] if c["name"] == case)
    if "reverse" in case:
        # The converter puts out 3 to 15 psi for 4 to 20 mA the other way round: 20 mA gives 3 psi.
        lrv, urv = urv, lrv
    expected = row["expected"]
    assert Signal(lrv, urv).ideal_current(applied) == pytest.approx(expected, abs=row["tol"])


def test_percent_and_current_agree_with_the_textbook_both_ways() -> None:
    """Source: Lessons In Industrial Instrumentation, analog signals: 34.7 %, 8.55 mA, pH at 11.3 mA."""
    cases = {c["name"]: c for c in read_json("liii_scaling_and_level.json")["cases"]}
    assert s.current_of_percent(34.7) == pytest.approx(cases["34.7 % -> mA"]["expected"], abs=5e-4)
    assert s.percent_of_current(8.55) == pytest.approx(cases["8.55 mA -> %"]["expected"], abs=0.05)
    acidity = Signal(4, 10)
    assert acidity.input_of_current(11.3) == pytest.approx(cases["pH 4-10 at 11.3 mA"]["expected"], abs=0.005)


def test_currents_are_classified_by_ne_43() -> None:
    """Source: NAMUR NE 43; the class names there are read from their first words."""
    limits = read_json("ne43_limits.json")
    names = {
        "fault low": SignalState.FAILURE_LOW,
        "between": None,
        "measuring": SignalState.MEASURING,
        "fault high": SignalState.FAILURE_HIGH,
    }
    for row in limits["classes"]:
        (expected,) = (state for name, state in names.items() if row["cls"].startswith(name))
        found = SignalState(int(s.classify(row["mA"])))
        if expected is None:
            assert found in (SignalState.CLIPPED_LOW, SignalState.CLIPPED_HIGH)
        else:
            assert found is expected
    assert limits["measuring_mA"] == [s.MEASURING_LOW_MA, s.MEASURING_HIGH_MA]
    assert limits["fault_low_max_mA"] == s.FAILURE_LOW_MA
    assert limits["fault_high_min_mA"] == s.FAILURE_HIGH_MA
    assert s.percent_of_current(limits["measuring_mA"]) == pytest.approx(limits["measuring_pct"])


def test_a_missing_current_is_missing_and_the_edge_is_a_bound() -> None:
    assert s.classify(float("nan")) == SignalState.MISSING
    assert list(s.saturated([3.5, 3.8, 3.81, 12, 20.49, 20.5, 22, float("nan")])) == [
        -1,
        -1,
        0,
        0,
        0,
        1,
        1,
        0,
    ]


def test_a_small_zero_shift_is_large_at_zero_input_of_a_square_root_and_small_at_full_scale() -> None:
    """Own arithmetic: +1 inH2O on 0-125 inH2O gives √(1/125) of span more at zero, √(126/125) - 1 at full."""
    flow = Signal(0, 125, Transfer.SQUARE_ROOT)
    at_zero, at_full = flow.ideal_current([1.0, 126.0])
    assert at_zero == pytest.approx(5.431, abs=5e-4)
    assert s.error_percent(at_zero, 4.0) == pytest.approx(8.94, abs=5e-3)
    assert at_full == pytest.approx(20.064, abs=5e-4)


def test_below_the_low_cut_the_output_follows_its_setting() -> None:
    line = Signal(0, 100, Transfer.SQUARE_ROOT, low_cut_percent=1.0)
    held = Signal(0, 100, Transfer.SQUARE_ROOT, low_cut_percent=1.0, below_cut=BelowCut.ZERO)
    assert list(line.ideal_current([-5.0, 0.0, 0.5, 1.0, 4.0])) == pytest.approx([4.0, 4.0, 4.8, 5.6, 7.2])
    assert list(held.ideal_current([-5.0, 0.0, 0.5, 1.0, 4.0])) == pytest.approx([4.0, 4.0, 4.0, 5.6, 7.2])
    assert line.input_of_current(4.8) == pytest.approx(0.5)
    assert np.isnan(held.input_of_current(4.8))


def test_the_low_cut_is_met_where_typed_decimals_miss_it_by_rounding() -> None:
    held = Signal(0.1, 0.4, Transfer.SQUARE_ROOT, low_cut_percent=1.0, below_cut=BelowCut.ZERO)
    at_cut = held.input_of_percent(1.0)
    assert held.ideal_current(at_cut) == pytest.approx(5.6)


@given(signals(), st.floats(-50, 150))
def test_the_ideal_output_is_never_nan(signal: Signal, percent: float) -> None:
    assert np.isfinite(signal.ideal_current(signal.input_of_percent(percent)))


@given(signals(), st.floats(0.01, 110))
def test_input_to_current_and_back_is_the_same_input(signal: Signal, percent: float) -> None:
    applied = float(signal.input_of_percent(percent))
    assume(not (signal.below_cut is BelowCut.ZERO and percent <= signal.low_cut_percent))
    back = float(signal.input_of_current(signal.ideal_current(applied)))
    resolution = 1e-12 * (abs(signal.lrv) + abs(signal.urv)) / max(np.sqrt(percent / 100.0), 0.1)
    assert back == pytest.approx(applied, abs=resolution + 1e-12 * abs(signal.span))


@given(signals(), st.floats(4.0001, 22.0))
def test_current_to_input_and_back_is_the_same_current(signal: Signal, current: float) -> None:
    applied = float(signal.input_of_current(current))
    assume(np.isfinite(applied))
    assume(abs(signal.lrv) < 1e3 * abs(signal.span))
    assert float(signal.ideal_current(applied)) == pytest.approx(current, abs=1e-6)


@given(signals(), st.floats(0.0, 100.0))
def test_percent_input_and_percent_agree_both_ways(signal: Signal, percent: float) -> None:
    assume(abs(signal.lrv) < 1e3 * abs(signal.span))
    assert float(signal.percent_of_input(signal.input_of_percent(percent))) == pytest.approx(percent, abs=1e-9)
    assert float(signal.input_of_percent(0.0)) == signal.lrv
    assert float(signal.input_of_percent(100.0)) == signal.urv


@given(signals(), st.lists(st.floats(-20, 120), min_size=1, max_size=8))
def test_an_array_gives_what_its_elements_give(signal: Signal, percents: list[float]) -> None:
    inputs = np.asarray(signal.input_of_percent(percents))
    currents = signal.ideal_current(inputs)
    assert list(currents) == [float(signal.ideal_current(p)) for p in inputs]
    slopes = signal.slope(inputs)
    assert list(slopes) == [float(signal.slope(p)) for p in inputs]


@given(signals(), st.floats(6.0, 95.0))
def test_the_slope_is_the_derivative(signal: Signal, percent: float) -> None:
    step = 1e-4 * signal.span
    here = float(signal.input_of_percent(percent))
    assume(abs(signal.lrv) < 10 * abs(signal.span))
    measured = (signal.ideal_current(here + step) - signal.ideal_current(here - step)) / (2 * step)
    assert float(signal.slope(here)) == pytest.approx(float(measured), rel=1e-4)


def test_transfers_may_differ_within_one_array() -> None:
    mixed = s.ideal_current([25.0, 25.0, 75.0], [0, 0, 100], [100, 100, 0], [False, True, False])
    assert list(mixed) == [8.0, 12.0, 8.0]


def test_the_input_referred_error_is_exact_and_undefined_where_the_output_says_nothing() -> None:
    reverse = Signal(100, 0)
    assert float(reverse.input_error(50.0, 12.16)) == pytest.approx(-1.0)
    flow = Signal(0, 125, Transfer.SQUARE_ROOT)
    assert float(flow.input_error(30.0, flow.ideal_current(31.0))) == pytest.approx(1.0)
    assert np.isnan(flow.input_error([0.0, 1.0, 125.0], [4.0, 3.9, 20.5])).all()


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        ((5.0, 5.0), "two different range-values"),
        ((0.0, float("inf")), "must both be numbers"),
        ((0.0, 1.0, Transfer.SQUARE_ROOT, 100.0), "low cut is 100 %"),
    ],
)
def test_an_impossible_range_is_refused_in_words(arguments: tuple[float, ...], words: str) -> None:
    with pytest.raises(ValueError, match=words):
        Signal(*arguments)  # type: ignore[arg-type]
