"""Drift is read from the history: it follows the serial number, leaves out what cannot be compared, and says why.

The arithmetic itself is checked against published values, statsmodels and simulation in `test_drift_rates`;
expected differences here follow from the errors typed into the tests below.
"""

from __future__ import annotations

import datetime
from dataclasses import replace

import pytest
from django.db import connection
from django.test.utils import CaptureQueriesContext

from calibration.contexts import drift as drift_page
from calibration.metrology.pairing import Break
from calibration.models import Record, RunFigures, Test
from calibration.opening import current_requirement
from calibration.queries import drifting
from calibration.recording import RunContent
from calibration.records.basis import Basis
from register import fitting, intervening
from register.auditing import Actor
from register.models import Tag
from tests import cast as people
from tests.calibration.described import readings
from tests.calibration.scheduled import a_test, day


def zero_of(error: float) -> tuple[float, ...]:
    """The same error at every point [% of span]: zero error `error`, span error 0."""
    return (error,) * 9


def yearly(tag: Tag, errors: list[float], first: int = 2019) -> None:
    for year, error in enumerate(errors, start=first):
        a_test(tag, datetime.date(year, 3, 10), found=zero_of(error))


def seen(tag: Tag, channel: str = "zero") -> drifting.Drift:
    tag = Tag.objects.select_related("current_range", "current_fitting__transmitter__head").get(pk=tag.pk)
    history = drifting.of_tag(tag)
    chosen = drifting.choose(history, channel)
    assert chosen is not None
    held = tag.current_fitting
    return drifting.drift(
        history,
        chosen,
        transmitter_id=held.transmitter_id if held else None,
        terms=drifting.terms_now(tag, current_requirement(tag), held.transmitter.head if held else None),
        due=day("2027-03-10"),
    )


def test_differences_are_as_found_less_the_as_left_before(tag: Tag) -> None:
    a_test(tag, day("2024-03-10"), found=zero_of(0.10))
    a_test(tag, day("2025-03-10"), found=zero_of(0.40), left=zero_of(0.05))
    a_test(tag, day("2026-03-10"), found=zero_of(0.20))
    pairs = seen(tag).history.pairing.pairs
    assert [pair.differences["zero"] for pair in pairs] == pytest.approx([0.30, 0.15], abs=1e-9)
    assert [pair.differences["50"] for pair in pairs] == pytest.approx([0.30, 0.15], abs=1e-9)
    assert [pair.differences["span"] for pair in pairs] == pytest.approx([0.0, 0.0], abs=1e-9)


def test_under_four_pairs_there_is_no_rate_and_no_band(tag: Tag) -> None:
    yearly(tag, [0.0, 0.1, 0.15, 0.22])
    found = seen(tag)
    assert not found.rate.enough
    assert (found.meeting, found.band) == (None, ())
    view = drift_page.view_of(
        found.history,
        "zero",
        whose="PT-100",
        transmitter_id=found.history.tests[0].transmitter_id,
        terms=None,
        due=None,
    )
    assert view.facts == [("Rate", "not enough data: 3 pairs of tests, at least 4 are needed")]


def test_a_steady_walk_meets_the_limit_where_it_must(tag: Tag) -> None:
    yearly(tag, [0.00, 0.05, 0.10, 0.15, 0.20, 0.25])
    found = seen(tag)
    assert found.rate.rate == pytest.approx(0.05, rel=1e-3)
    assert found.limits == pytest.approx((-0.5, 0.5))
    assert found.start is not None
    assert (found.start[0], round(found.start[1], 9)) == (day("2024-03-10"), 0.25)
    assert found.meeting is not None and found.meeting.on is not None
    # 0.25 % is left at 0.05 % a year and no scatter: five years after the last test.
    assert abs((found.meeting.on - day("2029-03-10")).days) <= 10
    assert found.band[0][0] == day("2024-03-10")
    assert found.band[-1][0] >= day("2027-03-10")


