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
from dataclasses import dataclass, fields, replace
from typing import Any, Final
from urllib.parse import urlencode

from django.core.exceptions import ValidationError
from django.db import connection

from calibration.models import ScheduleState, SearchWord, Standing
from calibration.models.standing import NO_DATE
from calibration.queries.standings import WORD_LENGTH
from register.models import Plant

PAGE: Final = 50
#: Totals are counted up to here; fewer matches than this are gathered and sorted.
CEILING: Final = 1000
#: Where no filter alone is rare, so many rows of the list are looked at to tell how dense the matches are;
#: fewer where each row is asked for its words.
EXAMINED: Final = 4000
EXAMINED_FOR_WORDS: Final = 1000
#: A page is looked for along the order of the list if it should be full after so many rows; fewer where each is asked
#: for several words.
FARTHEST: Final = 20000
FARTHEST_FOR_WORDS: Final = 4000
#: Else all matches are gathered; so far filters are counted to find the one to begin with.
GATHERED: Final = 20000
Phase = Standing.Phase
_TABLE: Final = Standing._meta.db_table
_WORDS: Final = SearchWord._meta.db_table

#: Columns that a list is sorted by; each is led in by an index and ends in the key of the row.
ORDERS: Final[dict[str, tuple[str, ...]]] = {
    "tag": ("sort_key", "tag_id"),
    "area": ("area_code", "sort_key", "tag_id"),
    "due": ("due_key", "sort_key", "tag_id"),
    "error": ("error_rank", "sort_key", "tag_id"),
    "flag": ("flag_rank", "sort_key", "tag_id"),
}
FLAGS: Final[dict[str, int]] = {"violation": 0, "caution": 1, "cannot check": 2, "none": 3}
NO_TEST: Final = "none"


@dataclass(frozen=True, slots=True)
class Asked:
    """What a person asked a list for; every part stands in the address."""

    plant: str = ""
    area: str = ""
    service: str = ""
    flag: str = ""
    state: str = ""
    verdict: str = ""
    criticality: str = ""
    text: str = ""
    sort: str = "tag"
    after: str = ""
    before: str = ""

    @classmethod
    def read(cls, given: Mapping[str, str], known: Mapping[str, Sequence[str]], *, sort: str = "tag") -> Asked:
        """Read an address; what is not among the `known` values of a filter is left out."""
        chosen = {name: given.get(name, "") for name, values in known.items() if given.get(name, "") in values}
        order = given.get("sort", "")
        return cls(
            **chosen,
            plant=given.get("plant", ""),
            text=given.get("text", "").replace("\0", "").strip()[:100],
            sort=order if order.removeprefix("-") in ORDERS else sort,
            after=given.get("after", ""),
            before=given.get("before", ""),
        )

    def address(self, **changes: str) -> str:
        """The query part of the address with some parts changed; a new filter or sort starts at the first page."""
        if not {"after", "before"} & set(changes):
            changes |= {"after": "", "before": ""}
        return "?" + urlencode(replace(self, **changes).parts)

    @property
    def parts(self) -> dict[str, str]:
        """The parts that are set, by their names in the address."""
        return {name: value for name in _PARTS if (value := getattr(self, name))}

    @property
    def order(self) -> tuple[str, ...]:
        return ORDERS[self.sort.removeprefix("-")]

    @property
    def descending(self) -> bool:
        return self.sort.startswith("-")


_PARTS: Final = tuple(part.name for part in fields(Asked))


@dataclass(frozen=True, slots=True)
class Page:
    """Rows of one page as dictionaries, the total with its ceiling, and the cursors to the pages beside it."""

    rows: list[dict[str, Any]]
    total: str
    earlier: str
    later: str


@dataclass(frozen=True, slots=True)
class Term:
    """A comparison; `{column}` stands for a column, `bound` says whether it opens or closes a stretch of the order."""

    text: str
    values: tuple[Any, ...]
    bound: str = ""


@dataclass(frozen=True, slots=True)
class Condition:
    """One filter.

    `keeps` is the order in which its index gives what it finds; `fixes` the column that has one value there. Beginnings
    of `words` are looked up in the index of words.
    """

    terms: tuple[Term, ...]
    keeps: tuple[str, ...] = ()
    fixes: str = ""
    words: tuple[str, ...] = ()


