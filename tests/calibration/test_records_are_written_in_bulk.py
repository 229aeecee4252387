"""Records of past tests are judged, chained and summarised, many at a time."""

from __future__ import annotations

import dataclasses
import datetime

import pytest
from django.db import connection, transaction
from django.test.utils import CaptureQueriesContext

from calibration.models import ChainHead, Reading, Record, RunFigures, Signature, Test
from calibration.recording import write_record, write_records
from calibration.records.canonical import chain_hash
from register.auditing import Act, Actor
from register.models import AuditEntry
from tests import cast as people
from tests.calibration.described import described


def act() -> Act:
    return Act(by=Actor(person=None), reason="past tests")


@pytest.fixture
def tag(cast: people.Cast) -> people.Tag:
    return people.make_ready_tag(people.make_area(cast.plant), "PT-100")


def test_a_record_carries_runs_readings_figures_and_summaries(tag: people.Tag, cast: people.Cast) -> None:
    found = (0.2, 0.3, 0.6, 0.3, 0.2, 0.1, 0.2, 0.1, 0.1)
    record = write_record(described(tag, found=found, left=(0.1,) * 9, signer=cast.technician), act=act())
    test = Test.objects.get()
    assert test.current_record == record
    assert (test.state, test.outcome, test.accepted) == ("signed", "done", True)
    assert (test.as_found_verdict, test.as_left_verdict) == ("fail", "pass")
    assert test.as_found_worst == pytest.approx(0.6, abs=1e-3)
    assert test.as_found_ratio == pytest.approx(1.2, abs=2e-3)
    assert Reading.objects.count() == 18
    figures = RunFigures.objects.get(kind="as-left")
    assert figures.zero_error == pytest.approx(0.1, abs=1e-3)
    assert figures.point_errors[0][0] == 0.0


def test_the_order_given_is_the_order_of_the_chain(tag: people.Tag, cast: people.Cast) -> None:
    days = [datetime.date(2020 + n, 5, 1) for n in range(4)]
    write_records([described(tag, on=day, signer=cast.technician) for day in days], act=act())
    links = sorted([*Record.objects.all(), *Signature.objects.all()], key=lambda link: link.position)
    assert [link.position for link in links] == list(range(1, 9))
    previous = "0" * 64
    for link in links:
        assert link.previous_hash == previous
        assert link.hash == chain_hash(previous, link.content)
        previous = link.hash
    assert ChainHead.objects.get().hash == previous
    assert [record.test.tested_on for record in Record.objects.order_by("position")] == days


def test_every_record_leaves_an_audit_entry(tag: people.Tag) -> None:
    trail = act()
    with transaction.atomic():
        write_records([described(tag), described(tag)], act=trail)
        trail.write()
    assert AuditEntry.objects.filter(thing_type="calibration.record", kind="created").count() == 2


def test_a_later_version_supersedes_and_takes_over_the_summaries(tag: people.Tag, cast: people.Cast) -> None:
    first = write_record(described(tag, found=(0.9,) * 9, signer=cast.technician), act=act())
    corrected = described(
        tag, signer=cast.technician, test_id=first.test_id, correction_reason="unit of the meter misread"
    )
    second = write_record(corrected, act=act())
    test = Test.objects.get()
    assert (second.version, second.supersedes, test.current_record) == (2, first, second)
    assert (test.as_found_verdict, test.accepted) == ("pass", True)
    assert list(RunFigures.objects.filter(current=True).values_list("run__record", flat=True)) == [second.pk]
    assert Record.objects.get(pk=first.pk).content == first.content


def test_an_unadjusted_test_is_accepted_by_its_as_found_run_alone(tag: people.Tag) -> None:
    assert write_record(described(tag), act=act()).test.accepted
    assert not write_record(described(tag, found=(0.6,) * 9), act=act()).test.accepted


def test_an_adjusted_test_without_as_left_run_is_not_accepted(tag: people.Tag) -> None:
    assert not write_record(described(tag, adjusted=True), act=act()).test.accepted


def test_a_missing_point_makes_the_run_incomplete(tag: people.Tag) -> None:
    whole = described(tag)
    run = dataclasses.replace(whole.runs[0], readings=whole.runs[0].readings[:-1])
    test = write_record(dataclasses.replace(whole, runs=(run,)), act=act()).test
    assert (test.as_found_verdict, test.accepted) == ("incomplete", False)


def test_a_bad_text_names_its_place_and_nothing_is_written(tag: people.Tag) -> None:
    good, bad = described(tag), described(tag)
    reading = dataclasses.replace(bad.runs[0].readings[1], measured="8,oo")
    run = dataclasses.replace(bad.runs[0], readings=(bad.runs[0].readings[0], reading))
    with pytest.raises(ValueError, match="test 2, as-found, reading 2: “8,oo” is not a number"):
        write_records([good, dataclasses.replace(bad, runs=(run,))], act=act())
    assert not Record.objects.exists()


def test_many_records_cost_hardly_more_statements_than_one(tag: people.Tag, cast: people.Cast) -> None:
    def statements(count: int) -> int:
        contents = [described(tag, signer=cast.technician) for _ in range(count)]
        with CaptureQueriesContext(connection) as seen:
            write_records(contents, act=act())
        return len(seen)

    # SQLite takes 999 parameters a statement, about 60 readings: that is all that may grow.
    assert statements(60) - statements(1) < 60 * 1.5
