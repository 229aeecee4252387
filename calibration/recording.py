"""Writes records of tests, signed or transcribed, into the chain of their plant.

A caller describes each test with the dataclasses of `calibration.records.content`; this module judges the runs,
writes the canonical content, links it to the chain under its lock and keeps the summaries of the test.
`calibration.signing` and `calibration.transcribing` both end here.
"""

from __future__ import annotations

from collections.abc import Collection, Iterator, Mapping, Sequence
from dataclasses import dataclass
from typing import Any, Final

from django.db import transaction
from django.db.models import OuterRef, Subquery

from calibration import scheduling
from calibration.models import ChainHead, Reading, Record, Run, RunFigures, Signature, StandardUse, Test
from calibration.queries.naming import Names
from calibration.records.canonical import canonical, chain_hash
from calibration.records.content import (
    ReadingContent,
    RecordContent,
    RunContent,
    SignatureContent,
    UseContent,
    record_object,
    signature_object,
)
from calibration.records.judging import JudgedRun, judge
from calibration.records.reckoning import figures_row, reading_row, summarise, verdicts_of
from register.auditing import Act
from register.models import Plant, Tag

__all__ = [
    "ReadingContent",
    "RecordContent",
    "RunContent",
    "SignatureContent",
    "UseContent",
    "lock_chain",
    "write_record",
    "write_records",
    "write_signature",
]

_AT_ONCE: Final = 1000
#: Columns of a test that follow from the version that counts …
FOLLOWS: Final = (
    "adjusted",
    "accepted",
    "as_found_verdict",
    "as_left_verdict",
    "as_found_worst",
    "as_left_worst",
    "as_found_ratio",
    "as_left_ratio",
)
#: … and all that a new version changes.
_SUMMARY: Final = ("state", "outcome", "tested_on", *FOLLOWS)


def write_record(content: RecordContent, *, act: Act) -> Record:
    """Write one test; see `write_records`."""
    return write_records([content], act=act)[0]


def write_records(contents: Sequence[RecordContent], *, act: Act) -> list[Record]:
    """Write tests of one plant, in the given order, each judged, hashed and chained, with its summaries.

    Parameters
    ----------
    contents : sequence of RecordContent
        Any number; thousands cost a few statements a thousand.
    act : Act
        Receives an entry for each record; the caller writes it, in the same transaction.

    Returns
    -------
    list of Record
        In the order given; `record.test` is at hand.

    Raises
    ------
    ValueError
        A text is not a number, a unit is unknown, or the contents belong to several plants; the message begins with the
        place ("test 3, as-found, reading 2: …"). Nothing is then written.

    Notes
    -----
    Locks the tags, the tests that get a further version, then the chain of the plant. The standings of the tags are
    refreshed before it returns.
    """
    if not contents:
        return []
    plants = {content.plant_id for content in contents}
    if len(plants) > 1:
        raise ValueError("Records are written for one plant at a time.")
    judged = [_judged(content, place) for place, content in enumerate(contents, start=1)]
    tag_ids = sorted({content.tag_id for content in contents if content.tag_id is not None})
    with transaction.atomic():
        list(Tag.objects.select_for_update().filter(pk__in=tag_ids).order_by("pk").values_list("pk", flat=True))
        plant = Plant.objects.get(pk=plants.pop())
        earlier = _locked_tests([content.test_id for content in contents if content.test_id is not None])
        chain = lock_chain(plant)
        written: list[Record] = []
        for start in range(0, len(contents), _AT_ONCE):
            batch = judged[start : start + _AT_ONCE]
            written += _write_batch(batch, earlier, plant=plant, chain=chain)
        ChainHead.objects.filter(pk=plant.pk).update(position=chain.position, hash=chain.hash)
        for record in written:
            act.created(record, plant=plant)
        if tag_ids:
            scheduling.refresh(tag_ids)
    return written


