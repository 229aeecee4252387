"""The audit trail page: what a plant's people may see of it, its filters, and taking it out."""

from __future__ import annotations

import csv
import datetime
import io
from collections.abc import Callable
from zoneinfo import ZoneInfo

import pytest
from django.db import connection
from django.test import Client
from django.test.utils import CaptureQueriesContext
from django.utils import timezone

from register import exporting
from register.auditing import Act, Actor
from register.models import AuditEntry, User
from tests.cast import Cast, make_area, make_head, make_maker, make_range, make_tag

SignIn = Callable[[User], Client]


def change(
    cast: Cast, thing: object, field: str, before: str, after: str, *, reason: str = "", plant: object = None
) -> Act:
    act = Act(Actor(cast.engineer, "192.0.2.9"), reason)
    act.changed(thing, plant=plant, before={field: before}, after={field: after})  # type: ignore[arg-type]
    act.write()
    return act


def test_before_after_and_reason_stand_in_the_row(cast: Cast, client_as: SignIn) -> None:
    tag = make_tag(make_area(cast.plant), "FT-2041")
    act = change(cast, tag, "supply_v", "24", "18", reason="longer cable", plant=cast.plant)
    page = client_as(cast.auditor).get("/audit/").content.decode()
    for words in ("FT-2041", "loop supply (V)", ">24<", ">18<", "longer cable", "Engineer"):
        assert words in page
    whole = client_as(cast.auditor).get(f"/audit/{act.id}/").content.decode()
    assert "192.0.2.9" in whole
    assert "longer cable" in whole


def test_a_range_is_found_by_its_tag(cast: Cast, client_as: SignIn) -> None:
    tag = make_tag(make_area(cast.plant), "FT-2041")
    change(cast, make_range(tag), "urv", "10", "16", plant=cast.plant)
    assert "FT-2041: 0 to 10 bar" in client_as(cast.auditor).get("/audit/?thing=ft-2041").content.decode()


def test_heads_are_called_by_their_type_first(cast: Cast) -> None:
    change(cast, make_head(code="3"), "url", "16", "20")
    assert AuditEntry.objects.get(field="url").thing_label.startswith("Quillhaven Gauge Works Q")


@pytest.mark.parametrize(
    ("asked", "found"),
    [
        ("person=engineer", {"one", "two"}),
        ("person=planner", set()),
        ("thing=FT-1", {"one"}),
        ("field=loop+supply", {"one"}),
        ("field=supply_v", {"one"}),
        ("field=service", {"two"}),
        ("kind=created", set()),
        ("kind=changed", {"one", "two"}),
        ("since=2020-01-01", {"one", "two"}),
        ("since=2199-01-01", set()),
        ("until=2020-01-01", set()),
    ],
)
def test_each_filter_narrows_the_trail(cast: Cast, client_as: SignIn, asked: str, found: set[str]) -> None:
    area = make_area(cast.plant)
    change(cast, make_tag(area, "FT-1"), "supply_v", "24", "one", plant=cast.plant)
    change(cast, make_tag(area, "FT-2"), "service", "x", "two", plant=cast.plant)
    lines = client_as(cast.auditor).get(f"/audit/?{asked}").context["lines"]
    assert {line.entry.after for line in lines if line.entry.kind == "changed"} == found


def test_a_period_runs_from_midnight_to_midnight_at_the_plant(cast: Cast, client_as: SignIn) -> None:
    cast.plant.time_zone = "Pacific/Auckland"
    cast.plant.save()
    change(cast, make_tag(make_area(cast.plant), "FT-1"), "service", "x", "y", plant=cast.plant)
    today = timezone.now().astimezone(ZoneInfo("Pacific/Auckland")).date()
    auditor = client_as(cast.auditor)
    assert [
        line.entry.after for line in auditor.get(f"/audit/?since={today}&until={today}&field=service").context["lines"]
    ] == ["y"]


def test_moments_before_and_after_are_told_by_the_clock_of_the_plant(cast: Cast, client_as: SignIn) -> None:
    tag = make_tag(make_area(cast.plant), "PT-1")
    moment = datetime.datetime(2026, 7, 1, 12, 0, 5, 123456, tzinfo=datetime.UTC)
    change(cast, tag, "seen_at", str(moment), f"from {moment}")
    text = client_as(cast.auditor).get("/audit/").content.decode()
    local = moment.astimezone(ZoneInfo(cast.plant.time_zone)).strftime("%Y-%m-%d %H:%M:%S")
    assert f'<td class="clip before">{local}</td>' in text
    # Words of people are shown as they are.
    assert f'<td class="clip after">from {moment}</td>' in text


def test_an_unreadable_date_is_said_and_the_rest_of_the_filter_holds(cast: Cast, client_as: SignIn) -> None:
    answer = client_as(cast.auditor).get("/audit/?since=09/03/2026&thing=nothing-such")
    assert "is not a date" in answer.content.decode()
    assert answer.context["lines"] == []
    swapped = client_as(cast.auditor).get("/audit/?since=2026-03-09&until=2026-03-01").content.decode()
    assert "2026-03-01 is before 2026-03-09" in swapped


