"""Works out what requirements in a file would do: first ones, others from a day on, or what is there already."""

from __future__ import annotations

import datetime
import hashlib
import json
from collections import defaultdict
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, field
from typing import Any, Final

from django.core.exceptions import ValidationError

from calibration.imports.names import Tags
from calibration.imports.requirement_columns import COLUMNS, LABELS, OF_REQUIREMENT
from calibration.models import PointList, Requirement, ToleranceForm
from calibration.scheduling import check_requirement
from register import access
from register.bulk import many_objects_alive
from register.changes import object_to_backdating
from register.imports.cells import unknown
from register.imports.columns import Cells, Complaint, Matching, read_cells
from register.imports.drafts import Change
from register.imports.known import folded
from register.imports.tables import Table
from register.models import Plant, Tag, User
from register.searching import key

BEFORE: Final = (
    "The requirement in force began on {}: a new one cannot begin before it. If that one was a mistake, withdraw it."
)
_COMPARED: Final = (
    *("mpe_form", "mpe_percent", "mpe_input", "as_left_percent", "as_left_input", "input_unit", "decision_rule"),
    *("interval_months", "anchor", "anchor_on", "grace_days", "lead_days", "point_list_id"),
)
_FIGURES: Final = ("mpe_percent", "mpe_input", "as_left_percent", "as_left_input")


@dataclass(frozen=True, slots=True)
class Wanted:
    """A requirement that a row adds, in place of another or as the first of its tag."""

    line: int
    requirement: Requirement
    before: Requirement | None


@dataclass(frozen=True, slots=True)
class Proposal:
    """What requirements in a file would do."""

    plant: Plant
    wanted: Sequence[Wanted]
    unchanged: int
    complaints: Sequence[Complaint]
    bad_rows: int

    @property
    def changes(self) -> list[Change]:
        """What changes where a tag has a requirement already, field by field."""
        return [change for one in self.wanted for change in _changes(one)]

    def digest(self) -> str:
        """Tells whether two proposals would do the same."""
        told: list[Any] = [[one.line, one.column, one.words] for one in self.complaints]
        for one in self.wanted:
            shown = [str(getattr(one.requirement, name)) for name in _COMPARED]
            told.append([one.line, one.before.pk if one.before else 0, str(one.requirement.effective_from), *shown])
        return hashlib.sha256(json.dumps(told).encode()).hexdigest()


@dataclass(slots=True)
class _Draft:
    cells: Cells
    plant: Plant
    today: datetime.date
    tags: Tags
    lists: Sequence[PointList]
    there: Mapping[int, Sequence[Requirement]]
    wanted: list[Wanted] = field(default_factory=list)
    unchanged: int = 0
    seen: dict[int, int] = field(default_factory=dict)
    may_set: bool = True


@many_objects_alive()
def propose(
    *, plant: Plant, table: Table, matching: Matching, today: datetime.date, by: User | None = None
) -> Proposal:
    """Read requirements against those that are there; reads only, with a fixed number of queries a thousand rows.

    Parameters
    ----------
    by : User, optional
        Who brings them: rows that change a requirement are refused where he may not set one by hand.
    """
    from register.engineering.units import prepare

    prepare()
    cells = read_cells(table, matching, COLUMNS)
    tags = Tags.named(plant, filter(None, cells.values["tag"]))
    draft = _Draft(cells, plant, today, tags, list(PointList.objects.filter(plant=plant)), _there(tags.rows.values()))
    draft.may_set = access.acts_for(by, "set requirement", plant.pk)
    for row in range(len(table.rows)):
        if row not in table.faults:
            _propose(draft, row)
    return Proposal(
        plant=plant,
        wanted=[one for one in draft.wanted if one.line not in {table.lines[row] for row in cells.bad}],
        unchanged=draft.unchanged,
        complaints=sorted(cells.complaints, key=lambda one: one.line),
        bad_rows=len(cells.bad),
    )


def _there(tags: Iterable[Tag]) -> dict[int, list[Requirement]]:
    found: dict[int, list[Requirement]] = defaultdict(list)
    ids = sorted(tag.pk for tag in tags)
    for start in range(0, len(ids), 1000):
        rows = Requirement.objects.filter(tag__in=ids[start : start + 1000], withdrawn_at__isnull=True)
        for row in rows.select_related("point_list").order_by("effective_from", "pk"):
            found[row.tag_id].append(row)
    return found


def _propose(draft: _Draft, row: int) -> None:
    cells = draft.cells
    number = cells.values["tag"][row]
    given = {name: value for name in OF_REQUIREMENT if (value := cells.values[name][row]) is not None}
    if number is None:
        # A transmitter in stores, in a file that is a register as well, asks for nothing.
        if given:
            cells.complain(row, "tag", "Which tag is meant? Its number is missing.")
        return
    tag = draft.tags.rows.get(key(number))
    if tag is None:
        cells.complain(row, "tag", draft.tags.unknown(number))
        return
    if tag.pk in draft.seen:
        cells.complain(row, "tag", f"{number} stands in {cells.table.counted_in} {draft.seen[tag.pk]} already.")
        return
    draft.seen[tag.pk] = cells.table.lines[row]
    if not given:
        draft.unchanged += 1
        return
    there = draft.there.get(tag.pk, [])
    in_force = next((one for one in reversed(there) if one.applied_at is not None), None)
    new = _completed(draft, row, tag, given, in_force)
    if new is None or row in cells.bad:
        return
    _compare(draft, row, tag, new, there, in_force)


