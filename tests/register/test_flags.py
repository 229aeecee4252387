"""Flags: opened, closed and opened again by the checks; accepted for a time by an engineer."""

from __future__ import annotations

import datetime

import pytest
from django.core.exceptions import ValidationError
from django.db import connection
from django.test.utils import CaptureQueriesContext

from register import editing, fitting, flagging, intervening
from register.auditing import Actor
from register.models import AuditEntry, Flag, Tag
from tests import cast as people

CLEAR, CANNOT_CHECK, VIOLATION = Flag.Severity.CLEAR, Flag.Severity.CANNOT_CHECK, Flag.Severity.VIOLATION


@pytest.fixture
def by(cast: people.Cast) -> Actor:
    return Actor(cast.engineer)


@pytest.fixture
def tag(cast: people.Cast) -> Tag:
    """0 to 20 bar on a head that ends at 16 bar: a violation of 4 bar."""
    tag = people.make_tag(people.make_area(cast.plant))
    people.make_fitting(tag)
    people.make_range(tag, "0", "20")
    flagging.recompute([tag.pk])
    return tag


@pytest.fixture
def until(cast: people.Cast) -> datetime.date:
    return cast.plant.today() + datetime.timedelta(days=30)


def upper(tag: Tag) -> Flag:
    return Flag.objects.get(tag=tag, check_key="range_upper")


def set_upper(tag: Tag, urv: str) -> None:
    """Another URV of the same range, as if it had been set so."""
    assert tag.current_range is not None
    tag.current_range.urv = urv
    tag.current_range.set_si()
    tag.current_range.save()
    flagging.recompute([tag.pk])


def test_a_violation_stands_with_its_two_numbers_and_its_margin(tag: Tag) -> None:
    flag = upper(tag)
    assert (flag.severity, flag.closed_at) == (VIOLATION, None)
    assert flag.demanded == pytest.approx(2e6)
    assert flag.limit == pytest.approx(1.6e6)
    assert (flag.margin, flag.margin_unit) == (pytest.approx(-4.0), "bar")
    assert flag.margin_percent == pytest.approx(-25.0)
    assert flag.sentence
    assert flag.arithmetic


def test_a_check_that_is_clear_has_no_row(tag: Tag) -> None:
    assert not Flag.objects.filter(tag=tag, check_key="range_lower").exists()


def test_missing_data_is_a_flag_and_not_silence(cast: people.Cast) -> None:
    bare = people.make_tag(people.make_area(cast.plant))
    flagging.recompute([bare.pk])
    flag = Flag.objects.get(tag=bare, check_key="static_pressure")
    assert flag.severity == CANNOT_CHECK
    assert "no transmitter is fitted" in flag.sentence


def test_one_row_per_check_is_closed_and_opened_again(tag: Tag) -> None:
    row = upper(tag)
    set_upper(tag, "10")
    closed = upper(tag)
    assert (closed.pk, closed.severity) == (row.pk, CLEAR)
    assert closed.closed_at is not None
    set_upper(tag, "20")
    again = upper(tag)
    assert (again.pk, again.severity, again.closed_at) == (row.pk, VIOLATION, None)
    assert again.opened_at > row.opened_at


def test_recomputing_without_a_change_writes_nothing(tag: Tag) -> None:
    before = list(Flag.objects.values())
    entries = AuditEntry.objects.count()
    flagging.recompute([tag.pk])
    assert list(Flag.objects.values()) == before
    assert AuditEntry.objects.count() == entries


def test_an_acceptance_survives_recomputing(by: Actor, tag: Tag, until: datetime.date) -> None:
    flagging.accept_flag(by=by, reason="never above 15 bar", flag=upper(tag), until=until)
    editing.edit_tag(by=by, reason="typo", tag=tag, values={"service": "Cooling water", "operating_pressure": "5"})
    flag = upper(tag)
    assert (flag.accepted_until, flag.accepted_reason, flag.closed_at) == (until, "never above 15 bar", None)


def test_an_acceptance_survives_a_smaller_excess(by: Actor, tag: Tag, until: datetime.date) -> None:
    flagging.accept_flag(by=by, reason="?", flag=upper(tag), until=until)
    set_upper(tag, "18")
    assert upper(tag).accepted_until == until


def test_an_acceptance_holds_for_the_excess_that_was_accepted(by: Actor, tag: Tag, until: datetime.date) -> None:
    """Less meanwhile, then as it was when accepted: nothing got worse than what was accepted."""
    flagging.accept_flag(by=by, reason="?", flag=upper(tag), until=until)
    set_upper(tag, "18")
    set_upper(tag, "20")
    assert upper(tag).accepted_until == until
    set_upper(tag, "20.1")
    assert upper(tag).accepted_until is None


def test_many_small_steps_are_compared_with_what_was_accepted(by: Actor, tag: Tag, until: datetime.date) -> None:
    """Each step is within the noise of floating point, all of them together are not."""
    flagging.accept_flag(by=by, reason="?", flag=upper(tag), until=until)
    for step in range(1, 5):
        set_upper(tag, f"{20 + step * 3e-9:.9f}")
    assert upper(tag).accepted_until is None


def test_an_acceptance_ends_when_the_excess_grows(by: Actor, tag: Tag, until: datetime.date) -> None:
    flagging.accept_flag(by=by, reason="?", flag=upper(tag), until=until)
    set_upper(tag, "21")
    flag = upper(tag)
    assert (flag.accepted_until, flag.accepted_reason, flag.accepted_by) == (None, "", None)
    entry = AuditEntry.objects.filter(thing_id=str(flag.pk), field="accepted_until").latest("id")
    assert entry.after == ""
    assert entry.reason.startswith("worse than when accepted")