def test_what_happened_at_another_plant_stays_there(cast: Cast, client_as: SignIn) -> None:
    theirs = change(
        cast, make_tag(make_area(cast.other_plant), "XT-9"), "service", "x", "secret", plant=cast.other_plant
    )
    auditor = client_as(cast.auditor)
    assert "XT-9" not in auditor.get("/audit/").content.decode()
    assert auditor.get(f"/audit/{theirs.id}/").status_code == 404
    assert auditor.get("/audit/?plant=south").status_code == 404
    assert client_as(cast.stranger).get(f"/audit/{theirs.id}/").status_code == 200


def test_the_shared_catalogue_is_seen_by_all_and_people_only_where_they_belong(cast: Cast, client_as: SignIn) -> None:
    change(cast, make_maker(), "name", "Old", "Quillhaven")
    change(cast, cast.planner, "printed_name", "Old", "Planner-of-north")
    here = client_as(cast.auditor).get("/audit/").content.decode()
    there = client_as(cast.stranger).get("/audit/").content.decode()
    assert "Quillhaven" in here
    assert "Quillhaven" in there
    assert "Planner-of-north" in here
    assert "Planner-of-north" not in there


def test_the_trail_is_walked_by_key_with_a_fixed_number_of_queries(cast: Cast, client_as: SignIn) -> None:
    tag = make_tag(make_area(cast.plant), "FT-1")
    auditor = client_as(cast.auditor)
    counts = set()
    for _ in range(2):
        act = Act(Actor(cast.engineer))
        for number in range(60):
            act.changed(tag, plant=cast.plant, before={"service": ""}, after={"service": f"{number}"})
            act.changed(make_maker(), plant=None, before={"name": ""}, after={"name": f"{number}"})
        act.write()
        with CaptureQueriesContext(connection) as queries:
            first = auditor.get("/audit/")
        counts.add(len(queries))
    assert len(counts) == 1
    seen, page = [], first
    while True:
        seen += [line.entry.pk for line in page.context["lines"]]
        if not page.context["paging"].later:
            break
        page = auditor.get(f"/audit/{page.context['paging'].later}")
    assert seen == sorted(seen, reverse=True)
    assert len(seen) == len(set(seen)) == AuditEntry.objects.count()


def test_the_trail_taken_out_holds_the_same_entries_and_says_that_it_was(cast: Cast, client_as: SignIn) -> None:
    tag = make_tag(make_area(cast.plant), "FT-1")
    change(cast, tag, "service", "=1+1", "-0.25", plant=cast.plant, reason="@SUM(A1)")
    change(cast, tag, "location", "a", "b", plant=cast.plant)
    auditor = client_as(cast.auditor)
    answer = auditor.post("/audit/export/", {"field": "service"})
    assert answer["Content-Type"] == "text/csv; charset=utf-8"
    text = b"".join(answer.streaming_content).decode()  # type: ignore[attr-defined]
    assert text.startswith("\ufeff")
    rows = list(csv.DictReader(io.StringIO(text.removeprefix("\ufeff"))))
    assert len(rows) == 1
    assert (rows[0]["before"], rows[0]["after"], rows[0]["reason"]) == ("'=1+1", "-0.25", "'@SUM(A1)")
    taken = AuditEntry.objects.get(kind="exported")
    assert (taken.person, taken.plant) == (cast.auditor, cast.plant)
    assert "field: service" in taken.after
    assert auditor.get("/audit/export/").status_code == 405


def test_a_filter_that_cannot_be_meant_leads_back_with_the_filter_alone(cast: Cast, client_as: SignIn) -> None:
    """The token of the form would stand in the address, in the history of the browser and in the log of a proxy."""
    typed = {"person": "Engineer & co", "since": "yesterday", "csrfmiddlewaretoken": "secret"}
    answer = client_as(cast.auditor).post("/audit/export/", typed)
    assert answer.url == "/audit/?plant=north&person=Engineer+%26+co&since=yesterday"


@pytest.mark.parametrize(
    ("value", "written"),
    [
        # Which beginnings a spreadsheet may run: OWASP, "CSV Injection" (page read from memory).
        ("=1+1", "'=1+1"),
        ("+49 170", "'+49 170"),
        ("-2+3", "'-2+3"),
        ("@SUM(A1)", "'@SUM(A1)"),
        ("\t=1", "'\t=1"),
        ("\r=1", "'\r=1"),
        ("  =1", "'  =1"),
        ("-0.25", "-0.25"),
        ("-0,25", "-0,25"),
        ("+1.5e-3", "+1.5e-3"),
        ("-5", "-5"),
        ("- 5", "'- 5"),
        ("−5", "−5"),
        ("12.0000", "12.0000"),
        ("FT-2041", "FT-2041"),
        (None, ""),
        (-3.5, "-3.5"),
    ],
)
def test_no_cell_acts_as_a_formula_and_no_number_is_spoiled(value: object, written: str) -> None:
    assert exporting.cell(value) == written
