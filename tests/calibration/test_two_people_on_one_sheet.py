"""Two devices on one sheet: nothing is overwritten silently, both versions stand until somebody settles them."""

from __future__ import annotations

import pytest
from django.core.exceptions import ValidationError

from calibration import sheets
from calibration.models import Sheet
from calibration.queries.drafts import Draft
from calibration.queries.entries import Field
from tests import cast as people
from tests.calibration.at_work import Device, run_texts, to_as_found

FIELD = "as-found.3.measured"


@pytest.fixture
def second(tablet: Device, cast: people.Cast) -> Device:
    """The engineer's tablet on the same sheet, which stands at as-found."""
    to_as_found(tablet)
    return Device(cast.engineer, tablet.sheet, "tablet-b")


def field(name: str = FIELD) -> Field:
    return Draft(Sheet.objects.get()).fields[name]


def test_both_versions_are_kept_and_neither_counts(tablet: Device, second: Device) -> None:
    tablet.send(tablet.entry(FIELD, "12.01"))
    second.send(second.entry(FIELD, "12.02"))
    kept = field()
    assert kept.clashes
    assert [entry.text for entry in kept.versions] == ["12.01", "12.02"]
    assert kept.text == ""


def test_the_last_to_arrive_does_not_win(tablet: Device, second: Device) -> None:
    first = tablet.entry(FIELD, "12.00")
    tablet.send(first)
    late = second.entry(FIELD, "12.02", base=first.id)
    tablet.send(tablet.entry(FIELD, "12.01", base=first.id))
    second.send(late)
    assert {entry.text for entry in field().versions} == {"12.01", "12.02"}


def test_who_has_seen_the_other_version_replaces_it(tablet: Device, second: Device) -> None:
    first = tablet.entry(FIELD, "12.01")
    tablet.send(first)
    second.send(second.entry(FIELD, "12.02", base=first.id))
    assert (field().clashes, field().text) == (False, "12.02")


def test_the_same_text_typed_twice_is_no_clash(tablet: Device, second: Device) -> None:
    first = tablet.entry(FIELD, "12.01")
    tablet.send(first)
    second.send(second.entry(FIELD, "12.01"))
    assert not field().clashes
    tablet.send(tablet.entry(FIELD, "12.03", base=first.id))
    assert (field().clashes, field().text) == (False, "12.03")


def test_a_settling_entry_decides_and_both_versions_stay_readable(tablet: Device, second: Device) -> None:
    tablet.send(tablet.entry(FIELD, "12.01"))
    second.send(second.entry(FIELD, "12.02"))
    seen = tuple(entry.id for entry in field().versions)
    second.send(second.entry(FIELD, "12.01", base=seen[0], settles=True, seen=seen))
    assert (field().clashes, field().text) == (False, "12.01")
    assert Sheet.objects.get().entries.filter(field=FIELD).count() == 3


def test_nobody_settles_a_version_that_he_has_not_seen(tablet: Device, second: Device) -> None:
    tablet.send(tablet.entry(FIELD, "12.01"))
    second.send(second.entry(FIELD, "12.02"))
    seen = tuple(entry.id for entry in field().versions)
    third = Device(tablet.person, tablet.sheet, "tablet-c")
    third.send(third.entry(FIELD, "12.03"))
    refused = second.send(second.entry(FIELD, "12.02", base=seen[1], settles=True, seen=seen)).refused
    assert "another version came in meanwhile" in refused[0][1]
    assert len(field().versions) == 3


def test_a_run_with_a_clash_is_not_closed(tablet: Device, second: Device) -> None:
    tablet.type(run_texts("as-found"))
    second.send(second.entry(FIELD, "12.02"))
    with pytest.raises(ValidationError, match="as-found, reading 3, measured"):
        sheets.close_as_found(by=tablet.by, sheet_id=tablet.sheet.pk, with_gaps=True)


def test_two_people_may_fill_in_different_fields_without_clashing(tablet: Device, second: Device) -> None:
    texts = list(run_texts("as-found").items())
    tablet.type(dict(texts[:9]))
    second.type(dict(texts[9:]))
    draft = Draft(Sheet.objects.get())
    assert not draft.clashes
    assert not draft.runs["as-found"].missing
