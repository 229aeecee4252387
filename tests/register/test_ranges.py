"""Facts of ranges and their place in the head."""

from __future__ import annotations

import math
from typing import Any

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from register.engineering.ranges import (
    RangeStrip,
    known,
    range_facts,
    range_strip,
    span,
    static_strip,
    turndown,
)
from tests.published import case, read_json

LEVELS = [one for one in read_json("level_range_examples.json")["cases"] if "five_points" in one]

values = st.floats(-1e6, 1e6)
heads = st.tuples(values, st.floats(1.0, 1e6)).map(lambda pair: (pair[0], pair[0] + pair[1]))


@pytest.mark.parametrize("level", LEVELS, ids=lambda level: level["name"])
def test_five_points_of_published_level_ranges_lie_at_quarters_of_the_span(level: dict[str, Any]) -> None:
    # level_range_examples.json: a published worked sheet on liquid level installations.
    lrv, urv = level["LRV_mmH2O"], level["URV_mmH2O"]
    points = [lrv + share * span(lrv, urv) for share in (0.0, 0.25, 0.5, 0.75, 1.0)]
    assert points == pytest.approx(level["five_points"])


def test_the_span_of_a_published_interface_range_does_not_mind_its_sign() -> None:
    # Lessons In Industrial Instrumentation, level chapter: −16.2 to −4.68 inches of water, span 11.52.
    low, high, printed = (
        case("liii_scaling_and_level.json", f"interface {name} inWC")["expected"] for name in ("LRV", "URV", "span")
    )
    assert span(low, high) == pytest.approx(printed)
    assert span(high, low) == pytest.approx(-printed)


@pytest.mark.parametrize(
    ("lrv", "urv", "elevated", "suppressed"),
    [
        (0, 100, False, False),
        (20, 100, False, True),
        (-25, 100, True, False),
        (-100, 0, True, False),
        (-100, -20, True, False),
    ],
)
def test_elevated_and_suppressed_zero_are_told_in_the_sense_of_isa_51_1(
    lrv: float, urv: float, elevated: bool, suppressed: bool
) -> None:
    # ISA-51.1, table of range terms: 20 to 100 suppressed-zero; −25 to 100, −100 to 0, −100 to −20 elevated-zero
    # (examples from memory).
    for facts in (range_facts(lrv, urv), range_facts(urv, lrv)):
        assert (facts.elevated_zero, facts.suppressed_zero) == (elevated, suppressed)


def test_the_true_zero_of_a_wet_leg_range_lies_inside_it() -> None:
    (wet_leg,) = [level for level in LEVELS if level["name"] == "closed tank wet leg"]
    facts = range_facts(wet_leg["LRV_mmH2O"], wet_leg["URV_mmH2O"])
    assert facts.span == 5250.0  # 5000 mm × 1.05
    assert facts.zero_fraction == pytest.approx(4137.5 / 5250.0)
    assert not facts.reverse


def test_turndown_is_the_greater_limit_over_the_span() -> None:
    # Common practice, no source.
    assert turndown(0, 25, -250, 250) == 10.0
    assert turndown(25, 0, -250, 250) == 10.0
    assert turndown(-50, 0, -100, 10) == 2.0
    assert math.isnan(turndown(5, 5, 0, 250))


def test_a_range_inside_its_head_has_nothing_to_hatch() -> None:
    strip = range_strip(0, 125, -250, 250, 25)
    assert (strip.lrv, strip.urv, strip.least_span) == (0.5, 0.75, 0.05)
    assert (strip.inside_from, strip.inside_to, strip.below, strip.above) == (0.5, 0.75, 0.0, 0.0)
    assert strip.reverse is False


def test_what_lies_outside_the_head_is_measured_in_widths_of_the_head() -> None:
    strip = range_strip(260, -20, 0, 250)
    assert strip.reverse is True
    assert (strip.inside_from, strip.inside_to) == (0.0, 1.0)
    assert strip.below == pytest.approx(20 / 250)
    assert strip.above == pytest.approx(10 / 250)
    assert math.isnan(strip.least_span)


def test_a_range_wholly_outside_its_head_has_no_inside() -> None:
    strip = range_strip(300, 400, 0, 250)
    assert math.isnan(strip.inside_from) and math.isnan(strip.inside_to)
    assert strip.above == pytest.approx(100 / 250)
    assert strip.below == 0.0


def test_without_a_head_nothing_is_placed() -> None:
    strip = range_strip(0, 100, None, None)
    assert all(math.isnan(value) for value in (strip.lrv, strip.urv, strip.below, strip.above))
    assert known(strip.lrv) is None
    assert known(0.5) == 0.5


def test_static_pressures_are_fractions_of_the_rating() -> None:
    strip = static_strip(100.0, 40.0, 110.0)
    assert (strip.operating, strip.design) == (0.4, 1.1)
    assert strip.beyond == pytest.approx(0.1)
    assert static_strip(100.0, 40.0, None).beyond == 0.0
    assert math.isnan(static_strip(None, 40.0, 50.0).operating)
    assert math.isnan(static_strip(100.0, None, None).beyond)


@given(values, values, heads)
def test_the_pieces_of_a_strip_add_up_to_the_range(lrv: float, urv: float, head: tuple[float, float]) -> None:
    strip = range_strip(lrv, urv, *head)
    inside = 0.0 if math.isnan(strip.inside_from) else strip.inside_to - strip.inside_from
    whole = abs(urv - lrv) / (head[1] - head[0])
    assert inside + strip.below + strip.above == pytest.approx(whole, rel=1e-9, abs=1e-6)


@given(values, values, heads)
def test_reversing_a_range_changes_its_direction_only(lrv: float, urv: float, head: tuple[float, float]) -> None:
    there, back = range_strip(lrv, urv, *head), range_strip(urv, lrv, *head)
    assert (there.lrv, there.urv, there.below, there.above) == (back.urv, back.lrv, back.below, back.above)
    assert np.array_equal([there.inside_from, there.inside_to], [back.inside_from, back.inside_to], equal_nan=True)
    assert lrv == urv or there.reverse != back.reverse


@given(st.lists(st.tuples(values, values, heads), min_size=1, max_size=8), st.floats(1e-3, 1e3))
def test_a_fleet_in_any_unit_is_placed_as_its_tags_are(
    rows: list[tuple[float, float, tuple[float, float]]], scale: float
) -> None:
    lrv, urv = (np.array([row[i] for row in rows]) * scale for i in (0, 1))
    low, high = (np.array([row[2][i] for row in rows]) * scale for i in (0, 1))
    together = range_strip(lrv, urv, low, high, high - low)
    for index, (first, second, head) in enumerate(rows):
        alone = range_strip(first, second, *head, head[1] - head[0])
        for name in RangeStrip.__slots__:
            assert np.asarray(getattr(together, name))[index] == pytest.approx(
                getattr(alone, name), rel=1e-6, abs=1e-6, nan_ok=True
            )
