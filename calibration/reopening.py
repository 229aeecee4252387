"""Turns a signed record back into the fields of a sheet, so that it can be corrected."""

from __future__ import annotations

import datetime
import uuid
from collections.abc import Iterator

from calibration.models import Entry, Reading, Record, Run, Sheet, StandardUse
from calibration.queries.choosing import exception_field
from calibration.records.basis import Basis
from calibration.sheet_fields import ADJUSTED, COULD_NOT_TEST, NOT_ADJUSTED, REMARKS, reading
from register.models import User

DEVICE = "record"


def entries_of(record: Record, sheet: Sheet, *, by: User, at: datetime.datetime, reason: str) -> list[Entry]:
    """Unsaved entries that repeat a record field by field."""
    fields = [*_fields(record), ("correct.reason", reason)]
    allowed = [
        Entry(
            id=uuid.uuid4(),
            sheet=sheet,
            field=exception_field(use.standard_id),
            text=use.exception,
            device=f"{DEVICE} {use.pk}",
            sequence=1,
            base=None,
            typed_at=at,
            received_at=at,
            person=use.exception_by,
        )
        for use in StandardUse.objects.filter(run__record=record, exception_by__isnull=False).select_related(
            "exception_by"
        )
    ]
    return allowed + [
        Entry(
            id=uuid.uuid4(),
            sheet=sheet,
            field=name,
            text=text,
            device=DEVICE,
            sequence=number,
            base=None,
            typed_at=at,
            received_at=at,
            person=by,
        )
        for number, (name, text) in enumerate(((name, text) for name, text in fields if text), start=1)
    ]


def _fields(record: Record) -> Iterator[tuple[str, str]]:
    basis = Basis.read(record, record.head_id)
    runs = {run.kind: run for run in record.runs.prefetch_related("readings", "standards")}
    for run in runs.values():
        yield from _run_fields(run, basis)
    test = record.test
    answers = record.answers
    if Run.Kind.AS_FOUND in runs:
        yield "adjust.choice", ADJUSTED if test.adjusted else NOT_ADJUSTED
    yield "adjust.log", str(answers.get("adjustment", ""))
    yield REMARKS, str(answers.get("remarks", ""))
    yield COULD_NOT_TEST, str(answers.get("could_not_test", ""))
    confirmed = answers.get("confirmed") or {}
    yield "confirm-tag", str(confirmed.get("tag", ""))
    yield "confirm-serial", str(confirmed.get("serial", ""))
    for part, name in (("cautions", "caution"), ("checklist", "checklist")):
        for line in answers.get(part) or ():
            if line.get("key"):
                yield f"{name}.{line['key']}", str(line.get("answer", ""))


def _run_fields(run: Run, basis: Basis) -> Iterator[tuple[str, str]]:
    kind = run.kind
    rows = list(run.readings.all())
    for name, text in (
        ("unit", rows[0].applied_unit if rows else ""),
        ("ambient", run.ambient),
        ("ambient-unit", run.ambient_unit),
        ("height", run.height_difference),
        ("height-unit", run.height_unit),
        ("static", run.static_pressure),
        ("static-unit", run.static_unit),
        ("digital-unit", next((row.digital_unit for row in rows if row.digital_unit), "")),
    ):
        yield f"{kind}.{name}", text
    for use in run.standards.all():
        yield f"{kind}.{use.part}-with", str(use.standard_id)
        yield f"{kind}.{use.part}-certificate", str(use.certificate_id or "")
    for key, row in placed(rows, basis):
        yield reading(kind, key, "applied"), row.applied
        yield reading(kind, key, "measured"), row.measured
        yield reading(kind, key, "digital"), row.digital


def placed(rows: list[Reading], basis: Basis) -> Iterator[tuple[str, Reading]]:
    """Each reading with its key in the point list; further readings at a point are its repeats."""
    asked = basis.point_list()
    if asked is None:
        return
    places: dict[tuple[int, float, int], list[int]] = {}
    listed = zip(asked.points, asked.directions, asked.cycles, strict=True)
    for place, (percent, direction, cycle) in enumerate(listed, start=1):
        places.setdefault((int(cycle), float(percent), int(direction)), []).append(place)
    repeats: dict[int, int] = {}
    last: dict[tuple[int, float, int], int] = {}
    for row in rows:
        point = (row.cycle, float(row.nominal_percent or 0.0), -1 if row.direction == "down" else 1)
        free = places.get(point)
        if free:
            last[point] = free.pop(0)
            yield str(last[point]), row
        elif point in last:
            place = last[point]
            repeats[place] = repeats.get(place, 0) + 1
            yield f"{place}-{repeats[place]}", row
