"""Reads records back from the database: as the content that was hashed, and as runs judged anew."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

from calibration.models import Reading, Record, Run, Signature
from calibration.records.basis import Basis
from calibration.records.content import ReadingContent, RecordContent, RunContent, SignatureContent, UseContent
from calibration.records.judging import JudgedRun, Point, applied_in_range_unit, judge, measured_in_ma


@dataclass(frozen=True, slots=True)
class ReadRun:
    """A recorded run with its readings and what the arithmetic says of them today; None without readings."""

    run: Run
    readings: tuple[Reading, ...]
    judged: JudgedRun | None


def judged_run(run: Run, basis: Basis, *, complete: bool = True) -> ReadRun:
    """Judge a recorded run from its texts; `complete` is false where the test was given up and has no readings."""
    readings = tuple(run.readings.all())
    points = [
        Point(
            applied=applied_in_range_unit(row.applied, row.applied_unit, basis),
            measured=measured_in_ma(row.measured, row.measured_unit, basis),
            direction=-1 if row.direction == "down" else 1,
            nominal_percent=row.nominal_percent,
            cycle=row.cycle,
        )
        for row in readings
    ]
    return ReadRun(run, readings, judge(basis, run.kind, points) if points or complete else None)


def content_of(record: Record, head: Mapping[str, Any]) -> RecordContent:
    """The content of a record as its rows say it.

    Parameters
    ----------
    record : Record
        With test, runs, readings and standards at hand.
    head : mapping
        Outcome, day, adjustment and sheet, which stand on the test for its newest version only.
    """
    test = record.test
    return RecordContent(
        plant_id=record.plant_id,
        tag_id=test.tag_id,
        transmitter_id=test.transmitter_id,
        fitting_id=test.fitting_id,
        tested_on=head["tested_on"],
        adjusted=head["adjusted"],
        basis=Basis.read(record, record.head_id),
        runs=tuple(_run(run) for run in sorted(record.runs.all(), key=lambda run: run.kind)),
        made_at=record.made_at,
        made_by_id=record.made_by_id,
        outcome=head["outcome"],
        transcribed=record.transcribed,
        answers=record.answers,
        sheet_id=head["sheet"],
        correction_reason=record.correction_reason,
    )


def signature_content(signature: Signature) -> SignatureContent:
    """What a signature says, as its row says it."""
    return SignatureContent(
        meaning=signature.meaning,
        person_id=signature.person_id,
        printed_name=signature.printed_name,
        signed_at=signature.signed_at,
        time_zone=signature.time_zone,
        remarks=signature.remarks,
    )


def _run(run: Run) -> RunContent:
    return RunContent(
        kind=run.kind,
        tested_on=run.tested_on,
        readings=tuple(reading_content(row) for row in sorted(run.readings.all(), key=lambda row: row.order)),
        standards=tuple(
            UseContent(use.part, use.standard_id, use.certificate_id, use.exception, use.exception_by_id)
            for use in run.standards.all()
        ),
        ambient=run.ambient,
        ambient_unit=run.ambient_unit,
        height_difference=run.height_difference,
        height_unit=run.height_unit,
        static_pressure=run.static_pressure,
        static_unit=run.static_unit,
    )


def reading_content(row: Reading) -> ReadingContent:
    """A reading as its row says it."""
    return ReadingContent(
        applied=row.applied,
        measured=row.measured,
        direction=row.direction,
        nominal_percent=row.nominal_percent,
        cycle=row.cycle,
        applied_unit=row.applied_unit,
        measured_unit=row.measured_unit,
        digital=row.digital,
        digital_unit=row.digital_unit,
        entered_at=row.entered_at,
    )