def page(plant: Plant, asked: Asked, today: datetime.date, columns: Sequence[str]) -> Page:
    """Read one page of the standings of a plant.

    Parameters
    ----------
    columns : sequence of str
        Columns of `Standing` that the page shows.
    """
    conditions = _conditions(plant, asked, today)
    fixed = {condition.fixes for condition in conditions}
    order = tuple(column for column in asked.order if column not in fixed)
    in_order = next((condition for condition in conditions if condition.keeps == order), None)
    counts = _counts(plant, conditions)
    rarest = conditions[counts.index(min(counts))] if conditions else None
    driver: Condition | None
    counted_all = True
    if rarest is not None and min(counts) <= CEILING:
        total = counts[0] if len(conditions) == 1 else _count(_matching(plant, conditions, rarest))
        driver = rarest
    elif len(conditions) == 1:
        total, driver = counts[0], in_order
    else:
        total, seen, counted_all = _sampled(plant, conditions, in_order, order)
        farthest = FARTHEST if sum(len(condition.words) for condition in conditions) < 2 else FARTHEST_FOR_WORDS
        if counted_all or total * farthest >= PAGE * seen:
            driver = in_order
        else:
            driver, conditions = _gathering(plant, conditions)
    cursor = _read_cursor(asked.before or asked.after, order)
    backward = bool(asked.before and cursor)
    keys = _keys(
        plant, conditions, driver, order, cursor, down=asked.descending != backward, sort=driver is not in_order
    )
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
    counts = _counts(plant, [_in_state(state, today, spans) for state in ScheduleState])
    return dict(zip(ScheduleState, counts, strict=True))


def total_text(count: int) -> str:
    """A count as it is shown: above the ceiling it only says so."""
    return f"{CEILING:,}+" if count > CEILING else f"{count:,}"


def _conditions(plant: Plant, asked: Asked, today: datetime.date) -> list[Condition]:
    conditions = []
    if asked.area:
        conditions.append(_equal("area_code", asked.area))
    if asked.flag == "accepted":
        conditions.append(Condition((Term("{accepted_flags} > %s", (0,)),)))
    elif asked.flag:
        conditions.append(_equal("flag_rank", FLAGS[asked.flag]))
    if asked.verdict:
        conditions.append(_equal("last_verdict", "" if asked.verdict == NO_TEST else asked.verdict))
    if asked.criticality:
        conditions.append(_equal("criticality", asked.criticality))
    if asked.service:
        conditions.append(_in_service(asked.service))
    if asked.state:
        conditions.append(_in_state(ScheduleState(asked.state), today, _spans(plant)))
    return conditions + [_worded(plant, word[:WORD_LENGTH]) for word in asked.text.casefold().split()]


def _equal(column: str, value: str | int) -> Condition:
    return Condition((Term(f"{{{column}}} = %s", (value,)),), keeps=ORDERS["tag"], fixes=column)


def _in_phase(phase: int) -> Condition:
    return Condition((Term("{phase} = %s", (phase,)),), keeps=ORDERS["due"])


def _in_service(asked: str) -> Condition:
    if asked == "in":
        return Condition((Term("{phase} > %s", (Phase.NOT_IN_SERVICE,)),))
    phase = Phase.NOTHING_FITTED if asked == "unfitted" else Phase.NOT_IN_SERVICE
    dateless = Term("{due_key} = %s", (NO_DATE,))
    return Condition((*_in_phase(phase).terms, dateless), keeps=ORDERS["tag"], fixes="due_key")