def test_the_curve_begins_again_where_pairs_are_broken_and_at_the_as_left_error(tag: Tag) -> None:
    yearly(tag, [0.10, 0.15, 0.20])
    held = Tag.objects.select_related("current_fitting__transmitter").get(pk=tag.pk).current_fitting
    assert held is not None
    intervening.record_intervention(
        by=Actor(None), reason="plugged", transmitter=held.transmitter, kind="flush", done_on=day("2021-09-01")
    )
    yearly(tag, [0.30, 0.35], first=2022)
    found = seen(tag)
    assert [len(stretch) for stretch in found.stretches] == [3, 2]
    assert [stretch[0][1] for stretch in found.stretches] == pytest.approx([0.10, 0.30])
    broken = [one for one in found.history.pairing.left_out if one.reason is Break.INTERVENTION]
    assert [one.when for one in broken] == [day("2022-03-10")]
    assert "flush" in broken[0].words and "2021-09-01" in broken[0].words


def test_drift_follows_the_serial_number_over_a_swap(tag: Tag, cast: people.Cast) -> None:
    yearly(tag, [0.0, 0.1, 0.2])
    held = Tag.objects.select_related("current_fitting__transmitter").get(pk=tag.pk).current_fitting
    assert held is not None
    first, second = held.transmitter, people.make_transmitter(cast.plant)
    fitting.swap(by=Actor(None), reason="sticks", tag=tag, transmitter=second, on=day("2021-06-01"))
    yearly(tag, [-0.1, -0.2], first=2022)
    found = seen(tag)
    assert [pair.differences["zero"] for pair in found.history.pairing.pairs] == pytest.approx([0.1, 0.1, -0.1])
    assert found.counted == {2}, "the rate at the tag is that of what is fitted"
    assert [(mark.kind, mark.on) for mark in found.history.marks] == [("swap", day("2021-06-01"))]
    assert [one.reason for one in found.history.pairing.left_out] == [Break.FIRST, Break.SWAP]
    own = drifting.of_transmitter(first)
    assert [pair.differences["zero"] for pair in own.pairing.pairs] == pytest.approx([0.1, 0.1])
    assert {test.transmitter_id for test in own.tests} == {first.pk}


def test_the_same_transmitter_at_another_tag_is_one_life_and_no_pair(tag: Tag, cast: people.Cast) -> None:
    yearly(tag, [0.0, 0.1])
    held = Tag.objects.select_related("current_fitting__transmitter").get(pk=tag.pk).current_fitting
    assert held is not None
    other = people.make_tag(tag.area, "PT-200")
    people.make_range(other)
    people.make_requirement(other)
    fitting.remove(by=Actor(None), reason="outage", tag=tag, on=day("2021-01-10"))
    fitting.fit(by=Actor(None), reason="spare", tag=other, transmitter=held.transmitter, on=day("2021-02-10"))
    a_test(other, day("2021-03-10"), found=zero_of(0.3))
    own = drifting.of_transmitter(held.transmitter)
    assert len(own.tests) == 3
    assert len(own.pairing.pairs) == 1
    assert own.pairing.left_out[-1].reason is Break.TAG


def test_a_sent_back_record_breaks_the_history_and_says_so(tag: Tag, cast: people.Cast) -> None:
    yearly(tag, [0.0, 0.1, 0.2])
    record = a_test(tag, day("2022-03-10"), found=zero_of(5.0), signer=cast.technician)
    Test.objects.filter(pk=record.test_id).update(state=Test.State.SENT_BACK)
    a_test(tag, day("2023-03-10"), found=zero_of(0.3))
    found = seen(tag)
    assert [pair.end for pair in found.history.pairing.pairs] == [day("2020-03-10"), day("2021-03-10")]
    said = [line.words for line in drift_page.left_out_lines(found.history)]
    assert drifting.SENT_BACK in said


