"""Due dates, grace and schedule states."""

from __future__ import annotations

from datetime import date, timedelta

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from calibration.metrology.due import (
    STATES,
    State,
    add_months,
    add_months_array,
    grace_after,
    plan_next,
    plan_next_array,
    state_on,
    states_on,
)

DAYS = st.dates(date(1990, 1, 1), date(2080, 12, 31))
INTERVALS = st.integers(1, 120)


@pytest.mark.parametrize(
    ("anchor", "months", "expected"),
    [
        (date(2025, 1, 31), 1, date(2025, 2, 28)),
        (date(2024, 1, 31), 1, date(2024, 2, 29)),
        (date(2025, 1, 31), 2, date(2025, 3, 31)),
        (date(2024, 2, 29), 12, date(2025, 2, 28)),
        (date(2024, 2, 29), 48, date(2028, 2, 29)),
        (date(2025, 8, 31), 6, date(2026, 2, 28)),
        (date(2025, 12, 15), 1, date(2026, 1, 15)),
        (date(2025, 3, 31), -1, date(2025, 2, 28)),
    ],
)
def test_months_are_counted_on_the_calendar_from_the_anchor(anchor: date, months: int, expected: date) -> None:
    """Ordinary calendar; the last of a short month stands for a day it does not have."""
    assert add_months(anchor, months) == expected


@given(DAYS, st.integers(-240, 240))
def test_a_date_keeps_its_day_or_takes_the_last_of_the_month(anchor: date, months: int) -> None:
    moved = add_months(anchor, months)
    assert (moved.year * 12 + moved.month) - (anchor.year * 12 + anchor.month) == months
    is_last = (moved + timedelta(1)).day == 1
    assert moved.day == anchor.day or (is_last and moved.day < anchor.day)


@given(st.lists(st.tuples(DAYS, st.integers(-240, 240)), min_size=1, max_size=20))
def test_months_over_an_array_equal_single_dates(rows: list[tuple[date, int]]) -> None:
    anchors, months = zip(*rows, strict=True)
    moved = add_months_array(np.array(anchors, dtype="datetime64[D]"), months)
    assert moved.tolist() == [add_months(a, m) for a, m in rows]


@pytest.mark.parametrize(("interval", "with_grace"), [(18, 22.5), (24, 30.0), (12, 15.0)])
def test_a_quarter_of_the_interval_is_the_usual_grace(interval: int, with_grace: float) -> None:
    """Source: NRC Generic Letter 91-04 practice: 18 → 22.5 and 24 → 30 months; to within the rounding down
    of days.
    """
    last = date(2023, 3, 1)
    plan = plan_next(last, interval)
    assert plan.limit is not None
    months = (plan.limit - last).days / 365.25 * 12
    assert months == pytest.approx(with_grace, abs=0.1)


def test_grace_is_whole_days_rounded_down() -> None:
    assert grace_after(date(2025, 1, 1), date(2026, 1, 1)) == 91
    assert grace_after(date(2024, 1, 1), date(2025, 1, 1)) == 91
    assert grace_after(date(2025, 1, 1), date(2025, 4, 11), 29.0) == 29
    assert grace_after(date(2025, 1, 1), date(2026, 1, 1), 0.0) == 0


def test_an_early_test_on_a_fixed_calendar_does_not_stretch_the_interval_by_grace() -> None:
    """Due 1 March; tested 6 weeks early: due a year later, but the limit counts from the test, not from the
    calendar.
    """
    plan = plan_next(date(2025, 1, 18), 12, calendar_anchor=date(2020, 3, 1), lead_days=42)
    assert plan.due == date(2026, 3, 1)
    assert plan.limit == date(2026, 1, 18) + timedelta(91)


def test_a_test_before_the_window_does_not_count_for_the_coming_date() -> None:
    plan = plan_next(date(2025, 1, 17), 12, calendar_anchor=date(2020, 3, 1), lead_days=42)
    assert plan.due == date(2025, 3, 1)


def test_a_test_in_grace_does_not_move_a_fixed_calendar() -> None:
    plan = plan_next(date(2025, 5, 20), 12, calendar_anchor=date(2020, 3, 1))
    assert plan.due == date(2026, 3, 1)


def test_due_is_never_later_than_the_limit() -> None:
    plan = plan_next(date(2025, 1, 20), 12, calendar_anchor=date(2020, 3, 1), grace_days=0)
    assert plan.limit == date(2026, 1, 20)
    assert plan.due == plan.limit


def test_a_window_longer_than_the_interval_skips_no_date() -> None:
    plan = plan_next(date(2025, 3, 1), 1, calendar_anchor=date(2025, 1, 1), lead_days=42)
    assert plan.due == date(2025, 4, 1)