def write_signature(record: Record, signature: SignatureContent) -> Signature:
    """Chain one more signature to a record (a review, a sending back); call it inside the transaction of the act."""
    chain = lock_chain(record.plant)
    row = _signature(record, signature, chain, record.plant)
    row.save(force_insert=True)
    ChainHead.objects.filter(pk=record.plant_id).update(position=chain.position, hash=chain.hash)
    return row


@dataclass(frozen=True, slots=True)
class _Judged:
    content: RecordContent
    columns: dict[str, Any]
    readings: dict[str, list[Reading]]
    runs: dict[str, JudgedRun]


def _judged(content: RecordContent, place: int) -> _Judged:
    try:
        columns = content.basis.columns()
        content.basis.signal()
    except ValueError as error:
        raise ValueError(f"test {place}, range: {error}") from error
    try:
        for kind in Run.Kind.values:
            content.basis.tolerance(kind)
    except ValueError as error:
        raise ValueError(f"test {place}, tolerance: {error}") from error
    readings: dict[str, list[Reading]] = {}
    runs: dict[str, JudgedRun] = {}
    for run in content.runs:
        rows, points = [], []
        for order, reading in enumerate(run.readings, start=1):
            try:
                row, point = reading_row(reading, order, content.basis)
            except ValueError as error:
                raise ValueError(f"test {place}, {run.kind}, reading {order}: {error}") from error
            rows.append(row)
            points.append(point)
        readings[run.kind] = rows
        if points or content.outcome == Test.Outcome.DONE:
            try:
                runs[run.kind] = judge(content.basis, run.kind, points)
            except ValueError as error:
                raise ValueError(f"test {place}, {run.kind}: {error}") from error
    return _Judged(content=content, columns=columns, readings=readings, runs=runs)


def _write_batch(
    batch: Sequence[_Judged], earlier: Mapping[int, Test], *, plant: Plant, chain: ChainHead
) -> list[Record]:
    named = Names.of([judged.content for judged in batch])
    tests = [_test(judged, earlier) for judged in batch]
    corrected = [test for test in tests if not test._state.adding]
    Test.objects.bulk_create([test for test in tests if test._state.adding])
    records: list[Record] = []
    signatures: list[tuple[Record, Signature]] = []
    for judged, test in zip(batch, tests, strict=True):
        record = _record(judged, test, named, plant=plant, chain=chain)
        records.append(record)
        for signed in judged.content.signatures:
            signatures.append((record, _signature(record, signed, chain, plant)))
    Record.objects.bulk_create(records)
    runs: list[tuple[Run, _Judged, Test]] = []
    for judged, test, record in zip(batch, tests, records, strict=True):
        runs += [(_run(run, record), judged, test) for run in judged.content.runs]
    Run.objects.bulk_create([run for run, _, _ in runs])
    Reading.objects.bulk_create(
        [_belonging(reading, run) for run, judged, _ in runs for reading in judged.readings[run.kind]]
    )
    StandardUse.objects.bulk_create([use for run, judged, _ in runs for use in _uses(run, judged.content)])
    RunFigures.objects.filter(test__in=corrected).update(current=False)
    RunFigures.objects.bulk_create(
        [figures_row(judged.runs[run.kind], run, test) for run, judged, test in runs if run.kind in judged.runs]
    )
    for record, signature in signatures:
        signature.record = record
    Signature.objects.bulk_create([signature for _, signature in signatures])
    if corrected:
        Test.objects.bulk_update(corrected, _SUMMARY)
    newest = Record.objects.filter(test=OuterRef("pk")).order_by("-version").values("pk")[:1]
    Test.objects.filter(pk__in=[test.pk for test in tests]).update(current_record=Subquery(newest))
    for test, record in zip(tests, records, strict=True):
        test.current_record = record
    return records


