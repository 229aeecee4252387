"""Filters of a list as comparisons of columns, each with what its index offers."""

from __future__ import annotations

import datetime
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any, Final

from django.db import connection

from calibration.models import ScheduleState, Standing
from calibration.models.standing import NO_DATE
from calibration.queries import wording
from calibration.queries.asking import FLAGS, NO_TEST, ORDERS, Asked
from calibration.queries.wording import Word

Phase = Standing.Phase


@dataclass(frozen=True, slots=True)
class Term:
    """A comparison; `{column}` stands for a column, `bound` says whether it opens or closes a stretch of the order."""

    text: str
    values: tuple[Any, ...]
    bound: str = ""


@dataclass(frozen=True, slots=True)
class Condition:
    """One filter.

    `keeps` is the order in which its index gives what it finds; `fixes` the column that has one value there. Tags with
    all `words` can be gathered. `last` says that what it is about lies at the end of its index.
    """

    terms: tuple[Term, ...]
    keeps: tuple[str, ...] = ()
    fixes: str = ""
    words: tuple[Word, ...] = ()
    last: bool = False


def conditions_of(asked: Asked, today: datetime.date, spans: tuple[int, int], words: Sequence[Word]) -> list[Condition]:
    """All filters that were asked for.

    Parameters
    ----------
    spans : tuple
        The longest grace and the longest lead of any tag of the plant [days].
    words : sequence of Word
        What stands in the search field.
    """
    conditions: list[Condition] = []
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
        conditions.append(in_state(ScheduleState(asked.state), today, spans))
    return conditions + [_worded(word) for word in words]


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


def in_state(state: ScheduleState, today: datetime.date, spans: tuple[int, int]) -> Condition:
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
    terms = (*_in_phase(Phase.SCHEDULED).terms, *dates[state], not_deferred)
    return Condition(terms, keeps=ORDERS["due"], last=state is ScheduleState.NOT_DUE)


def _worded(word: Word) -> Condition:
    """Tags with a word that begins so: gathered where it is rare, a look at each tag where it is common."""
    text, values = wording.look(word)
    stretch = wording.stretch(word)
    if stretch is None:
        return Condition((Term(text, values),), words=(word,))
    bounds = (Term("{sort_key} >= %s", stretch[:1], "low"), Term("{sort_key} < %s", stretch[1:], "high"))
    return Condition((*bounds, Term(text, values)), keeps=ORDERS["tag"], words=(word,))


class Columns(dict[str, str]):
    """Columns of the standing by name, each with a mark before it."""

    def __init__(self, mark: str) -> None:
        self.mark = mark

    def __missing__(self, column: str) -> str:
        return f"{self.mark}s.{column}"


PLAIN: Final = Columns("")
#: SQLite keeps no statistics that tell a rare verdict from a common one: unary plus, its own idiom, takes a column
#: out of the choice of index.
_KEPT_OUT: Final = Columns("+")


def guards() -> Columns:
    """How columns are written that shall be compared row by row, because another index serves the list better."""
    return _KEPT_OUT if connection.vendor == "sqlite" else PLAIN
