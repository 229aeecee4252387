"""Numbers and dates as shown: signs, decimals, alignment, ages. Expectations follow from the wording of the look."""

from __future__ import annotations

from datetime import UTC, date, datetime
from decimal import Decimal

import pytest
from django.template import Context, Template

from register.figures import age, ago, aligned, figure, iso, signed, typed, with_unit

TODAY = date(2026, 3, 21)


@pytest.mark.parametrize(
    "value, decimals, shown",
    [
        (12.5, 3, "12.500"),
        (-0.25, 2, "−0.25"),
        (-0.001, 2, "0.00"),
        (Decimal("4.0"), 1, "4.0"),
        (7, 0, "7"),
        (None, 2, "–"),
        (float("nan"), 2, "–"),
    ],
)
def test_figure_has_fixed_decimals_and_a_true_minus(value: float | None, decimals: int, shown: str) -> None:
    assert figure(value, decimals) == shown


@pytest.mark.parametrize(
    "value, shown",
    [(0.25, "+0.25"), (-0.1, "−0.10"), (0.0, "0.00"), (0.004, "0.00"), (-0.004, "0.00"), (None, "–")],
)
def test_errors_carry_their_sign_and_a_rounded_zero_carries_none(value: float | None, shown: str) -> None:
    assert signed(value, 2) == shown


@pytest.mark.parametrize(
    "text, filled",
    [("12.5", "00"), ("12", ".000"), ("12.", "000"), ("-0,25", "0"), ("12.0000", ""), ("n/a", ""), ("−3.1", "00")],
)
def test_text_as_typed_is_filled_to_one_decimal_line_without_gaining_digits(text: str, filled: str) -> None:
    shown = aligned(text, 3)
    seen, _, unseen = shown.partition('<span class="pad" aria-hidden="true">')
    assert seen == text.replace("-", "−")
    assert unseen.removesuffix("</span>") == filled


def test_typed_text_keeps_its_digits_and_gains_a_true_minus() -> None:
    assert typed("-1.50") == "−1.50"
    assert typed("12.000") == "12.000"
    assert typed("") == "–"


def test_aligned_text_is_escaped() -> None:
    assert aligned("<b>1</b>", 2) == "&lt;b&gt;1&lt;/b&gt;"
    assert aligned("", 2) == "–"


@pytest.mark.parametrize(
    "day, words",
    [
        (date(2026, 3, 21), "today"),
        (date(2026, 3, 20), "yesterday"),
        (date(2026, 3, 22), "tomorrow"),
        (date(2026, 3, 9), "12 days ago"),
        (date(2026, 4, 18), "in 4 weeks"),
        (date(2025, 1, 21), "14 months ago"),
        (date(2032, 3, 21), "in 6 years"),
        (None, ""),
    ],
)
def test_age_stands_in_words(day: date | None, words: str) -> None:
    assert ago(day, TODAY) == words


def test_a_moment_counts_as_its_day() -> None:
    assert ago(datetime(2026, 3, 20, 23, 59, tzinfo=UTC), TODAY) == "yesterday"
    assert iso(datetime(2026, 3, 20, 23, 59, tzinfo=UTC)) == "2026-03-20"
    assert iso(None) == "–"
    assert age(1) == "1 day"


def test_unit_follows_a_thin_space_and_is_escaped() -> None:
    assert with_unit(12.5, 1, "inH2O") == '<span class="nowrap">12.5\u2009<span class="unit">inH2O</span></span>'
    assert "&lt;" in with_unit(1, 0, "<x>")
    assert with_unit(None, 1, "kPa") == "–"


def test_templates_use_the_same_words() -> None:
    page = Template(
        "{% load figures %}{{ e|signed:2 }} {{ p|figure:1 }} {{ d|ago:today }} {{ d|iso }} {{ t|aligned:2 }}"
    )
    shown = page.render(Context({"e": 0.5, "p": -2.0, "d": date(2026, 3, 9), "today": TODAY, "t": "1.25"}))
    assert shown == "+0.50 −2.0 12 days ago 2026-03-09 1.25"
