"""What is done to a transmitter between tests is noted where it was done, and can be withdrawn."""

from __future__ import annotations

import datetime

import pytest
from django.core.exceptions import ValidationError

from register import editing, intervening
from register.auditing import Actor
from register.models import Intervention, Transmitter
from tests import cast as people

MAY, JUNE = datetime.date(2025, 5, 12), datetime.date(2025, 6, 16)


@pytest.fixture
def by(cast: people.Cast) -> Actor:
    return Actor(cast.engineer)


@pytest.fixture
def transmitter(cast: people.Cast) -> Transmitter:
    return people.make_transmitter(cast.plant)


def test_it_belongs_to_the_tag_where_the_transmitter_was_on_that_day(
    cast: people.Cast, by: Actor, transmitter: Transmitter
) -> None:
    area = people.make_area(cast.plant)
    earlier, now = people.make_tag(area), people.make_tag(area)
    people.make_fitting(earlier, transmitter, fitted_on=people.LONG_AGO, removed_on=MAY)
    people.make_fitting(now, transmitter, fitted_on=JUNE)
    days = {
        MAY - datetime.timedelta(days=7): earlier,
        MAY + datetime.timedelta(days=7): None,
        JUNE: now,
    }
    for day, place in days.items():
        done = intervening.record_intervention(
            by=by, reason="lines flushed", transmitter=transmitter, kind="flush", done_on=day, breaks_history=False
        )
        assert done.tag == place
        assert not done.breaks_history


def test_a_new_head_has_an_act_of_its_own(by: Actor, transmitter: Transmitter) -> None:
    with pytest.raises(ValidationError):
        intervening.record_intervention(by=by, reason="?", transmitter=transmitter, kind="new head", done_on=MAY)


def test_a_day_to_come_is_refused(cast: people.Cast, by: Actor, transmitter: Transmitter) -> None:
    tomorrow = cast.plant.today() + datetime.timedelta(days=1)
    with pytest.raises(ValidationError) as refused:
        intervening.record_intervention(by=by, reason="?", transmitter=transmitter, kind="repair", done_on=tomorrow)
    assert "still to come" in refused.value.message_dict["done_on"][0]


def test_a_changed_head_keeps_what_was_before_and_after(by: Actor, transmitter: Transmitter) -> None:
    before, after = transmitter.head, people.make_head(transmitter.type)
    done = intervening.change_head(by=by, reason="?", transmitter=transmitter, head=after, on=MAY)
    assert (done.kind, done.head_before, done.head_after, done.breaks_history) == ("new head", before, after, True)


def test_a_head_of_another_type_is_refused(by: Actor, transmitter: Transmitter) -> None:
    with pytest.raises(ValidationError) as refused:
        intervening.change_head(by=by, reason="?", transmitter=transmitter, head=people.make_head(), on=MAY)
    assert "does not go with the type" in refused.value.message_dict["head"][0]


def test_the_head_that_is_in_it_is_no_change(by: Actor, transmitter: Transmitter) -> None:
    with pytest.raises(ValidationError):
        intervening.change_head(by=by, reason="?", transmitter=transmitter, head=transmitter.head, on=MAY)
    assert not Intervention.objects.exists()


def test_heads_are_changed_in_the_order_of_the_days(by: Actor, transmitter: Transmitter) -> None:
    second, third = people.make_head(transmitter.type), people.make_head(transmitter.type)
    intervening.change_head(by=by, reason="?", transmitter=transmitter, head=second, on=JUNE)
    with pytest.raises(ValidationError) as refused:
        intervening.change_head(by=by, reason="?", transmitter=transmitter, head=third, on=MAY)
    assert str(JUNE) in refused.value.message_dict["on"][0]


def test_a_withdrawn_change_puts_the_old_head_back(by: Actor, transmitter: Transmitter) -> None:
    first, second = transmitter.head, people.make_head(transmitter.type)
    done = intervening.change_head(by=by, reason="?", transmitter=transmitter, head=second, on=MAY)
    intervening.withdraw_intervention(by=by, reason="other serial number", intervention=done)
    transmitter.refresh_from_db()
    done.refresh_from_db()
    assert transmitter.head == first
    assert done.withdrawn_reason == "other serial number"


def test_of_two_changes_the_later_is_withdrawn_first(by: Actor, transmitter: Transmitter) -> None:
    second, third = people.make_head(transmitter.type), people.make_head(transmitter.type)
    earlier = intervening.change_head(by=by, reason="?", transmitter=transmitter, head=second, on=MAY)
    later = intervening.change_head(by=by, reason="?", transmitter=transmitter, head=third, on=JUNE)
    with pytest.raises(ValidationError):
        intervening.withdraw_intervention(by=by, reason="?", intervention=earlier)
    intervening.withdraw_intervention(by=by, reason="?", intervention=later)
    intervening.withdraw_intervention(by=by, reason="?", intervention=earlier)
    with pytest.raises(ValidationError):
        intervening.withdraw_intervention(by=by, reason="?", intervention=earlier)


def test_a_change_is_not_withdrawn_once_the_register_was_corrected(by: Actor, transmitter: Transmitter) -> None:
    """The head of before would not go with the type that the register has now."""
    put_in, other = people.make_head(transmitter.type), people.make_head(people.make_type())
    done = intervening.change_head(by=by, reason="?", transmitter=transmitter, head=put_in, on=MAY)
    editing.correct_head(by=by, reason="type plate read again", transmitter=transmitter, head=other)
    with pytest.raises(ValidationError) as refused:
        intervening.withdraw_intervention(by=by, reason="?", intervention=done)
    assert f"has the head {other} now, not {put_in}" in refused.value.messages[0]
    transmitter.refresh_from_db()
    done.refresh_from_db()
    assert (transmitter.type, transmitter.head, done.withdrawn_at) == (other.type, other, None)
