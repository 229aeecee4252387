"""Works out what a register in a file would do to the register that is there: new, changed, unchanged, refused."""

from __future__ import annotations

import datetime
import hashlib
import json
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any, Final

from register import access
from register.bulk import many_objects_alive
from register.imports.columns import Complaint, Matching, read_cells
from register.imports.drafts import Change, Draft, Row
from register.imports.known import known
from register.imports.proposed_devices import check_moves, propose_device, propose_fitting
from register.imports.proposed_ranges import propose_range
from register.imports.proposed_tags import propose_tag
from register.imports.sheet import BY_KEY, COLUMNS, DEVICE, OF_RANGE, OF_TAG
from register.imports.tables import Table
from register.models import Area, Plant, User
from register.searching import key

_TAG: Final = ("area", "area_name", *OF_TAG)
_RANGE: Final = (*OF_RANGE, "range_from", "range_reason")
_DEVICE: Final = tuple(column.key for column in COLUMNS if column.group == DEVICE and column.key != "fitted_on")


@dataclass(frozen=True, slots=True)
class New:
    """A row that adds a tag, or a transmitter in stores, as the dry run lists it."""

    line: int
    tag: str
    service: str
    area: str
    range: str
    device: str


@dataclass(frozen=True, slots=True)
class Proposal:
    """What a file would do; `complaints` holds what is wrong with it, and with any of them nothing is done."""

    plant: Plant
    rows: Sequence[Row]
    areas: Sequence[Area]
    complaints: Sequence[Complaint]
    bad_rows: int

    def count(self, state: str) -> int:
        """How many rows that are not refused are “new”, “changed” or “unchanged”."""
        return sum(1 for row in self.rows if row.state == state)

    @property
    def touched(self) -> list[Row]:
        """The rows that would write something."""
        return [row for row in self.rows if row.state != "unchanged"]

    @property
    def changes(self) -> list[Change]:
        """What changes on things that are there already."""
        return [change for row in self.rows for change in row.changes]

    @property
    def new(self) -> list[New]:
        """What is added, row by row."""
        return [_new(row) for row in self.rows if row.state == "new"]

    def digest(self) -> str:
        """Tells whether two proposals would do the same, so that nothing else is applied than what was looked at."""
        told: list[Any] = [[area.code, area.name] for area in self.areas]
        told += [[one.line, one.column, one.words] for one in self.complaints]
        for row in self.touched:
            told.append(
                [
                    row.line,
                    row.state,
                    [[change.thing, change.field, change.before, change.after] for change in row.changes],
                    [row.device_is_new, row.fitting is not None, row.range is not None],
                    [row.device.head_id, row.device.type_id] if row.device and row.device_is_new else [],
                ]
            )
        return hashlib.sha256(json.dumps(told).encode()).hexdigest()


@many_objects_alive()
def propose(
    *, plant: Plant, table: Table, matching: Matching, today: datetime.date, by: User | None = None
) -> Proposal:
    """Read a file against the register; reads only, with a number of queries that grows by two thousand rows each.

    Parameters
    ----------
    by : User, optional
        Who brings it: rows that change a range or swap a transmitter are refused where he may not do so by hand.
    """
    from register.engineering.units import prepare

    prepare()
    cells = read_cells(table, matching, COLUMNS)
    numbers, serials = cells.values["tag"], cells.values["serial"]
    draft = Draft(cells, known(plant, filter(None, numbers), filter(None, serials)), today)
    draft.may_rerange = access.acts_for(by, "re-range", plant.pk)
    draft.may_fit = access.acts_for(by, "fit", plant.pk)
    tags_seen: dict[str, int] = {}
    devices_seen: dict[tuple[int, str], int] = {}
    for place, number in enumerate(numbers):
        if place in table.faults:
            continue
        row = Row(place, table.lines[place])
        draft.rows.append(row)
        if number is None and place not in cells.bad:
            _without_tag(draft, row, devices_seen)
        elif number is not None:
            _with_tag(draft, row, number, tags_seen, devices_seen)
    check_moves(draft)
    good = [row for row in draft.rows if row.place not in cells.bad]
    return Proposal(
        plant=plant,
        rows=good,
        areas=list(draft.new_areas.values()),
        complaints=sorted(cells.complaints, key=lambda one: one.line),
        bad_rows=len(cells.bad),
    )


def _with_tag(
    draft: Draft, row: Row, number: str, tags_seen: dict[str, int], devices_seen: dict[tuple[int, str], int]
) -> None:
    name = key(number)
    if name in tags_seen:
        draft.complain(row, "tag", f"{number} stands in {draft.cells.table.counted_in} {tags_seen[name]} already.")
        return
    tags_seen[name] = row.line
    row.tag = draft.known.tags.get(name)
    propose_tag(draft, row, number, draft.given(row, _TAG))
    propose_device(draft, row, draft.given(row, _DEVICE), devices_seen)
    day = draft.cells.values["fitted_on"][row.place]
    if row.device is not None:
        propose_fitting(draft, row, day)
    elif day is not None and not draft.is_bad(row):
        draft.complain(row, "fitted_on", "A day stands here, but no transmitter in the row.")
    propose_range(draft, row, draft.given(row, _RANGE))


def _without_tag(draft: Draft, row: Row, devices_seen: dict[tuple[int, str], int]) -> None:
    """A row without a tag is a transmitter in stores."""
    stray = list(draft.given(row, (*_TAG, *_RANGE, "fitted_on")))
    if stray:
        draft.complain(row, "tag", f"The tag is missing, but “{BY_KEY[stray[0]].label}” of one is given.")
        return
    given = draft.given(row, _DEVICE)
    if not given:
        draft.complain(row, "tag", "Neither a tag nor a transmitter is named in this row.")
        return
    propose_device(draft, row, given, devices_seen)


def _new(row: Row) -> New:
    tag, setting = row.tag, row.range
    return New(
        line=row.line,
        tag=tag.number if tag else "",
        service=tag.service if tag else "in stores",
        area=tag.area.code if tag else "",
        range=f"{setting} from {setting.effective_from}" if setting else "",
        device=f"{row.device} since {row.fitting.fitted_on}" if row.fitting else str(row.device or ""),
    )
