"""The page of a finished test, the lists of tests and sheets, bench tests, and the readings as a file."""

from __future__ import annotations

import csv
import datetime
import io
import re
import uuid
from collections.abc import Callable
from dataclasses import replace

import pytest
from django.db import connection, transaction
from django.test import Client
from django.test.utils import CaptureQueriesContext
from django.urls import reverse

from calibration import scheduling, sheets, signing
from calibration.models import Record, Sheet, Test
from calibration.opening import open_bench_sheet
from calibration.recording import ReadingContent, RunContent, write_record, write_records
from register.auditing import Act, Actor
from register.models import AuditEntry
from tests import cast as people
from tests.calibration.at_work import Device, answer_checklist, opened, run_texts, signed, to_as_found
from tests.calibration.described import described, readings

ClientAs = Callable[[people.User], Client]
FOUND = (0.2, 0.3, 0.6, 0.3, 0.2, 0.1, 0.2, 0.1, 0.1)


def transcribed(tag: people.Tag, count: int = 1) -> list[Record]:
    act = Act(by=Actor(person=None), reason="earlier history")
    first = datetime.date(2016, 5, 1)
    contents = [described(tag, on=first + datetime.timedelta(days=30 * n), found=FOUND) for n in range(count)]
    with transaction.atomic():
        records = write_records(contents, act=act)
        act.write()
    return records


@pytest.fixture
def auditor(client_as: ClientAs, cast: people.Cast) -> Client:
    return client_as(cast.auditor)


def text_of(client: Client, name: str, *args: object, **query: object) -> str:
    response = client.get(reverse(name, args=args), query)
    assert response.status_code == 200
    return response.content.decode()


def test_it_says_verdict_reason_standards_signatures_and_hash(tablet: Device, auditor: Client) -> None:
    record = signed(tablet, FOUND, (0.1,) * 9)
    text = text_of(auditor, "test", record.test_id)
    for words in (
        "fail, out of tolerance",
        "pass, in tolerance",
        "Reading 3 (50 % up)",
        "performed the test",
        record.hash,
        "Zero trimmed by −0.6 %.",
        "▲ read upwards",
        "<svg",
    ):
        assert words in text
    for use in record.runs.get(kind="as-left").standards.all():
        assert reverse("standard", args=[use.standard_id]) in text
        assert use.certificate is not None
        assert use.certificate.number in text


def test_the_figures_can_be_added_up_again_by_hand(tablet: Device, auditor: Client) -> None:
    """Zero error (0.2 + 0.1)/2 = 0.15; span error 0.2 − 0.15 = 0.05; hysteresis 0.6 − 0.2 = 0.4, worked by hand."""
    record = signed(tablet, FOUND)
    text = text_of(auditor, "test", record.test_id)
    assert "(+0.200 + 0.100)/2" in text
    assert "+0.150" in text
    assert "+0.200 at 100 %, less +0.150 at 0 %" in text
    assert "at 50 %: up +0.600, down +0.200" in text
    figures = dict(re.findall(r'<th scope="row">([^<]+)</th><td class="num nowrap">([^<]+)<', text))
    assert figures["Zero error"] == "+0.150"
    assert figures["Span error"] == "+0.050"
    assert figures["Hysteresis"] == "0.400"


def told_rows(client: Client, record: Record) -> tuple[list[str], list[list[str]], str]:
    """Head and rows of the table of readings, and the sentence below it."""
    text = text_of(client, "test", record.test_id)
    table = text[text.index("readings-table") :]
    head, body = table.split("<tbody>", 1)
    plain = re.compile(r"<svg.*?</svg>|<span class=\"pad\".*?</span>|<[^>]+>", re.DOTALL)

    def cells(row: str) -> list[str]:
        return [
            " ".join(plain.sub("", cell).split()) for cell in re.findall(r"<t[hd][^>]*>(.*?)</t[hd]>", row, re.DOTALL)
        ]

    rows = [cells(row) for row in body.partition("</tbody>")[0].split("<tr>")[1:]]
    return cells(head), rows, plain.sub("", body[body.index('<p class="quiet">') :].partition("</p>")[0])


