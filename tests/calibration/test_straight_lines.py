"""Straight-line fits against certified and published results."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from statsmodels.api import WLS, add_constant

from calibration.metrology.linefit import fit_line, minimax_line, minimax_line_through_first
from tests.published import read_json

CERTIFIED = 1e-8


def test_norris_has_its_certified_coefficients() -> None:
    """Source: NIST StRD, Linear Regression, Norris; relative tolerance 1e-8 in double precision."""
    norris = read_json("nist_strd_norris.json")
    x, y = np.array(norris["data"]).T
    fit, certified = fit_line(x, y), norris["certified"]
    assert fit.intercept == pytest.approx(certified["B0"], rel=CERTIFIED)
    assert fit.slope == pytest.approx(certified["B1"], rel=CERTIFIED)
    assert fit.intercept_se == pytest.approx(certified["B0_sd"], rel=CERTIFIED)
    assert fit.slope_se == pytest.approx(certified["B1_sd"], rel=CERTIFIED)
    assert fit.residual_sd == pytest.approx(certified["resid_sd"], rel=CERTIFIED)
    assert fit.r_squared == pytest.approx(certified["R2"], rel=CERTIFIED)
    assert (fit.residuals**2).sum() == pytest.approx(certified["SS_res"], rel=CERTIFIED)
    assert fit.dof == certified["df_res"]


@pytest.mark.parametrize("name", ["NoInt1", "NoInt2"])
def test_a_line_through_the_origin_has_its_certified_slope(name: str) -> None:
    """Source: NIST StRD, Linear Regression, NoInt1 and NoInt2."""
    data = read_json("nist_strd_noint.json")[name]
    fit, certified = fit_line(data["x"], data["y"], through_origin=True), data["certified"]
    assert fit.intercept == 0.0
    assert fit.slope == pytest.approx(certified["B1"], rel=CERTIFIED)
    assert fit.slope_se == pytest.approx(certified["B1_sd"], rel=CERTIFIED)
    assert fit.residual_sd == pytest.approx(certified["resid_sd"], rel=CERTIFIED)
    assert fit.r_squared == pytest.approx(certified["R2"], rel=CERTIFIED)
    assert fit.dof == certified["df_res"]


def test_the_thermometer_of_the_gum_has_its_published_line_and_prediction() -> None:
    """Source: JCGM 100:2008, Annex H.3; full values recomputed, printed values within half a unit of the
    last digit.
    """
    gum = read_json("gum_h3_thermometer.json")
    fit = fit_line(gum["t_C"], gum["correction_C"], origin=gum["reference_t0_C"])
    expected = gum["expected"]
    assert fit.intercept == pytest.approx(expected["intercept_C"]["full"], abs=1e-12)
    assert fit.intercept_se == pytest.approx(expected["u_intercept_C"]["full"], abs=1e-12)
    assert fit.slope == pytest.approx(expected["slope"]["full"], abs=1e-12)
    assert fit.slope_se == pytest.approx(expected["u_slope"]["full"], abs=1e-12)
    assert fit.correlation == pytest.approx(expected["correlation"]["full"], abs=1e-10)
    assert fit.residual_sd == pytest.approx(expected["s_C"]["full"], abs=1e-12)
    assert fit.dof == expected["dof"]
    assert float(fit.predict(30.0)) == pytest.approx(expected["prediction_30C"]["value"], abs=5e-5)
    assert float(fit.predict_se(30.0)) == pytest.approx(expected["u_prediction_30C"]["value"], abs=5e-5)


def test_intervals_use_student_and_a_new_reading_adds_its_own_scatter() -> None:
    """Source: Student's t, 95 %, 9 degrees of freedom: 2.262 (any table of the distribution)."""
    gum = read_json("gum_h3_thermometer.json")
    fit = fit_line(gum["t_C"], gum["correction_C"], origin=20.0)
    low, high = fit.prediction_interval(30.0)
    assert (high - low) / 2 / fit.predict_se(30.0) == pytest.approx(2.262, abs=5e-4)
    assert fit.slope_interval()[1] - fit.slope == pytest.approx(2.262 * fit.slope_se, rel=3e-4)
    wide = fit.predict_se(30.0, of_new_reading=True)
    assert wide == pytest.approx(np.hypot(fit.predict_se(30.0), fit.residual_sd))


