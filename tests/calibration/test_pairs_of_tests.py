"""Which tests may be compared to see drift, and why the others are left out."""

from __future__ import annotations

from dataclasses import replace
from datetime import UTC, date, datetime
from typing import Any

import pytest

from calibration.metrology.drift import Break, Intervention, Pairing, Visit, cumulative_curve, pair_tests


def visit(year: int, zero: float, left: float | None = None, **more: Any) -> Visit:
    basics: dict[str, Any] = {
        "when": date(year, 3, 1),
        "found": {"zero": zero},
        "left": None if left is None else {"zero": left},
        "transmitter": "A",
        "tag": "PT-1",
        "fitting": 1,
        "head": "h",
        "basis": (0, 10),
        "points": "0 50 100",
    }
    return Visit(**(basics | more))


def left_out(pairing: Pairing) -> dict[int, Break]:
    return {one.index: one.reason for one in pairing.left_out}


def test_as_found_is_compared_with_the_as_left_before_it() -> None:
    pairing = pair_tests([visit(2020, 0.3, 0.0), visit(2021, 0.1, 0.02), visit(2023, 0.12)])
    assert [one.differences["zero"] for one in pairing.pairs] == pytest.approx([0.1, 0.1])
    assert [one.years for one in pairing.pairs] == pytest.approx([365 / 365.25, 730 / 365.25])
    assert left_out(pairing) == {0: Break.FIRST}


def test_where_nothing_was_adjusted_as_found_stands_as_as_left() -> None:
    pairing = pair_tests([visit(2020, 0.3), visit(2021, 0.35), visit(2022, 0.45)])
    assert [one.differences["zero"] for one in pairing.pairs] == pytest.approx([0.05, 0.1])


@pytest.mark.parametrize(
    ("change", "reason"),
    [
        ({"transmitter": "B", "fitting": 2}, Break.SWAP),
        ({"tag": "PT-2", "fitting": 2}, Break.TAG),
        ({"fitting": 2}, Break.REFIT),
        ({"head": "i"}, Break.HEAD),
        ({"basis": (0, 16)}, Break.RERANGE),
        ({"points": "0 25 50"}, Break.POINTS),
        ({"complete_found": False}, Break.INCOMPLETE_FOUND),
        ({"found": None}, Break.INCOMPLETE_FOUND),
    ],
)
def test_a_broken_pair_is_left_out_with_its_reason(change: dict[str, Any], reason: Break) -> None:
    pairing = pair_tests([visit(2020, 0.0), visit(2021, 0.1, **change)])
    assert pairing.pairs == ()
    assert left_out(pairing) == {0: Break.FIRST, 1: reason}
    assert pairing.left_out[1].words


def test_after_a_break_comparing_goes_on_from_the_new_state() -> None:
    other: dict[str, Any] = {"transmitter": "B", "fitting": 2}
    pairing = pair_tests([visit(2020, 0.0), visit(2021, 0.5, **other), visit(2022, 0.6, **other)])
    assert [(one.start_index, one.end_index) for one in pairing.pairs] == [(1, 2)]


def test_an_intervention_between_two_tests_breaks_them_and_is_named() -> None:
    visits = [visit(2020, 0.0), visit(2021, 0.1), visit(2022, 0.2)]
    pairing = pair_tests(visits, [Intervention(date(2020, 7, 1), "impulse lines flushed", "A")])
    assert left_out(pairing) == {0: Break.FIRST, 1: Break.INTERVENTION}
    assert pairing.left_out[1].words == "impulse lines flushed on 2020-07-01"
    assert len(pairing.pairs) == 1


def test_an_intervention_dated_only_by_day_breaks_both_pairs_of_a_test_on_that_day() -> None:
    visits = [visit(2020, 0.0), visit(2021, 0.1), visit(2022, 0.2)]
    pairing = pair_tests(visits, [Intervention(date(2021, 3, 1), "diaphragm cleaned", "A")])
    assert left_out(pairing) == {0: Break.FIRST, 1: Break.INTERVENTION, 2: Break.INTERVENTION}


def test_an_intervention_known_to_the_minute_breaks_one_pair_only() -> None:
    visits = [replace(visit(y, 0.0), when=datetime(y, 3, 1, 10, tzinfo=UTC)) for y in (2020, 2021, 2022)]
    done = Intervention(datetime(2021, 3, 1, 11, tzinfo=UTC), "diaphragm cleaned after the test", "A")
    assert left_out(pair_tests(visits, [done])) == {0: Break.FIRST, 2: Break.INTERVENTION}


def test_what_is_done_to_another_transmitter_breaks_nothing() -> None:
    pairing = pair_tests([visit(2020, 0.0), visit(2021, 0.1)], [Intervention(date(2020, 7, 1), "new head", "B")])
    assert [(one.start_index, one.end_index) for one in pairing.pairs] == [(0, 1)]
    assert pairing.standing("A") == (1, "")


