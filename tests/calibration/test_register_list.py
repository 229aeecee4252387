"""The pages of the register list and the due list: filters in the address, counts, fragments, files, strangers."""

from __future__ import annotations

import csv
import datetime
import io
import re
from collections.abc import Callable
from typing import Any

import pytest
from django.db import connection
from django.test import Client
from django.test.utils import CaptureQueriesContext
from django.urls import reverse

from calibration import scheduling
from calibration.queries import listing
from register import flagging
from register.models import AuditEntry, Tag, User
from tests import cast as people
from tests.calibration.scheduled import OUTSIDE, a_test

SignIn = Callable[[User], Client]


@pytest.fixture
def fleet(tag: Tag) -> list[Tag]:
    """PT-100 overdue, PT-101 in grace, PT-102 tested today, PT-103 never tested with a failed test, PT-104 empty."""
    today = tag.plant.today()
    days = datetime.timedelta
    second = people.make_area(tag.plant, "30")
    tags = [tag, *(people.make_ready_tag(second, f"PT-10{number}") for number in (1, 2, 3))]
    tags.append(people.make_tag(second, "PT-104", service="Acid to the reactor"))
    inside = (0.0,) * 9
    for row, ago, found in (
        (tags[0], 600, inside),
        (tags[1], 400, inside),
        (tags[2], 0, inside),
        (tags[3], 10, OUTSIDE),
    ):
        a_test(row, today - days(days=ago), found=found)
    flagging.recompute([row.pk for row in tags])
    scheduling.refresh([row.pk for row in tags])
    return tags


def numbers(html: bytes) -> list[str]:
    return re.findall(r'<td class="key"><a class="mono" href="/tags/\d+/">([^<]+)</a>', html.decode())


def shown(client: Client, address: str) -> list[str]:
    response = client.get(address)
    assert response.status_code == 200
    return numbers(response.content)


@pytest.mark.parametrize(
    ("query", "expected"),
    [
        ("", ["PT-100", "PT-101", "PT-102", "PT-103", "PT-104"]),
        ("?sort=-tag", ["PT-104", "PT-103", "PT-102", "PT-101", "PT-100"]),
        ("?area=20", ["PT-100"]),
        ("?state=overdue", ["PT-100"]),
        ("?state=in+grace", ["PT-101"]),
        ("?state=never+tested", ["PT-103"]),
        ("?service=unfitted", ["PT-104"]),
        ("?service=in&sort=due", ["PT-100", "PT-101", "PT-102"]),
        ("?verdict=fail", ["PT-103"]),
        ("?verdict=none", ["PT-104"]),
        ("?text=acid+react", ["PT-104"]),
        ("?text=pt-10", ["PT-100", "PT-101", "PT-102", "PT-103", "PT-104"]),
        ("?sort=error", ["PT-103"]),
        ("?area=nowhere", ["PT-100", "PT-101", "PT-102", "PT-103", "PT-104"]),
    ],
)
def test_the_address_says_what_is_shown(
    fleet: list[Tag], cast: people.Cast, client_as: SignIn, query: str, expected: list[str]
) -> None:
    found = shown(client_as(cast.planner), reverse("register") + query)
    if query == "?service=in&sort=due":
        assert found.index("PT-100") < found.index("PT-101") < found.index("PT-102")
        assert set(found) == {"PT-100", "PT-101", "PT-102", "PT-103"}
    else:
        assert found[: len(expected)] == expected
        assert query == "?sort=error" or len(found) == len(expected)


def test_a_row_shows_range_strip_verdict_and_due_date(fleet: list[Tag], cast: people.Cast, client_as: SignIn) -> None:
    html = client_as(cast.planner).get(reverse("register") + "?area=20").content.decode()
    assert '0 to 10 <span class="unit">bar</span>' in html
    assert "takes 6 % to 65 % of the measuring head" in html
    assert '<span class="state ok">pass</span>' in html
    assert '<span class="state out">overdue</span>' in html
    assert html.count('<svg class="m strip"') == html.count('<svg class="m due"') == 1


@pytest.mark.parametrize("name", ["register", "due-list"])
def test_the_fragment_is_part_of_the_page(fleet: list[Tag], cast: people.Cast, client_as: SignIn, name: str) -> None:
    client = client_as(cast.planner)
    page = client.get(reverse(name) + "?text=pt")
    part = client.get(reverse(name) + "?text=pt", headers={"HX-Request": "true"})
    token = re.compile(rb'name="csrfmiddlewaretoken" value="\w+"')
    assert token.sub(b"", part.content).strip() in token.sub(b"", page.content)
    assert part.content.lstrip().startswith(b'<div id="rows">')
    assert "HX-Request" in page["Vary"]


def test_the_counts_of_the_due_list_do_not_move_with_its_filters(
    fleet: list[Tag], cast: people.Cast, client_as: SignIn
) -> None:
    client = client_as(cast.planner)

    def counts(query: str) -> list[str]:
        html = client.get(reverse("due-list") + query).content.decode()
        return re.findall(r'<a class="state \w+" href="[^"]+"(?: aria-current="true")?>([^<]+)</a>', html)

    every = counts("")
    assert every == [
        "1 overdue",
        "1 in grace",
        "0 due",
        "1 never tested",
        "0 deferred",
        "1 not due",
        "1 not in service",
        "5 in all",
    ]
    for query in ("?area=20", "?state=overdue", "?text=nothing", "?criticality=safety"):
        assert counts(query) == every


