"""Works out what past tests in a file would add: each matched to what was fitted on its day, and judged."""

from __future__ import annotations

import datetime
import hashlib
import json
from collections import defaultdict
from collections.abc import Callable, Iterable, Mapping, Sequence
from dataclasses import dataclass, field, replace
from typing import Any, Final
from zoneinfo import ZoneInfo

from calibration.imports.history import History, fits, read
from calibration.imports.names import Tags
from calibration.imports.recorded import Substance, recorded, substance_of
from calibration.imports.terms import terms_of
from calibration.imports.test_columns import COLUMNS, Moment
from calibration.imports.visits import KINDS, Visit, directions, gathered
from calibration.models import Requirement, Standard, Test
from calibration.records.basis import Basis
from calibration.records.content import ReadingContent, RecordContent, RunContent, UseContent
from calibration.records.judging import JudgedRun, applied_in_range_unit, judge, measured_in_ma
from calibration.records.reckoning import reading_row
from register.bulk import many_objects_alive
from register.imports.cells import unknown
from register.imports.columns import Cells, Complaint, Matching, read_cells
from register.imports.known import folded
from register.imports.tables import Table
from register.models import Fitting, Plant, Tag, Transmitter, User
from register.searching import key

ANSWERS: Final = ("performed_by", "remarks", "could_not_test")
MOST_NAMED: Final = 4
PARTS: Final = (("applied", "applied_standard"), ("measured", "measured_standard"))


@dataclass(frozen=True, slots=True)
class Planned:
    """A test to be added: its content without when and by whom it is made, and how it is told."""

    line: int
    content: RecordContent
    tag: str
    device: str
    readings: str
    terms: str
    verdicts: Mapping[str, str]
    lacking: Mapping[str, str]

    @property
    def count(self) -> int:
        """How many readings it holds."""
        return sum(len(run.readings) for run in self.content.runs)

    @property
    def verdict(self) -> str:
        """What each run is judged as, in words."""
        said = ", ".join(
            f"{kind} {verdict}" + (f" (lacks {self.lacking[kind]})" if kind in self.lacking else "")
            for kind, verdict in self.verdicts.items()
        )
        return said or str(self.content.outcome)


@dataclass(frozen=True, slots=True)
class Proposal:
    """What past tests in a file would do; `unchanged` counts tests that are recorded already, and their readings."""

    plant: Plant
    planned: Sequence[Planned]
    unchanged: int
    unchanged_readings: int
    complaints: Sequence[Complaint]
    bad_rows: int

    def digest(self) -> str:
        """Tells whether two proposals would do the same."""
        told: list[Any] = [[one.line, one.column, one.words] for one in self.complaints]
        for one in self.planned:
            content = one.content
            told.append([one.line, content.tag_id, content.transmitter_id, content.fitting_id, one.terms, one.readings])
            told.append([repr(content.runs), repr(content.basis.columns()), one.verdict, repr(content.answers)])
        return hashlib.sha256(json.dumps(told, default=str).encode()).hexdigest()


@dataclass(slots=True)
class _Draft:
    cells: Cells
    plant: Plant
    today: datetime.date
    tags: Tags
    history: History
    planned: list[Planned] = field(default_factory=list)
    unchanged: int = 0
    unchanged_readings: int = 0
    seen: dict[tuple[Any, ...], int] = field(default_factory=dict)


@many_objects_alive()
def propose(
    *, plant: Plant, table: Table, matching: Matching, today: datetime.date, by: User | None = None
) -> Proposal:
    """Read past tests against the register and the tests that are recorded; reads only.

    Whoever may import may transcribe tests: `by` is taken as by the other imports, and decides nothing.
    """
    from register.engineering.units import prepare

    prepare()
    cells = read_cells(table, matching, COLUMNS)
    tags = Tags.named(plant, filter(None, cells.values["tag"]))
    history = read(plant, tags.rows, set(filter(None, cells.values["serial"])))
    draft = _Draft(cells, plant, today, tags, history)
    visits = gathered(cells)
    there = recorded(history, {visit.day for visit in visits})
    for visit in sorted(visits, key=lambda one: (one.day, one.first)):
        _plan(draft, visit, there)
    bad = {table.lines[row] for row in cells.bad}
    return Proposal(
        plant=plant,
        planned=[one for one in draft.planned if one.line not in bad],
        unchanged=draft.unchanged,
        unchanged_readings=draft.unchanged_readings,
        complaints=sorted(cells.complaints, key=lambda one: one.line),
        bad_rows=len(cells.bad),
    )


