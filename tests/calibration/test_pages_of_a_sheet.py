"""The pages of a sheet: by form alone, by htmx and as JSON; errors stand beside the field, nothing typed is lost."""

from __future__ import annotations

import json
import re
import uuid
from collections.abc import Callable
from typing import Any

import pytest
from django.test import Client
from django.urls import reverse
from django.utils import timezone

from calibration import sheets
from calibration.models import Entry, Record, Sheet, Standard, Test
from calibration.queries.drafts import Draft
from tests import cast as people
from tests.calibration.at_work import Device, run_texts, signed, standards_of, to_adjustment, to_as_found, to_signature

ClientAs = Callable[[people.User], Client]


@pytest.fixture
def client(client_as: ClientAs, cast: people.Cast) -> Client:
    return client_as(cast.technician)


def page(client: Client, sheet: Sheet) -> str:
    response = client.get(reverse("sheet", args=[sheet.pk]))
    assert response.status_code == 200
    return response.content.decode()


def send(client: Client, sheet: Sheet, step: str, texts: dict[str, str], **more: str) -> Any:
    """Post a form as a browser without script would, with what it was shown as seen."""
    draft = Draft(Sheet.objects.get(pk=sheet.pk))
    seen = {f"seen.{name}": str(draft.fields[name].entry.id) if name in draft.fields else "" for name in texts}
    return client.post(reverse("sheet-step", args=[sheet.pk, step]), texts | seen | more)


def test_a_whole_test_by_forms_alone(client: Client, tag: people.Tag) -> None:
    shown = client.get(reverse("sheet-open", args=[tag.pk]))
    number = str(shown.context["number"])
    assert client.post(reverse("sheet-open", args=[tag.pk]), {"sheet": number}).status_code == 302
    sheet = Sheet.objects.get(pk=number)
    assert tag.number in page(client, sheet)
    send(client, sheet, "confirm", {"confirm-tag": "PT-100", "confirm-serial": sheet.transmitter.serial})
    assert "Before you start" in page(client, sheet)
    send(client, sheet, "cautions", {f"caution.{line['key']}": "yes" for line in sheet.basis["cautions"]})
    pressure, meter = standards_of(tag)
    assert pressure.name in page(client, sheet)
    send(
        client,
        sheet,
        "standards",
        {"as-found.applied-with": str(pressure.pk), "as-found.measured-with": str(meter.pk)},
        kind="as-found",
    )
    assert "0 bar → 4.000 mA" in page(client, sheet)
    send(client, sheet, "close-as-found", run_texts("as-found", (0.6,) * 9), kind="as-found")
    assert "out of tolerance" in page(client, sheet)
    send(client, sheet, "adjustment", {"adjust.choice": "adjusted", "adjust.log": "Zero trimmed."})
    send(client, sheet, "close-as-left", run_texts("as-left", (0.1,) * 9), kind="as-left")
    assert "Return to service" in page(client, sheet)
    send(client, sheet, "return", {f"checklist.{line['key']}": "yes" for line in sheet.basis["checklist"]})
    assert "Your password" in page(client, sheet)
    response = client.post(reverse("sheet-sign", args=[sheet.pk]), {"password": people.PASSWORD})
    test = Test.objects.get()
    assert response["Location"] == reverse("test", args=[test.pk])
    assert (test.as_found_verdict, test.as_left_verdict) == ("fail", "pass")
    assert client.get(reverse("sheet", args=[sheet.pk]))["Location"] == response["Location"]


def test_what_was_typed_is_there_after_a_reload(client: Client, tablet: Device) -> None:
    to_as_found(tablet)
    tablet.type({"as-found.3.measured": "12,0177", "as-found.3.applied": "5.003"})
    text = page(client, tablet.sheet)
    assert 'value="12,0177"' in text
    assert 'value="5.003"' in text


def test_a_slip_stays_in_its_field_with_the_error_beside_it(client: Client, tablet: Device) -> None:
    response = send(client, tablet.sheet, "confirm", {"confirm-tag": "PT-100", "confirm-serial": "S-99999"})
    text = response.content.decode()
    assert 'value="S-99999"' in text
    assert "“S-99999” was typed" in text
    assert text.index("“S-99999” was typed") > text.index('id="f-confirm-serial"')