def test_an_acceptance_ends_when_the_severity_rises(by: Actor, tag: Tag, until: datetime.date) -> None:
    """A check that could not be made is accepted; once it can be made, its violation was never accepted."""
    transmitter = tag.current_fitting.transmitter  # type: ignore[union-attr]
    fitting.remove(by=by, reason="away", tag=tag, on=tag.plant.today())
    flag = upper(tag)
    assert flag.severity == CANNOT_CHECK
    flagging.accept_flag(by=by, reason="empty until the outage", flag=flag, until=until)
    fitting.fit(by=by, reason="back", tag=tag, transmitter=transmitter, on=tag.plant.today())
    assert (upper(tag).severity, upper(tag).accepted_until) == (VIOLATION, None)


def test_an_acceptance_ends_when_the_finding_clears(by: Actor, tag: Tag, until: datetime.date) -> None:
    flagging.accept_flag(by=by, reason="?", flag=upper(tag), until=until)
    set_upper(tag, "10")
    set_upper(tag, "20")
    assert upper(tag).accepted_until is None


def test_a_lapsed_acceptance_is_ended_by_the_daily_act(by: Actor, tag: Tag, until: datetime.date) -> None:
    flagging.accept_flag(by=by, reason="?", flag=upper(tag), until=until)
    assert flagging.end_lapsed_acceptances(by=Actor(None), today=until) == 0
    assert flagging.end_lapsed_acceptances(by=Actor(None), today=until + datetime.timedelta(days=1)) == 1
    flag = upper(tag)
    assert (flag.accepted_until, flag.severity, flag.closed_at) == (None, VIOLATION, None)


def test_an_acceptance_ends_in_the_future(by: Actor, tag: Tag) -> None:
    with pytest.raises(ValidationError) as refused:
        flagging.accept_flag(by=by, reason="?", flag=upper(tag), until=tag.plant.today())
    assert "ends in the future" in refused.value.message_dict["until"][0]


def test_a_closed_flag_cannot_be_accepted(by: Actor, tag: Tag, until: datetime.date) -> None:
    set_upper(tag, "10")
    with pytest.raises(ValidationError):
        flagging.accept_flag(by=by, reason="?", flag=upper(tag), until=until)


def test_an_edited_head_moves_the_flags_of_every_tag_where_it_is_fitted(by: Actor, tag: Tag) -> None:
    head = tag.current_fitting.transmitter.head  # type: ignore[union-attr]
    editing.edit_head(by=by, reason="data sheet", head=head, values={"url": "25"})
    assert upper(tag).severity == CLEAR


def test_a_changed_head_moves_the_flags(by: Actor, tag: Tag) -> None:
    transmitter = tag.current_fitting.transmitter  # type: ignore[union-attr]
    larger = people.make_head(transmitter.type, url="40")
    intervening.change_head(by=by, reason="range 0 to 20", transmitter=transmitter, head=larger, on=tag.plant.today())
    assert upper(tag).severity == CLEAR


def test_an_edited_type_moves_the_flags(by: Actor, tag: Tag) -> None:
    assert not Flag.objects.filter(tag=tag, check_key="ambient_high").exists()
    kind = tag.current_fitting.transmitter.type  # type: ignore[union-attr]
    editing.edit_type(by=by, reason="data sheet", type_=kind, values={"ambient_max": "30"})
    assert Flag.objects.get(tag=tag, check_key="ambient_high").severity == VIOLATION


def test_an_edited_area_moves_the_flags_of_its_tags(by: Actor, tag: Tag) -> None:
    editing.edit_area(by=by, reason="roof removed", area=tag.area, values={"ambient_max": "95"})
    assert Flag.objects.get(tag=tag, check_key="ambient_high").severity == VIOLATION


def test_a_tag_with_its_own_ambient_does_not_follow_its_area(by: Actor, tag: Tag) -> None:
    editing.edit_tag(by=by, reason="cabinet", tag=tag, values={"ambient_min": "15", "ambient_max": "30"})
    editing.edit_area(by=by, reason="roof removed", area=tag.area, values={"ambient_max": "95"})
    assert not Flag.objects.filter(tag=tag, check_key="ambient_high", closed_at=None).exists()


def test_another_barometric_pressure_is_checked_at_all_tags(by: Actor, cast: people.Cast, tag: Tag) -> None:
    editing.edit_tag(
        by=by,
        reason="absolute",
        tag=tag,
        values={"pressure_reference": "absolute", "operating_pressure": "160.5", "design_pressure": "161"},
    )
    static = Flag.objects.get(tag=tag, check_key="static_pressure")
    assert static.severity == VIOLATION
    editing.edit_plant(by=by, reason="unknown", plant=cast.plant, values={"barometric_pressure": ""})
    static.refresh_from_db()
    assert static.severity == CANNOT_CHECK


def test_the_number_of_queries_does_not_grow_with_the_tags(cast: people.Cast) -> None:
    area = people.make_area(cast.plant)
    counts = []
    for number in (1, 5):
        tags = [people.make_tag(area) for _ in range(number)]
        for tag in tags:
            people.make_fitting(tag)
            people.make_range(tag, "0", "20")
        with CaptureQueriesContext(
            connection,
        ) as queries:
            flagging.recompute([tag.pk for tag in tags])
        counts.append(len(queries))
    assert counts[0] == counts[1]
