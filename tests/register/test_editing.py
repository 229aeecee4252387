"""Editing: refused in the user's words beside the field, also where another person was quicker."""

from __future__ import annotations

import datetime
from typing import Any
from unittest import mock

import pytest
from django.core.exceptions import ValidationError

from register import editing, storing
from register.auditing import Actor
from register.models import Tag, Transmitter
from tests import cast as people


@pytest.fixture
def by(cast: people.Cast) -> Actor:
    return Actor(cast.engineer)


def sentence(error: pytest.ExceptionInfo[ValidationError], field: str) -> str:
    return str(error.value.message_dict[field][0])


def test_a_number_that_is_none_is_refused_beside_its_field(cast: people.Cast, by: Actor) -> None:
    tag = people.make_tag(people.make_area(cast.plant))
    with pytest.raises(ValidationError) as refused:
        editing.edit_tag(by=by, reason="?", tag=tag, values={"design_pressure": "ten", "process_max": "12,5,0"})
    assert "“ten” is not a number" in sentence(refused, "design_pressure")
    assert "“12,5,0”" in sentence(refused, "process_max")


def test_an_unknown_unit_is_refused_beside_its_field(cast: people.Cast, by: Actor) -> None:
    with pytest.raises(ValidationError) as refused:
        values = {"code": "20", "name": "Boiler house", "ambient_min": "1", "temperature_unit": "degR"}
        editing.create_area(by=by, plant=cast.plant, values=values)
    assert "degR" in sentence(refused, "temperature_unit")


@pytest.mark.parametrize(
    ("values", "field", "words"),
    [
        ({"least_span": "20", "greatest_span": "16"}, "greatest_span", "16 bar is below the least span 20 bar"),
        ({"url": "-2"}, "url", "URL -2 bar is not above LRL -1 bar"),
        ({"least_span": "0"}, "least_span", "must be above zero"),
    ],
)
def test_limits_of_a_head_out_of_order_are_said_with_their_numbers(
    cast: people.Cast, by: Actor, values: dict[str, str], field: str, words: str
) -> None:
    given = {"code": "H", "unit": "bar", "lrl": "-1", "url": "16", "least_span": "0.16"} | values
    with pytest.raises(ValidationError) as refused:
        editing.create_head(by=by, type_=people.make_type(), values=given)
    assert words in sentence(refused, field)


def test_a_tag_number_that_stands_already_is_refused(cast: people.Cast, by: Actor) -> None:
    area = people.make_area(cast.plant)
    people.make_tag(area, "PT-101")
    for number in ("PT-101", "pt-101"):
        with pytest.raises(ValidationError) as refused:
            values = {"number": number, "area": area, "measurand": "pressure"}
            editing.create_tag(by=by, plant=cast.plant, values=values)
        assert f"already a tag {number}" in sentence(refused, "number")


def test_who_was_slower_by_a_moment_hears_the_same_sentence(cast: people.Cast, by: Actor) -> None:
    """The row of another person comes between the look and the insert: the constraint refuses, the act explains."""
    area = people.make_area(cast.plant)
    values: dict[str, Any] = {"number": "PT-101", "area": area, "measurand": "pressure"}
    looked = []
    check = storing.check

    def look_then_be_overtaken(thing: Any) -> None:
        check(thing)
        if not looked:
            people.make_tag(area, "PT-101")
        looked.append(thing)

    with (
        mock.patch.object(storing, "check", look_then_be_overtaken),
        pytest.raises(ValidationError) as refused,
    ):
        editing.create_tag(by=by, plant=cast.plant, values=values)
    assert "already a tag PT-101" in sentence(refused, "number")
    assert len(looked) == 1


def test_an_area_of_another_plant_is_refused(cast: people.Cast, by: Actor) -> None:
    foreign = people.make_area(cast.other_plant)
    with pytest.raises(ValidationError) as refused:
        values = {"number": "PT-1", "area": foreign, "measurand": "pressure"}
        editing.create_tag(by=by, plant=cast.plant, values=values)
    assert "another plant" in sentence(refused, "area")


def test_a_body_rating_that_falls_back_in_temperature_is_refused(cast: people.Cast, by: Actor) -> None:
    with pytest.raises(ValidationError) as refused:
        values = {"designation": "Q40", "measures": "gauge", "body_rating": [["120", "110"], ["38", "160"]]}
        editing.create_type(by=by, maker=people.make_maker(), values=values)
    assert "body_rating" in refused.value.message_dict


