"""Filters, sorts and pages the standings of a plant; a page costs the same at a thousand and at 100,000 tags.

A filter that few tags meet is followed by its own index, and what it finds is sorted. Where many tags meet all
filters, the list is walked in its order and the first that match are taken. Counts that stop at a ceiling tell which
of both applies, so nothing here reads a large part of a plant.

The statements are written as text: Django takes several times longer to write them than the database to answer.
"""

from __future__ import annotations

import base64
import datetime
import json
import re
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from typing import Any, Final

from django.db import connection

from calibration.models import ScheduleState, Standing
from calibration.queries import wording
from calibration.queries.asking import Asked
from calibration.queries.conditions import PLAIN, Condition, conditions_of, guards, in_state
from calibration.queries.wording import Statement, Word
from register.models import Plant
from register.paging import NO_KEY, key_values

PAGE: Final = 50
#: Totals are counted up to here; fewer matches than this are gathered and sorted.
CEILING: Final = 1000
#: Where no filter alone is rare, so many rows of the list are looked at to tell how dense the matches are;
#: fewer where each row is asked for its words.
EXAMINED: Final = 2000
EXAMINED_FOR_WORDS: Final = 600
#: A page is looked for along the order of the list if it should be full after so many rows; fewer where each is asked
#: for several words.
FARTHEST: Final = 20000
FARTHEST_FOR_WORDS: Final = 4000
#: Else all matches are gathered; with words, these and the filters are counted so far to find what to begin with.
GATHERED: Final = 3000
GATHERED_FOR_WORDS: Final = 16000
_TABLE: Final = Standing._meta.db_table


@dataclass(frozen=True, slots=True)
class Page:
    """Rows of one page as dictionaries, the total with its ceiling, and the cursors to the pages beside it."""

    rows: list[dict[str, Any]]
    total: str
    earlier: str
    later: str


def page(plant: Plant, asked: Asked, today: datetime.date, columns: Sequence[str]) -> Page:
    """Read one page of the standings of a plant.

    Parameters
    ----------
    columns : sequence of str
        Columns of `Standing` that the page shows.
    """
    conditions = _conditions(plant, asked, today)
    down = asked.descending
    fixed = {condition.fixes for condition in conditions}
    order = tuple(column for column in asked.order if column not in fixed)
    # A stretch of the order that a word marks off is narrower than any other filter.
    in_order = next((one for one in sorted(conditions, key=lambda one: not one.words) if one.keeps == order), None)
    counts = _counts(plant, conditions)
    rarest = conditions[counts.index(min(counts))] if conditions else None
    driver, counted_all, gathered = in_order, True, False
    if rarest is not None and min(counts) <= CEILING:
        driver, gathered = rarest, rarest is not in_order or bool(rarest.words)
        found = _matching(plant, conditions, rarest, gathered=True)
        total = counts[0] if len(conditions) == 1 else _count(found)
    elif len(conditions) == 1:
        total = counts[0]
    else:
        sample = _sampled(plant, conditions, in_order, order, down=down)
        total, counted_all = sample.found, sample.is_all
        farthest = FARTHEST if sum(len(condition.words) for condition in conditions) < 2 else FARTHEST_FOR_WORDS
        if not counted_all and total * farthest < PAGE * sample.seen:
            driver, conditions = _gathering(plant, conditions, sample)
            gathered = driver is not in_order or bool(driver.words)
    cursor = _read_cursor(asked.before or asked.after, order)
    backward = bool(asked.before and cursor)
    keys = _keys(plant, conditions, driver, order, cursor, down=down != backward, sort=gathered)
    more = len(keys) > PAGE
    keys = keys[:PAGE][::-1] if backward else keys[:PAGE]
    if not counted_all:
        # The page itself may show more than the sample, or all there is.
        total, counted_all = max(total, len(keys)), not cursor and not more
    stored = {row["tag_id"]: row for row in Standing.objects.filter(pk__in=keys).values(*{"tag_id", *columns, *order})}
    rows = [stored[key] for key in keys if key in stored]
    return Page(
        rows=rows,
        total=total_text(total) if counted_all or total > CEILING else f"{total:,}+",
        earlier=_cursor(rows[0], order) if rows and (more if backward else bool(cursor)) else "",
        later=_cursor(rows[-1], order) if rows and (backward or more) else "",
    )


