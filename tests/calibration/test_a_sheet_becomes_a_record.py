"""From opening to signature: what was typed is what is recorded, and each step waits for the one before."""

from __future__ import annotations

import uuid

import pytest
from django.core.exceptions import ValidationError

from calibration import sheets, signing
from calibration.models import Record, RunFigures, Sheet, Standing, Test
from calibration.opening import open_sheet
from register.auditing import Actor
from register.models import AuditEntry
from tests import cast as people
from tests.calibration.at_work import (
    Device,
    answer_checklist,
    opened,
    run_texts,
    signed,
    to_adjustment,
    to_as_found,
    to_signature,
)


def test_a_signed_sheet_gives_a_test_with_both_runs(tablet: Device) -> None:
    found = (0.2, 0.3, 0.6, 0.3, 0.2, 0.1, 0.2, 0.1, 0.1)
    record = signed(tablet, found, (0.1,) * 9)
    test = Test.objects.get()
    assert (test.current_record, test.sheet_id, test.tag) == (record, tablet.sheet.pk, tablet.sheet.tag)
    assert (test.as_found_verdict, test.as_left_verdict, test.adjusted, test.accepted) == ("fail", "pass", True, True)
    assert [reading.measured for reading in record.runs.get(kind="as-found").readings.all()] == [
        text for name, text in run_texts("as-found", found).items() if name.endswith("measured")
    ]
    signature = record.signatures.get()
    assert (signature.person, signature.printed_name, signature.time_zone) == (tablet.person, "Technician", "UTC")
    assert Sheet.objects.get().stage == "signed"


def test_signing_moves_the_due_date_in_the_same_transaction(tablet: Device, tag: people.Tag) -> None:
    signed(tablet)
    standing = Standing.objects.get(tag=tag)
    tested = Test.objects.get().tested_on
    assert standing.last_accepted_on == tested
    assert standing.due_on == tested.replace(year=tested.year + 1)


def test_a_test_that_fails_and_is_not_put_right_does_not_move_the_due_date(tablet: Device, tag: people.Tag) -> None:
    signed(tablet, (0.9,) * 9)
    assert not Test.objects.get().accepted
    assert Standing.objects.get(tag=tag).last_accepted_on is None


def test_texts_are_kept_as_typed(tablet: Device) -> None:
    to_as_found(tablet)
    texts = run_texts("as-found") | {"as-found.1.applied": "0,00", "as-found.1.measured": "4,0000"}
    tablet.type(texts)
    sheets.close_as_found(by=tablet.by, sheet_id=tablet.sheet.pk)
    tablet.type({"adjust.choice": "not adjusted"})
    sheets.record_adjustment(by=tablet.by, sheet_id=tablet.sheet.pk)
    answer_checklist(tablet)
    reading = signing.sign(by=tablet.by, sheet_id=tablet.sheet.pk).runs.get().readings.first()
    assert reading is not None
    assert (reading.applied, reading.measured, reading.measured_ma) == ("0,00", "4,0000", 4.0)


def test_signing_twice_gives_one_record(tablet: Device) -> None:
    first = signed(tablet)
    assert signing.sign(by=tablet.by, sheet_id=tablet.sheet.pk) == first
    assert Record.objects.count() == 1


def test_a_sheet_can_be_opened_twice_with_the_same_number_and_is_one_sheet(tag: people.Tag, cast: people.Cast) -> None:
    number = uuid.uuid4()
    by = Actor(person=cast.technician)
    first = open_sheet(by=by, reason="", tag=tag, sheet_id=number)
    assert open_sheet(by=by, reason="", tag=tag, sheet_id=number) == first
    assert Sheet.objects.count() == 1
    other = people.make_ready_tag(tag.area, "PT-101")
    with pytest.raises(ValidationError, match="belongs to another instrument"):
        open_sheet(by=by, reason="", tag=other, sheet_id=number)


