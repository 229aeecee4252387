"""Drift is read from the history: it follows the serial number, leaves out what cannot be compared, and says why.

The arithmetic itself is checked against published values, statsmodels and simulation in `test_drift_rates`;
expected differences here follow from the errors typed into the tests below.
"""

from __future__ import annotations

import datetime
import math
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
from register.models import Tag, Transmitter
from tests import cast as people
from tests.calibration.described import NINE, readings
from tests.calibration.rooted import flow_tag, read, shifted
from tests.calibration.scheduled import a_test, day
from tests.drawing import parsed, tagged


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


def fitted_at(tag: Tag) -> Transmitter:
    held = Tag.objects.select_related("current_fitting__transmitter__type").get(pk=tag.pk).current_fitting
    assert held is not None
    return held.transmitter


def view(found: drifting.Drift) -> drift_page.DriftView:
    """The page's part for a drift, worked out anew from its history."""
    transmitter_id = found.history.pairing.visits[-1].transmitter
    assert isinstance(transmitter_id, int)
    tag = Tag.objects.select_related("current_range").get(pk=found.history.tests[0].tag_id)
    terms = drifting.terms_now(tag, current_requirement(tag), fitted_at(tag).head)
    return drift_page.view_of(
        found.history, found.channel.key, whose="here", transmitter_id=transmitter_id, terms=terms, due=found.due
    )


def words(shown: drift_page.DriftView) -> set[str]:
    """The words in the chart."""
    return {"".join(word.itertext()).strip() for word in tagged(parsed(str(shown.chart)), "text")}


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


def test_a_point_limited_by_the_signal_on_one_side_gives_no_difference(tag: Tag) -> None:
    """20.5 mA on the way up is a bound (NAMUR NE 43), so only the way down says what the error is at 75 %."""
    yearly(tag, [0.0])
    on = day("2020-03-10")
    nine = readings()
    rows = (*nine[:3], replace(nine[3], measured="20.5000"), *nine[4:])
    a_test(tag, on, runs=(RunContent(kind="as-found", tested_on=on, readings=rows),))
    pairing = seen(tag, "75").history.pairing
    assert pairing.pairs == ()
    assert pairing.left_out[-1].reason is Break.INCOMPLETE_FOUND


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


def test_a_span_error_is_a_difference_and_held_against_nothing(tag: Tag) -> None:
    """+0.4 at 0 % and −0.4 at 100 % pass ±0.5, though the span error is −0.8."""
    tilted = tuple(0.4 - 0.8 * point / 100 for point in NINE)
    for year in range(2019, 2025):
        record = a_test(tag, datetime.date(year, 3, 10), found=tilted)
    assert record.test.as_found_verdict == "pass"
    span = seen(tag, "span")
    assert span.start is not None and span.start[1] == pytest.approx(-0.8)
    assert (span.limits, span.meeting) == (None, None)
    shown = view(span)
    assert drift_page.NO_MPE in shown.facts
    assert "plot-stroke-outside" not in str(shown.chart) and "MPE" not in words(shown)
    assert seen(tag, "zero").limits == pytest.approx((-0.5, 0.5))


def test_a_square_root_tag_is_followed_first_at_its_lowest_point_and_by_the_limits_there(tag: Tag) -> None:
    """A zero shift of 0.45 % of input span reads 100·(√0.1045 − √0.10) = +0.704 % at 10 %, outside ±0.5."""
    flow = flow_tag(tag.area)
    for year in range(2019, 2025):
        on = f"{year}-03-10"
        record = a_test(flow, day(on), runs=shifted(0.45, on=on))
    assert record.test.as_found_verdict == "fail"
    first = seen(flow, "")
    assert (first.channel.key, first.channel.unit) == ("10", "% of span")
    assert first.start is not None and first.start[1] == pytest.approx(0.704, abs=1e-3)
    assert first.limits == pytest.approx((-0.5, 0.5))
    assert "outside" in str(view(first).chart)
    assert first.meeting is not None and first.meeting.on == first.start[0]