@pytest.mark.parametrize(
    ("last", "stands"),
    [
        (visit(2022, 0.2), 2),
        (visit(2022, 0.2, 0.0), 2),
        (visit(2022, 0.2, complete_found=False), 1),
        (visit(2022, 0.2, found=None, could_not_test="no permit"), 1),
        (visit(2022, 0.2, 0.0, complete_left=False), None),
        (visit(2022, 0.2, complete_found=False, fitting=2), None),
        (visit(2022, 0.2, found=None, could_not_test="no permit", transmitter="B"), 1),
    ],
)
def test_the_as_left_that_stands_is_the_one_the_next_as_found_would_meet(last: Visit, stands: int | None) -> None:
    visits = [visit(2020, 0.0), visit(2021, 0.1), last]
    base, why = pair_tests(visits).standing("A")
    assert base == stands
    assert bool(why) == (stands is None)
    following = pair_tests([*visits, visit(2023, 0.3, fitting=last.fitting)]).pairs
    assert (following[-1].start_index if following[-1].end_index == 3 else None) == stands


def test_after_an_intervention_no_as_left_stands_and_it_is_named() -> None:
    done = Intervention(date(2021, 7, 1), "impulse lines flushed", "A")
    pairing = pair_tests([visit(2020, 0.0), visit(2021, 0.1)], [done])
    assert pairing.standing("A") == (None, "impulse lines flushed on 2021-07-01")
    assert pairing.standing("B") == (None, "there is no test of it")


def test_a_visit_without_a_test_is_passed_over_and_said() -> None:
    idle = visit(2021, 0.0, could_not_test="line could not be isolated", found=None)
    pairing = pair_tests([visit(2020, 0.0), idle, visit(2022, 0.2)])
    assert [(one.start_index, one.end_index) for one in pairing.pairs] == [(0, 2)]
    assert left_out(pairing)[1] is Break.COULD_NOT_TEST
    assert pairing.left_out[1].words == "line could not be isolated"


def test_an_incomplete_as_found_without_adjustment_leaves_the_earlier_as_left_standing() -> None:
    pairing = pair_tests([visit(2020, 0.0), visit(2021, 0.1, complete_found=False), visit(2022, 0.2)])
    assert [(one.start_index, one.end_index) for one in pairing.pairs] == [(0, 2)]


def test_an_incomplete_as_found_that_was_adjusted_starts_anew_from_its_as_left() -> None:
    pairing = pair_tests([visit(2020, 0.0), visit(2021, 0.1, 0.0, complete_found=False), visit(2022, 0.2)])
    assert [(one.start_index, one.end_index) for one in pairing.pairs] == [(1, 2)]


def test_an_incomplete_as_left_leaves_the_next_as_found_without_a_partner() -> None:
    pairing = pair_tests([visit(2020, 0.0), visit(2021, 0.1, 0.0, complete_left=False), visit(2022, 0.2)])
    assert left_out(pairing) == {0: Break.FIRST, 2: Break.INCOMPLETE_LEFT}


def test_two_tests_on_one_day_give_no_rate() -> None:
    pairing = pair_tests([visit(2020, 0.0), visit(2020, 0.1)])
    assert left_out(pairing) == {0: Break.FIRST, 1: Break.SAME_DAY}


def test_every_test_is_either_paired_or_named() -> None:
    visits = [visit(2015 + k, 0.1 * k, fitting=1 + k // 3) for k in range(9)]
    pairing = pair_tests(visits)
    assert {p.end_index for p in pairing.pairs} | set(left_out(pairing)) == set(range(9))
    assert len(pairing.pairs) + len(pairing.left_out) == 9


def test_tests_out_of_order_are_refused() -> None:
    with pytest.raises(ValueError, match="in order of time"):
        pair_tests([visit(2021, 0.0), visit(2020, 0.0)])


def test_the_cumulative_curve_adds_differences_and_starts_again_at_a_break() -> None:
    visits = [
        visit(2018, 0.0),
        visit(2019, 0.1, 0.0),
        visit(2020, 0.2),
        visit(2021, 0.9, fitting=2),
        visit(2022, 1.0, fitting=2),
    ]
    first, second = cumulative_curve(pair_tests(visits), "zero")
    assert first.indices == (0, 1, 2)
    assert first.values == pytest.approx((0.0, 0.1, 0.3))
    assert second.indices == (3, 4)
    assert second.values == pytest.approx((0.0, 0.1))
    assert second.dates == (date(2021, 3, 1), date(2022, 3, 1))


def test_only_channels_that_both_tests_have_are_compared() -> None:
    pairing = pair_tests([visit(2020, 0.0), visit(2021, 0.1, found={"zero": 0.1, "span": 0.2})])
    assert pairing.channels == ("zero",)
