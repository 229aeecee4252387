"""Error, due and drift marks: what is inside, late or outside must show as a place and a shape.

Expected places follow from the scales stated in the module, worked by hand: error mark 38 px per MPE about
60 px; due mark 630 days over 150 px; drift mark 9 px per MPE about 14 px.
"""

from __future__ import annotations

from datetime import date, timedelta

import pytest
from django.template import Context, Template

from calibration.drawing.marks import TODAY_PLACE, drift_mark, due_mark, error_bar, error_mark
from tests.drawing import classed, fits_the_policy, parsed, starts, tagged, title

TODAY = date(2026, 3, 21)
DAY = 150 / 630


def days(count: int) -> date:
    return TODAY + timedelta(count)


@pytest.mark.parametrize(
    "svg",
    [
        error_mark(0.4, -0.1, "a < b & c", guard=0.8),
        error_mark(-9.0, None, "a < b & c"),
        error_mark(None, None, "a < b & c"),
        error_bar(None, "a < b & c"),
        error_bar(1.2, "a < b & c", guard=0.7, up=True),
        error_bar(-3.0, "a < b & c", up=False),
        due_mark(TODAY, last=None, due=None, limit=None, words="a < b & c"),
        due_mark(TODAY, last=days(-900), due=days(-500), limit=days(-420), words="a < b & c", deferred=days(900)),
        drift_mark([], "a < b & c"),
        drift_mark([[(0, 0), (0.5, 1.4)], [(0.6, 0)]], "a < b & c", band=[(0.6, 0, 0), (1, -0.4, 0.2)]),
    ],
)
def test_mark_is_well_formed_titled_and_fits_the_content_policy(svg: str) -> None:
    root = parsed(svg)
    assert title(root) == "a < b & c"
    assert root.get("role") == "img"
    assert fits_the_policy(root)


def test_as_found_is_hollow_as_left_is_filled_and_both_stand_at_their_errors() -> None:
    root = parsed(error_mark(0.5, -1.0, ""))
    (found,) = classed(root, "hollow")
    (left,) = classed(root, "full")
    assert found.get("cx") == "79.0"
    assert left.get("cx") == "22.0"
    assert not classed(root, "bad")
    assert not classed(root, "hatch")


def test_error_at_its_limit_is_inside_as_the_verdict_says() -> None:
    # 0.2500000000000002 against 0.25 is inside: the verdict allows 1e-9 % of span.
    assert not classed(parsed(error_mark(0.2500000000000002 / 0.25, None, "")), "bad")
    assert classed(parsed(error_mark(0.2501 / 0.25, None, "")), "bad")


def test_error_outside_is_hatched_from_the_limit_to_its_place() -> None:
    root = parsed(error_mark(1.25, None, ""))
    (hatch,) = classed(root, "hatch")
    assert starts(hatch)[0] == 98.0
    assert classed(root, "hollow", "bad")[0].get("cx") == "107.5"


def test_error_beyond_one_and_a_half_limits_becomes_an_arrow_at_the_edge() -> None:
    (arrow,) = classed(parsed(error_mark(-7.0, None, "")), "hollow")
    assert arrow.tag == "path"
    assert arrow.get("d", "").endswith("L3.0 12z")


def test_acceptance_limits_stand_inside_the_limits() -> None:
    (inner,) = classed(parsed(error_mark(None, None, "", guard=0.5)), "inner")
    assert starts(inner) == [41.0, 79.0]


def test_live_bar_grows_from_the_middle_to_the_error() -> None:
    # A third of the half width is half a limit: the scale ends at 1.5 limits.
    (right,) = classed(parsed(error_bar(0.75, "")), "grow")
    (left,) = classed(parsed(error_bar(-0.75, "")), "grow")
    assert (right.get("x"), right.get("width")) == ("50.00%", "25.00%")
    assert (left.get("x"), left.get("width")) == ("25.00%", "25.00%")


def test_live_bar_is_solid_to_the_limit_and_hatched_beyond() -> None:
    root = parsed(error_bar(1.2, ""))
    (bar,) = classed(root, "grow", "bad")
    assert bar.get("width") == "33.33%"
    strokes = [float(line.get("x1", "").rstrip("%")) for line in classed(root, "hatch")]
    assert strokes
    assert all(83 < place < 91 for place in strokes)


def test_live_bar_without_a_reading_is_the_empty_scale() -> None:
    root = parsed(error_bar(None, ""))
    assert len(classed(root, "limit")) == 2
    assert not classed(root, "grow")
    assert not classed(root, "sign")