def test_the_serial_number_is_not_shown_before_it_is_confirmed(client: Client, tablet: Device) -> None:
    assert tablet.sheet.transmitter.serial not in page(client, tablet.sheet)
    to_as_found(tablet)
    assert tablet.sheet.transmitter.serial in page(client, tablet.sheet)


def htmx(client: Client, sheet: Sheet, field: str, text: str, **more: str) -> Any:
    values = {
        "uuid": str(uuid.uuid4()),
        "field": field,
        "text": text,
        "device": "tablet-h",
        "sequence": str(Entry.objects.count() + 1),
        "base": "",
        "typed_at": timezone.now().isoformat(),
        "schema_version": "1",
    } | more
    return client.post(reverse("sheet-entries", args=[sheet.pk]), values, headers={"HX-Request": "true"})


def test_a_field_left_is_saved_and_answered_with_its_error_at_once(client: Client, tablet: Device) -> None:
    to_as_found(tablet)
    htmx(client, tablet.sheet, "as-found.3.applied", "5")
    response = htmx(client, tablet.sheet, "as-found.3.measured", "12.096")
    text = response.content.decode()
    assert "+0.600" in text
    assert "outside" in text
    assert 'hx-swap-oob="true"' in text
    told = json.loads(response["HX-Trigger"])["entries-told"]
    assert len(told["saved"]) == 1
    assert Entry.objects.filter(field="as-found.3.measured", text="12.096").exists()


def test_judging_while_typing_stores_nothing(client: Client, tablet: Device) -> None:
    to_as_found(tablet)
    before = Entry.objects.count()
    response = client.get(
        reverse("sheet-judge", args=[tablet.sheet.pk]),
        {"kind": "as-found", "key": "3", "as-found.3.applied": "5", "as-found.3.measured": "12.04"},
        headers={"HX-Request": "true"},
    )
    assert "+0.250" in response.content.decode()
    assert Entry.objects.count() == before


def test_the_fragment_is_part_of_the_page(client: Client, tablet: Device) -> None:
    to_as_found(tablet)
    htmx(client, tablet.sheet, "as-found.3.applied", "5")
    response = htmx(client, tablet.sheet, "as-found.3.measured", "12.096")
    whole = page(client, tablet.sheet)
    start = response.content.decode().index("<output")
    fragment = response.content.decode()[start : response.content.decode().index("</output>")]
    assert fragment in whole


def test_a_refused_field_is_told_with_the_reason(client: Client, tablet: Device) -> None:
    to_as_found(tablet)
    response = htmx(client, tablet.sheet, "as-left.3.measured", "12.0")
    told = json.loads(response["HX-Trigger"])["entries-told"]
    assert "the as-left run opens after" in told["refused"][0]["why"]


def test_a_queue_is_taken_as_json_and_again(client: Client, tablet: Device) -> None:
    to_as_found(tablet)
    rows = [
        {
            "uuid": str(uuid.uuid4()),
            "field": name,
            "text": text,
            "device": "tablet-q",
            "sequence": number,
            "base": None,
            "typed_at": timezone.now().isoformat(),
            "schema_version": 1,
        }
        for number, (name, text) in enumerate(run_texts("as-found").items())
    ]
    url = reverse("sheet-entries", args=[tablet.sheet.pk])
    for _ in range(2):
        answer = client.post(url, {"entries": rows}, content_type="application/json").json()
        assert sorted(answer["saved"]) == sorted(row["uuid"] for row in rows)
        assert answer["refused"] == []
    assert Entry.objects.filter(device="tablet-q").count() == 18


@pytest.mark.parametrize(
    "body",
    [
        "no json",
        "[]",
        '{"entries": 3}',
        '{"entries": [3]}',
        '{"entries": [{}]}',
        "[" * 200_000,
        '{"entries": ' + "[" * 200_000,
        '{"entries": [{"uuid": "x", "field": "a", "device": "d", "sequence": 1, "typed_at": "2026-01-01T00:00:00Z"}]}',
        '{"entries": [{"uuid": "6f9619ff-8b86-d011-b42d-00cf4fc964ff", "field": "a", "device": "d", "sequence": 1e400,'
        ' "typed_at": "2026-01-01T00:00:00Z"}]}',
        '{"entries": [{"uuid": "6f9619ff-8b86-d011-b42d-00cf4fc964ff", "field": "a", "device": "", "sequence": 1,'
        ' "typed_at": "2026-01-01T00:00:00Z"}]}',
        '{"entries": [{"uuid": "6f9619ff-8b86-d011-b42d-00cf4fc964ff", "field": "a", "device": "d", "sequence": 1,'
        ' "typed_at": "2026-01-01"}]}',
    ],
)
def test_unreadable_json_is_refused_in_words(client: Client, tablet: Device, body: str) -> None:
    url = reverse("sheet-entries", args=[tablet.sheet.pk])
    response = client.post(url, body, content_type="application/json")
    assert response.status_code == 400
    assert response.json()["error"]