def _plan(draft: _Draft, visit: Visit, there: Mapping[tuple[int, datetime.date], Sequence[Substance]]) -> None:
    cells = draft.cells
    if any(row in cells.bad for row in visit.rows):
        return
    found = _instrument(draft, visit)
    if found is None:
        return
    device, fitting = found
    if not _is_plausible(draft, visit, device, fitting):
        return
    terms = terms_of(cells, visit, draft.history, device, fitting)
    made = None if terms is None else _runs(draft, visit, *terms)
    if made is None:
        return
    basis, content_runs, points = made
    substance = substance_of(content_runs, basis)
    recorded = there.get((device.pk, visit.day), ())
    if substance in recorded:
        draft.unchanged += 1
        draft.unchanged_readings += sum(len(run.readings) for run in content_runs)
        return
    if recorded and cells.values["test"][visit.first] is None:
        cells.complain(
            visit.first,
            "tested_on",
            f"A test of {device} on {visit.day} is recorded already, with other readings, and a record is never "
            "changed by an import. If this is another test, give it a number under “Test number”.",
        )
        return
    judged = _judged(draft, visit, basis, points)
    adjusted = _adjusted(draft, visit)
    if any(row in cells.bad for row in visit.rows):
        return
    content = RecordContent(
        plant_id=draft.plant.pk,
        tag_id=fitting.tag_id if fitting else None,
        transmitter_id=device.pk,
        fitting_id=fitting.pk if fitting else None,
        tested_on=visit.day,
        adjusted=adjusted,
        basis=basis,
        runs=content_runs,
        made_at=datetime.datetime.combine(visit.day, datetime.time(12), tzinfo=ZoneInfo(draft.plant.time_zone)),
        made_by_id=None,
        outcome=Test.Outcome.NOT_TESTED if visit.unread else Test.Outcome.DONE,
        transcribed=True,
        answers=_answers(cells, visit),
    )
    draft.planned.append(
        Planned(
            line=cells.table.lines[visit.first],
            content=content,
            tag=str(fitting.tag) if fitting else "on the bench",
            device=str(device),
            readings=", ".join(f"{kind} {len(visit.runs[kind])}" for kind in KINDS if kind in visit.runs) or "none",
            terms=_said(basis),
            verdicts={kind: str(run.judgement.verdict) for kind, run in judged.items()},
            lacking={kind: _lacks(run) for kind, run in judged.items() if run.missing},
        )
    )


def _instrument(draft: _Draft, visit: Visit) -> tuple[Transmitter, Fitting | None] | None:
    """The transmitter of a test, and how it was fitted on its day; None where that cannot be told, which is said."""
    cells, history, row = draft.cells, draft.history, visit.first
    number, serial = cells.values["tag"][row], cells.values["serial"][row]
    tag = draft.tags.rows.get(key(number)) if number else None
    if number and tag is None:
        cells.complain(row, "tag", draft.tags.unknown(number))
        return None
    device = _device(draft, visit, serial) if serial else None
    if serial and device is None:
        return None
    if tag is not None:
        return _fitted_at(draft, visit, tag, device)
    assert device is not None
    held = history.fitted_on(history.fittings_of_device[device.pk], visit.day)
    if len(held) > 1:
        where = " and ".join(str(one.tag) for one in held)
        cells.complain(row, "tag", f"{device} was fitted at {where} on {visit.day}: say at which it was tested.")
        return None
    return device, held[0] if held else None


def _device(draft: _Draft, visit: Visit, serial: str) -> Transmitter | None:
    cells, row = draft.cells, visit.first
    maker = cells.values["maker"][row]
    found = draft.history.by_serial.get(key(serial), ())
    chosen = [one for one in found if maker is None or folded(one.maker.name) == folded(maker)]
    if len(chosen) == 1:
        return chosen[0]
    if not chosen:
        of = f" of {maker}" if maker else ""
        cells.complain(row, "serial", f"No transmitter{of} with the serial number {serial} is registered here.")
    else:
        makers = ", ".join(one.maker.name for one in chosen)
        cells.complain(row, "maker", f"The serial number {serial} is one of {makers}: say of which maker.")
    return None


def _fitted_at(draft: _Draft, visit: Visit, tag: Tag, device: Transmitter | None) -> tuple[Transmitter, Fitting] | None:
    cells, row, fittings = draft.cells, visit.first, draft.history.fittings_of_tag[tag.pk]
    held = draft.history.fitted_on(fittings, visit.day)
    chosen = [one for one in held if device is None or one.transmitter_id == device.pk]
    if len(chosen) == 1:
        return chosen[0].transmitter, chosen[0]
    if chosen:
        names = " and ".join(str(one.transmitter) for one in chosen)
        cells.complain(row, "serial", f"{names} were both at {tag} on {visit.day}: say which of them was tested.")
        return None
    what = str(device) if device else "Nothing"
    instead = f", but {held[0].transmitter}" if held else ""
    since = f"; the first fitting there begins on {fittings[0].fitted_on}" if fittings and not held else ""
    cells.complain(
        row,
        "serial" if device else "tested_on",
        f"{what} was {'not ' if device else ''}fitted at {tag} on {visit.day}{instead}{since}.",
    )
    return None


