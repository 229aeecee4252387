"""Plain rows inserted at once are the rows that objects would have been stored as."""

from __future__ import annotations

import datetime
import gc
import uuid

import pytest
from django.db import IntegrityError, transaction
from django.utils import timezone

from register.bulk import among, another, columns_of, insert, many_objects_alive, values_of
from register.models import AuditEntry, Tag, TransmitterType
from tests.cast import Cast, make_area, make_maker, make_tag


def test_rows_of_every_kind_of_column_are_stored_as_objects_would_be(cast: Cast) -> None:
    maker = make_maker()
    rating = [["20", "160"], ["120", "110"]]
    made = TransmitterType(maker=maker, designation="A", measures="gauge", body_rating=rating, digital=True)
    made.set_si()
    columns = columns_of(TransmitterType)
    insert(TransmitterType, columns, values_of([made], columns))
    made.designation = "B"
    made.save()
    first, second = TransmitterType.objects.order_by("designation").values()
    assert {**first, "id": 0, "designation": ""} == {**second, "id": 0, "designation": ""}
    assert first["body_rating"] == rating and first["digital"] is True and first["ambient_min_k"] is None


def test_times_and_ids_are_stored_as_objects_would_be(cast: Cast) -> None:
    at, act = timezone.now(), uuid.uuid4()
    entry = AuditEntry(act=act, at=at, kind="created", plant=cast.plant, thing_type="register.tag", thing_id="1")
    columns = columns_of(AuditEntry)
    insert(AuditEntry, columns, values_of([entry, entry], columns))
    assert list(AuditEntry.objects.values_list("act", "at", "person_id")) == [(act, at, None)] * 2


def test_a_rule_of_the_data_holds_for_plain_rows_too(cast: Cast) -> None:
    tag = make_tag(make_area(cast.plant), "PT-1")
    columns = columns_of(Tag)
    with pytest.raises(IntegrityError), transaction.atomic():
        insert(Tag, columns, values_of([tag], columns))
    assert Tag.objects.count() == 1


def test_another_object_shares_nothing_with_the_blank_one(cast: Cast) -> None:
    area = make_area(cast.plant)
    blank = Tag(plant=cast.plant)
    one, other = another(blank, number="PT-1"), another(blank, number="PT-2", supply_v=24.0)
    one.area = other.area = area
    one.measurand = other.measurand = "pressure"
    one.save()
    other.save()
    assert (one.pk != other.pk, blank.pk, blank.number) == (True, None, "")
    stored = Tag.objects.get(number="PT-2")
    assert (stored.supply_v, stored.plant, stored.craft, stored.created_at.date()) == (
        24.0,
        cast.plant,
        "instrument",
        datetime.datetime.now(datetime.UTC).date(),
    )


def test_a_stretch_of_ids_is_asked_for_by_its_ends() -> None:
    assert among("pk", [3, 4, 5]) == {"pk__gte": 3, "pk__lte": 5}
    assert among("pk", [3, 5]) == {"pk__in": [3, 5]}
    assert among("pk", []) == {"pk__in": []}


def test_the_collector_works_again_afterwards() -> None:
    with many_objects_alive():
        assert not gc.isenabled()
        with many_objects_alive():
            pass
        assert not gc.isenabled()
    assert gc.isenabled()
