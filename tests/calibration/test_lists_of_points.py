"""Point lists as typed: directions, cycles, and what is refused."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from calibration.metrology.pointlist import (
    SQUARE_ROOT_STANDARD,
    STANDARD,
    THREE_CYCLES,
    PointList,
    default_for,
    points_from_applied,
)
from calibration.metrology.signal import Signal, Transfer


def test_the_usual_list_goes_up_and_comes_down() -> None:
    assert STANDARD.text == "0 25 50 75 100 75 50 25 0"
    assert STANDARD.directions == (1, 1, 1, 1, 1, -1, -1, -1, -1)
    assert set(STANDARD.cycles) == {1}
    assert STANDARD.labels[0] == "0 % up"
    assert STANDARD.labels[-1] == "0 % down"


def test_three_cycles_share_their_ends_and_are_found_without_bars() -> None:
    assert THREE_CYCLES.cycles.count(1) == 9
    assert (THREE_CYCLES.cycles.count(2), THREE_CYCLES.cycles.count(3)) == (8, 8)
    assert PointList.parse(THREE_CYCLES.text) == THREE_CYCLES
    assert PointList.parse(THREE_CYCLES.text.replace("|", " ")) == THREE_CYCLES
    assert THREE_CYCLES.labels[-1] == "0 % down, cycle 3"


def test_a_cycle_that_repeats_its_first_point_counts_it_up_again() -> None:
    twice = PointList.parse("0 50 100 50 0 | 0 50 100 50 0")
    assert twice.directions == (1, 1, 1, -1, -1) * 2
    assert twice.cycles == (1,) * 5 + (2,) * 5


def test_a_list_may_begin_at_the_top() -> None:
    assert PointList.parse("100 50 0 50 100").directions == (-1, -1, -1, 1, 1)


@pytest.mark.parametrize(
    ("text", "points"),
    [
        ("0 25 50", (0, 25, 50)),
        ("0, 25, 50", (0, 25, 50)),
        ("0;25;50", (0, 25, 50)),
        ("0,25,50", (0, 25, 50)),
        ("0 % 12,5 % 50 %", (0, 12.5, 50)),
        ("−5 0 105", (-5, 0, 105)),
    ],
)
def test_a_list_is_read_as_people_type_it(text: str, points: tuple[float, ...]) -> None:
    assert PointList.parse(text).points == points


@pytest.mark.parametrize(
    ("text", "words"),
    [
        ("", "at least two points"),
        ("50", "at least two points"),
        ("0 half 100", "“half” is not a percentage"),
        ("0 50 250", "250 is not a point"),
        ("0 nan 50", "nan is not a point"),
        ("50 50", "at least two different inputs"),
        ("0 50 100 |", "without points"),
        (" ".join(["0 100"] * 101), "at most 200"),
    ],
)
def test_a_list_that_cannot_be_run_is_refused_in_words(text: str, words: str) -> None:
    with pytest.raises(ValueError, match=words):
        PointList.parse(text)


@given(st.lists(st.integers(-10, 110), min_size=2, max_size=30).filter(lambda p: len(set(p)) > 1))
def test_a_list_written_and_read_again_is_the_same(points: list[float]) -> None:
    once = PointList(tuple(points))
    again = PointList.parse(once.text)
    assert again == once
    assert again.directions == once.directions
    assert again.cycles == once.cycles


@given(st.lists(st.integers(-10, 110), min_size=2, max_size=30).filter(lambda p: len(set(p)) > 1))
def test_each_point_is_up_or_down_as_it_was_reached(points: list[float]) -> None:
    found = PointList(tuple(points)).directions
    for here, there, way in zip(points, points[1:], found[1:], strict=False):
        if here != there:
            assert way == (1 if there > here else -1)
    assert set(found) <= {1, -1}


def test_square_root_lists_start_above_zero() -> None:
    """Common practice, no source: 5 to 10 % of the input."""
    assert default_for(Transfer.SQUARE_ROOT) == SQUARE_ROOT_STANDARD
    assert min(SQUARE_ROOT_STANDARD.points) == 10
    assert min(default_for(Transfer.SQUARE_ROOT, cycles=3).points) == 10
    assert default_for(Transfer.LINEAR, cycles=3) == THREE_CYCLES
    with pytest.raises(ValueError, match="1 or 3 cycles"):
        default_for(Transfer.LINEAR, cycles=2)


def test_points_are_inputs_of_the_range() -> None:
    assert list(PointList((0, 50, 100)).inputs(Signal(-10, -30))) == [-10, -20, -30]


def test_inputs_that_lie_together_are_one_point() -> None:
    found = points_from_applied([-0.3, 25.4, 24.8, np.nan, 12.4, 99.6, 37.0, 41.23])
    np.testing.assert_array_equal(found, [0, 25, 25, np.nan, 12.5, 100, 37.5, 41.2])
    assert np.isnan(points_from_applied([np.nan])).all()