def test_a_signed_out_tablet_is_told_so_and_keeps_its_queue(tablet: Device) -> None:
    url = reverse("sheet-entries", args=[tablet.sheet.pk])
    response = Client().post(
        url, {"entries": []}, content_type="application/json", headers={"Accept": "application/json"}
    )
    assert response.status_code == 401


def test_a_clash_is_shown_with_both_versions_and_settled_by_a_button(
    client: Client, tablet: Device, cast: people.Cast
) -> None:
    to_as_found(tablet)
    other = Device(cast.engineer, tablet.sheet, "tablet-b")
    tablet.send(tablet.entry("as-found.3.measured", "12.01"))
    other.send(other.entry("as-found.3.measured", "12.02"))
    text = page(client, tablet.sheet)
    assert "typed by you" in text
    assert "typed by Engineer" in text
    versions = Draft(Sheet.objects.get()).fields["as-found.3.measured"].versions
    client.post(
        reverse("sheet-settle", args=[tablet.sheet.pk]),
        {
            "settle": f"as-found.3.measured {versions[1].id}",
            "versions.as-found.3.measured": [str(version.id) for version in versions],
        },
    )
    assert Draft(Sheet.objects.get()).text("as-found.3.measured") == "12.02"


def test_the_empty_field_of_a_clash_is_no_third_version(client: Client, tablet: Device, cast: people.Cast) -> None:
    to_as_found(tablet)
    name = "as-found.3.measured"
    other = Device(cast.engineer, tablet.sheet, "tablet-b")
    tablet.send(tablet.entry(name, "12.01"))
    other.send(other.entry(name, "12.02"))
    kept = Draft(Sheet.objects.get()).fields[name]
    client.post(
        reverse("sheet-settle", args=[tablet.sheet.pk]),
        {
            name: "",
            f"seen.{name}": str(kept.entry.id),
            "settle": f"{name} {kept.versions[0].id}",
            f"versions.{name}": [str(version.id) for version in kept.versions],
        },
    )
    settled = Draft(Sheet.objects.get()).fields[name]
    assert (settled.clashes, settled.text) == (False, "12.01")


def test_choices_of_others_are_told_by_their_names(client: Client, tablet: Device, cast: people.Cast) -> None:
    to_as_found(tablet)
    other = Device(cast.engineer, tablet.sheet, "tablet-b")
    other.type({"as-found.ambient-unit": "degF"})
    assert "typed “°F” at as-found, unit of the ambient temperature" in page(client, tablet.sheet)
    other.type({"as-found.1.measured": "4.003"})
    other.type({"as-found.1.measured": ""})
    assert "emptied as-found, reading 1, measured" in page(client, tablet.sheet)
    chosen = client.get(reverse("sheet-entries", args=[tablet.sheet.pk])).content.decode()
    assert Standard.objects.get(kind=Standard.Kind.CURRENT).name in chosen


def test_who_else_is_on_the_sheet_is_said(client: Client, tablet: Device, cast: people.Cast) -> None:
    to_as_found(tablet)
    other = Device(cast.engineer, tablet.sheet, "tablet-b")
    other.type({"as-found.1.measured": "4.003"})
    assert "typed “4.003” at as-found, reading 1, measured" in page(client, tablet.sheet)


def test_news_tell_what_others_did_meanwhile(client: Client, tablet: Device, cast: people.Cast) -> None:
    to_as_found(tablet)
    since = timezone.now().isoformat()
    other = Device(cast.engineer, tablet.sheet, "tablet-b")
    other.type({"as-found.1.measured": "4.003"})
    response = client.get(reverse("sheet-news", args=[tablet.sheet.pk]), {"since": since, "stage": "standards"})
    text = response.content.decode()
    assert "Engineer typed “4.003”" in text
    assert "The sheet stands at “as-found” now" in text