def mixed(tag: people.Tag, *, percent: bool) -> Record:
    """A run with inputs in bar and kPa, and outputs in % of span, all or but the first."""
    on = datetime.date(2016, 5, 1)
    texts = [("0", "bar"), ("250.3", "kPa"), ("5.004", "bar"), ("1000", "kPa")]
    outputs = [("0.11", "percent"), ("25.13", "percent"), ("50.21", "percent"), ("100.07", "percent")]
    if not percent:
        outputs[0] = ("4.0176", "mA")
    taken = tuple(
        ReadingContent(applied, measured, "up", float(point), applied_unit=unit, measured_unit=output)
        for (applied, unit), (measured, output), point in zip(texts, outputs, (0, 25, 50, 100), strict=True)
    )
    act = Act(by=Actor(person=None), reason="earlier history")
    content = described(tag, on=on, runs=(RunContent(kind="as-found", tested_on=on, readings=taken),))
    return write_record(content, act=act)


@pytest.mark.parametrize("percent", [True, False])
def test_rows_in_several_units_say_theirs_and_their_errors_can_be_worked_out(
    tag: people.Tag, auditor: Client, percent: bool
) -> None:
    head, rows, formula = told_rows(auditor, mixed(tag, percent=percent))
    assert head[1] == "Applied"
    assert [row[1] for row in rows[:3]] == ["0 bar", "250.3 kPa", "5.004 bar"]
    assert head[3] == ("Measured % of span" if percent else "Measured")
    assert formula.startswith("Error = measured − expected." if percent else "Error = (measured − expected) / 16 mA")
    units = [] if percent else ["mA", "% of span", "% of span", "% of span"]
    assert [row[3].partition(" ")[2] for row in rows[:4] if not percent] == units
    for row in rows[:4]:
        expected, measured, error = (float(cell.split(" ")[0].replace("−", "-")) for cell in row[2:5])
        scale = 100 / 16 if "mA" in row[3] else 1
        assert round((measured - expected) * scale, 3) == error


def test_a_test_that_does_not_prove_the_range_of_today_says_so(tablet: Device, auditor: Client) -> None:
    record = signed(tablet)
    assert "the next due date counts from" in text_of(auditor, "test", record.test_id)
    assert tablet.sheet.tag is not None
    people.make_range(tablet.sheet.tag, "0", "16", effective_from=record.test.tested_on)
    scheduling.refresh([tablet.sheet.tag.pk])
    assert "the due date does not count from it" in text_of(auditor, "test", record.test_id)


def test_a_reading_that_was_clipped_is_not_called_a_point_that_was_not_asked_for(
    tag: people.Tag, auditor: Client
) -> None:
    on = datetime.date(2016, 5, 1)
    clipped = (replace(readings()[0], measured="3.7"), *readings()[1:8], replace(readings()[8], measured="3.7"))
    content = described(tag, on=on, runs=(RunContent(kind="as-found", tested_on=on, readings=clipped),))
    record = write_record(content, act=Act(by=Actor(person=None), reason="earlier history"))
    text = text_of(auditor, "test", record.test_id)
    assert "no reading at 0 % carries a measurement" in text
    assert "the list has no reading at 0 %" not in text


def test_the_lines_of_non_linearity_can_be_drawn_by_hand(tablet: Device, auditor: Client) -> None:
    record = signed(tablet, (0.0, 0.0, 0.4, 0.0, 0.0, 0.0, 0.4, 0.0, 0.0))
    text = text_of(auditor, "test", record.test_id)
    # Through the error at zero: 0.4 − s/2 = s at full scale, so s = 0.4/1.5 and the distance is the same 0.2667.
    assert "from the line 0.0000 + 0.2667·x, where x is the expected output" in text


def test_a_transcribed_test_says_so_and_offers_no_review(
    tag: people.Tag, client_as: ClientAs, cast: people.Cast
) -> None:
    record = transcribed(tag)[0]
    text = text_of(client_as(cast.reviewer), "test", record.test_id)
    assert "transcribed, unsigned" in text
    assert "Nobody signed it." in text
    assert "Sign the review" not in text


def test_what_could_not_be_tested_shows_its_reason(tablet: Device, auditor: Client) -> None:
    sheets.could_not_test(by=tablet.by, reason="No permit today.", sheet_id=tablet.sheet.pk)
    record = signing.sign(by=tablet.by, sheet_id=tablet.sheet.pk)
    text = text_of(auditor, "test", record.test_id)
    assert "could not be tested" in text
    assert "No permit today." in text