def test_a_tag_that_lacks_something_says_what(cast: people.Cast) -> None:
    bare = people.make_tag(people.make_area(cast.plant), "PT-7")
    with pytest.raises(ValidationError) as refused:
        opened(bare, cast.technician)
    assert len(refused.value.messages) == 3
    assert "No transmitter is fitted at PT-7" in refused.value.messages[0]


def test_the_signature_waits_for_the_checklist(tablet: Device) -> None:
    to_signature(tablet)
    sheets.step_back(by=tablet.by, sheet_id=tablet.sheet.pk)
    tablet.type({"checklist.leaks": ""})
    with pytest.raises(ValidationError) as refused:
        sheets.return_to_service(by=tablet.by, sheet_id=tablet.sheet.pk)
    assert set(refused.value.message_dict) == {"checklist.leaks"}


def test_every_caution_is_answered_before_standards_are_chosen(tablet: Device) -> None:
    tablet.type({"confirm-tag": "PT-100", "confirm-serial": tablet.sheet.transmitter.serial})
    sheets.confirm(by=tablet.by, sheet_id=tablet.sheet.pk)
    tablet.type({"caution.permit": "yes"})
    with pytest.raises(ValidationError) as refused:
        sheets.pass_cautions(by=tablet.by, sheet_id=tablet.sheet.pk)
    assert "caution.control-room" in refused.value.message_dict
    assert "caution.permit" not in refused.value.message_dict


def test_each_step_leaves_an_audit_entry(tablet: Device) -> None:
    signed(tablet)
    stages = AuditEntry.objects.filter(thing_type="calibration.sheet", field="stage").order_by("id")
    assert [entry.after for entry in stages] == [
        "cautions",
        "reference standards",
        "as-found",
        "adjustment",
        "return to service",
        "sign",
        "signed",
    ]


def test_what_cannot_be_tested_is_signed_with_its_reason(tablet: Device, tag: people.Tag) -> None:
    to_as_found(tablet)
    tablet.type({"as-found.1.applied": "0", "as-found.1.measured": "4.01"})
    sheets.could_not_test(by=tablet.by, reason="Impulse line plugged, no permit to clear it.", sheet_id=tablet.sheet.pk)
    answer_checklist(tablet)
    record = signing.sign(by=tablet.by, sheet_id=tablet.sheet.pk)
    test = Test.objects.get()
    assert (test.outcome, test.accepted, test.as_found_verdict) == ("could not be tested", False, "incomplete")
    assert record.answers["could_not_test"] == "Impulse line plugged, no permit to clear it."
    assert RunFigures.objects.get().verdict == "incomplete"
    assert Standing.objects.get(tag=tag).last_accepted_on is None


def test_an_instrument_that_was_never_touched_needs_no_checklist(tablet: Device) -> None:
    sheets.could_not_test(by=tablet.by, reason="No permit today.", sheet_id=tablet.sheet.pk)
    record = signing.sign(by=tablet.by, sheet_id=tablet.sheet.pk)
    assert not record.runs.exists()


def test_an_abandoned_sheet_takes_no_more_entries(tablet: Device) -> None:
    with pytest.raises(ValidationError):
        sheets.abandon(by=tablet.by, reason=" ", sheet_id=tablet.sheet.pk)
    sheets.abandon(by=tablet.by, reason="Opened for the wrong tag.", sheet_id=tablet.sheet.pk)
    stored = tablet.send(tablet.entry("confirm-tag", "PT-100"))
    assert "abandoned" in stored.refused[0][1]


def test_a_sheet_that_tells_of_an_adjustment_is_not_abandoned(tablet: Device) -> None:
    to_adjustment(tablet)
    tablet.type({"adjust.choice": "adjusted", "adjust.log": "Zero trimmed."})
    with pytest.raises(ValidationError, match="The transmitter was adjusted"):
        sheets.abandon(by=tablet.by, reason="Called away.", sheet_id=tablet.sheet.pk)
    tablet.type({"adjust.choice": "not adjusted"})
    assert sheets.abandon(by=tablet.by, reason="Called away.", sheet_id=tablet.sheet.pk).stage == "abandoned"