def test_missing_points_ask_before_the_run_is_closed(client: Client, tablet: Device) -> None:
    to_as_found(tablet)
    texts = {name: text for name, text in run_texts("as-found").items() if ".9." not in name}
    text = send(client, tablet.sheet, "close-as-found", texts).content.decode()
    assert "1 of 9 points have no reading: 0 % down." in text
    assert 'name="gaps"' in text
    assert 'value="4.0000"' in text
    send(client, tablet.sheet, "close-as-found", {}, gaps="yes")
    assert Sheet.objects.get().stage == "adjust"


def test_signing_asks_for_the_password(client: Client, tablet: Device) -> None:
    to_signature(tablet)
    url = reverse("sheet-sign", args=[tablet.sheet.pk])
    for password, words in (("", "Type the password"), ("wrong", "This is not your password. Nothing is signed.")):
        assert words in client.post(url, {"password": password}).content.decode()
    assert not Record.objects.exists()
    assert client.post(url, {"password": people.PASSWORD}).status_code == 302
    assert Record.objects.count() == 1


def test_an_auditor_reads_a_sheet_and_changes_nothing(client_as: ClientAs, tablet: Device, cast: people.Cast) -> None:
    to_as_found(tablet)
    auditor = client_as(cast.auditor)
    text = page(auditor, tablet.sheet)
    assert "Read only" in text
    assert "Close as-found" not in text
    assert htmx(auditor, tablet.sheet, "as-found.1.measured", "4").status_code == 403


def test_the_number_of_queries_does_not_grow_with_the_entries(
    client: Client, tablet: Device, django_assert_num_queries: Any
) -> None:
    from django.db import connection
    from django.test.utils import CaptureQueriesContext

    to_as_found(tablet)
    page(client, tablet.sheet)
    with CaptureQueriesContext(connection) as few:
        page(client, tablet.sheet)
    for number in range(5):
        tablet.type(run_texts("as-found", (0.01 * number,) * 9))
    with CaptureQueriesContext(connection) as many:
        page(client, tablet.sheet)
    assert len(few) == len(many)


def test_every_entry_ever_made_can_be_read(client: Client, tablet: Device) -> None:
    to_as_found(tablet)
    tablet.type({"as-found.1.measured": "4.1"})
    tablet.type({"as-found.1.measured": "4.01"})
    text = client.get(reverse("sheet-entries", args=[tablet.sheet.pk])).content.decode()
    assert "4.1<" in text
    assert "4.01<" in text


def test_a_signed_sheet_leads_to_its_test(client: Client, tablet: Device) -> None:
    record = signed(tablet)
    response = client.get(reverse("sheet", args=[tablet.sheet.pk]))
    assert response["Location"] == reverse("test", args=[record.test_id])


def test_what_the_device_had_not_sent_goes_with_the_form_and_is_no_clash(client: Client, tablet: Device) -> None:
    to_as_found(tablet)
    tablet.type(run_texts("as-found") | {"as-found.9.measured": ""})
    shown = Draft(Sheet.objects.get()).fields["as-found.9.measured"].entry
    first, second = (tablet.entry("as-found.9.measured", text) for text in ("4.2", "4.02"))
    queue = [
        {
            "uuid": str(entry.id),
            "field": entry.field,
            "text": entry.text,
            "device": "tablet-new",
            "sequence": number,
            "base": str(base),
            "typed_at": timezone.now().isoformat(),
        }
        for number, (entry, base) in enumerate([(first, shown.id), (second, first.id)], start=1)
    ]
    response = client.post(
        reverse("sheet-step", args=[tablet.sheet.pk, "close-as-found"]),
        {
            "as-found.9.measured": "4.02",
            "seen.as-found.9.measured": str(second.id),
            "queue": json.dumps({"entries": queue}),
        },
    )
    assert response.status_code == 302
    assert Sheet.objects.get().stage == "adjust"
    url = reverse("sheet-entries", args=[tablet.sheet.pk])
    again = client.post(url, {"entries": queue}, content_type="application/json").json()
    assert again["refused"] == []
    assert Entry.objects.filter(field="as-found.9.measured", text="4.02").count() == 1


