"""A change of the register cannot be dated before a test that was made with what the register said then."""

from __future__ import annotations

import datetime

import pytest
from django.core.exceptions import ValidationError

from calibration.models import Test
from register import fitting, intervening, reranging
from register.auditing import Actor
from register.models import Tag
from tests import cast as people

TESTED = datetime.date(2025, 6, 16)
BEFORE = TESTED - datetime.timedelta(days=7)
VALUES = {"lrv": "0", "urv": "12", "unit": "bar", "reference": "gauge", "transfer": "linear"}


@pytest.fixture
def by(cast: people.Cast) -> Actor:
    return Actor(cast.engineer)


@pytest.fixture
def tag(cast: people.Cast) -> Tag:
    return people.make_ready_tag(people.make_area(cast.plant), "PT-2041")


def visited(tag: Tag, **values: str) -> Test:
    fitted = tag.current_fitting
    assert fitted is not None
    settings = {"state": Test.State.SIGNED} | values
    return Test.objects.create(
        plant=tag.plant, tag=tag, transmitter=fitted.transmitter, fitting=fitted, tested_on=TESTED, **settings
    )


def test_a_range_begins_after_the_test_or_on_its_day(by: Actor, tag: Tag) -> None:
    visited(tag)
    with pytest.raises(ValidationError) as refused:
        reranging.set_range(by=by, reason="?", tag=tag, values=VALUES, effective_from=BEFORE)
    (sentence,) = refused.value.message_dict["effective_from"]
    assert sentence.startswith(f"PT-2041 was tested on {TESTED}, after {BEFORE}")
    new = reranging.set_range(by=by, reason="?", tag=tag, values=VALUES, effective_from=TESTED)
    assert new.applied_at is not None


def test_a_transmitter_was_there_when_it_was_tested(by: Actor, tag: Tag) -> None:
    visited(tag)
    with pytest.raises(ValidationError) as refused:
        fitting.remove(by=by, reason="?", tag=tag, on=BEFORE)
    assert "was tested on" in refused.value.message_dict["on"][0]
    fitting.remove(by=by, reason="?", tag=tag, on=TESTED)


def test_a_head_was_in_it_when_it_was_tested(by: Actor, tag: Tag) -> None:
    visited(tag)
    transmitter = tag.current_fitting.transmitter  # type: ignore[union-attr]
    other = people.make_head(transmitter.type)
    with pytest.raises(ValidationError) as refused:
        intervening.change_head(by=by, reason="?", transmitter=transmitter, head=other, on=BEFORE)
    assert "was tested on" in refused.value.message_dict["on"][0]


def test_a_head_that_was_tested_is_not_withdrawn(by: Actor, tag: Tag) -> None:
    transmitter = tag.current_fitting.transmitter  # type: ignore[union-attr]
    first, second = transmitter.head, people.make_head(transmitter.type)
    done = intervening.change_head(by=by, reason="?", transmitter=transmitter, head=second, on=BEFORE)
    test = visited(tag)
    with pytest.raises(ValidationError) as refused:
        intervening.withdraw_intervention(by=by, reason="?", intervention=done)
    assert "was tested on" in refused.value.message_dict["reason"][0]
    transmitter.refresh_from_db()
    assert transmitter.head == second
    test.delete()
    intervening.withdraw_intervention(by=by, reason="?", intervention=done)
    transmitter.refresh_from_db()
    assert transmitter.head == first


def test_a_head_was_in_it_when_it_was_tested_on_the_bench_or_at_another_tag(by: Actor, tag: Tag) -> None:
    test = visited(tag)
    transmitter, other = test.transmitter, people.make_head(test.transmitter.type)
    elsewhere = people.make_tag(tag.area)
    for place in (None, elsewhere):
        Test.objects.filter(pk=test.pk).update(tag=place, fitting=None)
        with pytest.raises(ValidationError) as refused:
            intervening.change_head(by=by, reason="?", transmitter=transmitter, head=other, on=BEFORE)
        assert refused.value.message_dict["on"][0].startswith(f"{transmitter} was tested on {TESTED}")


def test_a_visit_at_which_nothing_could_be_tested_forbids_nothing(by: Actor, tag: Tag) -> None:
    visited(tag, outcome=Test.Outcome.NOT_TESTED)
    fitting.remove(by=by, reason="?", tag=tag, on=BEFORE)