def test_the_shift_of_a_square_root_input_has_its_own_unit_and_no_mpe(tag: Tag) -> None:
    flow = flow_tag(tag.area)
    for year in range(2019, 2025):
        on = f"{year}-03-10"
        a_test(flow, day(on), runs=shifted(0.1 * (year - 2019), on=on))
    zero = seen(flow, "input zero")
    assert zero.rate.rate == pytest.approx(0.1, rel=1e-2)
    assert (zero.limits, zero.meeting) == (None, None)
    shown = view(zero)
    rate = dict(shown.facts)["Rate"]
    assert rate.endswith("% of input span a year")
    assert "Cumulative drift, % of input span" in words(shown)
    assert drift_page.file_head(zero)[4] == "as-found less as-left (% of input span)"
    assert "fitted zero" not in [channel.key for channel in zero.history.channels]


def test_a_tolerance_of_the_input_limits_the_output_unequally_above_and_below(tag: Tag) -> None:
    """±2 kPa at 10 kPa: 100·(√0.08 − √0.10) = −3.339 and 100·(√0.12 − √0.10) = +3.018 % of span."""
    flow = flow_tag(tag.area, mpe_form="absolute", mpe_percent="", mpe_input="2", input_unit="kPa", as_left_percent="")
    for year, error in enumerate((-3.2, -3.25, -3.3, -3.25), start=2019):
        on = f"{year}-03-10"
        ideal = 100 * math.sqrt(0.10)
        record = a_test(flow, day(on), runs=read({0: ideal + error, 8: ideal + error}, on=on))
        assert record.test.as_found_verdict == "pass"
    found = seen(flow, "10")
    assert found.limits == pytest.approx((-3.3385, 3.0182), abs=1e-3)
    assert "plot-stroke-outside" not in str(view(found).chart)
    a_test(flow, day("2023-03-10"), runs=shifted(-1.9, on="2023-03-10"))
    assert dict(view(seen(flow, "10")).facts)["MPE here"] == "−3.339 to +3.018 % of span"


def test_where_the_output_is_held_at_zero_there_is_no_lower_limit(tag: Tag) -> None:
    points = (0, 25, 50, 75, 100, 75, 50, 25, 0)
    flow = flow_tag(
        tag.area,
        points=" ".join(map(str, points)),
        mpe_form="absolute",
        mpe_percent="",
        mpe_input="0.1",
        input_unit="kPa",
        as_left_percent="",
    )
    for year in range(2019, 2025):
        on = f"{year}-03-10"
        # 4 mA itself would say no more than that the input is not above zero, and leave the run incomplete.
        a_test(flow, day(on), runs=read({0: 0.01, 8: 0.02}, points, on=on))
    found = seen(flow, "zero")
    assert found.limits == pytest.approx((-math.inf, 100 * math.sqrt(0.001)))
    assert found.meeting is not None and found.meeting.on is None
    shown = view(found)
    assert "plot-stroke-outside" not in str(shown.chart)
    assert "held at 4 mA" in dict(shown.facts)["MPE here"]


def test_what_is_done_to_a_transmitter_that_was_taken_out_breaks_nothing_here(tag: Tag, cast: people.Cast) -> None:
    yearly(tag, [0.0, 0.1])
    first = fitted_at(tag)
    second = people.make_transmitter(cast.plant)
    fitting.swap(by=Actor(None), reason="sticks", tag=tag, transmitter=second, on=day("2021-06-01"))
    yearly(tag, [0.0], first=2022)
    intervening.record_intervention(
        by=Actor(None), reason="bearing", transmitter=first, kind="repair", done_on=day("2022-09-01")
    )
    intervening.record_intervention(
        by=Actor(None), reason="plugged", transmitter=second, kind="flush", done_on=day("2021-06-01")
    )
    yearly(tag, [0.2], first=2023)
    history = drifting.of_tag(Tag.objects.get(pk=tag.pk))
    assert [pair.end for pair in history.pairing.pairs] == [day("2020-03-10"), day("2023-03-10")]
    assert [(mark.kind, mark.on) for mark in history.marks] == [
        ("swap", day("2021-06-01")),
        ("other", day("2021-06-01")),
    ]
    assert [mark.on for mark in drifting.of_transmitter(first).marks] == [day("2022-09-01")]


