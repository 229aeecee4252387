"""Entries are only added: sent again they change nothing, out of order they find their place."""

from __future__ import annotations

import random
import uuid

import pytest
from django.db import DatabaseError, transaction

from calibration.models import Entry, Sheet
from calibration.queries.drafts import Draft
from tests.calibration.at_work import Device, run_texts, to_as_found


def test_the_same_entries_sent_again_are_stored_once(tablet: Device) -> None:
    to_as_found(tablet)
    entries = [tablet.entry(name, text) for name, text in run_texts("as-found").items()]
    before = Entry.objects.count()
    first, second = tablet.send(*entries), tablet.send(*entries)
    assert set(first.saved) == set(second.saved)
    assert not second.refused
    assert Entry.objects.count() == before + 18


def test_an_entry_number_cannot_be_used_for_something_else(tablet: Device) -> None:
    to_as_found(tablet)
    entry = tablet.entry("as-found.1.measured", "4.01")
    tablet.send(entry)
    other = tablet.entry("as-found.1.measured", "4.02", id=entry.id)
    assert tablet.send(other).refused == [(entry.id, "This entry number was used before for something else.")]


def test_entries_that_arrive_in_any_order_count_in_the_order_of_their_device(tablet: Device) -> None:
    to_as_found(tablet)
    entries = []
    base = None
    for text in ("4.0", "4.01", "4.012", "4.0123"):
        entry = tablet.entry("as-found.1.measured", text, base=base)
        entries.append(entry)
        base = entry.id
    random.Random(7).shuffle(entries)
    for entry in entries:
        tablet.send(entry)
    kept = Draft(Sheet.objects.get()).fields["as-found.1.measured"]
    assert (kept.clashes, kept.text) == (False, "4.0123")


def test_a_later_entry_of_a_device_stands_over_its_earlier_one_even_if_an_answer_was_lost(tablet: Device) -> None:
    to_as_found(tablet)
    tablet.send(tablet.entry("as-found.1.measured", "4.01"))
    tablet.send(tablet.entry("as-found.1.measured", "4.02", base=None))
    assert Draft(Sheet.objects.get()).text("as-found.1.measured") == "4.02"


def test_everything_ever_typed_stays_readable(tablet: Device) -> None:
    to_as_found(tablet)
    tablet.type({"as-found.1.measured": "4.1"})
    tablet.type({"as-found.1.measured": "4.01"})
    texts = Entry.objects.filter(field="as-found.1.measured").order_by("sequence").values_list("text", flat=True)
    assert list(texts) == ["4.1", "4.01"]


def test_a_text_that_is_no_number_is_kept_as_typed(tablet: Device) -> None:
    to_as_found(tablet)
    tablet.type({"as-found.1.measured": "four"})
    run = Draft(Sheet.objects.get()).runs["as-found"]
    assert run.readings[0].measured == "four"
    assert "“four” is not a number" in run.readings[0].problems["measured"]


@pytest.mark.django_db
def test_the_database_refuses_to_change_or_delete_an_entry(tablet: Device) -> None:
    tablet.type({"confirm-tag": "PT-100"})
    for attempt in (lambda rows: rows.update(text="x"), lambda rows: rows._raw_delete("default")):
        with pytest.raises(DatabaseError, match="frozen"), transaction.atomic():
            attempt(Entry.objects.all())
    assert Entry.objects.get().text == "PT-100"


def test_a_field_that_no_sheet_has_is_refused_by_name(tablet: Device) -> None:
    for field in ("as-found.10.measured", "as-found.0.measured", "stage", "exception.1", "caution.unknown"):
        assert "has no field" in tablet.send(tablet.entry(field, "1")).refused[0][1]


def test_a_page_of_another_version_is_told_to_load_again(tablet: Device) -> None:
    stored = tablet.send(tablet.entry("confirm-tag", "PT-100", schema_version=2))
    assert "load it again" in stored.refused[0][1]


def test_a_device_number_used_by_another_entry_is_refused_not_overwritten(tablet: Device) -> None:
    tablet.send(tablet.entry("confirm-tag", "PT-100", sequence=5))
    stored = tablet.send(tablet.entry("confirm-tag", "PT-1", sequence=5, id=uuid.uuid4()))
    assert stored.refused
    assert Draft(Sheet.objects.get()).text("confirm-tag") == "PT-100"


def test_the_unit_of_the_applied_input_cannot_change_under_readings(tablet: Device) -> None:
    to_as_found(tablet)
    tablet.type({"as-found.unit": "kPa"})
    tablet.type({"as-found.1.applied": "0"})
    refused = tablet.send(tablet.entry("as-found.unit", "bar")).refused
    assert "already typed in the present unit" in refused[0][1]


def test_what_was_typed_over_something_refused_replaces_what_that_would_have_replaced(tablet: Device) -> None:
    to_as_found(tablet)
    tablet.type({"remarks": "first"})
    standing = Draft(Sheet.objects.get()).fields["remarks"].entry
    later = Device(tablet.person, tablet.sheet, "tablet-after-a-reload")
    long = later.entry("remarks", "x" * 2001, base=standing.id)
    longer = later.entry("remarks", "y" * 2002, base=long.id)
    short = later.entry("remarks", "second", base=longer.id)
    assert later.send(long, longer, short).saved == [short.id]
    kept = Draft(Sheet.objects.get()).fields["remarks"]
    assert (kept.clashes, kept.text) == (False, "second")
