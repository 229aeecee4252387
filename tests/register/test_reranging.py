"""Ranges change by rows with a date: in force at once, planned, applied, withdrawn."""

from __future__ import annotations

import datetime

import pytest
from django.core.exceptions import ValidationError
from django.core.management import call_command

from register import reranging
from register.auditing import Actor
from register.models import Flag, Range, Tag
from tests import cast as people

MAY = datetime.date(2025, 5, 12)
DAY = datetime.timedelta(days=1)


@pytest.fixture
def by(cast: people.Cast) -> Actor:
    return Actor(cast.engineer)


@pytest.fixture
def tag(cast: people.Cast) -> Tag:
    tag = people.make_tag(people.make_area(cast.plant))
    people.make_fitting(tag)
    people.make_range(tag, "0", "10")
    return tag


def values(lrv: str = "0", urv: str = "12", **others: object) -> dict[str, object]:
    return {"lrv": lrv, "urv": urv, "unit": "bar", "reference": "gauge", "transfer": "linear"} | others


def test_a_range_up_to_today_is_in_force_at_once(by: Actor, tag: Tag) -> None:
    new = reranging.set_range(by=by, reason="new pump", tag=tag, values=values(), effective_from=MAY)
    tag.refresh_from_db()
    assert tag.current_range == new
    assert new.applied_at is not None
    assert (new.lrv_si, new.urv_si) == (0.0, 1_200_000.0)


def test_what_was_typed_is_kept(by: Actor, tag: Tag) -> None:
    new = reranging.set_range(by=by, reason="?", tag=tag, values=values("-0,50", "12.00"), effective_from=MAY)
    assert (new.lrv, new.urv, new.lrv_si) == ("-0,50", "12.00", -50_000.0)


def test_a_range_of_a_day_to_come_is_planned_and_the_old_one_stays(by: Actor, tag: Tag) -> None:
    tomorrow = tag.plant.today() + DAY
    new = reranging.set_range(by=by, reason="outage", tag=tag, values=values(), effective_from=tomorrow)
    tag.refresh_from_db()
    assert new.applied_at is None
    assert tag.current_range is not None
    assert tag.current_range.urv == "10"


def test_a_planned_range_is_applied_on_its_day_and_checked_then(by: Actor, tag: Tag) -> None:
    tomorrow = tag.plant.today() + DAY
    new = reranging.set_range(by=by, reason="outage", tag=tag, values=values(urv="20"), effective_from=tomorrow)
    assert not Flag.objects.filter(tag=tag, check_key="range_upper", closed_at=None).exists()
    assert reranging.apply_planned(by=Actor(None), today=tomorrow - DAY) == 0
    assert reranging.apply_planned(by=Actor(None), today=tomorrow) == 1
    tag.refresh_from_db()
    assert tag.current_range == new
    assert Flag.objects.get(tag=tag, check_key="range_upper", closed_at=None).severity == Flag.Severity.VIOLATION


def test_of_two_planned_ranges_whose_days_have_come_the_later_is_in_force(by: Actor, tag: Tag) -> None:
    today = tag.plant.today()
    reranging.set_range(by=by, reason="1", tag=tag, values=values(urv="12"), effective_from=today + DAY)
    last = reranging.set_range(by=by, reason="2", tag=tag, values=values(urv="14"), effective_from=today + 2 * DAY)
    assert reranging.apply_planned(by=Actor(None), today=today + 2 * DAY) == 2
    tag.refresh_from_db()
    assert tag.current_range == last


def test_the_daily_command_applies_planned_ranges(by: Actor, tag: Tag, capsys: pytest.CaptureFixture[str]) -> None:
    planned = people.make_range(tag, "0", "12", effective_from=tag.plant.today(), applied_at=None)
    call_command("apply_planned")
    tag.refresh_from_db()
    assert tag.current_range == planned
    assert "1 planned range is in force" in capsys.readouterr().out


def test_a_range_cannot_begin_before_the_one_in_force(by: Actor, tag: Tag) -> None:
    with pytest.raises(ValidationError) as refused:
        earlier = people.LONG_AGO - DAY
        reranging.set_range(by=by, reason="?", tag=tag, values=values(), effective_from=earlier)
    assert f"began on {people.LONG_AGO}" in refused.value.message_dict["effective_from"][0]


def test_two_ranges_cannot_begin_on_one_day(by: Actor, tag: Tag) -> None:
    with pytest.raises(ValidationError) as refused:
        reranging.set_range(by=by, reason="?", tag=tag, values=values(), effective_from=people.LONG_AGO)
    assert "already begins on" in refused.value.message_dict["effective_from"][0]


def test_lrv_and_urv_must_differ_even_when_typed_differently(by: Actor, tag: Tag) -> None:
    with pytest.raises(ValidationError) as refused:
        reranging.set_range(by=by, reason="?", tag=tag, values=values("10", "10.0"), effective_from=MAY)
    assert "a range without a span" in refused.value.message_dict["urv"][0]


def test_a_square_root_asks_for_a_differential_range(by: Actor, tag: Tag) -> None:
    with pytest.raises(ValidationError) as refused:
        asked = values(transfer="square root")
        reranging.set_range(by=by, reason="?", tag=tag, values=asked, effective_from=MAY)
    assert "differential pressure only" in refused.value.message_dict["transfer"][0]


def test_a_change_cannot_be_dated_before_a_test_that_stands(by: Actor, tag: Tag, settings: object) -> None:
    settings.BEFORE_BACKDATING = [f"{__name__}.objection"]  # type: ignore[attr-defined]
    with pytest.raises(ValidationError) as refused:
        reranging.set_range(by=by, reason="?", tag=tag, values=values(), effective_from=MAY)
    assert refused.value.message_dict["effective_from"] == [f"tested after {MAY}"]


def objection(tag: Tag, on: datetime.date) -> str:
    return f"tested after {on}"


def test_a_withdrawn_range_gives_way_to_the_one_before_it(by: Actor, tag: Tag) -> None:
    before = tag.current_range
    mistaken = reranging.set_range(by=by, reason="?", tag=tag, values=values(), effective_from=MAY)
    reranging.withdraw_range(by=by, reason="wrong tag", range_=mistaken)
    tag.refresh_from_db()
    mistaken.refresh_from_db()
    assert tag.current_range == before
    assert mistaken.withdrawn_reason == "wrong tag"
    assert Range.objects.filter(tag=tag).count() == 2


def test_a_withdrawn_planned_range_is_never_applied(by: Actor, tag: Tag) -> None:
    tomorrow = tag.plant.today() + DAY
    planned = reranging.set_range(by=by, reason="?", tag=tag, values=values(), effective_from=tomorrow)
    reranging.withdraw_range(by=by, reason="outage moved", range_=planned)
    assert reranging.apply_planned(by=Actor(None), today=tomorrow) == 0


def test_a_withdrawn_day_may_be_used_again(by: Actor, tag: Tag) -> None:
    mistaken = reranging.set_range(by=by, reason="?", tag=tag, values=values(urv="12"), effective_from=MAY)
    reranging.withdraw_range(by=by, reason="typed wrongly", range_=mistaken)
    right = reranging.set_range(by=by, reason="?", tag=tag, values=values(urv="1.2"), effective_from=MAY)
    tag.refresh_from_db()
    assert tag.current_range == right
