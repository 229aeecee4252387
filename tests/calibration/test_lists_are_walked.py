"""A list gives exactly the rows that meet its filters, in its order, page by page in both directions.

The same lists are worked out row by row in Python from randomly made standings and compared. Ceilings are set
so low that every way a page can be found is taken: gathered by a rare filter, walked along an order, sampled.
"""

from __future__ import annotations

import base64
import datetime
import itertools
import json
import random
from collections.abc import Callable
from typing import Any

import pytest

from calibration.models import ScheduleState, SearchWord, Standing
from calibration.models.standing import NO_DATE
from calibration.queries import listing, standings
from calibration.queries.asking import FLAGS, ORDERS, Asked
from register.models import Area, Plant, Tag
from tests import cast as people

TODAY = datetime.date(2026, 6, 15)
COLUMNS = ["number", "due_on"]
WORDS = ["feed", "water", "steam", "drum", "acid", "feeder"]
Phase = Standing.Phase


@pytest.fixture
def plant(cast: people.Cast) -> Plant:
    """North works with 90 tags in all kinds of states; the other plant has some as well."""
    draw = random.Random(20260615)
    for plant, count in ((cast.plant, 90), (cast.other_plant, 12)):
        areas = [people.make_area(plant, code) for code in ("10", "20", "30~x")]
        tags = [made(plant, draw.choice(areas), number, draw) for number in range(count)]
        assert len({tag.number for tag in tags}) == count
    return cast.plant


def made(plant: Plant, area: Area, number: int, draw: random.Random) -> Tag:
    tag = people.make_tag(
        area,
        f"{draw.choice(['FT', 'pt', 'LT', '2PT', 'Öl'])}-{number}",
        service=" ".join(draw.sample(WORDS, 2)).capitalize(),
    )
    phase = draw.choice([Phase.NOTHING_FITTED, Phase.NOT_IN_SERVICE, Phase.NEVER_TESTED, *[Phase.SCHEDULED] * 6, 3])
    due = TODAY + datetime.timedelta(days=draw.choice([-200, -60, -1, 0, 1, 41, 42, 43, 300]))
    grace = draw.choice([0, 45, 90])
    row = Standing(
        tag=tag,
        plant=plant,
        area=area,
        number=tag.number,
        sort_key=standings.sort_key(tag.number),
        service=tag.service,
        area_code=area.code,
        criticality=draw.choice(["safety", "general"]),
        phase=phase,
        flag_rank=draw.choice([0, 1, 2, 3, 3]),
        accepted_flags=draw.choice([0, 0, 1]),
        last_verdict=draw.choice(["pass", "pass", "fail", ""]),
        error_rank=draw.choice([1.0, -0.25, -0.5, -0.5, -1.25]),
    )
    if phase >= Phase.NEVER_TESTED:
        row.due_on = row.due_key = due
    if phase == Phase.SCHEDULED:
        row.grace_until, row.grace_span = due + datetime.timedelta(days=grace), grace
        row.window_opens_on, row.lead_span = due - datetime.timedelta(days=42), 42
        row.deferred_until = draw.choice([None, None, None, TODAY - datetime.timedelta(days=1), TODAY])
    row.save()
    SearchWord.objects.bulk_create(
        SearchWord(plant=plant, tag=tag, word=word)
        for word in standings.words_of_number(tag.number) | standings.words_of(tag.service)
    )
    return tag


def meets(row: Standing, asked: Asked) -> bool:
    services: dict[str, Callable[[int], bool]] = {
        "in": lambda phase: phase > 0,
        "out": lambda phase: phase == 0,
        "unfitted": lambda phase: phase < 0,
    }
    words = standings.words_of(f"{row.number} {row.service}")
    checks = [
        not asked.area or row.area_code == asked.area,
        not asked.service or services[asked.service](row.phase),
        not asked.state or row.state(TODAY) == asked.state,
        not asked.verdict or row.last_verdict == ("" if asked.verdict == "none" else asked.verdict),
        not asked.criticality or row.criticality == asked.criticality,
        all(any(word.startswith(start) for word in words) for start in asked.text.casefold().split()),
    ]
    if asked.flag == "accepted":
        checks.append(row.accepted_flags > 0)
    elif asked.flag:
        checks.append(row.flag_rank == FLAGS[asked.flag])
    return all(checks)