def test_a_visit_without_a_test_is_listed_and_the_next_pair_spans_it(tag: Tag) -> None:
    yearly(tag, [0.0, 0.1])
    a_test(tag, day("2021-03-10"), outcome=Test.Outcome.NOT_TESTED, runs=(), answers={"could_not_test": "no outage"})
    yearly(tag, [0.4], first=2022)
    pairs = seen(tag).history.pairing.pairs
    assert pairs[-1].years == pytest.approx(2.0, abs=0.01)
    assert "no outage" in [line.words for line in drift_page.left_out_lines(seen(tag).history)]


def test_a_failed_run_with_a_gap_gives_no_difference(tag: Tag) -> None:
    """At 75 % only the reading on the way down is there: half of the opening between up and down would be drift."""
    opening = (0.0, 0.1, 0.1, 0.1, 0.0, -0.1, -0.1, -0.1, 0.0)
    yearly(tag, [0.0])
    whole = a_test(tag, day("2020-03-10"), found=opening)
    on = day("2021-03-10")
    gap = [one for place, one in enumerate(readings((0.6, *opening[1:]))) if place != 3]
    gone = a_test(tag, on, runs=(RunContent(kind="as-found", tested_on=on, readings=tuple(gap)),))
    assert (whole.test.as_found_verdict, gone.test.as_found_verdict) == ("pass", "fail")
    assert not RunFigures.objects.get(tested_on=on).complete
    yearly(tag, [0.0], first=2022)
    pairing = seen(tag, "75").history.pairing
    assert [(pair.start, pair.end) for pair in pairing.pairs] == [
        (day("2019-03-10"), day("2020-03-10")),
        (day("2020-03-10"), day("2022-03-10")),
    ]
    assert [one.reason for one in pairing.left_out] == [Break.FIRST, Break.INCOMPLETE_FOUND]


def test_a_run_with_a_point_limited_by_the_signal_on_one_side_is_not_complete(tag: Tag) -> None:
    """20.5 mA on the way up is a bound (NAMUR NE 43), so only the way down says what the error is at 100 %."""
    assert tag.current_range and tag.current_fitting
    yearly(tag, [0.0])
    on = day("2020-03-10")
    nine = list(readings())
    rows = (*nine[:4], replace(nine[4], measured="20.5000"), replace(nine[4], direction="down"), *nine[5:])
    head = tag.current_fitting.transmitter.head
    terms = Basis.of(used=tag.current_range, requirement=tag.requirements.get(), head=head)
    basis = replace(terms, points="0 25 50 75 100 100 75 50 25 0")
    a_test(tag, on, basis=basis, runs=(RunContent(kind="as-found", tested_on=on, readings=rows),))
    assert not RunFigures.objects.get(tested_on=on).complete


def test_other_points_cannot_be_compared_also_where_no_list_was_stated(tag: Tag) -> None:
    yearly(tag, [0.0, 0.1])
    on = day("2021-03-10")
    few = RunContent(kind="as-found", tested_on=on, readings=readings((0.0,) * 3, (0, 50, 100)))
    record = a_test(tag, day("2020-09-10"), found=zero_of(0.1))
    assert record.basis["points"]
    basis = replace(Basis.read(Record.objects.get(pk=record.pk), record.head_id), points="")
    a_test(tag, on, runs=(few,), basis=basis)
    left_out = seen(tag).history.pairing.left_out
    assert (left_out[-1].when, left_out[-1].reason) == (on, Break.POINTS)


def test_the_number_of_queries_does_not_grow_with_the_tests(tag: Tag) -> None:
    def count() -> int:
        held = Tag.objects.get(pk=tag.pk)
        with CaptureQueriesContext(connection) as queries:
            drifting.of_tag(held)
        return len(queries)

    yearly(tag, [0.0, 0.1])
    few = count()
    yearly(tag, [0.1, 0.2, 0.3, 0.4], first=2021)
    assert count() == few