def test_adjusted_and_then_broken_off_leaves_nothing_to_compare_with(tag: Tag) -> None:
    a_test(tag, day("2020-03-10"), found=zero_of(0.8), left=zero_of(0.4))
    a_test(
        tag,
        day("2021-03-10"),
        outcome=Test.Outcome.NOT_TESTED,
        adjusted=True,
        answers={"could_not_test": "pump tripped"},
    )
    assert seen(tag).start is None
    a_test(tag, day("2022-03-10"), found=zero_of(0.02))
    found = seen(tag)
    assert found.history.pairing.pairs == ()
    said = {line.on: line.words for line in drift_page.left_out_lines(found.history)}
    assert said["2021-03-10"] == "adjusted without a complete as-left: pump tripped"
    assert said["2022-03-10"] == "the test before was adjusted without a complete as-left"


def test_a_last_test_sent_back_takes_the_prediction_but_not_the_rate(tag: Tag, cast: people.Cast) -> None:
    yearly(tag, [0.0, 0.1, 0.2, 0.3, 0.4])
    record = a_test(tag, day("2024-03-10"), found=zero_of(0.5), signer=cast.technician)
    Test.objects.filter(pk=record.test_id).update(state=Test.State.SENT_BACK)
    found = seen(tag)
    assert (found.rate.n, found.rate.enough) == (4, True)
    assert (found.start, found.meeting, found.band) == (None, None, ())
    assert dict(view(found).facts)["Prediction"] == "none: test of 2024-03-10: the record was sent back"


def test_a_last_test_with_gaps_lets_the_prediction_begin_at_the_as_left_before(tag: Tag) -> None:
    yearly(tag, [0.0, 0.1, 0.2, 0.3, 0.4])
    on = day("2024-03-10")
    a_test(tag, on, runs=(RunContent(kind="as-found", tested_on=on, readings=readings(zero_of(0.5))[:5]),))
    found = seen(tag)
    assert (found.rate.n, found.rate.enough) == (4, True)
    assert found.start is not None
    assert (found.start[0], round(found.start[1], 9)) == (day("2023-03-10"), 0.4)
    assert found.band[0][0] == day("2023-03-10")


@pytest.mark.parametrize(
    ("done", "words"),
    [
        ("flush", "flush or clearing of impulse lines: plugged on 2024-06-01"),
        ("refit", "it was taken out and fitted again since the last test"),
        ("range", "the range or its transfer function was changed since the last test"),
    ],
)
def test_no_prediction_begins_where_the_next_as_found_could_not_be_compared(tag: Tag, done: str, words: str) -> None:
    yearly(tag, [0.0, 0.1, 0.2, 0.3, 0.4, 0.45])
    held, on = fitted_at(tag), day("2024-06-01")
    assert seen(tag).band
    if done == "flush":
        intervening.record_intervention(by=Actor(None), reason="plugged", transmitter=held, kind="flush", done_on=on)
    elif done == "refit":
        fitting.remove(by=Actor(None), reason="outage", tag=tag, on=on)
        fitting.fit(by=Actor(None), reason="outage over", tag=tag, transmitter=held, on=day("2024-06-02"))
    else:
        people.make_range(tag, urv="8", effective_from=on)
    found = seen(tag)
    assert (found.rate.n, found.start, found.band) == (5, None, ())
    assert dict(view(found).facts)["Prediction"] == f"none: {words}"


def test_the_rate_is_that_of_the_measuring_head_that_is_in(tag: Tag) -> None:
    yearly(tag, [0.0, 0.1, 0.2, 0.3, 0.4, 0.45])
    assert seen(tag).rate.n == 5
    held = fitted_at(tag)
    head = people.make_head(held.type)
    intervening.change_head(by=Actor(None), reason="leaks", transmitter=held, head=head, on=day("2024-06-01"))
    yearly(tag, [0.0, -0.1], first=2025)
    found = seen(tag)
    assert (len(found.history.pairing.pairs), found.rate.n) == (6, 1)
    assert view(found).not_counted == 5


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
