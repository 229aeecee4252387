"""The page of a tag and the page of a transmitter: what it is, how it stands, what happened, what to do next."""

from __future__ import annotations

import csv
import datetime
import io
import re
from collections.abc import Callable
from html import unescape

import pytest
from django.db import connection
from django.test import Client
from django.test.utils import CaptureQueriesContext
from django.urls import reverse

from calibration import scheduling
from calibration.models import Deferral, Requirement, Standing
from register import fitting, flagging, reranging
from register.auditing import Actor
from register.models import AuditEntry, Tag, User
from tests import cast as people
from tests.calibration.scheduled import OUTSIDE, a_test, day, state_of

SignIn = Callable[[User], Client]


@pytest.fixture
def page(tag: Tag) -> str:
    scheduling.refresh([tag.pk])
    return reverse("tag", args=[tag.pk])


def transmitter_of(tag: Tag) -> int:
    held = Tag.objects.select_related("current_fitting").get(pk=tag.pk).current_fitting
    assert held is not None
    return held.transmitter_id


def next_action(client: Client, address: str) -> str:
    html = client.get(address).content.decode()
    found = re.search(r'<div class="next-action">.*?</div>', html, re.S)
    assert found
    link = re.search(r'<a class="button primary" href="[^"]+">([^<]+)</a>', found[0])
    return link[1] if link else ""


def test_the_one_next_thing_is_what_the_person_may_do(
    tag: Tag, page: str, cast: people.Cast, client_as: SignIn
) -> None:
    assert next_action(client_as(cast.technician), page) == "Start a test"
    assert next_action(client_as(cast.auditor), page) == ""
    assert next_action(client_as(cast.planner), page) == ""
    a_test(tag, tag.plant.today() - datetime.timedelta(days=600))
    assert next_action(client_as(cast.planner), page) == "Ask for a deferral"


def test_what_is_missing_comes_first(cast: people.Cast, client_as: SignIn) -> None:
    tag = people.make_tag(people.make_area(cast.plant), "PT-900")
    scheduling.refresh([tag.pk])
    address = reverse("tag", args=[tag.pk])
    assert next_action(client_as(cast.engineer), address) == "Fit a transmitter"
    people.make_fitting(tag)
    assert next_action(client_as(cast.engineer), address) == "Set the range"
    people.make_range(tag)
    assert next_action(client_as(cast.engineer), address) == "Set the requirement"
    people.make_requirement(tag)
    assert next_action(client_as(cast.engineer), address) == "Start a test"


def test_flags_show_their_arithmetic_and_lead_the_engineer_to_acceptance(
    tag: Tag, page: str, cast: people.Cast, client_as: SignIn
) -> None:
    people.make_range(tag, "0", "25", effective_from=day("2024-01-01"))
    flagging.recompute([tag.pk])
    html = unescape(client_as(cast.engineer).get(page).content.decode())
    flag = tag.flags.get(check_key="range_upper")
    assert flag.sentence in html
    assert reverse("flag-accept", args=[flag.pk]) in html
    assert reverse("flag-accept", args=[flag.pk]) not in client_as(cast.planner).get(page).content.decode()
    flagging.accept_flag(
        by=Actor(cast.engineer),
        reason="checked by hand",
        flag=flag,
        until=tag.plant.today() + datetime.timedelta(days=9),
    )
    html = unescape(client_as(cast.engineer).get(page).content.decode())
    assert "checked by hand" in html and flag.sentence in html
    assert reverse("flag-withdraw", args=[flag.pk]) in html


def test_what_happened_is_told_newest_first(tag: Tag, page: str, cast: people.Cast, client_as: SignIn) -> None:
    a_test(tag, day("2025-03-10"), found=OUTSIDE, left=(0.0,) * 9)
    spare = people.make_transmitter(cast.plant, serial="SPARE-1")
    fitting.swap(by=Actor(cast.engineer), reason="sticks", tag=tag, transmitter=spare, on=day("2025-06-01"))
    html = client_as(cast.auditor).get(page).content.decode()
    line = html[html.index('<ol class="timeline">') : html.index("</ol>")]
    days = re.findall(r'<time datetime="([\d-]+)">', line)
    assert days == sorted(days, reverse=True)
    assert "SPARE-1 in" in line and "as-found fail, adjusted, as-left pass" in line


