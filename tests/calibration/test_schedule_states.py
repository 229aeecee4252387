"""The schedule states of a tag, from its real history, on the days where one becomes the next.

Interval arithmetic and the 25 % grace (NRC Generic Letter 91-04 practice) are checked for themselves in
`test_due_dates`; here the dates must come out of fittings, tests, requirements and deferrals as stored.
"""

from __future__ import annotations

import datetime

import pytest

from calibration import reviewing, scheduling
from calibration.metrology.due import State, state_on
from calibration.models import Requirement, ScheduleState, Standing, Test
from calibration.models.standing import schedule_state
from register.auditing import Actor
from register.models import Tag
from tests import cast as people
from tests.calibration.scheduled import OUTSIDE, a_test, day, state_of

ONE_DAY = datetime.timedelta(days=1)


def test_a_tag_with_nothing_fitted_is_not_in_service(cast: people.Cast) -> None:
    tag = people.make_tag(people.make_area(cast.plant))
    scheduling.refresh([tag.pk])
    assert state_of(tag, day("2026-01-01")) == ScheduleState.NOT_IN_SERVICE


def test_a_tag_out_of_service_is_not_in_service_though_it_was_tested(tag: Tag) -> None:
    a_test(tag, day("2025-03-01"))
    tag.out_of_service_on = day("2025-06-01")
    tag.save()
    scheduling.refresh([tag.pk])
    standing = Standing.objects.get(pk=tag.pk)
    assert standing.state(day("2030-01-01")) == ScheduleState.NOT_IN_SERVICE
    assert standing.due_on == day("2026-03-01"), "the date stays to be seen"


def test_a_fitted_tag_is_never_tested_and_due_since_it_was_fitted(tag: Tag) -> None:
    scheduling.refresh([tag.pk])
    standing = Standing.objects.get(pk=tag.pk)
    assert standing.state(day("2030-01-01")) == ScheduleState.NEVER_TESTED
    assert standing.due_on == people.LONG_AGO


@pytest.mark.parametrize(
    ("today", "state"),
    [
        ("2026-01-17", "not due"),
        ("2026-01-18", "due"),  # 42 days before 1 March 2026
        ("2026-03-01", "due"),
        ("2026-03-02", "in grace"),
        ("2026-05-31", "in grace"),  # 91 days, a quarter of 365 rounded down
        ("2026-06-01", "overdue"),
    ],
)
def test_the_last_day_of_a_state_still_has_it(tag: Tag, today: str, state: str) -> None:
    a_test(tag, day("2025-03-01"))
    assert state_of(tag, day(today)) == state


def test_a_transcribed_test_inside_its_limits_counts_as_history(tag: Tag) -> None:
    record = a_test(tag, day("2025-03-01"))
    assert record.test.state == Test.State.TRANSCRIBED
    assert Standing.objects.get(pk=tag.pk).due_on == day("2026-03-01")


def test_a_test_that_failed_and_was_not_put_right_leaves_the_old_date(tag: Tag, cast: people.Cast) -> None:
    a_test(tag, day("2024-03-01"))
    a_test(tag, day("2025-03-01"), found=OUTSIDE, signer=cast.technician)
    standing = Standing.objects.get(pk=tag.pk)
    assert (standing.due_on, standing.last_verdict) == (day("2025-03-01"), "fail")
    assert standing.last_tested_on == day("2025-03-01")


def test_a_test_that_failed_and_was_put_right_moves_the_date(tag: Tag, cast: people.Cast) -> None:
    a_test(tag, day("2025-03-01"), found=OUTSIDE, left=(0.0,) * 9, signer=cast.technician)
    standing = Standing.objects.get(pk=tag.pk)
    assert (standing.due_on, standing.as_found_verdict, standing.last_verdict) == (day("2026-03-01"), "fail", "pass")


def test_a_visit_without_a_test_leaves_the_old_date(tag: Tag) -> None:
    a_test(tag, day("2024-03-01"))
    a_test(tag, day("2025-02-01"), outcome=Test.Outcome.NOT_TESTED, runs=(), answers={"could_not_test": "no outage"})
    standing = Standing.objects.get(pk=tag.pk)
    assert (standing.due_on, standing.last_tested_on) == (day("2025-03-01"), day("2024-03-01"))