def test_a_calendar_that_begins_later_asks_for_its_first_date_but_not_beyond_the_interval() -> None:
    plan = plan_next(date(2025, 1, 1), 12, calendar_anchor=date(2025, 9, 1), grace_days=10)
    assert (plan.due, plan.limit) == (date(2025, 9, 1), date(2025, 9, 11))
    late = plan_next(date(2025, 1, 1), 12, calendar_anchor=date(2029, 9, 1), grace_days=10)
    assert (late.due, late.limit) == (date(2026, 1, 1), date(2026, 1, 11))
    near = plan_next(date(2025, 1, 1), 12, calendar_anchor=date(2026, 1, 5), grace_days=10)
    assert (near.due, near.limit) == (date(2026, 1, 1), date(2026, 1, 11))


def test_grace_is_never_merged_with_the_due_date() -> None:
    """Tested 41 days early with 10 days of grace: the next date of the calendar lies beyond the limit."""
    plan = plan_next(date(2025, 1, 19), 12, calendar_anchor=date(2020, 3, 1), grace_days=10, lead_days=42)
    assert (plan.due, plan.limit) == (date(2026, 1, 19), date(2026, 1, 29))


def test_the_window_shown_is_the_one_that_counts() -> None:
    """Three months are 90 days before 1 April 2026; a window of 60 days opens after half of them."""
    calendar = {"calendar_anchor": date(2026, 1, 1), "lead_days": 60}
    plan = plan_next(date(2026, 1, 1), 3, **calendar)  # type: ignore[arg-type]
    assert (plan.due, plan.opens) == (date(2026, 4, 1), date(2026, 2, 15))
    assert plan_next(date(2026, 2, 14), 3, **calendar).due == date(2026, 4, 1)  # type: ignore[arg-type]
    assert plan_next(date(2026, 2, 15), 3, **calendar).due > date(2026, 4, 1)  # type: ignore[arg-type, operator]


@given(DAYS, INTERVALS, st.integers(0, 200), DAYS)
def test_a_test_counts_for_its_date_from_the_day_the_window_opens(
    last: date, interval: int, lead: int, anchor: date
) -> None:
    plan = plan_next(last, interval, calendar_anchor=anchor, lead_days=lead)
    assert plan.due is not None and plan.opens is not None
    early, in_time = (
        plan_next(day, interval, calendar_anchor=anchor, lead_days=lead).due
        for day in (plan.opens - timedelta(1), plan.opens)
    )
    assert early is not None and in_time is not None
    months = (plan.due.year - anchor.year) * 12 + plan.due.month - anchor.month
    if plan.due >= anchor and months % interval == 0 and add_months(anchor, months) == plan.due:
        assert in_time > plan.due
        assert plan.opens - timedelta(1) < last or early == plan.due


def test_a_monthly_test_is_not_due_again_on_the_day_after_it() -> None:
    plan = plan_next(date(2025, 3, 1), 1, lead_days=42)
    assert plan.opens == date(2025, 3, 17)
    assert plan.state(date(2025, 3, 2)) is State.NOT_DUE


def test_a_transmitter_never_tested_is_due_on_the_day_it_was_fitted() -> None:
    plan = plan_next(None, 12, fitted_on=date(2025, 5, 5))
    assert (plan.due, plan.opens, plan.limit) == (date(2025, 5, 5), date(2025, 5, 5), None)
    assert plan.state(date(2035, 1, 1)) is State.NEVER_TESTED


@given(DAYS, INTERVALS, st.integers(0, 60), st.one_of(st.none(), st.integers(0, 400)), st.one_of(st.none(), DAYS))
def test_dates_stand_in_order_and_due_is_a_whole_number_of_intervals_from_its_anchor(
    last: date, interval: int, lead: int, grace: int | None, anchor: date | None
) -> None:
    plan = plan_next(last, interval, calendar_anchor=anchor, grace_days=grace, lead_days=lead)
    assert plan.opens is not None and plan.due is not None and plan.limit is not None
    assert plan.opens <= plan.due <= plan.limit
    after = add_months(last, interval)
    assert plan.limit <= after + timedelta(grace_after(last, after) if grace is None else grace)
    assert last < plan.opens
    if anchor is None or plan.due == after:
        assert plan.due == after
    else:
        months = (plan.due.year - anchor.year) * 12 + plan.due.month - anchor.month
        assert months % interval == 0
        assert plan.due == add_months(anchor, months) >= anchor


@given(
    DAYS,
    INTERVALS,
    st.integers(0, 200),
    st.integers(0, 3650),
    st.lists(st.floats(0, 1), min_size=2, max_size=8),
)
def test_on_a_fixed_calendar_grace_never_compounds(
    first: date, interval: int, lead: int, before: int, shares: list[float]
) -> None:
    """Test after test, each on any day from the opening of its window to its limit, a quarter of the interval late at
    most: the k-th date is at most k intervals after the first, and no two tests are further apart than one interval
    and its grace.
    """
    anchor = first - timedelta(before)
    last, plan = first, plan_next(first, interval, calendar_anchor=anchor, lead_days=lead)
    assert plan.due is not None
    n = next(n for n in range(10_000) if add_months(anchor, n * interval) >= plan.due)
    for k, share in enumerate(shares, start=1):
        assert plan.opens is not None and plan.limit is not None
        tested = max(plan.opens + share * (plan.limit - plan.opens), last + timedelta(1))
        after = add_months(last, interval)
        assert tested <= after + timedelta(grace_after(last, after))
        last, plan = tested, plan_next(tested, interval, calendar_anchor=anchor, lead_days=lead)
        assert plan.due is not None
        assert plan.due <= add_months(anchor, (n + k) * interval)