@settings(max_examples=40)
@given(
    st.lists(st.tuples(st.floats(-100, 100), st.floats(-10, 10), st.floats(0.1, 10)), min_size=3, max_size=12).filter(
        lambda rows: np.ptp([row[0] for row in rows]) > 1.0
    )
)
def test_weighted_fits_agree_with_statsmodels(rows: list[tuple[float, float, float]]) -> None:
    """Second opinion: statsmodels WLS."""
    x, y, w = np.array(rows).T
    fit, other = fit_line(x, y, w), WLS(y, add_constant(x, has_constant="add"), w).fit()
    assert (fit.intercept, fit.slope) == pytest.approx(tuple(other.params), rel=1e-6, abs=1e-6)
    np.testing.assert_allclose(fit.covariance, other.cov_params(), rtol=1e-5, atol=1e-9)


def test_known_uncertainties_are_not_scaled_by_the_residuals() -> None:
    """Own arithmetic: three points at −1, 0, 1 of u = 2 have u(slope) = 2/√2 and u(mean) = 2/√3."""
    fit = fit_line([-1, 0, 1], [0.0, 0.1, 0.0], [0.25] * 3, absolute_weights=True)
    assert fit.slope_se == pytest.approx(2 / np.sqrt(2))
    assert fit.intercept_se == pytest.approx(2 / np.sqrt(3))
    assert fit.student_factor() == pytest.approx(1.95996, abs=1e-5)


def test_the_minimax_line_halves_the_bow_of_three_points() -> None:
    """Own arithmetic: the best line runs half-way between chord and bow."""
    line = minimax_line([1, 0, 0.5], [0.0, 0.0, 1.0])
    assert (line.intercept, line.slope, line.deviation) == pytest.approx((0.5, 0.0, 0.5))
    through = minimax_line_through_first([0, 1, 2], [0.0, 1.0, 0.0])
    assert (through.slope, through.deviation) == pytest.approx((1 / 3, 2 / 3))
    assert minimax_line([0, 2], [1.0, 3.0]).deviation == 0.0
    assert minimax_line_through_first([0, 2], [1.0, 3.0]).slope == 1.0


@given(
    st.lists(st.floats(-5, 5), min_size=3, max_size=9),
    st.floats(-0.5, 0.5),
    st.floats(-0.5, 0.5),
)
def test_no_other_line_deviates_less_than_the_minimax_line(y: list[float], lift: float, tilt: float) -> None:
    x = np.arange(len(y), dtype=float)
    line = minimax_line(x, y)
    assert np.abs(np.array(y) - line.intercept - line.slope * x).max() == pytest.approx(line.deviation, abs=1e-9)
    other = np.abs(np.array(y) - (line.intercept + lift) - (line.slope + tilt) * x).max()
    assert other >= line.deviation - 1e-9
    through = minimax_line_through_first(x, y)
    turned = np.abs(np.array(y) - through.intercept - (through.slope + tilt) * x).max()
    assert turned >= through.deviation - 1e-9


@pytest.mark.parametrize(
    ("x", "y", "words"),
    [
        ([1.0], [1.0], "at least 2 points"),
        ([1.0, 1.0], [1.0, 2.0], "one x"),
        ([1.0, 2.0], [1.0, float("nan")], "must be numbers"),
        ([1.0, 2.0], [1.0], "as many x as y"),
    ],
)
def test_points_that_carry_no_line_are_refused_in_words(x: list[float], y: list[float], words: str) -> None:
    with pytest.raises(ValueError, match=words):
        fit_line(x, y)


def test_weights_must_be_positive_and_minimax_points_apart() -> None:
    with pytest.raises(ValueError, match="one positive number"):
        fit_line([1.0, 2.0], [1.0, 2.0], [1.0, 0.0])
    with pytest.raises(ValueError, match="different x"):
        minimax_line([1.0, 1.0], [1.0, 2.0])