def _in_state(state: ScheduleState, today: datetime.date, spans: tuple[int, int]) -> Condition:
    """The condition of a state, with bounds on the due date by which its index is entered at the right place."""
    grace, lead = (datetime.timedelta(days) for days in spans)
    if state is ScheduleState.NOT_IN_SERVICE:
        return Condition((Term("{phase} <= %s", (Phase.NOT_IN_SERVICE,)),), fixes="due_key")
    if state is ScheduleState.NEVER_TESTED:
        return _in_phase(Phase.NEVER_TESTED)
    if state is ScheduleState.NO_REQUIREMENT:
        return _in_phase(Phase.NO_REQUIREMENT)
    if state is ScheduleState.DEFERRED:
        return Condition((Term("{deferred_until} >= %s", (today,)),))
    past, coming = Term("{due_key} < %s", (today,), "high"), Term("{due_key} >= %s", (today,), "low")
    dates = {
        ScheduleState.OVERDUE: (past, Term("{grace_until} < %s", (today,))),
        ScheduleState.IN_GRACE: (
            past,
            Term("{due_key} >= %s", (today - grace,), "low"),
            Term("{grace_until} >= %s", (today,)),
        ),
        ScheduleState.DUE: (
            coming,
            Term("{due_key} <= %s", (today + lead,), "high"),
            Term("{window_opens_on} <= %s", (today,)),
        ),
        ScheduleState.NOT_DUE: (coming, Term("{window_opens_on} > %s", (today,))),
    }
    not_deferred = Term("({deferred_until} IS NULL OR {deferred_until} < %s)", (today,))
    return Condition((*_in_phase(Phase.SCHEDULED).terms, *dates[state], not_deferred), keeps=ORDERS["due"])


def _worded(plant: Plant, word: str) -> Condition:
    """Tags with a word that begins so; keys where it is rare, a look at each tag where it is common."""
    begins, values = _begins(word)
    # Not EXISTS: PostgreSQL would gather every tag with such a word before it looks at the first row.
    look = f"(SELECT 1 FROM {_WORDS} w WHERE w.tag_id = s.tag_id AND {begins} LIMIT 1) IS NOT NULL"
    return Condition((Term(look, values),), words=(word,))


def _gathering(plant: Plant, conditions: list[Condition]) -> tuple[Condition, list[Condition]]:
    """The condition that the fewest tags meet, together with other words that are not common, and all conditions."""
    counts = _counts(plant, conditions, far=True)
    rarest = conditions[counts.index(min(counts))]
    apart = [
        condition
        for condition, count in zip(conditions, counts, strict=True)
        if condition is not rarest and not (rarest.words and condition.words and count <= GATHERED)
    ]
    if len(apart) == len(conditions) - 1:
        return rarest, conditions
    words = tuple(word for condition in conditions if condition not in apart for word in condition.words)
    together = Condition((), words=words)
    return together, [*apart, together]


def _begins(word: str) -> tuple[str, tuple[str, ...]]:
    """A comparison by which the index of words is entered, on either database."""
    if connection.vendor == "postgresql":
        escaped = word.replace("\\", "\\\\").replace("%", "\\%").replace("_", "\\_")
        return "w.word LIKE %s", (f"{escaped}%",)
    return "w.word >= %s AND w.word < %s", (word, f"{word}\U0010ffff")


_COLUMN: Final = re.compile(r"\{(\w+)\}")
Statement = tuple[str, list[Any]]


def _matching(plant: Plant, conditions: Sequence[Condition], driver: Condition | None, cursor: str = "") -> Statement:
    """FROM and WHERE that find the tags which meet all conditions, by the index of one of them.

    `cursor` names the kind of bounds that the place in the list makes idle.
    """
    texts, values = [], []
    if driver is not None and driver.words:
        looks = []
        for word in driver.words:
            look, more = _with_word(plant, word)
            looks.append(f"SELECT w.tag_id {look}")
            values += more
        texts.append(f"s.tag_id IN ({' INTERSECT '.join(looks)})")
    else:
        texts.append("s.plant_id = %s")
        values.append(plant.pk)
    for condition in sorted(conditions, key=lambda condition: bool(condition.words)):
        if condition is driver and driver.words:
            continue
        for term in condition.terms:
            plain = condition is driver and not (cursor and term.bound == cursor)
            texts.append(term.text.format_map(_PLAIN if plain else _guards()))
            values += term.values
    return f"FROM {_TABLE} s WHERE {' AND '.join(texts)}", values


class _Columns(dict[str, str]):
    def __init__(self, mark: str) -> None:
        self.mark = mark

    def __missing__(self, column: str) -> str:
        return f"{self.mark}s.{column}"