def test_a_planned_range_is_shown_and_can_be_withdrawn(
    tag: Tag, page: str, cast: people.Cast, client_as: SignIn
) -> None:
    values = {"lrv": "0", "urv": "12", "unit": "bar", "reference": "gauge", "transfer": "linear", "below_cut": "linear"}
    planned = reranging.set_range(
        by=Actor(cast.engineer), reason="load", tag=tag, values=values, effective_from=day("2099-01-01")
    )
    html = client_as(cast.engineer).get(page).content.decode()
    assert "Planned 2099-01-01" in html and "0 to 12 bar gauge" in html
    assert reverse("range-withdraw", args=[planned.pk]) in html


def test_drift_is_drawn_listed_and_given_as_a_file(tag: Tag, page: str, cast: people.Cast, client_as: SignIn) -> None:
    for year, error in enumerate((0.0, 0.1, 0.05, 0.2, 0.15, 0.3), start=2020):
        a_test(tag, datetime.date(year, 3, 10), found=(error,) * 9)
    client = client_as(cast.auditor)
    html = client.get(page).content.decode()
    assert "<title>Drift of the zero error at PT-100" in html or "Drift of the zero error at PT-100" in html
    assert "% of span a year" in html and "95 % interval" in html
    part = client.get(page + "?channel=50", headers={"HX-Request": "true"}).content.decode()
    assert part.lstrip().startswith('<section class="wide" id="drift">')
    assert 'value="50" selected' in part
    response = client.post(reverse("tag-drift-export", args=[tag.pk]), {"channel": "zero"})
    rows = list(csv.reader(io.StringIO(b"".join(response.streaming_content).decode("utf-8-sig"))))  # type: ignore[attr-defined]
    steps = [float(row[4]) for row in rows if row[0] == "pair"]
    assert steps == pytest.approx([0.1, -0.05, 0.15, -0.05, 0.15], abs=1e-9)
    assert AuditEntry.objects.filter(kind=AuditEntry.Kind.EXPORTED, thing_id=str(tag.pk)).exists()


def test_the_fragment_is_part_of_the_page(tag: Tag, page: str, cast: people.Cast, client_as: SignIn) -> None:
    for year in (2024, 2025):
        a_test(tag, datetime.date(year, 3, 10))
    client = client_as(cast.auditor)
    for address in (page, reverse("transmitter", args=[transmitter_of(tag)])):
        token = re.compile(rb'name="csrfmiddlewaretoken" value="\w+"')
        part = client.get(address, headers={"HX-Request": "true"}).content
        assert token.sub(b"", part).strip() in token.sub(b"", client.get(address).content)


@pytest.mark.parametrize("which", ["tag", "transmitter"])
def test_the_number_of_queries_does_not_grow_with_the_history(
    tag: Tag, page: str, cast: people.Cast, client_as: SignIn, which: str
) -> None:
    client = client_as(cast.engineer)
    address = page if which == "tag" else reverse("transmitter", args=[transmitter_of(tag)])

    def count() -> int:
        with CaptureQueriesContext(connection) as queries:
            assert client.get(address).status_code == 200
        return len(queries)

    a_test(tag, day("2020-03-10"))
    a_test(tag, day("2021-03-10"))
    few = count()
    for year in range(2022, 2026):
        a_test(tag, datetime.date(year, 3, 10), left=(0.0,) * 9)
    for year in range(2022, 2026):
        people.make_requirement(
            tag,
            effective_from=datetime.date(year, 4, 1),
            withdrawn_at=datetime.datetime(year, 5, 1, tzinfo=datetime.UTC),
            withdrawn_reason="typed by mistake",
        )
    assert count() == few


