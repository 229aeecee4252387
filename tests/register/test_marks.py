"""The range strip: geometry is the message, so geometry is what is checked.

Expected places follow from the scale stated in the module (LRL at 18 px, URL at 114 px), worked by hand.
"""

from __future__ import annotations

import re
from typing import Any

import pytest
from django.template import Context, Template

from register.marks import HIGH_END, LOW_END, OVERHANG, fraction, range_strip
from tests.drawing import classed, fits_the_policy, parsed, starts, title


def bar_ends(svg: str) -> tuple[float, float]:
    """Start of the bar and tip of its arrow head [px]."""
    (bar,) = classed(parsed(svg), "bar")
    numbers = re.fullmatch(r"M([\d.]+) 6.5H[\d.]+V4.5L([\d.]+) 9L.*z", bar.get("d", ""))
    assert numbers, bar.get("d")
    return float(numbers[1]), float(numbers[2])


@pytest.mark.parametrize(
    "case",
    [
        (0.1, 0.6, 0.05, 0.4, 0.7),
        (0.9, 0.2, None, None, None),
        (-4.0, 7.0, 0.5, 3.0, 3.0),
        (None, None, None, 0.2, None),
        (0.5, 0.5001, 0.3, -0.2, 0.0),
    ],
)
@pytest.mark.parametrize("known", [True, False])
def test_strip_is_well_formed_titled_and_fits_the_content_policy(case: tuple[Any, ...], known: bool) -> None:
    root = parsed(
        range_strip(case[0], case[1], case[2], case[3], case[4], 'LRV < "URV" & so on', head=known, rated=known)
    )
    assert title(root) == 'LRV < "URV" & so on'
    assert root.get("role") == "img"
    assert fits_the_policy(root)


def test_bar_stands_where_the_range_stands_in_the_head() -> None:
    # 96 px from LRL to URL: a quarter is 24 px from LRL, three quarters 72 px.
    assert bar_ends(range_strip(0.25, 0.75, None, None, None, "")) == (42.0, 90.0)


def test_arrow_of_a_reverse_range_points_left() -> None:
    start, tip = bar_ends(range_strip(0.75, 0.25, None, None, None, ""))
    assert (start, tip) == (90.0, 42.0)


def test_range_that_fills_the_head_is_not_outside() -> None:
    root = parsed(range_strip(0.0, 1.0 + 1e-12, None, None, None, ""))
    assert not classed(root, "hatch")
    assert not classed(root, "bad")


@pytest.mark.parametrize("lrv, urv", [(0.5, 1.08), (1.08, 0.5)])
def test_what_lies_above_the_head_is_hatched_and_only_there(lrv: float, urv: float) -> None:
    root = parsed(range_strip(lrv, urv, None, None, None, ""))
    (hatch,) = classed(root, "hatch")
    assert HIGH_END <= starts(hatch)[0] <= HIGH_END + 1
    assert "bar" in {name for element in root.iter() for name in element.get("class", "").split()}


def test_what_lies_below_the_head_is_hatched() -> None:
    (hatch,) = classed(parsed(range_strip(-0.1, 0.5, None, None, None, "")), "hatch")
    assert starts(hatch)[0] == pytest.approx(LOW_END - 0.1 * 96 + 0.5, abs=0.06)


def test_range_wholly_outside_the_head_has_no_solid_bar() -> None:
    root = parsed(range_strip(1.02, 1.1, None, None, None, ""))
    assert not classed(root, "bar")
    assert classed(root, "hatch")


def test_range_far_outside_stays_in_the_picture() -> None:
    root = parsed(range_strip(-50, 50, None, 9.0, 20.0, ""))
    reach = (HIGH_END - LOW_END) * OVERHANG
    hatched = classed(root, "hatch")
    assert len(hatched) == 3, "below the head, above it, and above the rating"
    for path in hatched:
        assert LOW_END - reach - 1 <= starts(path)[0] <= HIGH_END + reach + 1


def test_least_span_is_marked_where_it_would_end_in_the_direction_of_the_range() -> None:
    direct = classed(parsed(range_strip(0.25, 0.75, 0.125, None, None, "")), "tick")
    reverse = classed(parsed(range_strip(0.75, 0.25, 0.125, None, None, "")), "tick")
    assert starts(direct[0]) == [54.0]
    assert starts(reverse[0]) == [78.0]


def test_span_below_the_least_span_is_told_apart_by_more_than_colour() -> None:
    enough = classed(parsed(range_strip(0.25, 0.75, 0.5, None, None, "")), "tick")[0]
    too_small = classed(parsed(range_strip(0.25, 0.3, 0.5, None, None, "")), "tick", "bad")[0]
    assert len(starts(enough)) == 1
    assert len(starts(too_small)) == 2  # a line from URV to the least span, then the tick


def test_pressures_stand_where_they_stand_against_the_rating() -> None:
    root = parsed(range_strip(None, None, None, 0.5, 0.75, ""))
    (dot,) = classed(root, "dot")
    (tick,) = classed(root, "tick")
    assert dot.get("cx") == "66.0"
    assert starts(tick) == [90.0]
    assert not classed(root, "hatch")


def test_pressure_beyond_the_rating_is_hatched() -> None:
    root = parsed(range_strip(None, None, None, 0.9, 1.1, ""))
    (hatch,) = classed(root, "hatch")
    assert starts(hatch)[0] >= HIGH_END
    assert classed(root, "tick", "bad")
    assert not classed(root, "dot", "bad")


def test_unknown_limits_are_broken_lines_and_nothing_is_drawn_on_them() -> None:
    root = parsed(range_strip(0.2, 0.8, 0.1, 0.5, 1.5, "", head=False, rated=False))
    assert len(classed(root, "gone")) == 2
    assert not classed(root, "bar")
    assert not classed(root, "dot")
    assert not classed(root, "hatch")


def test_fraction_is_a_place_between_two_ends_and_unknown_stays_unknown() -> None:
    assert fraction(62.5, 0.0, 250.0) == 0.25
    assert fraction(-25.0, 0.0, 250.0) == -0.1
    assert fraction(None, 0.0, 250.0) is None
    assert fraction(1.0, 0.0, None) is None
    assert fraction(1.0, 5.0, 5.0) is None


def test_template_tag_draws_the_same_strip() -> None:
    drawn = Template('{% load marks %}{% range_strip 0.1 0.6 None 0.4 None "words" %}').render(Context())
    assert drawn == range_strip(0.1, 0.6, None, 0.4, None, "words")
