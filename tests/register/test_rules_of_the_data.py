"""Rules that the database itself keeps, on SQLite and PostgreSQL alike, whatever wrote the row."""

from __future__ import annotations

import datetime

import pytest
from django.db import IntegrityError, transaction
from django.utils import timezone

from register.models import Area, Fitting, Flag, Maker, MeasuringHead, Plant, Range, Tag, Transmitter, TransmitterType
from tests import cast as people

DAY = datetime.date(2025, 5, 12)


@pytest.fixture
def area(cast: people.Cast) -> Area:
    return people.make_area(cast.plant, "20")


def refused(make: object, **values: object) -> None:
    with pytest.raises(IntegrityError), transaction.atomic():
        make(**values)  # type: ignore[operator]


def test_a_tag_has_at_most_one_open_fitting(cast: people.Cast, area: Area) -> None:
    tag = people.make_tag(area)
    people.make_fitting(tag)
    other = people.make_transmitter(cast.plant)
    refused(Fitting.objects.create, tag=tag, transmitter=other, fitted_on=DAY, fitted_reason="?")
    Fitting.objects.create(tag=tag, transmitter=other, fitted_on=DAY, removed_on=DAY, fitted_reason="ended")


def test_a_transmitter_has_at_most_one_open_fitting(area: Area) -> None:
    transmitter = people.make_fitting(people.make_tag(area)).transmitter
    refused(
        Fitting.objects.create, tag=people.make_tag(area), transmitter=transmitter, fitted_on=DAY, fitted_reason="?"
    )


def test_a_fitting_does_not_end_before_it_begins(cast: people.Cast, area: Area) -> None:
    refused(
        Fitting.objects.create,
        tag=people.make_tag(area),
        transmitter=people.make_transmitter(cast.plant),
        fitted_on=DAY,
        removed_on=DAY - datetime.timedelta(days=1),
        fitted_reason="?",
    )


@pytest.mark.django_db
@pytest.mark.parametrize(
    "values",
    [
        pytest.param({"least_span": "20", "greatest_span": "16"}, id="least span above greatest span"),
        pytest.param({"lrl": "16", "url": "16"}, id="LRL not below URL"),
        pytest.param({"least_span": "0"}, id="least span of zero"),
    ],
)
def test_a_head_keeps_its_limits_in_order(values: dict[str, str]) -> None:
    kind = people.make_type()
    settings = {"code": "H", "unit": "bar", "lrl": "-1", "url": "16", "least_span": "0.16"} | values
    head = MeasuringHead(type=kind, **settings)
    head.set_si()
    refused(head.save)


def test_lrv_and_urv_differ(area: Area) -> None:
    row = Range(
        tag=people.make_tag(area), lrv="1", urv="1.0", unit="bar", reference="gauge", effective_from=DAY, reason="?"
    )
    row.set_si()
    refused(row.save)


def test_one_range_of_a_tag_begins_on_a_day(area: Area) -> None:
    tag = people.make_tag(area)
    people.make_range(tag, effective_from=DAY)
    row = Range(tag=tag, lrv="1", urv="2", unit="bar", reference="gauge", effective_from=DAY, reason="?")
    row.set_si()
    refused(row.save)


def test_a_serial_number_stands_once_per_maker_whatever_its_capital_letters(cast: people.Cast) -> None:
    head = people.make_head()
    people.make_transmitter(cast.plant, head, serial="V4-19022a")
    same = {"plant": cast.plant, "maker": head.type.maker, "type": head.type, "head": head}
    refused(Transmitter.objects.create, serial="V4-19022a", **same)
    refused(Transmitter.objects.create, serial="v4-19022A", **same)
    other = people.make_head(people.make_type(people.make_maker("Fernhollow Instruments")))
    people.make_transmitter(cast.plant, other, serial="V4-19022a")


def test_a_tag_number_stands_once_per_plant_whatever_its_capital_letters(cast: people.Cast, area: Area) -> None:
    people.make_tag(area, "PT-101A")
    refused(Tag.objects.create, plant=cast.plant, area=area, number="PT-101a", measurand="pressure")
    people.make_tag(people.make_area(cast.other_plant), "PT-101A")


def test_a_tag_and_a_transmitter_need_their_number(cast: people.Cast, area: Area) -> None:
    head = people.make_head()
    refused(Tag.objects.create, plant=cast.plant, area=area, number="", measurand="pressure")
    refused(
        Transmitter.objects.create,
        plant=cast.plant,
        maker=head.type.maker,
        type=head.type,
        head=head,
        serial="",
    )


def test_temperatures_stand_in_order(cast: people.Cast, area: Area) -> None:
    refused(people.make_tag, area=area, process_min="60", process_max="20")
    refused(people.make_area, plant=cast.plant, ambient_min="40", ambient_max="-10")
    refused(people.make_type, ambient_min="85", ambient_max="-40")


def test_names_stand_once(cast: people.Cast, area: Area) -> None:
    maker = people.make_maker()
    kind = people.make_type(maker, designation="Q40")
    head = people.make_head(kind, code="H3")
    refused(Plant.objects.create, code=cast.plant.code, name="Another")
    refused(Area.objects.create, plant=cast.plant, code=area.code, name="Another")
    refused(Maker.objects.create, name=maker.name)
    refused(TransmitterType.objects.create, maker=maker, designation="Q40", measures="gauge")
    refused(people.make_head, type=kind, code=head.code)


def test_a_tag_has_one_flag_per_check(area: Area) -> None:
    values = {
        "tag": people.make_tag(area),
        "check_key": "one_side",
        "severity": 3,
        "opened_at": timezone.now(),
        "sentence": "?",
    }
    Flag.objects.create(**values)
    refused(Flag.objects.create, **values)


def test_an_acceptance_has_a_reason(area: Area) -> None:
    refused(
        Flag.objects.create,
        tag=people.make_tag(area),
        check_key="one_side",
        severity=3,
        opened_at=timezone.now(),
        sentence="?",
        accepted_until=DAY,
    )
