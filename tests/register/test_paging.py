"""Pages by key: complete, in order, both ways, whatever the page size, and never by offset."""

from __future__ import annotations

import json
from urllib.parse import parse_qs, quote

import pytest
from django.core.exceptions import ValidationError
from django.db import connection
from django.http import Http404
from django.test import RequestFactory
from django.test.utils import CaptureQueriesContext

from register.models import Area, AuditEntry, Plant
from register.paging import Page, page_of, total
from tests.cast import make_area, make_plant

ORDER = ("-name", "id")


@pytest.fixture
def plant(db: None) -> Plant:
    """A plant with 23 areas, many of them of the same name."""
    plant = make_plant()
    for number in range(23):
        make_area(plant, f"{number:02}", name=f"Unit {number % 5}")
    return plant


def page(query: str, plant: Plant, *, rows: int = 5) -> Page[Area]:
    request = RequestFactory().get(f"/{query}")
    return page_of(request, Area.objects.filter(plant=plant), order=ORDER, what="areas", rows=rows)


def expected(plant: Plant) -> list[str]:
    return [area.code for area in Area.objects.filter(plant=plant).order_by(*ORDER)]


@pytest.mark.parametrize("rows", [1, 4, 5, 22, 23, 24])
def test_walking_later_shows_every_row_once_in_order(plant: Plant, rows: int) -> None:
    seen, query = [], ""
    for _ in range(30):
        now = page(query, plant, rows=rows)
        seen += [area.code for area in now.rows]
        query = now.later
        if not query:
            break
    assert seen == expected(plant)


@pytest.mark.parametrize("rows", [1, 4, 5, 22, 23, 24])
def test_walking_back_shows_the_same_rows(plant: Plant, rows: int) -> None:
    now = page("", plant, rows=rows)
    while now.later:
        now = page(now.later, plant, rows=rows)
    seen = [area.code for area in now.rows]
    while now.earlier:
        now = page(now.earlier, plant, rows=rows)
        seen = [area.code for area in now.rows] + seen
    assert seen == expected(plant)


def test_sets_are_merged_as_if_they_were_one(plant: Plant) -> None:
    request = RequestFactory().get("/")
    parts = [
        Area.objects.filter(plant=plant, name__in=names)
        for names in (["Unit 0", "Unit 3"], ["Unit 1"], ["Unit 2", "Unit 4"])
    ]
    merged = page_of(request, *parts, order=ORDER, what="areas", rows=23)
    assert [area.code for area in merged.rows] == expected(plant)
    assert merged.total == "23"


def test_other_filters_of_the_address_are_kept(plant: Plant) -> None:
    later = page("?text=a%26b&after=", plant).later
    assert parse_qs(later.removeprefix("?"))["text"] == ["a&b"]


NO_KEYS = [
    "x",
    "[]",
    '["Unit 1"]',
    '["Unit 1","one"]',
    '{"a":1}',
    '["\\u0000",1]',
    '["a",1e400]',
    '["a",Infinity]',
    '["a",NaN]',
    '["a",null]',
    '["a",[1]]',
    '[{"b":"c"},1]',
    '["\\ud800",1]',
    f'["a",{2**63}]',
    f'["a",{-(2**63) - 1}]',
    f'["a",{"9" * 5000}]',
    "[" * 5000,
    '{"a":' * 5000,
]


@pytest.mark.parametrize("side", ["after", "before"])
@pytest.mark.parametrize("key", NO_KEYS, ids=[key[:24] for key in NO_KEYS])
def test_a_key_that_is_none_is_not_found(plant: Plant, key: str, side: str) -> None:
    with pytest.raises((Http404, ValidationError)) as refusal:
        page(f"?{side}={quote(key)}", plant)
    assert refusal.type is Http404


@pytest.mark.parametrize(
    "moment", ["0001-01-01T00:00:00+14:00", "9999-12-31T23:59:59-12:00", "2026-01-01T00:00:00", "2026-13-01", "now"]
)
def test_a_moment_that_no_clock_shows_is_no_key(plant: Plant, moment: str) -> None:
    request = RequestFactory().get("/", {"after": json.dumps([moment, 1])})
    with pytest.raises(Http404):
        page_of(request, AuditEntry.objects.all(), order=("-at", "-id"), what="entries")


def test_beyond_a_thousand_the_total_is_not_counted_out(plant: Plant) -> None:
    Area.objects.bulk_create(Area(plant=plant, code=f"B{number}", name="x") for number in range(977))
    assert total(Area.objects.filter(plant=plant)) == "1,000"
    make_area(plant, "one more")
    assert total(Area.objects.filter(plant=plant)) == "1,000+"


def test_no_page_is_reached_by_offset_and_all_cost_two_queries(plant: Plant) -> None:
    query = ""
    for _ in range(3):
        with CaptureQueriesContext(
            connection,
        ) as queries:
            now = page(query, plant)
        assert len(queries) == 2
        assert not any("OFFSET" in one["sql"] for one in queries)
        query = now.later