def test_a_type_with_transmitters_keeps_its_maker(cast: people.Cast, by: Actor) -> None:
    kind = people.make_transmitter(cast.plant).type
    with pytest.raises(ValidationError) as refused:
        other = people.make_maker("Fernhollow Instruments")
        editing.edit_type(by=by, reason="?", type_=kind, values={"maker": other})
    assert "registered under" in sentence(refused, "maker")


def test_a_head_goes_with_its_type(cast: people.Cast, by: Actor) -> None:
    head, other = people.make_head(), people.make_type()
    with pytest.raises(ValidationError) as refused:
        values = {"maker": other.maker, "type": other, "head": head, "serial": "V4-1"}
        editing.create_transmitter(by=by, plant=cast.plant, values=values)
    assert "does not go with the type" in sentence(refused, "head")


def test_another_head_is_no_edit(cast: people.Cast, by: Actor) -> None:
    transmitter = people.make_transmitter(cast.plant)
    other = people.make_head(transmitter.type)
    with pytest.raises(ValidationError) as refused:
        editing.edit_transmitter(by=by, reason="?", transmitter=transmitter, values={"head": other})
    assert "intervention" in sentence(refused, "head")


def test_a_head_entered_wrongly_is_corrected_without_an_intervention(cast: people.Cast, by: Actor) -> None:
    transmitter = people.make_transmitter(cast.plant)
    right = people.make_head(people.make_type(people.make_maker("Fernhollow Instruments")))
    editing.correct_head(by=by, reason="read the plate", transmitter=transmitter, head=right)
    transmitter.refresh_from_db()
    assert (transmitter.head, transmitter.type, transmitter.maker) == (right, right.type, right.type.maker)
    assert not transmitter.interventions.exists()


def test_a_fitted_transmitter_is_not_moved_to_stores_behind_its_tag(cast: people.Cast, by: Actor) -> None:
    transmitter = people.make_fitting(people.make_tag(people.make_area(cast.plant))).transmitter
    with pytest.raises(ValidationError) as refused:
        editing.move_transmitter(by=by, reason="?", transmitter=transmitter, whereabouts="stores")
    assert "remove it from its tag" in sentence(refused, "whereabouts")


def test_a_transmitter_comes_back_from_repair(cast: people.Cast, by: Actor) -> None:
    transmitter = people.make_transmitter(cast.plant, whereabouts="repair")
    editing.move_transmitter(by=by, reason="repaired", transmitter=transmitter, whereabouts="stores")
    assert Transmitter.objects.get(pk=transmitter.pk).whereabouts == "stores"


def test_a_tag_goes_out_of_service_and_comes_back(cast: people.Cast, by: Actor) -> None:
    tag = people.make_tag(people.make_area(cast.plant))
    today = cast.plant.today()
    editing.take_out_of_service(by=by, reason="line blinded", tag=tag, on=today)
    assert Tag.objects.get(pk=tag.pk).out_of_service_on == today
    with pytest.raises(ValidationError):
        editing.take_out_of_service(by=by, reason="again", tag=tag, on=today)
    editing.return_to_service(by=by, reason="back on line", tag=tag)
    assert Tag.objects.get(pk=tag.pk).out_of_service_on is None


def test_a_tag_does_not_go_out_of_service_in_the_future(cast: people.Cast, by: Actor) -> None:
    tag = people.make_tag(people.make_area(cast.plant))
    with pytest.raises(ValidationError) as refused:
        tomorrow = cast.plant.today() + datetime.timedelta(days=1)
        editing.take_out_of_service(by=by, reason="?", tag=tag, on=tomorrow)
    assert "still to come" in sentence(refused, "on")


def test_what_is_not_named_stays_as_it_is(cast: people.Cast, by: Actor) -> None:
    tag = people.make_tag(people.make_area(cast.plant), medium="water", service="Feed water")
    editing.edit_tag(by=by, reason="?", tag=tag, values={"service": "Condensate"})
    tag.refresh_from_db()
    assert (tag.service, tag.medium, tag.design_pressure_pa) == ("Condensate", "water", 1e6)