def _is_plausible(draft: _Draft, visit: Visit, device: Transmitter, fitting: Fitting | None) -> bool:
    cells, row = draft.cells, visit.first
    if visit.day > draft.today:
        cells.complain(row, "tested_on", f"{visit.day} is still to come: a past test has been made.")
    elif device.made_on is not None and visit.day < device.made_on:
        cells.complain(row, "tested_on", f"{device} was made on {device.made_on}, after {visit.day}.")
    name = (device.pk, fitting.pk if fitting else 0, visit.day, cells.values["test"][row] or "")
    if name in draft.seen:
        where = f"{cells.table.counted_in} {draft.seen[name]}"
        cells.complain(
            row,
            "tag",
            f"This and the test of {where} are one and the same: write tag and serial number alike in all of its rows.",
        )
    draft.seen.setdefault(name, cells.table.lines[row])
    return row not in cells.bad


def _runs(
    draft: _Draft, visit: Visit, basis: Basis, requirement: Requirement | None
) -> tuple[Basis, tuple[RunContent, ...], dict[str, list[Any]]] | None:
    """The runs of a test, and their readings as points for the arithmetic; the basis with its point list."""
    runs, points, lists, named = [], {}, set(), []
    for kind in KINDS:
        if kind not in visit.runs:
            continue
        rows = visit.runs[kind]
        readings = _readings(draft, rows, basis)
        if readings is None:
            return None
        run = RunContent(kind=kind, tested_on=visit.day, readings=readings, standards=tuple(_uses(draft, visit, rows)))
        points[kind] = [reading_row(one, order, basis)[1] for order, one in enumerate(readings, start=1)]
        runs.append(run)
        lists.add(_list_of(readings))
        if draft.cells.values["nominal"][rows[0]] is None:
            named.append(kind)
    if named:
        basis = replace(basis, notes={**basis.notes, "points_named_from_inputs": named})
    asked = requirement.point_list if requirement else None
    held = requirement is not None and requirement.effective_from <= visit.day
    if asked is not None and (held or lists == {asked.points}):
        # The points that were asked for on the day are kept with the test, so that a run with gaps is incomplete; those
        # that were asked for only later, where every run followed just them.
        basis = replace(basis, points=asked.points, notes={**basis.notes, "point_list": asked.name})
    return (basis, tuple(runs), points) if not draft.cells.bad.intersection(visit.rows) else None


def _readings(draft: _Draft, rows: Sequence[int], basis: Basis) -> tuple[ReadingContent, ...] | None:
    from calibration.metrology.pointlist import points_from_applied

    cells, values = draft.cells, draft.cells.values
    nominal = _all_or_none(draft, rows, "nominal", lambda value: float(value.value))
    given = _all_or_none(draft, rows, "direction", lambda value: 1 if value == "up" else -1)
    cycles = _all_or_none(draft, rows, "cycle", lambda value: int(value.value))
    applied = []
    for row in rows:
        unit, output = values["applied_unit"][row] or "", values["measured_unit"][row] or "mA"
        for name, in_what, read_as in (
            ("applied", unit, applied_in_range_unit),
            ("measured", output, measured_in_ma),
            ("digital", values["digital_unit"][row] or "", applied_in_range_unit),
        ):
            if values[name][row] is None:
                continue
            try:
                number = read_as(values[name][row], in_what, basis)
            except ValueError as error:
                cells.complain(row, name, str(error))
                continue
            if name == "applied":
                applied.append(number)
    if any(row in cells.bad for row in rows):
        return None
    signal = basis.signal()
    if nominal is None:
        nominal = [float(one) for one in points_from_applied(signal.percent_of_input(applied))]
    found, cycle = directions(nominal, cycles)
    return tuple(
        ReadingContent(
            applied=values["applied"][row],
            measured=values["measured"][row],
            direction="up" if (given or found)[place] > 0 else "down",
            nominal_percent=nominal[place],
            cycle=cycle[place],
            applied_unit=values["applied_unit"][row] or "",
            measured_unit=values["measured_unit"][row] or "mA",
            digital=values["digital"][row] or "",
            digital_unit=_digital_unit(draft, row, basis),
        )
        for place, row in enumerate(rows)
    )


def _digital_unit(draft: _Draft, row: int, basis: Basis) -> str:
    values = draft.cells.values
    return (values["digital_unit"][row] or basis.unit) if values["digital"][row] is not None else ""


