"""The rate of drift: generalised least squares, REML, interval, prediction, and when the limit is met."""

from __future__ import annotations

from datetime import date, timedelta

import numpy as np
import pytest
from hypothesis import example, given, settings
from hypothesis import strategies as st
from scipy import special
from statsmodels.api import GLS, OLS

from calibration.metrology.drift import (
    DriftRate,
    Visit,
    cumulative_curve,
    error_covariance,
    estimate_rate,
    pair_tests,
    rates_from_differences,
)
from calibration.metrology.linefit import fit_line

SERIES = st.lists(st.tuples(st.floats(-1, 1), st.floats(0.3, 3.0)), min_size=4, max_size=10)


def history(values: list[float], years: list[float], u: float | None = None, left: float | None = None) -> DriftRate:
    """Rate of a transmitter found at these values; left at `left` each time, or not adjusted."""
    start, visits, at = date(2015, 1, 1), [], 0.0
    for value, step in zip(values, [0.0, *years], strict=True):
        at += step
        visits.append(
            Visit(
                start + timedelta(round(at * 365.25)),
                {"zero": value},
                None if left is None else {"zero": left},
                u_found=u,
                u_left=u,
            )
        )
    return estimate_rate(pair_tests(visits), "zero")


def covariance(n: int, u: float, adjusted: bool) -> np.ndarray:
    return error_covariance(np.full(n, u * u), np.full(n, u * u), 0.0 if adjusted else u * u)


def reml(q: float, d: np.ndarray, t: np.ndarray, r: np.ndarray) -> float:
    """-2 log restricted likelihood, written out with full matrices."""
    v = q * np.diag(t) + r
    inverse = np.linalg.inv(v)
    information = t @ inverse @ t
    left = d - t * (t @ inverse @ d) / information
    return float(np.linalg.slogdet(v)[1] + np.log(information) + left @ inverse @ left)


@settings(max_examples=60)
@given(SERIES, st.floats(0.01, 1.0), st.booleans())
def test_the_rate_agrees_with_generalised_least_squares(
    series: list[tuple[float, float]], u: float, adjusted: bool
) -> None:
    """Second opinion: statsmodels GLS with the covariance at the q that was found."""
    d, t = np.array(series).T
    r = covariance(len(d), u, adjusted)
    found = rates_from_differences(d, t, r)
    other = GLS(d, t[:, None], sigma=float(found.walk) * np.diag(t) + r).fit()
    assert float(found.rate) == pytest.approx(other.params[0], rel=1e-6, abs=1e-9)
    plain = np.sqrt(other.cov_params(scale=1.0)[0, 0])
    if adjusted:
        assert float(found.se) == pytest.approx(plain, rel=1e-6)
    else:
        assert float(found.se) >= plain * (1 - 1e-9)


@settings(max_examples=60)
@given(SERIES, st.floats(0.01, 1.0), st.booleans())
@example([(0.0, 1.0)] * 3 + [(2e-159, 1.0)], 1.0, False)
def test_no_other_walk_has_a_greater_restricted_likelihood(
    series: list[tuple[float, float]], u: float, adjusted: bool
) -> None:
    """Second opinion: the restricted likelihood with full matrices, over a fine grid of q."""
    d, t = np.array(series).T
    r = covariance(len(d), u, adjusted)
    q = float(rates_from_differences(d, t, r).walk)
    here = reml(q, d, t, r)
    others = [reml(other, d, t, r) for other in np.concatenate([[0.0], np.logspace(-8, 3, 200)])]
    assert here <= min(others) + 1e-6


def test_without_errors_of_the_tests_the_estimates_have_their_closed_form() -> None:
    """Own derivation: u = 0 gives μ = Σd/ΣΔt, q = Σ(d − μΔt)²/Δt/(n − 1), var μ = q/ΣΔt."""
    d, t = np.array([0.1, 0.3, -0.05, 0.2, 0.12]), np.array([1.0, 2.0, 0.5, 1.5, 1.0])
    found = rates_from_differences(d, t, np.zeros((5, 5)))
    mu = d.sum() / t.sum()
    q = ((d - mu * t) ** 2 / t).sum() / 4
    assert float(found.rate) == pytest.approx(mu)
    assert float(found.walk) == pytest.approx(q)
    assert float(found.se) == pytest.approx(np.sqrt(q / t.sum()))


def test_equal_times_without_errors_of_the_tests_are_a_mean_with_its_standard_error() -> None:
    """Second opinion: statsmodels OLS on a constant."""
    d = [0.1, 0.3, -0.05, 0.2, 0.12, 0.0]
    other = OLS(d, np.ones(6)).fit()
    found = rates_from_differences(d, np.ones(6), np.zeros((6, 6)))
    assert float(found.rate) == pytest.approx(other.params[0])
    assert float(found.se) == pytest.approx(other.bse[0])


