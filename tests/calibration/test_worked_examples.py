"""Five-point tests worked in open textbooks and law, computed again from their published readings."""

from __future__ import annotations

import numpy as np
import pytest

from calibration.metrology.conformity import judge_run
from calibration.metrology.errors import evaluate_run
from calibration.metrology.pointlist import STANDARD, UP_ONLY, PointList
from calibration.metrology.signal import Signal, Transfer
from calibration.metrology.tolerance import Tolerance
from calibration.metrology.verdicts import Verdict
from tests.published import read_csv, read_json

# Half of the last printed digit; a value that was rounded up exactly at the half lies on it.
PRINTED = 5.001e-4


def test_the_up_and_down_test_gives_the_printed_errors_and_hysteresis() -> None:
    """Source: Lessons In Industrial Instrumentation, calibration chapter, 0-200 psi, up and down."""
    example = read_json("liii_updown_calibration.json")
    readings = example["up"] + example["down"]
    run = evaluate_run(
        [r["psi"] for r in readings],
        [r["mA"] for r in readings],
        Signal(0, 200, unit="psi"),
        points=STANDARD,
    )
    assert list(run.error) == pytest.approx([r["err_pct"] for r in readings], abs=PRINTED)
    assert run.hysteresis == pytest.approx(example["max_hysteresis_pct"], abs=PRINTED)
    (level,) = (one for one in run.levels if one.point == run.hysteresis_at)
    assert run.signal.input_of_percent(level.point) == example["at_psi"]
    for inputs, gap in example["computed_hysteresis_pct"].items():
        (level,) = (one for one in run.levels if run.signal.input_of_percent(one.point) == float(inputs))
        assert level.hysteresis == pytest.approx(gap, abs=1e-12)


def test_the_up_readings_alone_have_the_figures_of_the_definitions() -> None:
    """Source: own arithmetic on the same published readings, `linearity_own_arithmetic.json`."""
    example = read_json("liii_updown_calibration.json")
    figures = read_json("linearity_own_arithmetic.json")["results"]
    run = evaluate_run(None, [r["mA"] for r in example["up"]], Signal(*example["range_psi"]), points=UP_ONLY)
    assert run.zero_error == pytest.approx(figures["zero_error"])
    assert run.span_error == pytest.approx(figures["span_error"])
    assert run.inaccuracy == pytest.approx(figures["inaccuracy_up"])
    assert run.nonlinearity_terminal == pytest.approx(figures["terminal_nonlinearity"])
    assert run.nonlinearity_independent == pytest.approx(figures["independent_nonlinearity"])
    assert run.nonlinearity_zero_based == pytest.approx(figures["zero_based_nonlinearity"])
    assert run.zero_based_line == pytest.approx((run.zero_error, (figures["zero_based_slope"] - 1.0) * 100.0), abs=1e-9)
    line = figures["independent_line"]
    assert run.independent_line[0] == pytest.approx(line["a"])
    assert run.independent_line[1] == pytest.approx((line["b"] - 1.0) * 100.0)


def test_zero_and_span_errors_and_fitted_shifts_are_different_numbers() -> None:
    """Source: own arithmetic on the same readings: errors −0.0625 and +0.0625, fitted shifts −0.100 and
    +0.075.
    """
    example = read_json("liii_updown_calibration.json")
    run = evaluate_run(None, [r["mA"] for r in example["up"]], Signal(0, 200), points=UP_ONLY)
    assert (run.zero_error, run.span_error) == pytest.approx((-0.0625, 0.0625))
    assert (run.fit.zero_shift, run.fit.span_shift) == pytest.approx((-0.100, 0.075))


def test_an_interface_transmitter_with_its_range_below_zero_is_tested_at_the_printed_pressures() -> None:
    """Source: Lessons In Industrial Instrumentation, level chapter, interface table: five points, −16.2 to
    −4.68 inWC.
    """
    cases = {c["name"]: c["expected"] for c in read_json("liii_scaling_and_level.json")["cases"]}
    signal = Signal(cases["interface LRV inWC"], cases["interface URV inWC"], unit="inH2O")
    assert signal.span == pytest.approx(cases["interface span inWC"])
    printed = [cases[f"interface table {percent} %"] for percent in (0, 25, 50, 75, 100)]
    assert list(UP_ONLY.inputs(signal)) == pytest.approx(printed)
    run = evaluate_run(printed, [4.0, 8.0, 12.0, 16.0, 20.0], signal, points=UP_ONLY)
    assert np.abs(run.error).max() < 1e-9
    assert judge_run(run, Tolerance.of_span(0.01)).verdict is Verdict.PASS


def test_a_wet_leg_transmitter_is_tested_at_the_printed_pressures() -> None:
    """Source: Lessons In Industrial Instrumentation, level chapter: gasoline of 41.0 lb/ft³ from 0 to 10 ft, a leg of
    11 ft of water (62.4 lb/ft³); five pressures, printed to 0.01 psi.

    Range and five points are the printed ones, the inputs applied are worked out from the printed densities: between
    them lies nothing but the rounding of the print, 0.01 psi on each side.
    """
    cases = [c for c in read_json("liii_scaling_and_level.json")["cases"] if c["name"].startswith("wet leg")]
    printed = [c["expected"] for c in cases]
    signal = Signal(printed[0], printed[-1], unit="psi")
    applied = [(41.0 * level - 62.4 * 11.0) / 144.0 for level in (0.0, 2.5, 5.0, 7.5, 10.0)]
    run = evaluate_run(applied, [4.0, 8.0, 12.0, 16.0, 20.0], signal, points=UP_ONLY)
    assert list(UP_ONLY.inputs(signal)) == pytest.approx(printed, abs=0.01)
    assert run.inaccuracy <= 100.0 * 0.01 / signal.span
    assert run.input_error == pytest.approx(np.zeros(5), abs=0.01)


