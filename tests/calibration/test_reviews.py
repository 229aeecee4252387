"""A second person reviews a record or sends it back; corrections are new versions beside the old."""

from __future__ import annotations

import uuid
from collections.abc import Callable

import pytest
from django.core.exceptions import ValidationError
from django.test import Client, override_settings
from django.urls import reverse

from calibration import reviewing, sheets, signing
from calibration.models import Record, Sheet, Signature, Standing, Test
from calibration.opening import open_correction
from register.auditing import Actor
from tests import cast as people
from tests.calibration.at_work import Device, opened, signed

ClientAs = Callable[[people.User], Client]


@pytest.fixture
def record(tablet: Device) -> Record:
    return signed(tablet, (0.6,) * 9, (0.1,) * 9)


def corrected(record: Record, person: people.User, texts: dict[str, str]) -> Record:
    number = uuid.uuid4()
    by = Actor(person=person)
    open_correction(by=by, reason="Reading 3 was misread.", test=record.test, sheet_id=number)
    Device(person, Sheet.objects.get(pk=number), "tablet-c").type(texts)
    sheets.finish_correction(by=by, sheet_id=number)
    return signing.sign(by=by, sheet_id=number)


def test_a_reviewer_signs_with_his_password(record: Record, client_as: ClientAs, cast: people.Cast) -> None:
    client = client_as(cast.reviewer)
    url = reverse("test-review", args=[record.test_id])
    text = client.post(url, {"record": record.pk, "password": "wrong", "remarks": "Read it."}).content.decode()
    assert "This is not your password" in text
    assert "Read it." in text
    assert not Signature.objects.filter(meaning="reviewed").exists()
    assert client.post(url, {"record": record.pk, "password": people.PASSWORD}).status_code == 302
    test = Test.objects.get()
    assert (test.state, test.accepted) == ("reviewed", True)
    signature = Signature.objects.get(meaning="reviewed")
    assert (signature.person, signature.printed_name, signature.position) == (cast.reviewer, "Reviewer", 3)


def test_nobody_reviews_his_own_test(cast: people.Cast, tag: people.Tag) -> None:
    own = signed(opened(tag, cast.engineer))
    with pytest.raises(ValidationError, match="You took part in this test"):
        reviewing.review(by=Actor(person=cast.engineer), test=own.test, record_id=own.pk)


def test_who_entered_a_reading_does_not_review_it(tablet: Device, cast: people.Cast) -> None:
    Device(cast.engineer, tablet.sheet, "tablet-b").type({"confirm-tag": "PT-100"})
    record = signed(tablet)
    with pytest.raises(ValidationError, match="You took part in this test"):
        reviewing.review(by=Actor(person=cast.engineer), test=record.test, record_id=record.pk)


def test_a_review_does_not_move_the_due_date(record: Record, tag: people.Tag, cast: people.Cast) -> None:
    before = Standing.objects.get(tag=tag).due_on
    reviewing.review(by=Actor(person=cast.reviewer), test=record.test, record_id=record.pk)
    assert Standing.objects.get(tag=tag).due_on == before


def test_a_record_sent_back_does_not_count_until_it_is_corrected(
    record: Record, tag: people.Tag, cast: people.Cast
) -> None:
    by = Actor(person=cast.reviewer)
    with pytest.raises(ValidationError):
        reviewing.send_back(by=by, test=record.test, record_id=record.pk, remarks=" ")
    reviewing.send_back(by=by, test=record.test, record_id=record.pk, remarks="Reading 3 looks misread.")
    test = Test.objects.get()
    assert (test.state, test.accepted) == ("sent back", False)
    assert Standing.objects.get(tag=tag).last_accepted_on is None
    newer = corrected(record, cast.technician, {"as-found.3.measured": "12.0160"})
    test.refresh_from_db()
    assert (test.state, test.accepted, test.current_record) == ("signed", True, newer)
    assert (newer.version, newer.supersedes, newer.correction_reason) == (2, record, "Reading 3 was misread.")
    assert Standing.objects.get(tag=tag).last_accepted_on == test.tested_on


def test_a_correction_keeps_what_it_does_not_touch(record: Record, cast: people.Cast) -> None:
    newer = corrected(record, cast.technician, {"as-found.3.measured": "12.0160"})
    before = {row.order: row for row in record.runs.get(kind="as-found").readings.all()}
    for row in newer.runs.get(kind="as-found").readings.all():
        same = row.order != 3
        assert (row.measured == before[row.order].measured) == same
        assert (row.entered_at == before[row.order].entered_at) == same
    assert newer.basis["mpe"] == record.basis["mpe"]
    assert newer.answers["cautions"] == record.answers["cautions"]
    assert Record.objects.get(pk=record.pk).hash == record.hash


def test_a_newer_version_is_not_reviewed_unseen(record: Record, cast: people.Cast) -> None:
    corrected(record, cast.technician, {"as-found.3.measured": "12.0160"})
    with pytest.raises(ValidationError, match="newer version"):
        reviewing.review(by=Actor(person=cast.reviewer), test=record.test, record_id=record.pk)


def test_one_correction_at_a_time(record: Record, cast: people.Cast) -> None:
    by = Actor(person=cast.technician)
    open_correction(by=by, reason="first", test=record.test, sheet_id=uuid.uuid4())
    with pytest.raises(ValidationError, match="already has a correction"):
        open_correction(by=by, reason="second", test=record.test, sheet_id=uuid.uuid4())
    with pytest.raises(ValidationError):
        open_correction(by=by, reason="", test=record.test, sheet_id=uuid.uuid4())


def test_the_page_shows_both_versions_and_what_changed(record: Record, client_as: ClientAs, cast: people.Cast) -> None:
    corrected(record, cast.technician, {"as-found.3.measured": "12.0160"})
    client = client_as(cast.auditor)
    url = reverse("test", args=[record.test_id])
    text = client.get(url).content.decode()
    assert "as-found: reading 3 (50 % up), measured" in text
    assert "12.0960 mA" in text
    assert "12.0160 mA" in text
    assert "Reading 3 was misread." in text
    old = client.get(url, {"version": 1}).content.decode()
    assert "superseded" in old
    assert record.hash in old
    assert client.get(url, {"version": 9}).status_code == 404


def test_a_planner_may_read_but_not_review(record: Record, client_as: ClientAs, cast: people.Cast) -> None:
    client = client_as(cast.planner)
    assert client.get(reverse("test", args=[record.test_id])).status_code == 200
    url = reverse("test-review", args=[record.test_id])
    assert client.post(url, {"record": record.pk, "password": people.PASSWORD}).status_code == 403


@override_settings(AXES_ENABLED=True, AXES_FAILURE_LIMIT=3)
def test_wrong_passwords_at_a_signature_count_towards_the_lock_out(
    record: Record, client_as: ClientAs, cast: people.Cast
) -> None:
    client = client_as(cast.reviewer)
    url = reverse("test-review", args=[record.test_id])
    for _ in range(3):
        client.post(url, {"record": record.pk, "password": "wrong"})
    response = client.post(url, {"record": record.pk, "password": people.PASSWORD})
    assert response.status_code == 429
    assert not Signature.objects.filter(meaning="reviewed").exists()
