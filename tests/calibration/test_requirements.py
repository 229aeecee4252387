"""Requirements change by adding a row from a day on; deferrals need another person where people could be hurt."""

from __future__ import annotations

import datetime
from typing import Any

import pytest
from django.core.exceptions import ValidationError

from calibration import scheduling
from calibration.models import Deferral, Requirement, ScheduleState, Standing
from register.auditing import Actor
from register.models import AuditEntry, Tag
from tests import cast as people
from tests.calibration.scheduled import a_test, day, state_of


@pytest.fixture
def engineer(cast: people.Cast) -> Actor:
    return Actor(cast.engineer)


@pytest.fixture
def planner(cast: people.Cast) -> Actor:
    return Actor(cast.planner)


def values(tag: Tag, **changes: Any) -> dict[str, Any]:
    return {
        "mpe_form": "percent of span",
        "mpe_percent": "0.5",
        "mpe_input": "",
        "input_unit": "",
        "as_left_percent": "0.25",
        "as_left_input": "",
        "decision_rule": "simple acceptance",
        "interval_months": 6,
        "anchor": "last test",
        "anchor_on": None,
        "grace_days": None,
        "lead_days": 42,
        "point_list": tag.plant.point_lists.first(),
    } | changes


def set_one(engineer: Actor, tag: Tag, effective_from: datetime.date, **changes: Any) -> Requirement:
    return scheduling.set_requirement(
        by=engineer, reason="drifts", tag=tag, values=values(tag, **changes), effective_from=effective_from
    )


def test_a_requirement_from_today_moves_the_due_date_at_once(tag: Tag, engineer: Actor) -> None:
    a_test(tag, day("2026-01-15"))
    row = set_one(engineer, tag, tag.plant.today())
    standing = Standing.objects.get(pk=tag.pk)
    assert row.applied_at is not None
    assert (standing.due_on, standing.interval_months) == (day("2026-07-15"), 6)
    assert AuditEntry.objects.filter(thing_type="calibration.requirement", kind="created").exists()


def test_a_requirement_of_a_day_to_come_is_planned_and_put_in_force_on_that_day(tag: Tag, engineer: Actor) -> None:
    a_test(tag, day("2026-01-15"))
    coming = tag.plant.today() + datetime.timedelta(days=30)
    row = set_one(engineer, tag, coming)
    assert row.applied_at is None
    assert Standing.objects.get(pk=tag.pk).interval_months == 12
    assert scheduling.apply_planned(by=Actor(None), today=coming - datetime.timedelta(days=1)) == 0
    assert scheduling.apply_planned(by=Actor(None), today=coming) == 1
    assert scheduling.apply_planned(by=Actor(None), today=coming) == 0
    assert Standing.objects.get(pk=tag.pk).interval_months == 6


def test_a_withdrawn_requirement_gives_the_one_before_it_back_and_stays_to_be_seen(tag: Tag, engineer: Actor) -> None:
    a_test(tag, day("2026-01-15"))
    row = set_one(engineer, tag, tag.plant.today())
    scheduling.withdraw_requirement(by=engineer, reason="typed by mistake", requirement=row)
    assert Standing.objects.get(pk=tag.pk).interval_months == 12
    row.refresh_from_db()
    assert row.withdrawn_reason == "typed by mistake"
    with pytest.raises(ValidationError, match="withdrawn already"):
        scheduling.withdraw_requirement(by=engineer, reason="again", requirement=row)


def test_a_requirement_cannot_begin_before_a_test_that_was_judged_by_another(tag: Tag, engineer: Actor) -> None:
    a_test(tag, day("2026-01-15"))
    with pytest.raises(ValidationError) as refused:
        set_one(engineer, tag, day("2026-01-01"))
    assert "was tested on 2026-01-15" in refused.value.message_dict["effective_from"][0]


@pytest.mark.parametrize(
    ("changes", "field", "words"),
    [
        ({"mpe_percent": ""}, "mpe_percent", "needs this figure"),
        ({"mpe_percent": "half"}, "mpe_percent", "half"),
        ({"mpe_percent": "0"}, "mpe_percent", "not above zero"),
        ({"as_left_percent": "0.6"}, "as_left_percent", "wider than the tolerance"),
        ({"mpe_form": "absolute", "mpe_input": "0.05"}, "input_unit", "in which unit"),
        ({"mpe_form": "larger", "mpe_input": "0.05", "input_unit": "bar"}, "as_left_input", "both figures"),
        ({"anchor": "calendar"}, "anchor_on", "the day it begins"),
        ({"interval_months": 0}, "interval_months", "no interval"),
    ],
)
def test_what_cannot_be_judged_by_is_refused_beside_its_field(
    tag: Tag, engineer: Actor, changes: dict[str, Any], field: str, words: str
) -> None:
    with pytest.raises(ValidationError) as refused:
        set_one(engineer, tag, tag.plant.today(), **changes)
    assert words in refused.value.message_dict[field][0]
    assert tag.requirements.count() == 1