def test_many_series_at_once_equal_each_alone() -> None:
    chance = np.random.default_rng(2)
    d, t = chance.normal(0, 0.2, (7, 6)), chance.uniform(0.5, 2, (7, 6))
    r = np.stack([covariance(6, u, adjusted=bool(k % 2)) for k, u in enumerate(chance.uniform(0.0, 0.3, 7))])
    together = rates_from_differences(d, t, r)
    for k in range(7):
        alone = rates_from_differences(d[k], t[k], r[k])
        assert together.rate[k] == pytest.approx(float(alone.rate))
        assert together.se[k] == pytest.approx(float(alone.se))
        assert together.walk[k] == pytest.approx(float(alone.walk))


@pytest.mark.parametrize(
    ("n", "walk", "u", "adjusted", "most"),
    [
        (4, 1.0, 0.0, True, 0.97),
        (8, 1.0, 0.0, False, 0.97),
        (8, 1.0, 0.3, True, 0.97),
        (8, 1.0, 0.3, False, 0.97),
        (12, 1.0, 1.0, True, 0.97),
        (12, 1.0, 1.0, False, 0.97),
        (20, 1.0, 0.3, False, 0.97),
        (20, 1.0, 1.0, False, 0.97),
        # Where the errors of the tests outweigh the walk, n − 1 degrees of freedom are too few, it covers more.
        (8, 0.1, 1.0, True, 1.0),
        (8, 0.1, 1.0, False, 1.0),
        (12, 0.0, 1.0, False, 1.0),
    ],
)
def test_the_95_percent_interval_and_band_cover_95_percent(
    n: int, walk: float, u: float, adjusted: bool, most: float
) -> None:
    """By simulation, seeded: 4000 histories; the standard error of a coverage near 95 % is 0.35 %."""
    chance = np.random.default_rng(20260309)
    runs, mu, ahead = 4000, 0.1, 1.5
    t = chance.uniform(0.5, 2.0, n)
    found = chance.normal(0, u, (runs, n + 1))
    left = chance.normal(0, u, (runs, n + 1)) if adjusted else found
    steps = mu * t + chance.normal(0, 1, (runs, n)) * np.sqrt(walk * t)
    d = steps + found[:, 1:] - left[:, :-1]
    result = rates_from_differences(d, t, covariance(n, u, adjusted))
    factor = special.stdtrit(n - 1, 0.975)
    covered = np.mean(np.abs(result.rate - mu) <= factor * result.se)
    assert 0.93 <= covered <= most

    following = mu * ahead + chance.normal(0, np.sqrt(walk * ahead), runs) + chance.normal(0, u, runs) - left[:, -1]
    half = factor * np.sqrt(result.walk * ahead + 2 * u * u + (ahead * result.se) ** 2)
    assert 0.93 <= np.mean(np.abs(following - result.rate * ahead) <= half) <= max(most, 0.985)


def test_the_rate_covers_its_95_percent_where_a_line_through_the_cumulative_curve_covers_half() -> None:
    """Why the curve is never fitted: 400 walks without a trend, seeded, each read off our own curve and pairs."""
    chance = np.random.default_rng(4)
    runs, covered, covered_by_line = 400, 0, 0
    for _ in range(runs):
        found = np.concatenate([[0.0], np.cumsum(chance.normal(0, 1, 12))])
        visits = [Visit(date(2010 + year, 1, 1), {"zero": value}) for year, value in enumerate(found)]
        pairing = pair_tests(visits)
        rate = estimate_rate(pairing, "zero")
        covered += rate.lower <= 0.0 <= rate.upper
        (curve,) = cumulative_curve(pairing, "zero")
        years = [(day - curve.dates[0]).days / 365.25 for day in curve.dates]
        low, high = fit_line(years, curve.values).slope_interval()
        covered_by_line += low <= 0.0 <= high
    assert 0.92 <= covered / runs <= 0.975
    assert covered_by_line / runs < 0.6


def test_under_four_pairs_there_is_not_enough_data() -> None:
    few = history([0.0, 0.1, 0.2, 0.3], [1.0, 1.0, 1.0])
    assert not few.enough
    assert np.isnan(few.rate)
    assert few.notes[0] == "not enough data: 3 pairs of tests, at least 4 are needed"
    assert np.isnan(few.predict(1.0).upper)
    meeting = few.meets(date(2025, 1, 1), 0.0, -0.5, 0.5)
    assert (meeting.on, meeting.words) == (None, "not enough data")


def test_a_rate_carries_its_interval_and_says_what_it_does_not_know() -> None:
    rate = history([0.0, 0.11, 0.19, 0.32, 0.38, 0.52], [1.0] * 5)
    assert rate.enough
    assert (rate.n, rate.dof) == (5, 4)
    assert rate.t_factor == pytest.approx(2.776, abs=5e-4)
    assert rate.rate == pytest.approx(0.104, abs=1e-3)
    assert (rate.upper + rate.lower) / 2 == pytest.approx(rate.rate)
    assert (rate.upper - rate.lower) / 2 == pytest.approx(rate.t_factor * rate.se)
    assert any("not known and was taken as zero" in note for note in rate.notes)


