"""What is typed on a sheet stays as typed; what no record can keep stops the step, with the reason beside its field."""

from __future__ import annotations

import uuid
from collections.abc import Callable

import pytest
from django.core.exceptions import ValidationError
from django.test import Client
from django.urls import reverse

from calibration import sheets, signing
from calibration.models import Record, Run, RunFigures, Sheet
from calibration.opening import open_correction
from calibration.queries.drafts import Draft
from register.auditing import Actor
from tests import cast as people
from tests.calibration.at_work import Device, answer_checklist, run_texts, signed, to_as_found, to_signature

ClientAs = Callable[[people.User], Client]
WEATHER = "18 in the shade, 31 in the sun, windy from west"


@pytest.fixture
def client(client_as: ClientAs, cast: people.Cast) -> Client:
    return client_as(cast.technician)


def page(client: Client, sheet: Sheet) -> str:
    return client.get(reverse("sheet", args=[sheet.pk])).content.decode()


def correcting(tablet: Device, reason: str = "wrong meter") -> Device:
    record = signed(tablet)
    by = Actor(person=tablet.person)
    sheet = open_correction(by=by, reason=reason, test=record.test, sheet_id=uuid.uuid4())
    return Device(tablet.person, sheet, "tablet-c")


@pytest.mark.parametrize("condition", ["ambient", "height", "static"])
@pytest.mark.parametrize("text", ["warm", WEATHER, "18 °C", "1" * 41, "1e309", "0." + "0" * 60 + "5"])
def test_a_run_is_not_closed_with_surroundings_that_are_no_figure(tablet: Device, condition: str, text: str) -> None:
    to_as_found(tablet)
    tablet.type(run_texts("as-found") | {f"as-found.{condition}": text})
    with pytest.raises(ValidationError) as refused:
        sheets.close_as_found(by=tablet.by, sheet_id=tablet.sheet.pk)
    assert list(refused.value.message_dict) == [f"as-found.{condition}"]
    assert Draft(Sheet.objects.get()).text(f"as-found.{condition}") == text
    tablet.type({f"as-found.{condition}": "18.5"})
    assert sheets.close_as_found(by=tablet.by, sheet_id=tablet.sheet.pk).stage == "adjust"


def test_the_reason_stands_beside_the_field_and_the_field_is_not_folded_away(client: Client, tablet: Device) -> None:
    to_as_found(tablet)
    assert '<details class="conditions">' in page(client, tablet.sheet)
    tablet.type({"as-found.ambient": "warm"})
    text = page(client, tablet.sheet)
    assert '<details class="conditions" open>' in text
    assert 'value="warm"' in text
    assert text.index("“warm” is not a number") > text.index('id="f-as-found-ambient-note"')


def test_a_figure_of_surroundings_is_kept_as_typed(tablet: Device) -> None:
    to_as_found(tablet)
    tablet.type({"as-found.ambient": "−4,5", "as-found.static": "40.0", "as-found.height": "120"})
    signed_run(tablet)
    run = Run.objects.get()
    assert (run.ambient, run.static_pressure, run.height_difference) == ("−4,5", "40.0", "120")


def signed_run(tablet: Device) -> Record:
    tablet.type(run_texts("as-found"))
    sheets.close_as_found(by=tablet.by, sheet_id=tablet.sheet.pk)
    tablet.type({"adjust.choice": "not adjusted"})
    sheets.record_adjustment(by=tablet.by, sheet_id=tablet.sheet.pk)
    answer_checklist(tablet)
    return signing.sign(by=tablet.by, sheet_id=tablet.sheet.pk)


@pytest.mark.parametrize(
    ("field", "text", "unit"),
    [
        ("applied", "1e305", "MPa"),
        ("applied", "1e308", "bar"),
        ("applied", "500", "bar"),
        ("applied", "5" + "0" * 40, "bar"),
        ("measured", "1e308", "bar"),
        ("measured", "-1e200", "bar"),
        ("measured", "12004", "bar"),
        ("digital", "1e305", "bar"),
    ],
)
def test_a_reading_far_beyond_anything_is_a_slip(tablet: Device, field: str, text: str, unit: str) -> None:
    to_as_found(tablet)
    tablet.type({"as-found.unit": unit})
    tablet.type(run_texts("as-found") | {f"as-found.3.{field}": text})
    row = Draft(Sheet.objects.get()).runs["as-found"].readings[2]
    assert list(row.problems) == [field]
    assert text[:40] in row.problems[field]
    with pytest.raises(ValidationError) as refused:
        sheets.close_as_found(by=tablet.by, sheet_id=tablet.sheet.pk, with_gaps=True)
    assert f"as-found.3.{field}" in refused.value.message_dict


def test_a_reading_far_outside_is_still_a_reading(tablet: Device) -> None:
    to_as_found(tablet)
    tablet.type({"as-found.3.applied": "99", "as-found.3.measured": "0.000"})
    row = Draft(Sheet.objects.get()).runs["as-found"].readings[2]
    assert row.problems == {}
    assert row.point is not None
    assert row.caution.startswith("990 % of range")


