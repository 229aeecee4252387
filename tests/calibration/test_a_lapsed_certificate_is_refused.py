"""A standard whose certificate has lapsed is refused, unless an authorised person allows it with a reason."""

from __future__ import annotations

import datetime
from collections.abc import Callable

import pytest
from django.core.exceptions import ValidationError
from django.test import Client
from django.urls import reverse

from calibration import sheets, signing
from calibration.models import Entry, Sheet, Standard, StandardUse
from register import membership
from register.auditing import Actor
from register.models import AuditEntry
from tests import cast as people
from tests.calibration.at_work import Device, answer_checklist, run_texts, to_as_found


@pytest.fixture
def lapsed(tablet: Device, tag: people.Tag) -> Standard:
    """A pressure standard whose certificate lapsed; the sheet stands where standards are chosen."""
    standard = people.make_standard(tag.plant, certified=False)
    people.make_certificate(standard, number="C-old", valid_until=tag.plant.today() - datetime.timedelta(days=37))
    meter = people.make_meter(tag.plant)
    tablet.type({"confirm-tag": "PT-100", "confirm-serial": tablet.sheet.transmitter.serial})
    sheets.confirm(by=tablet.by, sheet_id=tablet.sheet.pk)
    tablet.type({f"caution.{line['key']}": "yes" for line in tablet.sheet.basis["cautions"]})
    sheets.pass_cautions(by=tablet.by, sheet_id=tablet.sheet.pk)
    tablet.type({"as-found.applied-with": str(standard.pk), "as-found.measured-with": str(meter.pk)})
    return standard


def choose(tablet: Device) -> Sheet:
    return sheets.choose_standards(by=tablet.by, sheet_id=tablet.sheet.pk, kind="as-found")


def refusal(tablet: Device) -> dict[str, list[str]]:
    with pytest.raises(ValidationError) as error:
        choose(tablet)
    messages: dict[str, list[str]] = error.value.message_dict
    return messages


def test_it_is_refused_with_the_date_it_lapsed(tablet: Device, lapsed: Standard) -> None:
    until = lapsed.certificates.get().valid_until
    assert refusal(tablet) == {
        "as-found.applied-with": [
            f"The certificate C-old of {lapsed.name} was relied on until {until}, 37 days ago. "
            "It cannot be used: choose another, or have an exception allowed."
        ]
    }


def test_the_last_day_still_counts(tablet: Device, lapsed: Standard, tag: people.Tag) -> None:
    people.make_certificate(
        lapsed, valid_until=tag.plant.today(), calibrated_on=tag.plant.today() - datetime.timedelta(days=30)
    )
    assert choose(tablet).stage == "as-found"


def test_a_standard_without_certificate_is_refused(tablet: Device, lapsed: Standard) -> None:
    bare = people.make_standard(lapsed.plant, certified=False)
    tablet.type({"as-found.applied-with": str(bare.pk)})
    assert "has no certificate" in refusal(tablet)["as-found.applied-with"][0]


def test_a_standard_away_at_the_laboratory_is_refused_and_cannot_be_excepted(
    tablet: Device, lapsed: Standard, cast: people.Cast
) -> None:
    away = people.make_standard(lapsed.plant, state="at the laboratory")
    tablet.type({"as-found.applied-with": str(away.pk)})
    assert "is at the laboratory" in refusal(tablet)["as-found.applied-with"][0]
    with pytest.raises(ValidationError, match="needs no exception"):
        sheets.allow_exception(by=Actor(person=cast.engineer), reason="urgent", sheet_id=tablet.sheet.pk, standard=away)


def test_a_meter_does_not_apply_pressure(tablet: Device, lapsed: Standard) -> None:
    meter = Standard.objects.get(kind="current")
    tablet.type({"as-found.applied-with": str(meter.pk)})
    assert "is no standard that applied the input" in refusal(tablet)["as-found.applied-with"][0]


def test_an_allowed_exception_is_recorded_with_who_and_why(tablet: Device, lapsed: Standard, cast: people.Cast) -> None:
    reason = "Checked against RS-9 this morning, within 0.01 % at five points."
    sheets.allow_exception(by=Actor(person=cast.engineer), reason=reason, sheet_id=tablet.sheet.pk, standard=lapsed)
    choose(tablet)
    tablet.type(run_texts("as-found"))
    sheets.close_as_found(by=tablet.by, sheet_id=tablet.sheet.pk)
    tablet.type({"adjust.choice": "not adjusted"})
    sheets.record_adjustment(by=tablet.by, sheet_id=tablet.sheet.pk)
    answer_checklist(tablet)
    record = signing.sign(by=tablet.by, sheet_id=tablet.sheet.pk)
    use = StandardUse.objects.get(part="applied")
    assert (use.certificate, use.exception, use.exception_by) == (lapsed.certificates.get(), reason, cast.engineer)
    assert record.answers["exceptions"] == [{"standard": lapsed.name, "reason": reason, "by": "Engineer"}]
    entry = AuditEntry.objects.get(field="exception")
    assert (entry.person, entry.reason) == (cast.engineer, reason)