def everything(
    plant: Plant, asked: Asked, today: datetime.date, columns: Sequence[str], *, at_once: int = 2000
) -> Iterator[dict[str, Any]]:
    """All standings that meet the filters, in the order asked for, read in stretches; for files."""
    conditions = _conditions(plant, asked, today)
    cursor: list[Any] = []
    while True:
        keys = _keys(plant, conditions, None, asked.order, cursor, down=asked.descending, sort=False, limit=at_once)
        stored = {
            row["tag_id"]: row
            for row in Standing.objects.filter(pk__in=keys).values(*{"tag_id", *columns, *asked.order})
        }
        rows = [stored[key] for key in keys if key in stored]
        yield from rows
        if len(keys) < at_once or not rows:
            return
        cursor = [rows[-1][column] for column in asked.order]


def state_counts(plant: Plant, today: datetime.date) -> dict[ScheduleState, int]:
    """How many tags of a plant are in each state, counted up to the ceiling and one more; no filter changes it."""
    spans = _spans(plant)
    counts = _counts(plant, [in_state(state, today, spans) for state in ScheduleState])
    return dict(zip(ScheduleState, counts, strict=True))


def total_text(count: int) -> str:
    """A count as it is shown: above the ceiling it only says so."""
    return f"{CEILING:,}+" if count > CEILING else f"{count:,}"


@dataclass(frozen=True, slots=True)
class _Sample:
    """How many of the first rows of a list were seen and match, whether these are all, and how many match each."""

    found: int
    seen: int
    is_all: bool
    alone: Sequence[int] = ()


def _gathering(plant: Plant, conditions: list[Condition], sample: _Sample) -> tuple[Condition, list[Condition]]:
    """The condition that the fewest tags meet, together with other words that are not common, and all conditions.

    Of conditions that too many meet to be counted, the one that fewest rows of the sample meet; that tells enough of
    all conditions where there are no words among them.
    """
    by_words = any(condition.words for condition in conditions)
    counts = _counts(plant, conditions, far=True) if by_words else [0] * len(conditions)
    rarest = conditions[min(range(len(conditions)), key=lambda place: (counts[place], sample.alone[place]))]
    near = [
        condition
        for condition, count in zip(conditions, counts, strict=True)
        if condition is rarest or (condition.words and count <= GATHERED_FOR_WORDS)
    ]
    if not rarest.words or len(near) == 1:
        return rarest, conditions
    together = Condition((), words=tuple(word for condition in near for word in condition.words))
    return together, [*(condition for condition in conditions if condition not in near), together]


def _conditions(plant: Plant, asked: Asked, today: datetime.date) -> list[Condition]:
    words: list[Word] = []
    if typed := wording.typed(asked.text):
        words = wording.known(typed, _read(*wording.where(plant, typed))[0])
    return conditions_of(asked, today, _spans(plant) if asked.state else (0, 0), words)


_COLUMN: Final = re.compile(r"\{(\w+)\}")


