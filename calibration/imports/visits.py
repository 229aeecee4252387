"""Gathers the rows of a file, one a reading, into runs and tests."""

from __future__ import annotations

import datetime
from collections.abc import Iterator, Sequence
from dataclasses import dataclass, field
from typing import Any, Final

from calibration.imports.test_columns import LABELS, OF_READING, OF_RUN, OF_TEST, Moment
from calibration.models import Run
from register.imports.columns import Cells
from register.imports.known import folded
from register.searching import key

#: Kinds of runs in the order in which they are made.
KINDS: Final = (Run.Kind.AS_FOUND.value, Run.Kind.AS_LEFT.value)


@dataclass(slots=True)
class Visit:
    """The rows of one test by their places in the table, run by run, in the order of the readings.

    `unread` are the rows that say why it could not be tested.
    """

    day: datetime.date
    runs: dict[str, list[int]] = field(default_factory=dict)
    unread: list[int] = field(default_factory=list)
    values: dict[str, Any] = field(default_factory=dict)

    @property
    def rows(self) -> list[int]:
        return [*(row for kind in KINDS for row in self.runs.get(kind, ())), *self.unread]

    @property
    def first(self) -> int:
        """The row that comes first in the file."""
        return min(self.rows)


def gathered(cells: Cells) -> list[Visit]:
    """Tests in the order of the file; rows that contradict each other within a test are refused."""
    visits: dict[tuple[Any, ...], Visit] = {}
    values = cells.values
    for row in range(len(cells.table.rows)):
        if row in cells.table.faults:
            continue
        tested: Moment | None = values["tested_on"][row]
        if tested is None:
            cells.complain(row, "tested_on", "On which day was this read? Its date is missing.")
            continue
        names = [values[name][row] for name in ("tag", "maker", "serial")]
        if names[0] is None and names[2] is None:
            cells.complain(row, "tag", "What was tested? Neither a tag nor a serial number stands here.")
            continue
        which = (
            key(names[0] or ""),
            folded(names[1] or ""),
            key(names[2] or ""),
            tested.day,
            values["test"][row] or "",
        )
        visit = visits.setdefault(which, Visit(tested.day))
        if values["could_not_test"][row] is not None:
            visit.unread.append(row)
            continue
        for name in ("applied", "measured"):
            if values[name][row] is None:
                cells.complain(
                    row, name, f"{LABELS[name]} is missing; leave a reading out as a whole if it was not taken."
                )
        visit.runs.setdefault(values["run"][row] or KINDS[0], []).append(row)
    for visit in visits.values():
        _either_read_or_not(cells, visit)
        _put_in_order(cells, visit)
        _agree(cells, visit, visit.rows, OF_TEST)
        for rows in visit.runs.values():
            _agree(cells, visit, rows, OF_RUN)
    return list(visits.values())


def _either_read_or_not(cells: Cells, visit: Visit) -> None:
    for row in visit.unread:
        name = next((name for name in OF_READING if cells.values[name][row] is not None), None)
        if name is not None:
            cells.complain(row, name, "The same row says why it could not be tested: then nothing was read with it.")
        elif visit.runs:
            cells.complain(row, "could_not_test", "Other rows hold readings of this test: then it was tested.")


def _put_in_order(cells: Cells, visit: Visit) -> None:
    orders = cells.values["order"]
    for kind, rows in visit.runs.items():
        given = [row for row in rows if orders[row] is not None]
        if not given:
            continue
        if len(given) < len(rows):
            missing = next(row for row in rows if orders[row] is None)
            cells.complain(missing, "order", "The other readings of this run have a place in it, this one has none.")
            continue
        seen: dict[float, int] = {}
        for row in rows:
            place = orders[row].value
            if place in seen:
                where = f"{cells.table.counted_in} {cells.table.lines[seen[place]]}"
                cells.complain(row, "order", f"Reading {int(place)} of this run stands in {where} already.")
            seen[place] = row
        visit.runs[kind] = sorted(rows, key=lambda row: orders[row].value)


def _agree(cells: Cells, visit: Visit, rows: Sequence[int], names: Sequence[str]) -> None:
    """What describes the test or run as a whole may stand in one row or in all, but not differ."""
    for name in names:
        for row in rows:
            value = cells.values[name][row]
            if value is None:
                continue
            first = visit.values.setdefault(name, value) if name in OF_TEST else _first(cells, rows, name)
            if _plain(value) != _plain(first):
                cells.complain(row, name, f"Another row of the same test says otherwise: {_said(first)}.")
                break


def _first(cells: Cells, rows: Sequence[int], name: str) -> Any:
    return next(value for row in rows if (value := cells.values[name][row]) is not None)


def _plain(value: Any) -> Any:
    """A number counts by its value, however it is written."""
    return getattr(value, "value", value)


def _said(value: Any) -> str:
    if isinstance(value, bool):
        return "yes" if value else "no"
    return str(getattr(value, "text", value))


def directions(percents: Sequence[float], cycles: Sequence[int] | None) -> tuple[list[int], list[int]]:
    """Directions (+1 up, −1 down) and cycles of readings, from the points in percent of the input span.

    Parameters
    ----------
    percents : sequence of float
        Points in the order read.
    cycles : sequence of int, optional
        Cycle of each reading where it is known.

    Notes
    -----
    Without known cycles, a new one begins where a way down has ended and the next reading goes up again.
    """
    from calibration.metrology.pointlist import directions_of

    if cycles is None:
        cycles = list(_found_cycles(percents))
    starts = [place for place, cycle in enumerate(cycles) if place == 0 or cycle != cycles[place - 1]]
    return [int(one) for one in directions_of(percents, starts)], list(cycles)


def _found_cycles(percents: Sequence[float]) -> Iterator[int]:
    cycle, falling = 1, False
    for place, percent in enumerate(percents):
        if place:
            step = percent - percents[place - 1]
            rises_next = place + 1 < len(percents) and percents[place + 1] - percent > _STEP
            if falling and (step > _STEP or (abs(step) <= _STEP and rises_next)):
                cycle, falling = cycle + 1, False
            elif step < -_STEP:
                falling = True
        yield cycle


#: Points closer together than this, in percent of span, are one point read again.
_STEP: Final = 0.5