def _test(judged: _Judged, earlier: Mapping[int, Test]) -> Test:
    content = judged.content
    if content.test_id is not None:
        test = earlier[content.test_id]
    else:
        test = Test(
            plant_id=content.plant_id,
            tag_id=content.tag_id,
            transmitter_id=content.transmitter_id,
            fitting_id=content.fitting_id,
            sheet_id=content.sheet_id,
        )
    test.tested_on = content.tested_on
    test.state = state_of({signature.meaning for signature in content.signatures}, transcribed=content.transcribed)
    summarise(
        test,
        outcome=content.outcome,
        adjusted=content.adjusted,
        runs=judged.runs,
        counts=test.state != Test.State.SENT_BACK,
    )
    return test


def state_of(meanings: Collection[str], *, transcribed: bool) -> Test.State:
    """The state that the signatures of the version that counts give a test."""
    if Signature.Meaning.SENT_BACK in meanings:
        return Test.State.SENT_BACK
    if Signature.Meaning.REVIEWED in meanings:
        return Test.State.REVIEWED
    return Test.State.TRANSCRIBED if transcribed else Test.State.SIGNED


def _record(judged: _Judged, test: Test, named: Names, *, plant: Plant, chain: ChainHead) -> Record:
    before = test.current_record
    content = named.told(judged.content)
    version = before.version + 1 if before else 1
    written = canonical(
        record_object(
            content,
            plant=plant.code,
            position=chain.position + 1,
            test_id=test.pk,
            version=version,
            supersedes=before.hash if before else "",
            verdicts=verdicts_of(judged.runs),
        )
    )
    previous = chain.hash
    _lengthen(chain, written)
    return Record(
        test=test,
        version=version,
        supersedes=before,
        correction_reason=content.correction_reason,
        plant=plant,
        position=chain.position,
        content=written,
        previous_hash=previous,
        hash=chain.hash,
        transcribed=content.transcribed,
        made_by_id=content.made_by_id,
        made_at=content.made_at,
        head_id=content.basis.head_id,
        answers=content.answers,
        **(judged.columns | {"basis": content.basis.kept()}),
    )


def _run(content: RunContent, record: Record) -> Run:
    return Run(
        record=record,
        kind=content.kind,
        tested_on=content.tested_on,
        ambient=content.ambient,
        ambient_unit=content.ambient_unit,
        height_difference=content.height_difference,
        height_unit=content.height_unit,
        static_pressure=content.static_pressure,
        static_unit=content.static_unit,
    )


def _belonging(reading: Reading, run: Run) -> Reading:
    reading.run = run
    return reading


def _uses(run: Run, content: RecordContent) -> Iterator[StandardUse]:
    for described in content.runs:
        if described.kind == run.kind:
            for use in described.standards:
                yield StandardUse(
                    run=run,
                    part=use.part,
                    standard_id=use.standard_id,
                    certificate_id=use.certificate_id,
                    exception=use.exception,
                    exception_by_id=use.exception_by_id,
                )


def _signature(record: Record, signed: SignatureContent, chain: ChainHead, plant: Plant) -> Signature:
    written = canonical(signature_object(signed, plant=plant.code, position=chain.position + 1, record=record.hash))
    previous = chain.hash
    _lengthen(chain, written)
    return Signature(
        record=record,
        meaning=signed.meaning,
        person_id=signed.person_id,
        printed_name=signed.printed_name,
        signed_at=signed.signed_at,
        time_zone=signed.time_zone,
        remarks=signed.remarks,
        plant=plant,
        position=chain.position,
        content=written,
        previous_hash=previous,
        hash=chain.hash,
    )


def _locked_tests(test_ids: Sequence[int]) -> dict[int, Test]:
    rows = Test.objects.filter(pk__in=test_ids).order_by("pk").select_for_update(of=("self",))
    return {test.pk: test for test in rows.select_related("current_record")}


def lock_chain(plant: Plant) -> ChainHead:
    """Lock the chain of a plant inside the transaction of an act, after the tags and tests that it touches."""
    ChainHead.objects.get_or_create(plant=plant)
    return ChainHead.objects.select_for_update().get(plant=plant)


def _lengthen(chain: ChainHead, written: str) -> None:
    chain.position += 1
    chain.hash = chain_hash(chain.hash, written)