def by_hand(plant: Plant, asked: Asked) -> list[int]:
    rows = [row for row in Standing.objects.filter(plant=plant) if meets(row, asked)]
    rows.sort(key=lambda row: [getattr(row, column) for column in asked.order], reverse=asked.descending)
    return [row.tag_id for row in rows]


def walk(plant: Plant, asked: Asked) -> tuple[list[int], list[int], str]:
    """Keys met on the way to the end, keys met on the way back, and the total shown."""
    page = listing.page(plant, asked, TODAY, COLUMNS)
    total, there = page.total, [row["tag_id"] for row in page.rows]
    assert page.earlier == ""
    last = page
    while last.later:
        last = listing.page(plant, _at(asked, after=last.later), TODAY, COLUMNS)
        assert last.rows and last.earlier
        there += [row["tag_id"] for row in last.rows]
    back = [row["tag_id"] for row in last.rows]
    while last.earlier:
        last = listing.page(plant, _at(asked, before=last.earlier), TODAY, COLUMNS)
        assert last.rows and last.later
        back = [row["tag_id"] for row in last.rows] + back
    return there, back, total


def _at(asked: Asked, **place: str) -> Asked:
    return Asked(**{**asked.parts, **place})


SORTS = [f"{sign}{name}" for sign in ("", "-") for name in ORDERS]
ALONE: list[dict[str, Any]] = [
    {},
    *({"state": state} for state in ScheduleState.values),
    *({"flag": flag} for flag in [*FLAGS, "accepted"]),
    *({"service": service} for service in ("in", "out", "unfitted")),
    *({"verdict": verdict} for verdict in ("pass", "fail", "none")),
    {"area": "30~x"},
    {"criticality": "safety"},
    *(
        {"text": text}
        for text in (
            "feed",
            "feeder",
            "feed water",
            "ft",
            "FT-7",
            "pt 1",
            "steam drum f",
            "steam nothing",
            "ft pt",
            "PT pt-1 water",
            "öl",
            "2p",
        )
    ),
]


@pytest.mark.parametrize(
    ("ceiling", "examined", "farthest"), [(1000, 4000, 20000), (5, 4000, 20000), (5, 20, 20), (0, 5, 20000), (0, 5, 0)]
)
def test_every_row_is_met_once_on_the_way_there_and_back(
    plant: Plant, monkeypatch: pytest.MonkeyPatch, ceiling: int, examined: int, farthest: int
) -> None:
    monkeypatch.setattr(listing, "PAGE", 7)
    monkeypatch.setattr(listing, "CEILING", ceiling)
    monkeypatch.setattr(listing, "EXAMINED", examined)
    monkeypatch.setattr(listing, "EXAMINED_FOR_WORDS", examined)
    monkeypatch.setattr(listing, "FARTHEST", farthest)
    monkeypatch.setattr(listing, "FARTHEST_FOR_WORDS", farthest)
    draw = random.Random(ceiling * 10000 + examined)
    together = [draw.choice(ALONE) | draw.choice(ALONE) | draw.choice(ALONE) for _ in range(25)]
    for filters, sort in itertools.chain(
        ((alone, draw.choice(SORTS)) for alone in ALONE), zip(together, itertools.cycle(SORTS), strict=False)
    ):
        asked = Asked(**filters, sort=sort)
        there, back, total = walk(plant, asked)
        assert there == back == by_hand(plant, asked), (filters, sort)
        if ceiling == 1000:
            assert total == str(len(there))
        elif not total.endswith("+"):
            assert int(total) == len(there)
        else:
            assert int(total[:-1].replace(",", "")) <= len(there)


def test_a_file_holds_the_same_rows_in_the_same_order(plant: Plant) -> None:
    for filters, sort in zip(ALONE, itertools.cycle(SORTS), strict=False):
        asked = Asked(**filters, sort=sort)
        rows = listing.everything(plant, asked, TODAY, COLUMNS, at_once=4)
        assert [row["tag_id"] for row in rows] == by_hand(plant, asked)