def test_only_who_may_allow_it_can(tablet: Device, lapsed: Standard, cast: people.Cast) -> None:
    for person in (cast.technician, cast.planner, cast.auditor, cast.stranger):
        with pytest.raises(ValidationError, match="no role in this plant that allows an exception"):
            sheets.allow_exception(by=Actor(person=person), reason="why not", sheet_id=tablet.sheet.pk, standard=lapsed)
    assert refusal(tablet)


def test_nobody_allows_an_exception_on_his_own_sheet(tag: people.Tag, cast: people.Cast, lapsed: Standard) -> None:
    from tests.calibration.at_work import opened

    own = opened(tag, cast.engineer, "tablet-e")
    with pytest.raises(ValidationError, match="somebody else must allow"):
        sheets.allow_exception(by=own.by, reason="I know it is good.", sheet_id=own.sheet.pk, standard=lapsed)


def test_an_exception_needs_a_reason(tablet: Device, lapsed: Standard, cast: people.Cast) -> None:
    with pytest.raises(ValidationError) as error:
        sheets.allow_exception(by=Actor(person=cast.engineer), reason=" ", sheet_id=tablet.sheet.pk, standard=lapsed)
    assert set(error.value.message_dict) == {"reason"}


def test_the_authorised_person_gives_his_password_on_the_technicians_tablet(
    tablet: Device, lapsed: Standard, cast: people.Cast, client_as: Callable[[people.User], Client]
) -> None:
    client = client_as(cast.technician)
    page = client.get(reverse("sheet", args=[tablet.sheet.pk])).content.decode()
    url = reverse("sheet-exception", args=[tablet.sheet.pk, lapsed.pk])
    assert url in page
    values = {"username": "engineer", "password": "wrong", "reason": "Checked this morning."}
    refused = client.post(url, values).content.decode()
    assert "do not belong together" in refused
    assert "Checked this morning." in refused
    own = {"username": "technician", "password": people.PASSWORD, "reason": "I want to."}
    assert "no role in this plant that allows an exception" in client.post(url, own).content.decode()
    assert client.post(url, values | {"password": people.PASSWORD}).status_code == 302
    assert (
        "Engineer allowed it: Checked this morning."
        in client.get(reverse("sheet", args=[tablet.sheet.pk])).content.decode()
    )
    assert choose(tablet).stage == "as-found"


def test_a_certificate_that_lapses_between_choosing_and_the_last_reading_is_refused_at_closing(
    tablet: Device, tag: people.Tag
) -> None:
    to_as_found(tablet)
    tablet.type(run_texts("as-found"))
    standard = Standard.objects.get(kind="pressure")
    standard.certificates.update(valid_until=tag.plant.today() - datetime.timedelta(days=1))
    with pytest.raises(ValidationError) as error:
        sheets.close_as_found(by=tablet.by, sheet_id=tablet.sheet.pk)
    assert "1 day ago" in error.value.message_dict["as-found.applied-with"][0]


def test_a_password_that_somebody_else_gave_allows_nothing_in_its_owners_name(
    client_as: Callable[[people.User], Client], tablet: Device, lapsed: Standard, cast: people.Cast
) -> None:
    given, own = "given by the administrator 1", "known to the engineer alone 2"
    membership.set_password(by=Actor(person=cast.administrator), person=cast.engineer, password=given)
    client = client_as(cast.technician)
    url = reverse("sheet-exception", args=[tablet.sheet.pk, lapsed.pk])
    values = {"reason": "no other at hand", "username": "engineer", "password": given}
    page = client.post(url, values).content.decode()
    assert "Somebody else gave Engineer this password" in page
    assert not Entry.objects.filter(field__startswith="exception.").exists()
    cast.engineer.refresh_from_db()
    membership.set_password(by=Actor(person=cast.engineer), person=cast.engineer, password=own)
    assert client.post(url, values | {"password": own}).status_code == 302
    assert Entry.objects.get(field__startswith="exception.").person == cast.engineer