@pytest.mark.parametrize("text", ["4\x00.01", "4.01\ud800", "9" * 5000, "²", "1e999", "−1,5", " 4.01 ", "=1+1"])
def test_any_text_at_all_is_answered(client: Client, tablet: Device, text: str) -> None:
    to_as_found(tablet)
    rows = [
        {
            "uuid": str(uuid.uuid4()),
            "field": field,
            "text": text,
            "device": "tablet-x",
            "sequence": number,
            "typed_at": timezone.now().isoformat(),
        }
        for number, field in enumerate(["as-found.1.measured", "as-found.applied-with", "as-found.unit"])
    ]
    url = reverse("sheet-entries", args=[tablet.sheet.pk])
    response = client.post(url, json.dumps({"entries": rows}), content_type="application/json")
    assert response.status_code == 200
    assert client.get(reverse("sheet", args=[tablet.sheet.pk])).status_code == 200


def test_a_form_with_broken_hidden_fields_is_answered(client: Client, tablet: Device) -> None:
    values = {"confirm-tag": "PT-100", "seen.confirm-tag": "no number", "queue": "{", "seen.": ""}
    assert client.post(reverse("sheet-step", args=[tablet.sheet.pk, "confirm"]), values).status_code == 200
    assert client.post(reverse("sheet-settle", args=[tablet.sheet.pk]), {"settle": "x y"}).status_code == 302
    assert client.post(reverse("sheet-step", args=[tablet.sheet.pk, "nowhere"])).status_code == 404


LONG = "x" * 2001


def test_a_step_waits_for_what_was_not_taken(client: Client, tablet: Device) -> None:
    to_as_found(tablet)
    tablet.type(run_texts("as-found"))
    sheets.close_as_found(by=tablet.by, sheet_id=tablet.sheet.pk)
    tablet.type({"adjust.choice": "not adjusted"})
    sheets.record_adjustment(by=tablet.by, sheet_id=tablet.sheet.pk)
    answers = {f"checklist.{line['key']}": "yes" for line in tablet.sheet.basis["checklist"]}
    text = send(client, tablet.sheet, "return", answers | {"remarks": LONG}).content.decode()
    assert Sheet.objects.get().stage == "return"
    assert f">{LONG}</textarea>" in text
    assert "Not gone on" in text
    assert text.index("2001 were typed") > text.index('id="f-remarks-note"')
    assert send(client, tablet.sheet, "return", {"remarks": "short"}).status_code == 302
    assert Sheet.objects.get().stage == "sign"


def test_a_run_is_not_closed_in_a_unit_that_its_reader_changed(client: Client, tablet: Device) -> None:
    to_as_found(tablet)
    tablet.type(run_texts("as-found"))
    response = send(client, tablet.sheet, "close-as-found", {"as-found.unit": "kPa"})
    text = response.content.decode()
    assert Sheet.objects.get().stage == "as-found"
    assert '<option value="kPa" selected>' in text
    assert '<details class="conditions" open>' in text
    assert text.index("already typed in the present unit") > text.index('id="f-as-found-unit-note"')
    assert send(client, tablet.sheet, "close-as-found", {"as-found.unit": "bar"}).status_code == 302


def queue_of(tablet: Device, texts: dict[str, str]) -> str:
    rows = [
        {
            "uuid": str(entry.id),
            "field": entry.field,
            "text": entry.text,
            "device": entry.device,
            "sequence": entry.sequence,
            "base": "",
            "typed_at": entry.typed_at.isoformat(),
        }
        for entry in (tablet.entry(name, text) for name, text in texts.items())
    ]
    return json.dumps({"entries": rows})


def test_a_sheet_is_not_signed_over_something_that_was_not_taken(client: Client, tablet: Device) -> None:
    to_signature(tablet)
    queue = queue_of(tablet, {"as-found.3.measured": "12.04"})
    url = reverse("sheet-sign", args=[tablet.sheet.pk])
    text = client.post(url, {"password": people.PASSWORD, "queue": queue}).content.decode()
    assert not Record.objects.exists()
    assert "the as-found run is closed" in text
    assert '<p class="typed">12.04</p>' in text
    assert client.post(url, {"password": people.PASSWORD}).status_code == 302