def test_up_and_down_end_in_different_shapes() -> None:
    ends = {error_bar(0.2, "", up=up).split('class="sign"')[1] for up in (True, False, None)}
    assert len(ends) == 3


def test_today_stands_at_one_place_whatever_the_row() -> None:
    rows = [
        due_mark(TODAY, last=days(-300), due=days(65), limit=days(150), words=""),
        due_mark(TODAY, last=None, due=days(-3), limit=None, words=""),
    ]
    places = [starts(classed(parsed(row), "today")[0])[0] for row in rows]
    assert places == pytest.approx([TODAY_PLACE] * 2, abs=0.06)


def test_lateness_is_a_length() -> None:
    root = parsed(due_mark(TODAY, last=days(-395), due=days(-30), limit=days(61), words=""))
    (late,) = classed(root, "late")
    end = float(late.get("d", "").rpartition("H")[2])
    assert end - starts(late)[0] == pytest.approx(30 * DAY, abs=0.11)
    assert not classed(root, "overdue")


def test_overdue_is_hatched_from_the_end_of_grace_to_today() -> None:
    root = parsed(due_mark(TODAY, last=days(-500), due=days(-135), limit=days(-44), words=""))
    (overdue,) = classed(root, "overdue")
    assert TODAY_PLACE - starts(overdue)[0] == pytest.approx(44 * DAY, abs=0.06)
    assert classed(root, "hatch")


def test_the_limit_day_itself_is_not_overdue() -> None:
    assert not classed(parsed(due_mark(TODAY, last=days(-456), due=days(-91), limit=TODAY, words="")), "overdue")


def test_deferred_test_shows_a_bracket_to_its_limit_and_no_lateness() -> None:
    root = parsed(due_mark(TODAY, last=days(-500), due=days(-135), limit=days(-44), words="", deferred=days(60)))
    assert not classed(root, "overdue")
    assert not classed(root, "late")
    bracket = [path for path in classed(root, "tick") if "H" in path.get("d", "")]
    assert len(bracket) == 1
    assert float(bracket[0].get("d", "").partition("H")[2].partition("V")[0]) == pytest.approx(
        TODAY_PLACE + 60 * DAY, abs=0.06
    )


def test_deferral_that_ran_out_is_late_again() -> None:
    root = parsed(due_mark(TODAY, last=days(-500), due=days(-135), limit=days(-44), words="", deferred=days(-1)))
    assert classed(root, "overdue")


def test_never_tested_has_a_broken_line_and_no_dot() -> None:
    root = parsed(due_mark(TODAY, last=None, due=days(-20), limit=days(-20), words=""))
    assert classed(root, "gone")
    assert not classed(root, "dot")


def test_drift_curve_restarts_at_each_stretch() -> None:
    root = parsed(drift_mark([[(0, 0), (0.2, 0.5)], [(0.3, 0), (0.6, -0.5)]], ""))
    threads = [path.get("d") for path in classed(root, "thread")]
    assert threads == ["M4.0 14.0L28.8 9.5", "M41.2 14.0L78.4 18.5"]


def test_drift_outside_is_crossed_and_inside_ends_in_a_dot() -> None:
    outside = parsed(drift_mark([[(0, 0), (1, 1.2)]], ""))
    inside = parsed(drift_mark([[(0, 0), (1, 0.9)]], ""))
    assert classed(outside, "bad")
    assert not classed(outside, "dot")
    assert classed(inside, "dot")[0].get("cx") == "128.0"


def test_prediction_band_closes_around_its_points() -> None:
    (band,) = classed(parsed(drift_mark([[(0, 0)]], "", band=[(0.5, 0, 0), (1, -0.5, 0.5)])), "band")
    assert band.get("d") == "M66.0 14.0L128.0 9.5L128.0 18.5L66.0 14.0z"


def test_template_tags_draw_the_same_marks() -> None:
    page = Template(
        "{% load marks_of_tests %}{% error_mark 0.5 None 'w' guard=0.8 %}{% error_bar 0.5 'w' up=True %}"
        "{% due_mark today last=None due=today limit=None words='w' %}{% drift_mark stretches 'w' %}"
    )
    drawn = page.render(Context({"today": TODAY, "stretches": [[(0, 0), (1, 0.5)]]}))
    assert drawn == (
        error_mark(0.5, None, "w", guard=0.8)
        + error_bar(0.5, "w", up=True)
        + due_mark(TODAY, last=None, due=TODAY, limit=None, words="w")
        + drift_mark([[(0, 0), (1, 0.5)]], "w")
    )
    assert len(tagged(parsed(f"<p>{drawn}</p>"), "title")) == 4