def test_figures_of_a_run_are_finite_whatever_was_typed_first(tablet: Device) -> None:
    to_as_found(tablet)
    tablet.type({"as-found.3.applied": "1e305", "as-found.3.measured": "1e308"})
    signed_run(tablet)
    errors = RunFigures.objects.get().point_errors
    assert len(errors) == 5
    assert all(abs(error) < 1e-9 for _, error in errors)


def test_the_zero_at_line_pressure_is_a_reading_too(tablet: Device) -> None:
    sheet = tablet.sheet
    for line in sheet.basis["checklist"]:
        line["answer"] = "reading"
    sheet.save()
    to_signature_but_checklist(tablet)
    tablet.type({f"checklist.{line['key']}": "1e308" for line in sheet.basis["checklist"]})
    with pytest.raises(ValidationError) as refused:
        sheets.return_to_service(by=tablet.by, sheet_id=sheet.pk)
    assert len(refused.value.message_dict) == len(sheet.basis["checklist"])


def to_signature_but_checklist(tablet: Device) -> None:
    to_as_found(tablet)
    tablet.type(run_texts("as-found"))
    sheets.close_as_found(by=tablet.by, sheet_id=tablet.sheet.pk)
    tablet.type({"adjust.choice": "not adjusted"})
    sheets.record_adjustment(by=tablet.by, sheet_id=tablet.sheet.pk)


def test_a_test_that_could_not_be_finished_is_ended_only_when_its_run_can_be_read(tablet: Device) -> None:
    to_as_found(tablet)
    tablet.type({"as-found.1.applied": "0", "as-found.1.measured": "4.01", "as-found.ambient": WEATHER})
    with pytest.raises(ValidationError) as refused:
        sheets.could_not_test(by=tablet.by, reason="impulse line plugged", sheet_id=tablet.sheet.pk)
    assert any("ambient temperature" in words for words in refused.value.messages)
    tablet.type({"as-found.ambient": ""})
    sheets.could_not_test(by=tablet.by, reason="impulse line plugged", sheet_id=tablet.sheet.pk)
    answer_checklist(tablet)
    signing.sign(by=tablet.by, sheet_id=tablet.sheet.pk)
    assert Run.objects.get().ambient == ""


def test_a_clash_is_settled_before_a_test_is_given_up(tablet: Device, cast: people.Cast) -> None:
    to_as_found(tablet)
    other = Device(cast.engineer, tablet.sheet, "tablet-b")
    tablet.send(tablet.entry("as-found.1.measured", "4.01"))
    other.send(other.entry("as-found.1.measured", "4.02"))
    with pytest.raises(ValidationError) as refused:
        sheets.could_not_test(by=tablet.by, reason="impulse line plugged", sheet_id=tablet.sheet.pk)
    assert refused.value.code == "clash"


def test_a_reason_for_a_correction_is_kept_whole_or_not_taken(tablet: Device) -> None:
    correction = correcting(tablet)
    correction.type({"correct.reason": "x" * 301})
    with pytest.raises(ValidationError) as refused:
        sheets.finish_correction(by=correction.by, sheet_id=correction.sheet.pk)
    assert "here are 301" in refused.value.message_dict["correct.reason"][0]
    correction.type({"correct.reason": "y" * 300})
    sheets.finish_correction(by=correction.by, sheet_id=correction.sheet.pk)
    record = signing.sign(by=correction.by, sheet_id=correction.sheet.pk)
    assert record.correction_reason == "y" * 300


@pytest.mark.parametrize("late", ["", "z" * 301])
def test_a_reason_that_came_after_the_last_look_is_looked_at_before_signing(tablet: Device, late: str) -> None:
    correction = correcting(tablet)
    sheets.finish_correction(by=correction.by, sheet_id=correction.sheet.pk)
    correction.type({"correct.reason": late})
    with pytest.raises(ValidationError):
        signing.sign(by=correction.by, sheet_id=correction.sheet.pk)
    assert Record.objects.count() == 1


def test_the_page_of_a_correction_says_which_figure_is_wrong_beside_it(client: Client, tablet: Device) -> None:
    correction = correcting(tablet)
    correction.type({"as-found.ambient": "warm", "as-left.3.measured": "abc"})
    response = client.post(reverse("sheet-step", args=[correction.sheet.pk, "correction"]))
    text = response.content.decode()
    assert text.index("“warm” is not a number") > text.index('id="f-as-found-ambient-note"')
    assert "“abc” is not a number" in text
    assert text.count("<details open><summary") == 2


def test_a_whole_test_is_signed_after_every_slip_is_mended(client: Client, tablet: Device) -> None:
    to_as_found(tablet)
    tablet.type(run_texts("as-found") | {"as-found.ambient": WEATHER})
    url = reverse("sheet-step", args=[tablet.sheet.pk, "close-as-found"])
    text = client.post(url).content.decode()
    assert "words belong into the remarks" in text
    assert f'value="{WEATHER}"' in text
    tablet.type({"as-found.ambient": "18"})
    assert client.post(url).status_code == 302


def test_nothing_of_this_stops_an_ordinary_signature(tablet: Device) -> None:
    to_signature(tablet, (0.6,) * 9, (0.1,) * 9)
    assert signing.sign(by=tablet.by, sheet_id=tablet.sheet.pk).position == 1