def _completed(
    draft: _Draft, row: int, tag: Tag, given: dict[str, Any], in_force: Requirement | None
) -> Requirement | None:
    """The requirement that a row gives, completed by the one in force; None where something lacks or is wrong."""
    values = {name: value.text if name in _FIGURES else value for name, value in given.items()}
    for name in ("interval_months", "grace_days", "lead_days"):
        if name in values:
            values[name] = int(values[name].value)
    if "point_list" in values:
        values["point_list"] = _point_list(draft, row, values["point_list"])
    if in_force is not None:
        # Stated in another form, a tolerance takes none of its old figures along.
        restated = given.get("mpe_form", in_force.mpe_form) != in_force.mpe_form
        left = [name for name in OF_REQUIREMENT if name not in given and not (restated and name in _FIGURES)]
        values |= {name: getattr(in_force, name) for name in left}
    elif "mpe_form" not in values and ("mpe_percent" in values or "mpe_input" in values):
        if "mpe_percent" in values and "mpe_input" in values:
            draft.cells.complain(
                row,
                "mpe_form",
                "A tolerance in percent and one in input units: say how they go together, larger or sum.",
            )
        values["mpe_form"] = ToleranceForm.SPAN if "mpe_percent" in values else ToleranceForm.ABSOLUTE
    missing = [name for name in ("mpe_form", "interval_months", "point_list") if values.get(name) is None]
    for name in missing:
        words = (
            "its tolerance" if name == "mpe_form" else "the interval" if name == "interval_months" else "the point list"
        )
        draft.cells.complain(
            row, "mpe_percent" if name == "mpe_form" else name, f"{tag} has no requirement yet: {words} is missing."
        )
    if row in draft.cells.bad:
        return None
    new = Requirement(tag=tag, **values)
    try:
        check_requirement(new, tag)
    except ValidationError as error:
        for name, messages in error.message_dict.items():
            draft.cells.complain(row, name if name in LABELS else "", " ".join(messages))
    return new


def _point_list(draft: _Draft, row: int, said: str) -> PointList | None:
    for one in draft.lists:
        if folded(one.name) == folded(said) and one.withdrawn_at is None:
            return one
    points = _as_points(said)
    found = next((one for one in draft.lists if one.withdrawn_at is None and one.points == points), None)
    if found is None:
        names = [one.name for one in draft.lists if one.withdrawn_at is None]
        draft.cells.complain(row, "point_list", unknown("point list", said, names, "in this plant"))
    return found


def _as_points(text: str) -> str:
    from calibration.metrology.pointlist import PointList as Points

    try:
        return Points.parse(text).text
    except ValueError:
        return ""


def _compare(
    draft: _Draft, row: int, tag: Tag, new: Requirement, there: Sequence[Requirement], in_force: Requirement | None
) -> None:
    cells = draft.cells
    day = cells.values["requirement_from"][row]
    reason = cells.values["requirement_reason"][row] or ""
    same = in_force is not None and _same(in_force, new)
    if (same and day is None) or any(one.effective_from == day and _same(one, new) for one in there):
        draft.unchanged += 1
        return
    if same and in_force is not None:
        cells.complain(
            row,
            "requirement_from",
            f"{tag} has this requirement since {in_force.effective_from}: another day alone changes nothing. Leave the "
            "day empty.",
        )
        return
    if there and not draft.may_set:
        first = next(name for name in OF_REQUIREMENT if cells.values[name][row] is not None)
        cells.complain(
            row,
            first,
            f"{tag} has a requirement already: none of your roles here lets you set another. Leave it out, or let an "
            "instrument engineer bring it in.",
        )
        return
    if day is None and not there and tag.current_fitting is not None:
        day = tag.current_fitting.fitted_on
    if day is None:
        other = "; it has another one now" if there else ""
        cells.complain(row, "requirement_from", f"Say from which day {tag} has this requirement{other}.")
        return
    if there and not reason:
        cells.complain(row, "requirement_reason", f"The requirement of {tag} would change: say why.")
    if any(one.effective_from == day for one in there):
        cells.complain(
            row,
            "requirement_from",
            f"Another requirement of {tag} already begins on {day}: withdraw it first if it was a mistake.",
        )
    elif in_force is not None and day <= draft.today:
        _check_day(draft, row, tag, day, in_force)
    new.effective_from, new.reason = day, reason
    draft.wanted.append(Wanted(cells.table.lines[row], new, in_force))


def _check_day(draft: _Draft, row: int, tag: Tag, day: datetime.date, in_force: Requirement) -> None:
    if day < in_force.effective_from:
        draft.cells.complain(row, "requirement_from", BEFORE.format(in_force.effective_from))
        return
    try:
        object_to_backdating(tag, day, field="requirement_from")
    except ValidationError as error:
        draft.cells.complain(row, "requirement_from", " ".join(error.messages))


def _same(one: Requirement, other: Requirement) -> bool:
    return all(_compared(one, name) == _compared(other, name) for name in _COMPARED)


def _compared(requirement: Requirement, name: str) -> Any:
    value = getattr(requirement, name)
    if name in _FIGURES and value:
        from register.engineering.typed import parse_number

        return parse_number(value)
    return value


def _changes(one: Wanted) -> list[Change]:
    new, before = one.requirement, one.before
    if before is None:
        return []
    planned = f", from {new.effective_from}"
    found = []
    for name in _COMPARED:
        if _compared(before, name) != _compared(new, name):
            bare = name.removesuffix("_id")
            shown = [getattr(requirement, bare) for requirement in (before, new)]
            told = ["" if value is None else str(value) for value in shown]
            found.append(Change(one.line, str(new.tag), LABELS[bare] + planned, *told))
    return found