def test_figures_that_the_form_does_not_use_are_not_kept(tag: Tag, engineer: Actor) -> None:
    row = set_one(engineer, tag, tag.plant.today(), mpe_input="0.05", input_unit="bar")
    assert (row.mpe_input, row.input_unit) == ("", "")


def test_a_deferral_counts_once_it_is_approved_and_the_next_test_uses_it_up(
    tag: Tag, engineer: Actor, planner: Actor
) -> None:
    today = tag.plant.today()
    a_test(tag, today - datetime.timedelta(days=500))
    until = today + datetime.timedelta(days=60)
    asked = scheduling.defer(by=planner, tag=tag, until=until, risk_statement="small", mitigation="compared weekly")
    assert state_of(tag, today) == ScheduleState.OVERDUE
    scheduling.approve_deferral(by=engineer, reason="redundant measurement", deferral=asked)
    assert state_of(tag, today) == ScheduleState.DEFERRED
    assert state_of(tag, until) == ScheduleState.DEFERRED, "the last day still has it"
    assert state_of(tag, until + datetime.timedelta(days=1)) == ScheduleState.OVERDUE
    a_test(tag, today)
    assert state_of(tag, today) == ScheduleState.NOT_DUE


def test_a_withdrawn_deferral_gives_the_old_dates_back(tag: Tag, engineer: Actor, planner: Actor) -> None:
    today = tag.plant.today()
    a_test(tag, today - datetime.timedelta(days=500))
    until = today + datetime.timedelta(days=60)
    asked = scheduling.defer(by=planner, tag=tag, until=until, risk_statement="small", mitigation="compared")
    scheduling.approve_deferral(by=engineer, reason="ok", deferral=asked)
    scheduling.withdraw_deferral(by=planner, reason="slot found", deferral=asked)
    assert state_of(tag, today) == ScheduleState.OVERDUE
    fields = set(AuditEntry.objects.filter(thing_type="calibration.deferral").values_list("field", flat=True))
    assert {"approved_by", "approved_at", "withdrawn_at", "withdrawn_reason"} <= fields


@pytest.mark.parametrize(("criticality", "refused"), [("safety", True), ("environment", True), ("general", False)])
def test_nobody_approves_his_own_deferral_where_people_or_the_environment_could_be_hurt(
    tag: Tag, cast: people.Cast, criticality: str, refused: bool
) -> None:
    people.give_roles(cast.engineer, cast.plant, "planner")
    Tag.objects.filter(pk=tag.pk).update(criticality=criticality)
    today = tag.plant.today()
    a_test(tag, today - datetime.timedelta(days=500))
    both = Actor(cast.engineer)
    asked = scheduling.defer(
        by=both, tag=tag, until=today + datetime.timedelta(days=9), risk_statement="r", mitigation="m"
    )
    if refused:
        with pytest.raises(ValidationError, match="another person"):
            scheduling.approve_deferral(by=both, reason="mine", deferral=asked)
    else:
        scheduling.approve_deferral(by=both, reason="mine", deferral=asked)
    asked.refresh_from_db()
    assert (asked.approved_at is None) == refused


def test_what_was_never_tested_cannot_be_deferred(tag: Tag, planner: Actor) -> None:
    scheduling.refresh([tag.pk])
    with pytest.raises(ValidationError, match="never tested"):
        scheduling.defer(by=planner, tag=tag, until=day("2099-01-01"), risk_statement="r", mitigation="m")


def test_a_deferral_must_reach_beyond_due_and_today_and_only_one_waits(tag: Tag, planner: Actor) -> None:
    today = tag.plant.today()
    a_test(tag, today - datetime.timedelta(days=100))
    due = Standing.objects.get(pk=tag.pk).due_on
    assert due is not None
    with pytest.raises(ValidationError) as refused:
        scheduling.defer(by=planner, tag=tag, until=due, risk_statement="r", mitigation="m")
    assert "nothing would be deferred" in refused.value.message_dict["until"][0]
    later = due + datetime.timedelta(days=30)
    scheduling.defer(by=planner, tag=tag, until=later, risk_statement="r", mitigation="m")
    with pytest.raises(ValidationError, match="waiting for approval"):
        scheduling.defer(by=planner, tag=tag, until=later, risk_statement="r", mitigation="m")
    assert Deferral.objects.count() == 1