def test_nothing_is_settled_over_something_that_was_not_taken(
    client: Client, tablet: Device, cast: people.Cast
) -> None:
    to_as_found(tablet)
    name = "as-found.3.measured"
    other = Device(cast.engineer, tablet.sheet, "tablet-b")
    tablet.send(tablet.entry(name, "12.01"))
    other.send(other.entry(name, "12.02"))
    versions = Draft(Sheet.objects.get()).fields[name].versions
    values = {"settle": f"{name} {versions[1].id}", f"versions.{name}": [str(version.id) for version in versions]}
    url = reverse("sheet-settle", args=[tablet.sheet.pk])
    text = client.post(url, values | {"remarks": LONG, "seen.remarks": ""}).content.decode()
    assert LONG in text
    assert Draft(Sheet.objects.get()).fields[name].clashes


@pytest.mark.parametrize("bad", ["4\x00.01", "4.01\ud800"])
def test_a_character_that_no_database_keeps_is_refused_and_nothing_else_is(
    client: Client, tablet: Device, bad: str
) -> None:
    to_as_found(tablet)
    queue = json.loads(queue_of(tablet, {"as-found.1.measured": bad, "as-found.2.measured": "8.001"}))
    url = reverse("sheet-entries", args=[tablet.sheet.pk])
    answer = client.post(url, json.dumps(queue), content_type="application/json").json()
    assert [one["what"] for one in answer["refused"]] == ["as-found, reading 1, measured"]
    assert "can be kept nowhere" in answer["refused"][0]["why"]
    draft = Draft(Sheet.objects.get())
    assert "as-found.1.measured" not in draft.fields
    assert draft.text("as-found.2.measured") == "8.001"


def test_a_form_with_such_a_character_is_shown_again(client: Client, tablet: Device) -> None:
    response = send(client, tablet.sheet, "confirm", {"confirm-tag": "PT\x00-100", "confirm-serial": "S"})
    text = response.content.decode()
    assert 'value="PT-100"' in text
    assert "can be kept nowhere" in text
    assert Sheet.objects.get().stage == "confirm"


def test_nobody_reads_a_session_key_in_the_entries(client: Client, tablet: Device, cast: people.Cast) -> None:
    send(client, tablet.sheet, "save", {"confirm-tag": "PT-100"})
    key = client.session.session_key
    device = Entry.objects.get(field="confirm-tag").device
    assert key and device.startswith("form-")
    assert not any(key[start : start + 4] in device for start in range(len(key) - 3))
    send(client, tablet.sheet, "save", {"confirm-serial": "S"})
    assert Entry.objects.get(field="confirm-serial").device == device


def test_adjusted_or_not_is_one_question(client: Client, tablet: Device) -> None:
    to_adjustment(tablet)
    text = page(client, tablet.sheet)
    question = text[text.index('<fieldset class="choices">') : text.index("</fieldset>")]
    assert "<legend><h2>Was it adjusted?</h2></legend>" in question
    assert question.count('type="radio"') == question.count('aria-describedby="f-adjust-choice-note"') == 2
    assert len(set(re.findall(r'<input[^>]* id="([^"]*)"', question))) == 2


def test_every_button_and_choice_of_the_surroundings_says_of_what(client: Client, tablet: Device) -> None:
    to_as_found(tablet)
    text = page(client, tablet.sheet)
    pairs = text[text.index('<div class="pairs">') :].partition("</details>")[0]
    names = re.findall(r'aria-label="([^"]*)"', pairs)
    assert len(names) == len(set(names)) == 6
    assert "Change the sign of ambient temperature" in names
    assert "Unit of ambient temperature" in names


def test_the_top_of_a_long_page_says_how_many_fields_are_to_mend_and_leads_to_the_first(
    client: Client, tablet: Device
) -> None:
    to_as_found(tablet)
    texts = run_texts("as-found") | {"as-found.5.measured": "two", "as-found.7.measured": "three"}
    text = send(client, tablet.sheet, "close-as-found", texts).content.decode()
    assert 'Not gone on yet: <a href="#f-as-found-5-measured">2 fields</a> to mend below.' in text
    assert 'id="f-as-found-5-measured"' in text
    assert "Not gone on" not in page(client, tablet.sheet)


def test_a_reading_can_be_repeated_also_after_a_run_was_not_closed(client: Client, tablet: Device) -> None:
    to_as_found(tablet)
    texts = {name: text for name, text in run_texts("as-found").items() if ".9." not in name}
    text = send(client, tablet.sheet, "close-as-found", texts).content.decode()
    links = re.findall(r'href="([^"#]*)#r-as-found-3-1">Repeat this reading', text)
    assert len(links) == 1
    assert 'name="as-found.3-1.measured"' in client.get(links[0]).content.decode()