def test_scatter_within_the_uncertainty_of_the_tests_is_said_to_be_that() -> None:
    rate = history([0.0, 0.01, -0.01, 0.0, 0.01, 0.0], [1.0] * 5, u=0.05, left=0.0)
    assert rate.walk == 0.0
    assert rate.notes == ("the scatter is no larger than the uncertainty of the tests explains",)


def test_differences_that_agree_to_the_last_digit_are_remarked_upon() -> None:
    t = [1.0] * 4
    found = rates_from_differences([0.25] * 4, t, np.zeros((4, 4)))
    assert (float(found.rate), float(found.se), float(found.walk)) == (0.25, 0.0, 0.0)


@pytest.mark.parametrize("unit", [1e-145, 1e-9, 1e9])
def test_no_unit_is_too_small_or_too_large(unit: float) -> None:
    values = np.array([0.0, 0.0, 0.0, 0.0, 2.3])
    plain = rates_from_differences(values, np.ones(5), covariance(5, 0.1, adjusted=False))
    other = rates_from_differences(values * unit, np.ones(5), covariance(5, 0.1 * unit, adjusted=False))
    assert float(other.rate) == pytest.approx(unit * float(plain.rate), rel=1e-6)
    assert float(other.se) == pytest.approx(unit * float(plain.se), rel=1e-6)


def test_the_same_history_in_another_unit_has_the_same_rate_in_it() -> None:
    here = history([0.0, 0.11, 0.19, 0.32, 0.38, 0.5], [1.0, 0.7, 1.2, 1.0, 2.0], u=0.02)
    there = history([7 * v for v in (0.0, 0.11, 0.19, 0.32, 0.38, 0.5)], [1.0, 0.7, 1.2, 1.0, 2.0], u=0.14)
    assert there.rate == pytest.approx(7 * here.rate)
    assert there.se == pytest.approx(7 * here.se, rel=1e-6)
    assert there.walk == pytest.approx(49 * here.walk, rel=1e-5)


def test_the_prediction_has_its_stated_width() -> None:
    rate = history([0.0, 0.11, 0.19, 0.32, 0.38, 0.52], [1.0] * 5, u=0.01)
    ahead = rate.predict([0.0, 2.0], start_value=0.1, u_found=0.01, u_left=0.02)
    assert ahead.centre == pytest.approx([0.1, 0.1 + 2 * rate.rate])
    variance = np.array([0.0, 2.0]) * rate.walk + 0.0005 + (np.array([0.0, 2.0]) * rate.se) ** 2
    assert ahead.half_width == pytest.approx(rate.t_factor * np.sqrt(variance))
    assert ahead.upper - ahead.lower == pytest.approx(2 * ahead.half_width)


@settings(max_examples=60)
@given(
    st.floats(-0.3, 0.3),
    st.floats(-0.4, 0.4),
    st.floats(0.0, 0.05),
    st.lists(st.floats(-0.1, 0.1), min_size=5, max_size=8),
)
def test_the_band_meets_the_limit_on_the_day_named_and_not_before(
    slope: float, start: float, u: float, scatter: list[float]
) -> None:
    values = [slope * k + s for k, s in enumerate([0.0, *scatter])]
    rate = history(values, [1.0] * len(scatter))
    first = date(2026, 1, 1)
    meeting = rate.meets(first, start, -0.5, 0.5, u_found=u, u_left=u)
    day = 1 / 365.25

    def outside(t: float) -> bool:
        band = rate.predict(t, start_value=start, u_found=u, u_left=u)
        return bool(band.upper > 0.5 or band.lower < -0.5)

    if meeting.on is None:
        assert not any(outside(t) for t in np.linspace(0, 99, 300))
    else:
        days = (meeting.on - first).days
        assert outside((days + 1.001) * day)
        if days > 0:
            assert not any(outside(t) for t in np.linspace(0, (days - 0.001) * day, 50))
        assert meeting.words.endswith((meeting.on.isoformat(), "from the start"))


def test_a_band_that_stays_inside_names_no_day() -> None:
    steady = history([0.0] * 6, [1.0] * 5)
    meeting = steady.meets(date(2026, 1, 1), 0.0, -0.5, 0.5)
    assert meeting.on is None
    assert "more than 100 years" in meeting.words


def test_neighbours_share_the_test_between_them() -> None:
    """Own arithmetic: unadjusted tests of equal u have covariance −u² between neighbouring differences."""
    shared = error_covariance([0.04, 0.04, 0.04], [0.04, 0.04, 0.04], 0.04)
    assert shared == pytest.approx(np.array([[0.08, -0.04, 0], [-0.04, 0.08, -0.04], [0, -0.04, 0.08]]))


def test_what_cannot_be_estimated_is_refused_in_words() -> None:
    with pytest.raises(ValueError, match="at least two differences"):
        rates_from_differences([0.1], [1.0], [[0.0]])
    with pytest.raises(ValueError, match="above zero"):
        rates_from_differences([0.1, 0.2], [1.0, 0.0], np.zeros((2, 2)))
