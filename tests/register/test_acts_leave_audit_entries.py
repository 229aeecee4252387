"""Every act of the register leaves entries: one for a thing made, one per field changed, with reason and act."""

from __future__ import annotations

import datetime

import pytest
from django.core.exceptions import ValidationError

from register import editing, fitting, flagging, intervening, reranging
from register.auditing import Actor
from register.models import AuditEntry, Flag, Transmitter
from tests import cast as people

DAY = datetime.date(2026, 3, 2)
CREATED, CHANGED = AuditEntry.Kind.CREATED, AuditEntry.Kind.CHANGED


@pytest.fixture
def by(cast: people.Cast) -> Actor:
    return Actor(cast.engineer, "192.0.2.7")


def entries(thing: object, field: str = "") -> list[AuditEntry]:
    found = AuditEntry.objects.filter(
        thing_type=thing._meta.label_lower,  # type: ignore[attr-defined]
        thing_id=str(thing.pk),  # type: ignore[attr-defined]
    ).order_by("id")
    return list(found.filter(field=field) if field else found)


def test_a_new_tag_leaves_one_entry_that_it_was_made_and_one_of_its_flags(cast: people.Cast, by: Actor) -> None:
    area = people.make_area(cast.plant)
    values = {"number": "PT-2041", "measurand": "pressure", "area": area}
    tag = editing.create_tag(by=by, plant=cast.plant, values=values)
    made, flags = entries(tag)
    assert (made.kind, made.person, made.remote_address) == (CREATED, cast.engineer, "192.0.2.7")
    assert (flags.kind, flags.field, flags.before, flags.act) == (CHANGED, "flags", "", made.act)
    assert "Static pressure against the body rating: cannot check" in flags.after


def test_an_edited_tag_leaves_one_entry_per_changed_field_with_before_after_and_reason(
    cast: people.Cast, by: Actor
) -> None:
    tag = people.make_tag(people.make_area(cast.plant), service="Feed water", medium="water")
    values = {"service": "Feed water to the drum", "medium": "condensate", "number": tag.number}
    editing.edit_tag(by=by, reason="loop sheet revised", tag=tag, values=values)
    changed = {entry.field: entry for entry in entries(tag) if entry.field != "flags"}
    assert set(changed) == {"service", "medium"}
    assert (changed["service"].before, changed["service"].after) == ("Feed water", "Feed water to the drum")
    assert {entry.reason for entry in changed.values()} == {"loop sheet revised"}
    assert len({entry.act for entry in changed.values()}) == 1


def test_nothing_changed_leaves_no_entry(cast: people.Cast, by: Actor) -> None:
    tag = people.make_tag(people.make_area(cast.plant), service="Feed water")
    editing.edit_tag(by=by, reason="looked at", tag=tag, values={"service": "Feed water"})
    assert entries(tag) == []


def test_a_refused_act_leaves_nothing(cast: people.Cast, by: Actor) -> None:
    area = people.make_area(cast.plant)
    people.make_tag(area, "PT-1")
    before = AuditEntry.objects.count()
    with pytest.raises(ValidationError):
        editing.create_tag(by=by, plant=cast.plant, values={"number": "PT-1", "measurand": "pressure", "area": area})
    assert AuditEntry.objects.count() == before


def test_the_catalogue_belongs_to_no_plant(cast: people.Cast, by: Actor) -> None:
    maker = editing.create_maker(by=by, values={"name": "Quillhaven Gauge Works"})
    values = {"designation": "Q40", "measures": "gauge", "body_rating": [["20", "160"], ["120", "140"]]}
    kind = editing.create_type(by=by, maker=maker, values=values)
    editing.edit_type(by=by, reason="new data sheet", type_=kind, values={"body_rating": [["20", "160"]]})
    made, changed = entries(kind)
    assert made.plant is None
    assert (changed.field, changed.before, changed.after) == ("body_rating", "20 : 160; 120 : 140", "20 : 160")


def test_a_swap_is_one_act_over_both_fittings_both_transmitters_and_the_tag(cast: people.Cast, by: Actor) -> None:
    head = people.make_head()
    old, new = people.make_transmitter(cast.plant, head), people.make_transmitter(cast.plant, head)
    tag = people.make_tag(people.make_area(cast.plant))
    first = people.make_fitting(tag, old)
    second = fitting.swap(by=by, reason="zero drifts", tag=tag, transmitter=new, on=DAY, whereabouts="repair")
    touched = [
        *entries(first, "removed_on"),
        *entries(second),
        *entries(old, "whereabouts"),
        *entries(new, "whereabouts"),
        *entries(tag, "fitted transmitter"),
    ]
    assert len({entry.act for entry in touched}) == 1
    assert [(entry.before, entry.after) for entry in entries(old, "whereabouts")] == [("fitted", "repair")]
    assert [(entry.before, entry.after) for entry in entries(tag, "fitted transmitter")] == [
        (str(old), ""),
        ("", str(new)),
    ]


def test_a_new_range_shows_the_range_before_and_after(cast: people.Cast, by: Actor) -> None:
    tag = people.make_tag(people.make_area(cast.plant))
    people.make_range(tag, "0", "10")
    values = {"lrv": "0", "urv": "12.50", "unit": "bar", "reference": "gauge", "transfer": "linear"}
    reranging.set_range(by=by, reason="new pump", tag=tag, values=values, effective_from=DAY)
    (entry,) = entries(tag, "current_range")
    assert (entry.before, entry.after) == ("0 to 10 bar gauge, linear", "0 to 12.50 bar gauge, linear")
    assert entry.reason == "new pump"


def test_a_changed_head_is_noted_at_the_transmitter_and_as_intervention(cast: people.Cast, by: Actor) -> None:
    kind = people.make_type()
    small, large = people.make_head(kind, url="6"), people.make_head(kind, url="16")
    transmitter = people.make_transmitter(cast.plant, small)
    done = intervening.change_head(by=by, reason="overranged", transmitter=transmitter, head=large, on=DAY)
    (entry,) = entries(transmitter, "head")
    assert (entry.before, entry.after) == (str(small), str(large))
    assert entries(done)[0].act == entry.act
    assert Transmitter.objects.get(pk=transmitter.pk).head == large


def test_an_acceptance_and_its_withdrawal_are_noted(cast: people.Cast, by: Actor) -> None:
    tag = people.make_tag(people.make_area(cast.plant))
    flagging.recompute([tag.pk])
    flag = Flag.objects.get(tag=tag, check_key="static_pressure")
    until = cast.plant.today() + datetime.timedelta(days=90)
    flagging.accept_flag(by=by, reason="maker has been asked", flag=flag, until=until)
    flagging.withdraw_acceptance(by=by, reason="answer came", flag=flag)
    given, taken = entries(flag, "accepted_until")
    assert (given.before, given.after, given.reason) == ("", until.isoformat(), "maker has been asked")
    assert (taken.before, taken.after, taken.reason) == (until.isoformat(), "", "answer came")