def _all_or_none(draft: _Draft, rows: Sequence[int], name: str, plain: Callable[[Any], Any]) -> list[Any] | None:
    """The values of a column in all rows of a run, or None where it is blank in all."""
    held = draft.cells.values[name]
    given = [row for row in rows if held[row] is not None]
    if not given:
        return None
    for row in rows:
        if held[row] is None:
            draft.cells.complain(
                row, name, "The other readings of this run say it; say it for all of them, or for none."
            )
    return None if len(given) < len(rows) else [plain(held[row]) for row in rows]


def _uses(draft: _Draft, visit: Visit, rows: Sequence[int]) -> Iterable[UseContent]:
    for part, column in PARTS:
        row = next((row for row in rows if draft.cells.values[column][row] is not None), None)
        if row is None:
            continue
        said = draft.cells.values[column][row]
        standard = draft.history.standards.get(folded(said))
        if standard is None:
            names = [one.name for one in draft.history.standards.values()]
            draft.cells.complain(row, column, unknown("standard", said, names, "under “Standards”"))
        elif not fits(standard, part):
            what = "applies an input" if part == "applied" else "measures an output"
            draft.cells.complain(row, column, f"{standard} is no standard that {what}.")
        else:
            yield _use(draft, visit, part, standard)


def _use(draft: _Draft, visit: Visit, part: str, standard: Standard) -> UseContent:
    certificate = draft.history.certificate_on(standard, visit.day)
    remark = ""
    if certificate is None:
        remark = "Transcribed: no certificate of that day is registered."
    elif certificate.valid_until < visit.day:
        remark = f"Transcribed: the last certificate registered was relied on until {certificate.valid_until}."
    return UseContent(part, standard.pk, certificate.pk if certificate else None, exception=remark)


def _list_of(readings: Sequence[ReadingContent]) -> str:
    """The point list that a run followed, as text; empty where its points make none."""
    from calibration.metrology.pointlist import PointList

    cycles: dict[int, list[str]] = defaultdict(list)
    for one in readings:
        cycles[one.cycle].append(f"{one.nominal_percent:g}")
    try:
        made = PointList.parse(" | ".join(" ".join(points) for points in cycles.values()))
    except ValueError:
        return ""
    up = ["up" if direction > 0 else "down" for direction in made.directions]
    return made.text if up == [one.direction for one in readings] else ""


def _judged(draft: _Draft, visit: Visit, basis: Basis, points: Mapping[str, Sequence[Any]]) -> dict[str, JudgedRun]:
    runs = {}
    for kind, taken in points.items():
        try:
            runs[kind] = judge(basis, kind, taken)
        except ValueError as error:
            draft.cells.complain(visit.runs[kind][0], "mpe_percent", str(error))
            return {}
    return runs


def _lacks(run: JudgedRun) -> str:
    """The points that a run lacks, the first few of them."""
    from calibration.metrology.pointlist import percent_text

    points = run.points[len(run.points) - run.missing :]
    names = [
        f"{percent_text(point.nominal_percent or 0.0)} % {'up' if point.direction > 0 else 'down'}" for point in points
    ]
    return ", ".join(names[:MOST_NAMED]) + (f" and {len(names) - MOST_NAMED} more" if len(names) > MOST_NAMED else "")


def _adjusted(draft: _Draft, visit: Visit) -> bool:
    said = visit.values.get("adjusted")
    left = KINDS[1] in visit.runs
    if said is False and left:
        row = visit.runs[KINDS[1]][0]
        draft.cells.complain(row, "adjusted", "An as-left run stands here, but “Adjusted” says no.")
    if said and visit.unread:
        draft.cells.complain(visit.first, "adjusted", "It could not be tested, but “Adjusted” says yes.")
    return left if said is None else bool(said)


def _answers(cells: Cells, visit: Visit) -> dict[str, Any]:
    answers: dict[str, Any] = {name: visit.values[name] for name in ANSWERS if name in visit.values}
    tested: Moment = cells.values["tested_on"][visit.first]
    if tested.time is not None:
        answers["tested_at"] = tested.time.isoformat("minutes")
    return answers


def _said(basis: Basis) -> str:
    from register.engineering.units import label

    limit = basis.tolerance(KINDS[0]).words(label(basis.unit))
    return (
        f"{basis.lrv} to {basis.urv} {label(basis.unit)} {basis.reference}, {basis.transfer}; {limit}{_assumed(basis)}"
    )


def _assumed(basis: Basis) -> str:
    assumed = basis.notes.get("assumed", ())
    return f"; assumed: {' and '.join(assumed)}" if assumed else ""