def _matching(
    plant: Plant,
    conditions: Sequence[Condition],
    driver: Condition | None,
    cursor: str = "",
    *,
    gathered: bool = False,
) -> Statement:
    """FROM and WHERE that find the tags which meet all conditions, by the index of one of them.

    `cursor` names the kind of bounds that the place in the list makes idle; `gathered` begins with the words of the
    driver, if it has any, instead of its stretch of the order.
    """
    by_words = driver.words if driver is not None and gathered else ()
    texts, values = [], []
    told = [driver] if by_words else []
    if by_words:
        looks = [wording.tags_with(plant, word) for word in by_words]
        values += [value for _, more in looks for value in more]
        also = "".join(f" AND g.tag_id IN ({look})" for look, _ in looks[1:])
        # Other words are looked up before a row itself is read.
        for condition in conditions:
            if condition is not driver and condition.words and not any(word.numbers for word in condition.words):
                also += "".join(f" AND {term.text.format(tag_id='g.tag_id')}" for term in condition.terms)
                values += [value for term in condition.terms for value in term.values]
                told.append(condition)
        texts.append(f"s.tag_id IN (SELECT g.tag_id FROM ({looks[0][0]}) g WHERE g.tag_id > 0{also})")
    else:
        texts.append("s.plant_id = %s")
        values.append(plant.pk)
    for condition in sorted(conditions, key=lambda condition: bool(condition.words)):
        if condition in told:
            continue
        for term in condition.terms:
            plain = condition is driver and not (cursor and term.bound == cursor)
            texts.append(term.text.format_map(PLAIN if plain else guards()))
            values += term.values
    return f"FROM {_TABLE} s WHERE {' AND '.join(texts)}", values


def _keys(
    plant: Plant,
    conditions: Sequence[Condition],
    driver: Condition | None,
    order: Sequence[str],
    cursor: Sequence[Any],
    *,
    down: bool,
    sort: bool,
    limit: int = PAGE + 1,
) -> list[int]:
    """Keys of the tags after a place in the list; `sort` where the index of the driver does not keep the order."""
    columns = guards() if sort else PLAIN
    idle = ("high" if down else "low") if cursor and not sort else ""
    text, values = _matching(plant, conditions, driver, idle, gathered=sort)
    names = [columns[column] for column in order]
    if cursor:
        text += f" AND ({', '.join(names)}) {'<' if down else '>'} ({', '.join(['%s'] * len(names))})"
        values += cursor
    way = " DESC" if down else ""
    ordering = ", ".join(f"{name}{way}" for name in names)
    return [row[0] for row in _read(f"SELECT s.tag_id {text} ORDER BY {ordering} LIMIT {limit}", values)]


def _counts(plant: Plant, conditions: Sequence[Condition], *, far: bool = False) -> list[int]:
    """How many tags meet each condition alone, each counted up to the ceiling and one more, in one statement.

    `far` goes on to the greater ceilings, takes more than these for infinitely many, and counts a tag for each of its
    words that begin as asked.
    """
    if not conditions:
        return []
    texts, values, ceilings = [], [], []
    for condition in conditions:
        ceilings.append((GATHERED_FOR_WORDS if condition.words else GATHERED) if far else CEILING)
        if condition.words and not far:
            text, more = _count_of_word(plant, *condition.words)
        else:
            look = wording.tags_with(plant, *condition.words) if condition.words else _one_by_one(plant, condition)
            text, more = f"(SELECT COUNT(*) FROM ({look[0]} LIMIT {ceilings[-1] + 1}) c)", look[1]
        texts.append(text)
        values += more
    counts = _read(f"SELECT {', '.join(texts)}", values)[0]
    return [10**9 if far and count > ceiling else count for count, ceiling in zip(counts, ceilings, strict=True)]


def _one_by_one(plant: Plant, condition: Condition) -> Statement:
    """A row for each tag that meets one condition, from the end of the index at which these lie."""
    text, values = _matching(plant, [condition], condition)
    end = f" ORDER BY {', '.join(f'{PLAIN[column]} DESC' for column in condition.keeps)}" if condition.last else ""
    return f"SELECT 1 {text}{end}", values


def _count_of_word(plant: Plant, word: Word) -> Statement:
    """How many tags have a word that begins so: the first few thousand words tell, but for one letter or digit."""
    rows, values = wording.tags_with(plant, word)
    most = 5 * (CEILING + 1)
    exactly = f"(SELECT COUNT(*) FROM (SELECT DISTINCT d.tag_id FROM ({rows}) d LIMIT {CEILING + 1}) c)"
    if connection.vendor == "sqlite":
        # It stops as soon as there are enough; PostgreSQL would read all first.
        return exactly, values
    text = (
        f"(SELECT CASE WHEN COUNT(DISTINCT f.tag_id) > {CEILING} THEN {CEILING + 1} "
        f"WHEN COUNT(*) < {most} THEN COUNT(DISTINCT f.tag_id) ELSE {exactly} END FROM ({rows} LIMIT {most}) f)"
    )
    return text, values * 2