def test_a_transmitter_shows_its_life_over_all_tags(tag: Tag, cast: people.Cast, client_as: SignIn) -> None:
    a_test(tag, day("2025-03-10"))
    key = transmitter_of(tag)
    other = people.make_ready_tag(tag.area, "PT-300")
    fitting.remove(by=Actor(None), reason="outage", tag=other, on=day("2025-01-10"))
    device = Tag.objects.select_related("current_fitting__transmitter").get(pk=tag.pk).current_fitting
    assert device is not None
    fitting.remove(by=Actor(None), reason="needed elsewhere", tag=tag, on=day("2025-05-10"))
    fitting.fit(by=Actor(None), reason="spare", tag=other, transmitter=device.transmitter, on=day("2025-05-11"))
    client = client_as(cast.technician)
    html = client.get(reverse("transmitter", args=[key])).content.decode()
    assert "Removed from PT-100" in html and "Fitted at PT-300" in html
    assert next_action(client, reverse("transmitter", args=[key])) == "Start a test at PT-300"


@pytest.mark.parametrize("name", ["tag", "tag-drift-export", "tag-requirement", "tag-defer"])
def test_a_stranger_does_not_find_the_tag(tag: Tag, cast: people.Cast, client_as: SignIn, name: str) -> None:
    people.give_roles(cast.stranger, cast.other_plant, "engineer")
    client = client_as(cast.stranger)
    send = client.post if name == "tag-drift-export" else client.get
    assert send(reverse(name, args=[tag.pk])).status_code == 404
    assert client.get(reverse("transmitter", args=[transmitter_of(tag)])).status_code == 404


def test_a_requirement_is_set_on_its_page_and_what_was_typed_stays_on_error(
    tag: Tag, page: str, cast: people.Cast, client_as: SignIn
) -> None:
    client = client_as(cast.engineer)
    address = reverse("tag-requirement", args=[tag.pk])
    assert 'value="0.5"' in client.get(address).content.decode()
    points = tag.plant.point_lists.first()
    assert points is not None
    typed = {
        "mpe_form": "percent of span",
        "mpe_percent": "a quarter",
        "as_left_percent": "0.1",
        "decision_rule": "simple acceptance",
        "interval_months": "6",
        "anchor": "last test",
        "lead_days": "30",
        "point_list": str(points.pk),
        "effective_from": str(tag.plant.today()),
        "reason": "drifts more than thought",
    }
    html = client.post(address, typed).content.decode()
    assert "a quarter" in html and "drifts more than thought" in html
    assert Requirement.objects.filter(tag=tag).count() == 1
    response = client.post(address, typed | {"mpe_percent": "0.25"})
    assert (response.status_code, response["Location"]) == (302, page)
    assert Standing.objects.get(pk=tag.pk).interval_months == 6
    assert client_as(cast.planner).get(address).status_code == 403


def test_a_deferral_goes_from_planner_to_engineer(tag: Tag, page: str, cast: people.Cast, client_as: SignIn) -> None:
    today = tag.plant.today()
    a_test(tag, today - datetime.timedelta(days=600))
    until = today + datetime.timedelta(days=30)
    words = {"until": str(until), "risk_statement": "a wrong level alarm", "mitigation": "second level read daily"}
    assert client_as(cast.planner).post(reverse("tag-defer", args=[tag.pk]), words).status_code == 302
    asked = Deferral.objects.get()
    assert next_action(client_as(cast.engineer), page) == "Approve the deferral"
    assert client_as(cast.planner).get(reverse("deferral-approve", args=[asked.pk])).status_code == 403
    approve = reverse("deferral-approve", args=[asked.pk])
    assert "a wrong level alarm" in client_as(cast.engineer).get(approve).content.decode()
    client_as(cast.engineer).post(approve, {"reason": "second measurement is there"})
    assert state_of(tag, today) == "deferred"
    assert "second level read daily" in client_as(cast.auditor).get(page).content.decode()
    withdraw = reverse("deferral-withdraw", args=[asked.pk])
    assert client_as(cast.planner).get(withdraw).status_code == 200
    client_as(cast.planner).post(withdraw, {"reason": "slot found"})
    assert state_of(tag, today) == "overdue"