def test_a_check_at_one_point_has_the_printed_error() -> None:
    """Source: Lessons In Industrial Instrumentation, calibration chapter: −79 °C indicated where −78.112 °C is; error
    −0.888 °C.
    """
    (case,) = (c for c in read_json("liii_scaling_and_level.json")["cases"] if c["name"].startswith("single-point"))
    signal = Signal(-100.0, 50.0, unit="°C")
    run = evaluate_run([-78.112], [float(signal.ideal_current(-79.0))], signal)
    assert run.input_error[0] == pytest.approx(case["expected"], abs=case["tol"])
    assert run.error[0] == pytest.approx(case["expected"] / 150.0 * 100.0, abs=case["tol"])


def test_fitted_shifts_and_their_standard_errors_are_the_printed_ones() -> None:
    """Source: NIST/SEMATECH e-Handbook of Statistical Methods, 2.3.6.7.3: 40 readings of ten references, each read four
    times; intercept, slope, their standard errors and the scatter as printed.

    They are laid on a range of 0 to 12 units, so that one unit is 100/12 % of span.
    """
    printed = read_json("nist_ehandbook_calibration_line.json")["calibrationline"]["expected"]
    rows = read_csv("nist_calibrationline_mpc3673.csv")
    applied, read = (np.array([float(row[name]) for row in rows]) for name in ("reference", "measured"))
    signal = Signal(0.0, 12.0)
    run = evaluate_run(applied, np.asarray(signal.ideal_current(read)), signal)
    per_unit = 100.0 / 12.0
    assert run.fit.readings == 40 and run.fit.dof == printed["dof"]
    assert run.fit.zero_shift == pytest.approx(printed["a"] * per_unit, rel=1e-6)
    assert run.fit.span_shift == pytest.approx((printed["b"] - 1.0) * 100.0, rel=1e-5)
    assert run.fit.zero_se == pytest.approx(printed["se_a"] * per_unit, rel=1e-6)
    assert run.fit.span_se == pytest.approx(printed["se_b"] * 100.0, rel=1e-5)
    assert run.fit.residual_sd == pytest.approx(printed["s"] * per_unit, abs=5.001e-6 * per_unit)


def test_five_points_of_a_flow_transmitter_read_as_printed() -> None:
    """Source: Lessons In Industrial Instrumentation, flow chapter: 0-150 inWC, square root, currents to 0.01
    mA.
    """
    table = read_json("liii_flow_examples.json")["sqrt_4_20"]
    inputs, _, currents = zip(*table["rows"], strict=True)
    lrv, urv = table["range_inWC"]
    signal = Signal(lrv, urv, Transfer.SQUARE_ROOT, unit="inH2O")
    run = evaluate_run(inputs, currents, signal, points=PointList((0, 25, 50, 75, 100)))
    assert np.abs(run.error).max() <= 0.005 / 16 * 100
    assert judge_run(run, Tolerance.of_span(0.05)).verdict is Verdict.PASS


def test_a_sensor_and_an_output_fault_are_told_apart_as_printed() -> None:
    """Source: Lessons In Industrial Instrumentation, calibration chapter: digital value 24.781 (11.93 mA) at
    25.00 inWC.
    """
    cases = {c["name"]: c["expected"] for c in read_json("liii_scaling_and_level.json")["cases"]}
    signal = Signal(0, 50, unit="inH2O")
    sensed = evaluate_run([25.0], [cases["case A: PV 24.781 inWC implies AO mA"]], signal, points=[50.0])
    assert sensed.input_error[0] == pytest.approx(24.781 - 25.0, abs=0.002)


def test_three_cycles_have_the_hysteresis_and_repeatability_of_the_law() -> None:
    """Source: 43 CFR 3175.135: largest up-down difference at an input; largest among three values one way.

    The readings are made up, with one known spread each way and one known gap; the definitions are the law's.
    """
    definitions = read_json("cfr_3175_transducer_test.json")["definitions"]
    assert "ascending" in definitions["repeatability"]
    points = PointList.parse("0 50 100 50 0 | 0 50 100 50 0 | 0 50 100 50 0")
    signal = Signal(0, 100)
    currents = np.asarray(signal.ideal_current(points.inputs(signal)))
    offsets = np.zeros(15)
    offsets[[1, 6, 11]] = [0.10, 0.16, 0.13]
    offsets[[3, 8, 13]] = [0.30, 0.31, 0.29]
    run = evaluate_run(None, currents + offsets * 0.16, signal, points=points)
    assert run.inaccuracy == pytest.approx(0.31)
    assert run.repeatability == pytest.approx(0.06)
    assert run.hysteresis == pytest.approx(0.30 - 0.13)
    assert run.hysteresis_at == 50.0
    (middle,) = (level for level in run.levels if level.point == 50.0)
    assert (middle.up, middle.down) == pytest.approx((0.13, 0.30))
    assert (middle.spread_up, middle.spread_down) == pytest.approx((0.06, 0.02))