_PLAIN: Final = _Columns("")
#: SQLite keeps no statistics that tell a rare verdict from a common one: unary plus, its own idiom, takes a column
#: out of the choice of index.
_KEPT_OUT: Final = _Columns("+")


def _guards() -> _Columns:
    """How columns are written that shall be compared row by row, because another index serves the list better."""
    return _KEPT_OUT if connection.vendor == "sqlite" else _PLAIN


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
    columns = _guards() if sort else _PLAIN
    idle = ("high" if down else "low") if cursor and not sort else ""
    text, values = _matching(plant, conditions, driver, idle)
    names = [columns[column] for column in order]
    if cursor:
        text += f" AND ({', '.join(names)}) {'<' if down else '>'} ({', '.join(['%s'] * len(names))})"
        values += cursor
    way = " DESC" if down else ""
    ordering = ", ".join(f"{name}{way}" for name in names)
    return [row[0] for row in _read(f"SELECT s.tag_id {text} ORDER BY {ordering} LIMIT {limit}", values)]


def _counts(plant: Plant, conditions: Sequence[Condition], *, far: bool = False) -> list[int]:
    """How many tags meet each condition alone, each counted up to the ceiling and one more, in one statement.

    `far` goes on to the greater ceiling, and a tag counts for each of its words that begin as asked.
    """
    if not conditions:
        return []
    most = GATHERED if far else CEILING
    texts, values = [], []
    for condition in conditions:
        if condition.words and not far:
            text, more = _count_of_word(plant, *condition.words)
        else:
            look = _with_word(plant, *condition.words) if condition.words else _matching(plant, [condition], condition)
            text, more = f"(SELECT COUNT(*) FROM (SELECT 1 {look[0]} LIMIT {most + 1}) c)", look[1]
        texts.append(text)
        values += more
    return list(_read(f"SELECT {', '.join(texts)}", values)[0])


def _with_word(plant: Plant, word: str) -> Statement:
    """FROM and WHERE that find the words that begin so."""
    begins, values = _begins(word)
    return f"FROM {_WORDS} w WHERE w.plant_id = %s AND {begins}", [plant.pk, *values]


def _count_of_word(plant: Plant, word: str) -> Statement:
    """How many tags have a word that begins so: the first few thousand words tell, but for one letter or digit."""
    text, values = _with_word(plant, word)
    rows = f"SELECT w.tag_id {text}"
    most = 5 * (CEILING + 1)
    exactly = f"(SELECT COUNT(*) FROM (SELECT DISTINCT e.tag_id FROM ({rows}) e LIMIT {CEILING + 1}) c)"
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
    plant: Plant, conditions: Sequence[Condition], in_order: Condition | None, order: Sequence[str]
) -> tuple[int, int, bool]:
    """How many of the first rows of the list match, how many rows that were, and whether these were all of them."""
    text, values = _matching(plant, [in_order] if in_order else [], in_order)
    others = [term for condition in conditions if condition is not in_order for term in condition.terms]
    if not others:
        counted = _count((text, values))
        return counted, counted, True
    ceiling = EXAMINED_FOR_WORDS if any(condition.words for condition in conditions) else EXAMINED
    # Only columns that the index holds are named, so that no row itself is read.
    needed = {"tag_id", *(column for term in others for column in _COLUMN.findall(term.text))}
    ordering = ", ".join(_PLAIN[column] for column in order)
    rows = f"SELECT {', '.join(sorted(needed))} {text} ORDER BY {ordering} LIMIT {ceiling}"
    matches = " AND ".join(term.text.format_map(_PLAIN) for term in others)
    values = [value for term in others for value in term.values] + values
    found, seen = _read(f"SELECT COUNT(CASE WHEN {matches} THEN 1 END), COUNT(*) FROM ({rows}) s", values)[0]
    return found, seen, seen < ceiling


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
        if not isinstance(values, list) or len(values) != len(fields) or "\0" in str(values[0]):
            return []
        if not 0 < int(values[-1]) < 2**63:
            return []
        return [field.to_python(value) for field, value in zip(fields, values, strict=True)]
    except (ValueError, TypeError, ValidationError):
        return []