def _count(found: Statement) -> int:
    text, values = found
    counted: int = _read(f"SELECT COUNT(*) FROM (SELECT 1 {text} LIMIT {CEILING + 1}) c", values)[0][0]
    return counted


def _sampled(
    plant: Plant, conditions: Sequence[Condition], in_order: Condition | None, order: Sequence[str], *, down: bool
) -> _Sample:
    """Look at the first rows of the list, along the index of a condition that keeps its order if there is one."""
    text, values = _matching(plant, [in_order] if in_order else [], in_order)
    others = [condition for condition in conditions if condition is not in_order]
    if not others:
        counted = _count((text, values))
        return _Sample(counted, counted, is_all=True)
    by_words = any(condition.words for condition in conditions)
    ceiling = EXAMINED_FOR_WORDS if by_words else EXAMINED
    # Only columns that the index holds are named, so that no row itself is read.
    needed = {"tag_id"} | {
        column for condition in others for term in condition.terms for column in _COLUMN.findall(term.text)
    }
    ordering = ", ".join(f"{PLAIN[column]}{' DESC' if down else ''}" for column in order)
    rows = f"SELECT {', '.join(sorted(needed))} {text} ORDER BY {ordering} LIMIT {ceiling}"
    # Words are counted well enough by themselves, and dear to look up twice.
    singly = [condition for condition in others if not condition.words]
    looks = [_compared(others), *(_compared([condition]) for condition in singly if len(others) > 1)]
    matches = ", ".join(f"COUNT(CASE WHEN {look} THEN 1 END)" for look, _ in looks)
    values = [value for _, more in looks for value in more] + values
    seen, found, *each = _read(f"SELECT COUNT(*), {matches} FROM ({rows}) s", values)[0]
    each = each or [found]
    alone = [each[singly.index(condition)] if condition in singly else seen for condition in conditions]
    return _Sample(found, seen, seen < ceiling, alone)


def _compared(conditions: Sequence[Condition]) -> Statement:
    """The comparisons of some conditions, all of which must hold."""
    terms = [term for condition in conditions for term in condition.terms]
    text = " AND ".join(term.text.format_map(PLAIN) for term in terms)
    return text, [value for term in terms for value in term.values]


def _spans(plant: Plant) -> tuple[int, int]:
    """The longest grace and the longest lead of any tag of the plant [days]."""
    longest = "(SELECT MAX({column}) FROM " + _TABLE + " WHERE plant_id = %s)"
    text = ", ".join(longest.format(column=column) for column in ("grace_span", "lead_span"))
    grace, lead = _read(f"SELECT {text}", [plant.pk, plant.pk])[0]
    return grace or 0, lead or 0


def _read(text: str, values: Sequence[Any]) -> list[tuple[Any, ...]]:
    with connection.cursor() as cursor:
        cursor.execute(text, values)
        rows: list[tuple[Any, ...]] = cursor.fetchall()
        return rows


def _cursor(row: Mapping[str, Any], order: Sequence[str]) -> str:
    values = [value.isoformat() if isinstance(value, datetime.date) else value for value in map(row.get, order)]
    return base64.urlsafe_b64encode(json.dumps(values).encode()).decode().rstrip("=")


def _read_cursor(text: str, order: Sequence[str]) -> list[Any]:
    """Values of a cursor; empty where it cannot be read, which gives the first page."""
    try:
        values = json.loads(base64.urlsafe_b64decode(text + "=" * (-len(text) % 4)))
        known = {field.attname: field for field in Standing._meta.concrete_fields}
        fields = [known[column] for column in order]
        return key_values(values, fields)
    except NO_KEY:
        return []