def test_a_record_that_was_sent_back_does_not_count(tag: Tag, cast: people.Cast) -> None:
    a_test(tag, day("2024-03-01"))
    record = a_test(tag, day("2025-03-01"), signer=cast.technician)
    Test.objects.filter(pk=record.test_id).update(state=Test.State.SENT_BACK)
    scheduling.refresh([tag.pk])
    assert Standing.objects.get(pk=tag.pk).due_on == day("2025-03-01")


def test_a_record_that_was_sent_back_gives_no_last_verdict(tag: Tag, cast: people.Cast) -> None:
    a_test(tag, day("2025-03-01"), found=OUTSIDE)
    record = a_test(tag, day("2026-03-01"), signer=cast.technician)
    reviewing.send_back(by=Actor(cast.reviewer), test=record.test, record_id=record.pk, remarks="whose readings?")
    standing = Standing.objects.get(pk=tag.pk)
    assert (standing.last_verdict, standing.last_tested_on) == ("fail", day("2025-03-01"))


def test_what_was_found_and_left_is_compared_by_one_measure(tag: Tag) -> None:
    """MPE 0.5 %, as-left tolerance 0.25 %: +0.40 left at +0.18 is better, though both take up most of their limit."""
    record = a_test(tag, day("2026-03-01"), found=(0.40,) * 9, left=(0.18,) * 9)
    standing = Standing.objects.get(pk=tag.pk)
    assert (standing.as_found_ratio, standing.as_left_ratio) == (pytest.approx(0.8), pytest.approx(0.36))
    assert standing.error_rank == pytest.approx(-0.36)
    assert record.runs.get(kind="as-left").figures.worst_ratio == pytest.approx(0.72), "of the as-left tolerance"


def test_what_was_left_is_judged_by_its_own_tolerance(tag: Tag) -> None:
    a_test(tag, day("2026-03-01"), found=(0.40,) * 9, left=(0.30,) * 9)
    standing = Standing.objects.get(pk=tag.pk)
    assert (standing.last_verdict, standing.as_left_ratio) == ("fail", pytest.approx(0.6))


def test_a_tested_tag_without_a_requirement_says_so_instead_of_never_falling_due(tag: Tag) -> None:
    a_test(tag, day("2025-03-01"))
    Requirement.objects.filter(tag=tag).update(withdrawn_at=datetime.datetime(2025, 4, 1, tzinfo=datetime.UTC))
    scheduling.refresh([tag.pk])
    assert state_of(tag, day("2040-01-01")) == ScheduleState.NO_REQUIREMENT


def test_on_a_fixed_calendar_grace_does_not_shift_the_next_date(tag: Tag) -> None:
    tag.requirements.update(anchor="calendar", anchor_on=day("2020-03-01"))
    a_test(tag, day("2025-04-20"))
    assert Standing.objects.get(pk=tag.pk).due_on == day("2026-03-01")


@pytest.mark.parametrize("in_service", [True, False])
@pytest.mark.parametrize("never_tested", [True, False])
@pytest.mark.parametrize("deferred", [None, day("2026-07-01")])
def test_the_states_of_a_row_are_those_of_the_arithmetic(
    in_service: bool, never_tested: bool, deferred: datetime.date | None
) -> None:
    due, limit, opens = day("2026-03-01"), day("2026-05-31"), day("2026-01-18")
    phase = Standing.Phase.NEVER_TESTED if never_tested else Standing.Phase.SCHEDULED
    if not in_service:
        phase = Standing.Phase.NOT_IN_SERVICE
    for edge in (opens, due, limit, day("2026-07-01")):
        for today in (edge - ONE_DAY, edge, edge + ONE_DAY):
            expected = state_on(
                today,
                due=due,
                limit=limit,
                opens=opens,
                never_tested=never_tested,
                in_service=in_service,
                deferred_until=deferred,
            )
            assert schedule_state(today, phase, due, limit, opens, deferred) == str(expected)
    assert {str(state) for state in State} | {"no requirement"} == set(ScheduleState.values)