def test_each_count_leads_to_the_tags_it_counted(fleet: list[Tag], cast: people.Cast, client_as: SignIn) -> None:
    client = client_as(cast.planner)
    html = client.get(reverse("due-list")).content.decode()
    counts = re.findall(r'<a class="state \w+" href="([^"]+)"[^>]*>(\d+) (?!in all)', html)
    assert len(counts) == 7, "one for each state"
    for address, count in counts:
        assert len(shown(client, reverse("due-list") + address.replace("&amp;", "&"))) == int(count)


def test_nothing_drops_off_the_due_list_by_being_edited(fleet: list[Tag], cast: people.Cast, client_as: SignIn) -> None:
    from register import editing
    from register.auditing import Actor

    before = shown(client_as(cast.planner), reverse("due-list"))
    editing.edit_tag(by=Actor(cast.engineer), reason="moved", tag=fleet[0], values={"area": fleet[1].area})
    editing.edit_tag(by=Actor(cast.engineer), reason="spelling", tag=fleet[1], values={"service": "Other words"})
    assert shown(client_as(cast.planner), reverse("due-list")) == before


@pytest.mark.parametrize("address", ["register", "due-list"])
def test_the_number_of_queries_does_not_grow_with_the_rows(
    tag: Tag, cast: people.Cast, client_as: SignIn, address: str, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(listing, "PAGE", 10)
    client = client_as(cast.planner)

    def count() -> int:
        with CaptureQueriesContext(connection) as queries:
            assert client.get(reverse(address) + "?area=20&text=cool&sort=due").status_code == 200
        return len(queries)

    scheduling.refresh([tag.pk])
    one = count()
    tags = [people.make_ready_tag(tag.area) for _ in range(25)]
    for row in tags[:8]:
        a_test(row, tag.plant.today())
    scheduling.refresh([row.pk for row in tags])
    assert count() == one


@pytest.mark.parametrize(("page", "export"), [("register", "register-export"), ("due-list", "due-export")])
def test_the_list_can_be_taken_as_a_file_with_its_filters_and_that_is_noted(
    fleet: list[Tag], cast: people.Cast, client_as: SignIn, page: str, export: str
) -> None:
    client = client_as(cast.auditor)
    response = client.post(reverse(export), {"area": "30", "sort": "-tag"})
    rows = list(csv.reader(io.StringIO(b"".join(response.streaming_content).decode("utf-8-sig"))))  # type: ignore[attr-defined]
    assert rows[0][0] == "tag"
    assert [row[0] for row in rows[1:]] == ["PT-104", "PT-103", "PT-102", "PT-101"]
    assert rows[4][rows[0].index("state")] == "in grace"
    note = AuditEntry.objects.get(kind=AuditEntry.Kind.EXPORTED)
    assert (note.person, "area=30" in note.after) == (cast.auditor, True)
    assert client.get(reverse(export)).status_code == 405


def test_a_stranger_sees_his_own_plant_only(fleet: list[Tag], cast: people.Cast, client_as: SignIn) -> None:
    client = client_as(cast.stranger)
    for name in ("register", "due-list"):
        assert shown(client, reverse(name)) == []
        assert client.get(reverse(name) + f"?plant={cast.plant.code}").status_code == 404


def test_what_people_typed_is_shown_as_text(cast: people.Cast, client_as: SignIn) -> None:
    area = people.make_area(cast.plant, "<i>")
    tag = people.make_ready_tag(area, "<b>1</b>", service="<script>alert(1)</script>")
    tag.ranges.update(lrv='0"><b>', urv="9<i>")
    scheduling.refresh([tag.pk])
    for name in ("register", "due-list"):
        html = client_as(cast.planner).get(reverse(name)).content.decode()
        rows = html[html.index("<tbody>") : html.index("</tbody>")]
        assert "<script>" not in rows and "<b>" not in rows and "<i>" not in rows
        assert "&lt;script&gt;alert(1)" in rows


def test_an_empty_register_says_what_to_do_first(cast: people.Cast, client_as: SignIn) -> None:
    assert b"No tag yet." in client_as(cast.planner).get(reverse("register")).content
    assert b"No tag yet." in client_as(cast.planner).get(reverse("due-list")).content


def test_pages_lead_to_and_fro(tag: Tag, cast: people.Cast, client_as: SignIn, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(listing, "PAGE", 4)
    rows = [people.make_ready_tag(tag.area, f"LT-{number}") for number in range(1, 12)]
    scheduling.refresh([tag.pk, *(row.pk for row in rows)])
    client: Any = client_as(cast.planner)

    def follow(address: str, way: str) -> tuple[list[str], str]:
        html = client.get(address).content.decode()
        link = re.search(rf'<a href="([^"]+)" rel="{way}">', html)
        return numbers(html.encode()), reverse("register") + link[1].replace("&amp;", "&") if link else ""

    address, met = reverse("register") + "?area=20", []
    while address:
        last = address
        page, address = follow(address, "next")
        met += page
    assert met == [f"LT-{number}" for number in range(1, 12)] + ["PT-100"]
    _, before = follow(last, "prev")
    assert follow(before, "prev")[0] == met[4:8]