def test_an_incomplete_run_shows_the_missing_point(tablet: Device, auditor: Client) -> None:
    to_as_found(tablet)
    tablet.type({name: text for name, text in run_texts("as-found").items() if ".9." not in name})
    sheets.close_as_found(by=tablet.by, sheet_id=tablet.sheet.pk, with_gaps=True)
    tablet.type({"adjust.choice": "not adjusted"})
    sheets.record_adjustment(by=tablet.by, sheet_id=tablet.sheet.pk)
    answer_checklist(tablet)
    text = text_of(auditor, "test", signing.sign(by=tablet.by, sheet_id=tablet.sheet.pk).test_id)
    assert "incomplete" in text
    assert "missing" in text


def test_a_tag_renamed_later_keeps_its_old_name_on_the_record(tablet: Device, auditor: Client) -> None:
    record = signed(tablet)
    people.Tag.objects.filter(pk=tablet.sheet.tag_id).update(number="PT-100A")
    text = text_of(auditor, "test", record.test_id)
    assert '<span class="mono">PT-100</span> test of' in text


def test_the_readings_come_as_a_file_and_the_trail_knows(tablet: Device, auditor: Client) -> None:
    record = signed(tablet, FOUND)
    response = auditor.get(reverse("test-readings", args=[record.test_id]))
    body = b"".join(response.streaming_content).decode("utf-8-sig")  # type: ignore[attr-defined]
    rows = list(csv.DictReader(io.StringIO(body)))
    assert len(rows) == 9
    assert (rows[2]["measured"], rows[2]["error (% of span)"], rows[2]["verdict"]) == ("12.0960", "0.600000", "fail")
    assert AuditEntry.objects.filter(kind="exported", thing_type="calibration.test").exists()


def test_a_bench_test_of_a_spare_needs_no_tag(cast: people.Cast, tag: people.Tag, auditor: Client) -> None:
    spare = people.make_transmitter(cast.plant, serial="BENCH-1")
    by = Actor(person=cast.technician)
    sheet = open_bench_sheet(
        by=by,
        reason="",
        transmitter=spare,
        sheet_id=uuid.uuid4(),
        point_list=cast.plant.point_lists.get(name="Five points, up and down"),
        values={
            "lrv": "0", "urv": "10", "unit": "bar", "reference": "gauge", "transfer": "linear", "low_cut_percent": 0.0,
            "below_cut": "linear", "mpe_form": "percent of span", "mpe_percent": "0.1", "mpe_input": "",
            "as_left_percent": "", "as_left_input": "", "input_unit": "bar",
        },
    )  # fmt: skip
    record = signed(Device(cast.technician, sheet), (0.05,) * 9)
    test = Test.objects.get()
    assert (test.tag, test.transmitter, test.as_found_verdict) == (None, spare, "pass")
    assert "on the bench" in text_of(auditor, "test", record.test_id)
    assert "BENCH-1" in text_of(auditor, "tests")


def test_a_bench_sheet_is_opened_by_its_form(client_as: ClientAs, cast: people.Cast, tag: people.Tag) -> None:
    client = client_as(cast.technician)
    spare = people.make_transmitter(cast.plant)
    url = reverse("sheet-bench", args=[spare.pk])
    assert client.get(url).status_code == 200
    values = {
        "sheet": str(uuid.uuid4()),
        "lrv": "0",
        "urv": "0",
        "unit": "bar",
        "reference": "gauge",
        "transfer": "linear",
        "mpe_form": "percent of span",
        "mpe_percent": "",
        "point_list": str(cast.plant.point_lists.get(name="Five points, up and down").pk),
    }
    text = client.post(url, values).content.decode()
    assert "LRV and URV are both 0" in text
    assert "This form of tolerance needs this figure." in text
    response = client.post(url, values | {"urv": "10", "mpe_percent": "0.25"})
    assert response["Location"] == reverse("sheet", args=[values["sheet"]])