def test_the_counts_of_the_states_are_those_of_the_rows_and_add_up(plant: Plant) -> None:
    counts = listing.state_counts(plant, TODAY)
    rows = list(Standing.objects.filter(plant=plant))
    assert counts == {state: sum(row.state(TODAY) == state for row in rows) for state in ScheduleState}
    assert sum(counts.values()) == len(rows)


def test_a_total_above_the_ceiling_only_says_so(plant: Plant, monkeypatch: pytest.MonkeyPatch) -> None:
    assert listing.total_text(1000) == "1,000"
    assert listing.total_text(1001) == "1,000+"
    monkeypatch.setattr(listing, "CEILING", 20)
    assert listing.page(plant, Asked(), TODAY, COLUMNS).total == "20+"


def place(*values: Any) -> str:
    return base64.urlsafe_b64encode(json.dumps(values).encode()).decode().rstrip("=")


@pytest.mark.parametrize(
    "text",
    [
        "",
        "x",
        "AAAA",
        place(1, 2, 3, 4),
        place("2026-13-01", "pt-1", 7),
        place("2026-01-01", "pt-1", None),
        place("2026-01-01", "pt-1", 10**30),
        place("2026-01-01\0", "pt-1", 7),
        place(None, None, "seven"),
        place("2026-01-01", "pt\0-1", 7),
        place("2026-01-01", "pt\ud800-1", 7),
        place("2026-01-01", "pt-1", float("inf")),
        place("2026-01-01", "pt-1", float("nan")),
        place("2026-01-01", ["pt-1"], 7),
        base64.urlsafe_b64encode(b"[" * 5000).decode(),
    ],
)
def test_a_place_that_cannot_be_read_gives_the_first_page(plant: Plant, text: str) -> None:
    first = listing.page(plant, Asked(sort="due"), TODAY, COLUMNS)
    assert listing.page(plant, Asked(sort="due", after=text), TODAY, COLUMNS).rows == first.rows


@pytest.mark.parametrize(
    "values", [("2\0", "pt-1", 7), ("20", "pt\0-1", 7), ("\ud800", "pt-1", 7), ([["20"]], "pt-1", 7)]
)
def test_a_place_in_the_order_of_areas_that_cannot_be_read_gives_the_first_page(
    plant: Plant, values: tuple[Any, ...]
) -> None:
    first = listing.page(plant, Asked(sort="area"), TODAY, COLUMNS)
    assert listing.page(plant, Asked(sort="area", after=place(*values)), TODAY, COLUMNS).rows == first.rows


def test_a_word_longer_than_any_kept_is_compared_by_its_beginning(plant: Plant) -> None:
    tag = people.make_tag(plant.areas.first(), "PT-9999", service="x" * 90)  # type: ignore[arg-type]
    draw = random.Random(1)
    SearchWord.objects.create(
        plant=plant, tag=made(plant, tag.area, 5000, draw), word=("x" * 90)[: standings.WORD_LENGTH]
    )
    assert listing.page(plant, Asked(text="x" * 80), TODAY, COLUMNS).total == "1"
    assert Asked.read({"text": "a\0b"}, {}).text == "ab"


def test_a_tag_without_a_date_sorts_behind_all_that_have_one(plant: Plant) -> None:
    keys = by_hand(plant, Asked(sort="due"))
    dates = [Standing.objects.get(pk=key).due_key for key in keys]
    assert dates == sorted(dates)
    assert dates[-1] == NO_DATE


def test_numbers_sort_as_people_count() -> None:
    assert sorted(["FT-10", "FT-9", "ft-8", "FT-100A"], key=standings.sort_key) == ["ft-8", "FT-9", "FT-10", "FT-100A"]


def test_a_text_is_found_by_its_words_and_by_letters_and_digits_inside_them() -> None:
    assert standings.words_of("PDT-2041B: Low-pressure, (steam)") == {
        *("pdt-2041b", "pdt", "2041", "b", "low-pressure", "low", "pressure", "steam")
    }
