"""The plot of a test crosses the readings that its verdict finds outside, and no other.

Limits here are I(p − m) and I(p + m) of methods.md §1: at p = 10 kPa on 0 to 100 kPa, square root, ±2 kPa gives
100·(√0.08 − √0.10) = −3.339 and 100·(√0.12 − √0.10) = +3.018 % of span.
"""

from __future__ import annotations

import math

import pytest

from calibration.contexts.test import plot_of
from calibration.models import Record
from register.models import Tag
from tests.calibration.rooted import flow_tag, read
from tests.calibration.scheduled import a_test, day
from tests.drawing import parsed, tagged

IDEAL = 100 * math.sqrt(0.10)


def plot(tag: Tag, error: float) -> tuple[Record, str]:
    record = a_test(tag, day("2026-03-09"), runs=read({0: IDEAL + error}, on="2026-03-09"))
    record.refresh_from_db()
    svg = plot_of(record)
    assert svg is not None
    return record, svg


@pytest.mark.parametrize(
    ("error", "verdict"),
    [(-3.250, "pass"), (-3.330, "pass"), (-3.345, "fail"), (3.010, "pass"), (3.025, "fail")],
)
def test_the_plot_agrees_with_the_verdict_where_limits_differ_above_and_below(
    tag: Tag, error: float, verdict: str
) -> None:
    flow = flow_tag(tag.area, mpe_form="absolute", mpe_percent="", mpe_input="2", input_unit="kPa", as_left_percent="")
    record, svg = plot(flow, error)
    assert record.test.as_found_verdict == verdict
    said = {"".join(word.itertext()).strip() for word in tagged(parsed(svg), "text")}
    assert ("outside" in said) is (verdict == "fail")
    assert ("plot-stroke-outside" in svg) is (verdict == "fail")


def test_both_limits_are_drawn_as_the_curves_they_are(tag: Tag) -> None:
    """The lower curve falls further below zero at 10 kPa than the upper one rises above it."""
    flow = flow_tag(tag.area, mpe_form="absolute", mpe_percent="", mpe_input="2", input_unit="kPa", as_left_percent="")
    _, svg = plot(flow, 0.0)
    paths = [path for path in tagged(parsed(svg), "path") if path.get("clip-path")]
    zero = next(path for path in paths if path.get("stroke-width") == "0.8")
    lower, upper = (path for path in paths if path.get("stroke-width") == "1.8")
    at_zero, at_lower, at_upper = (float(path.get("d", "").split()[2]) for path in (zero, lower, upper))
    expected = (math.sqrt(0.10) - math.sqrt(0.08)) / (math.sqrt(0.12) - math.sqrt(0.10))
    assert (at_lower - at_zero) / (at_zero - at_upper) == pytest.approx(expected, rel=1e-3)
    assert min(path.get("d", "").count("L") for path in (lower, upper)) > 20