LIMIT, DUE, OPENS = date(2025, 9, 30), date(2025, 6, 30), date(2025, 5, 31)


@pytest.mark.parametrize(
    ("today", "expected"),
    [
        (date(2025, 5, 30), State.NOT_DUE),
        (OPENS, State.DUE),
        (DUE, State.DUE),
        (date(2025, 7, 1), State.IN_GRACE),
        (LIMIT, State.IN_GRACE),
        (date(2025, 10, 1), State.OVERDUE),
    ],
)
def test_a_limit_day_itself_counts_as_the_milder_state(today: date, expected: State) -> None:
    assert state_on(today, due=DUE, limit=LIMIT, opens=OPENS, never_tested=False) is expected


@pytest.mark.parametrize(
    ("circumstances", "expected"),
    [
        (
            {"in_service": False, "never_tested": True, "deferred_until": date(2030, 1, 1)},
            State.NOT_IN_SERVICE,
        ),
        ({"never_tested": True, "deferred_until": date(2030, 1, 1)}, State.NEVER_TESTED),
        ({"never_tested": False, "deferred_until": date(2026, 1, 1)}, State.DEFERRED),
        ({"never_tested": False, "deferred_until": date(2025, 12, 31)}, State.OVERDUE),
    ],
)
def test_the_first_state_that_applies_is_taken(circumstances: dict[str, object], expected: State) -> None:
    found = state_on(date(2026, 1, 1), due=DUE, limit=LIMIT, opens=OPENS, **circumstances)  # type: ignore[arg-type]
    assert found is expected


def test_a_tag_without_dates_is_not_due() -> None:
    assert state_on(date(2026, 1, 1), due=None, limit=None, opens=None, never_tested=False) is State.NOT_DUE


ROWS = st.tuples(
    st.one_of(st.none(), DAYS),
    INTERVALS,
    st.one_of(st.none(), DAYS),
    st.integers(0, 60),
    st.booleans(),
    st.one_of(st.none(), DAYS),
    st.one_of(st.none(), DAYS),
)


@given(st.lists(ROWS, min_size=1, max_size=25), DAYS, st.sampled_from([25.0, 10.0, 0.0]))
def test_dates_and_states_of_many_tags_equal_those_of_each(
    rows: list[tuple[date | None, int, date | None, int, bool, date | None, date | None]],
    today: date,
    percent: float,
) -> None:
    last, interval, anchor, lead, service, deferred, fitted = zip(*rows, strict=True)

    def days(values: tuple[date | None, ...]) -> np.ndarray:
        return np.array([np.datetime64("NaT") if v is None else np.datetime64(v) for v in values], "datetime64[D]")

    plans = plan_next_array(
        days(last),
        interval,
        calendar_anchor=days(anchor),
        grace_percent=percent,
        lead_days=lead,
        fitted_on=days(fitted),
    )
    codes = states_on(
        today,
        due=plans.due,
        limit=plans.limit,
        opens=plans.opens,
        never_tested=plans.never_tested,
        in_service=service,
        deferred_until=days(deferred),
    )
    for index, row in enumerate(rows):
        one = plan_next(
            row[0], row[1], calendar_anchor=row[2], grace_percent=percent, lead_days=row[3], fitted_on=row[6]
        )
        assert plans.due[index].item() == one.due
        assert plans.limit[index].item() == one.limit
        assert plans.opens[index].item() == one.opens
        assert STATES[codes[index]] is one.state(today, in_service=row[4], deferred_until=row[5])


def test_grace_in_days_counts_the_same_for_many_tags() -> None:
    plans = plan_next_array(np.array(["2025-01-31"], "datetime64[D]"), [1, 12], grace_days=7)
    assert plans.limit.tolist() == [date(2025, 3, 7), date(2026, 2, 7)]


@pytest.mark.parametrize(
    ("settings", "words"),
    [
        ({"interval_months": 0}, "at least one month"),
        ({"interval_months": 1, "grace_days": -1}, "cannot be negative"),
        ({"interval_months": 1, "lead_days": -1}, "cannot open after it"),
    ],
)
def test_impossible_settings_are_refused_in_words(settings: dict[str, int], words: str) -> None:
    with pytest.raises(ValueError, match=words):
        plan_next(date(2025, 1, 1), **settings)  # type: ignore[arg-type]
    with pytest.raises(ValueError, match="must be at least 1"):
        plan_next_array(np.array(["2025-01-01"], "datetime64[D]"), [0])