def test_a_fitted_transmitter_is_tested_from_its_tag(client_as: ClientAs, cast: people.Cast, tag: people.Tag) -> None:
    assert tag.current_fitting
    client = client_as(cast.technician)
    url = reverse("sheet-bench", args=[tag.current_fitting.transmitter_id])
    values = {
        "sheet": str(uuid.uuid4()), "lrv": "0", "urv": "10", "unit": "bar", "reference": "gauge", "transfer": "linear",
        "mpe_form": "percent of span", "mpe_percent": "0.25", "point_list": str(cast.plant.point_lists.all()[0].pk),
    }  # fmt: skip
    assert "It is fitted at PT-100" in client.post(url, values).content.decode()


def test_the_list_filters_by_verdict_state_date_and_name(tag: people.Tag, tablet: Device, auditor: Client) -> None:
    transcribed(tag, 3)
    signed(tablet)
    other = people.make_ready_tag(tag.area, "ZT-9")
    write_record(described(other), act=Act(by=Actor(person=None)))

    def count(**asked: str) -> str:
        total: str = auditor.get(reverse("tests"), asked).context["paging"].total
        return total

    assert count() == "5"
    assert count(state="signed") == "1"
    assert count(verdict="fail") == "3"
    assert count(text="zt") == "1"
    assert count(text=tablet.sheet.transmitter.serial.lower()) == "4"
    assert count(until="2016-06-01") == "2"
    assert count(since="2016-06-01") == "3"
    assert "No test fits." in text_of(auditor, "tests", text="nowhere")


def test_the_list_is_paged_by_key_with_a_fixed_number_of_queries(tag: people.Tag, auditor: Client) -> None:
    transcribed(tag, 5)
    text_of(auditor, "tests")
    with CaptureQueriesContext(connection) as few:
        text_of(auditor, "tests")
    transcribed(tag, 60)
    with CaptureQueriesContext(connection) as many:
        text = text_of(auditor, "tests")
    assert len(few) == len(many)
    assert text.count('<td class="key">') == 50
    later = re.search(r'href="([^"]*after=[^"]*)"', text)
    assert later
    second = auditor.get(reverse("tests") + later[1].replace("&amp;", "&")).content.decode()
    assert second.count('<td class="key">') == 15


def test_the_list_of_sheets_shows_open_ones_first(
    tablet: Device, tag: people.Tag, client_as: ClientAs, cast: people.Cast
) -> None:
    client = client_as(cast.technician)
    other = opened(people.make_ready_tag(tag.area, "PT-200"), cast.engineer)
    sheets.abandon(by=other.by, reason="wrong tag", sheet_id=other.sheet.pk)
    text = text_of(client, "sheets")
    assert "PT-100" in text
    assert "PT-200" not in text
    assert "PT-200" in text_of(client, "sheets", show="abandoned")
    assert "PT-100" in text_of(client, "sheets", show="mine")


def test_the_page_of_a_test_costs_a_fixed_number_of_queries(
    tablet: Device, auditor: Client, tag: people.Tag, cast: people.Cast
) -> None:
    record = signed(tablet)
    text_of(auditor, "test", record.test_id)
    with CaptureQueriesContext(connection) as plain:
        text_of(auditor, "test", record.test_id)
    both = signed(opened(tag, cast.technician, "tablet-2"), FOUND, (0.1,) * 9)
    with CaptureQueriesContext(connection) as adjusted:
        text_of(auditor, "test", both.test_id)
    assert len(plain) == len(adjusted)


def test_a_person_of_another_plant_finds_nothing(tablet: Device, client_as: ClientAs, cast: people.Cast) -> None:
    record = signed(tablet)
    stranger = client_as(cast.stranger)
    for name, args in (
        ("test", [record.test_id]),
        ("test-readings", [record.test_id]),
        ("sheet", [tablet.sheet.pk]),
        ("sheet-entries", [tablet.sheet.pk]),
    ):
        assert stranger.get(reverse(name, args=args)).status_code == 404


def test_sheets_of_a_tag_already_open_are_offered_first(tablet: Device, client_as: ClientAs, cast: people.Cast) -> None:
    assert tablet.sheet.tag
    text = text_of(client_as(cast.engineer), "sheet-open", tablet.sheet.tag.pk)
    assert "Technician" in text
    assert reverse("sheet", args=[tablet.sheet.pk]) in text
    assert "Open another sheet all the same" in text
    assert Sheet.objects.count() == 1
