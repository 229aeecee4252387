"""Tolerances in the forms in which they are stated, and the output limits they mean."""

from __future__ import annotations

import json

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from calibration.metrology.signal import BelowCut, Signal, Transfer
from calibration.metrology.tolerance import Form, Quantity, Tolerance

RANGE = Signal(0, 200, unit="kPa")
FLOW = Signal(0, 125, Transfer.SQUARE_ROOT, unit="kPa")

FIGURE = st.floats(0.01, 5.0)
PLAIN = st.one_of(
    st.builds(Tolerance.of_span, FIGURE),
    st.builds(Tolerance.absolute, FIGURE),
    st.builds(Tolerance.of_reading, FIGURE, st.floats(0.0, 2.0)),
)
ANY = st.one_of(PLAIN, st.builds(Tolerance.larger, PLAIN, PLAIN), st.builds(Tolerance.sum_of, PLAIN, PLAIN))


def test_percent_of_span_is_the_same_at_every_point() -> None:
    limits = Tolerance.of_span(0.25).limits([0.0, 100.0, 200.0], RANGE)
    assert list(limits.lower) == pytest.approx([-0.25] * 3)
    assert list(limits.upper) == pytest.approx([0.25] * 3)
    assert list(limits.upper_ma) == pytest.approx([4.04, 12.04, 20.04])


def test_percent_of_reading_grows_with_the_reading_above_its_floor() -> None:
    tolerance = Tolerance.of_reading(0.5, floor=0.3)
    assert list(tolerance.limit([0.0, 50.0, 60.0, 100.0, -100.0], RANGE)) == pytest.approx([0.3, 0.3, 0.3, 0.5, 0.5])
    assert list(tolerance.limits([100.0], RANGE).upper) == pytest.approx([0.25])


def test_an_input_tolerance_has_the_output_limits_of_the_inputs_beside_it() -> None:
    """The definition: limits I(p − m) and I(p + m), exact for square root; at zero the lower one is the held
    output.
    """
    limits = Tolerance.absolute(1.0).limits([0.0, 50.0], FLOW)
    assert list(limits.upper_ma) == pytest.approx([4 + 16 * np.sqrt(1 / 125), 4 + 16 * np.sqrt(51 / 125)])
    assert list(limits.lower_ma) == pytest.approx([4.0, 4 + 16 * np.sqrt(49 / 125)])
    assert -limits.lower[1] > limits.upper[1]


def test_the_larger_and_the_sum_of_two_are_taken_point_by_point() -> None:
    larger = Tolerance.stated("larger", percent=0.25, amount=1.0)
    both = Tolerance.stated("sum", percent=0.25, amount=1.0)
    assert list(larger.limits([0.0, 200.0], RANGE).upper) == pytest.approx([0.5, 0.5])
    assert list(both.limits([0.0, 200.0], RANGE).upper) == pytest.approx([0.75, 0.75])
    inputs = Tolerance.larger(Tolerance.of_reading(1.0), Tolerance.absolute(1.5))
    assert list(inputs.limit([100.0, 200.0], RANGE)) == pytest.approx([1.5, 2.0])
    total = Tolerance.sum_of(Tolerance.of_reading(1.0), Tolerance.absolute(1.5))
    assert list(total.limit([100.0, 200.0], RANGE)) == pytest.approx([2.5, 3.5])


def test_a_tolerance_is_judged_in_the_quantity_in_which_it_is_stated() -> None:
    assert Tolerance.of_span(1).quantity is Quantity.OUTPUT
    assert Tolerance.of_reading(1).quantity is Quantity.INPUT
    assert Tolerance.absolute(1).quantity is Quantity.INPUT
    assert Tolerance.stated("sum", 1, 1).quantity is Quantity.OUTPUT
    assert Tolerance.sum_of(Tolerance.of_reading(1), Tolerance.absolute(1)).quantity is Quantity.INPUT


@given(ANY, st.floats(0, 120), st.booleans())
def test_limits_enclose_the_ideal_and_a_wider_tolerance_encloses_a_narrower(
    tolerance: Tolerance, percent: float, root: bool
) -> None:
    signal = FLOW if root else Signal(50, -30)
    p = signal.input_of_percent(percent)
    limits = tolerance.limits(p, signal)
    wider = tolerance.limits(p, signal, widen=0.1)
    assert limits.lower_ma <= limits.ideal_ma + 1e-12 <= limits.upper_ma + 2e-12
    assert wider.lower_ma <= limits.lower_ma + 1e-12
    assert wider.upper_ma >= limits.upper_ma - 1e-12


@given(ANY, st.floats(1, 99))
def test_on_a_linear_range_the_limits_are_even_and_an_input_tolerance_is_its_share_of_span(
    tolerance: Tolerance, percent: float
) -> None:
    reverse = Signal(50, -30)
    p = float(reverse.input_of_percent(percent))
    limits = tolerance.limits(p, reverse)
    assert -float(limits.lower) == pytest.approx(float(limits.upper), abs=1e-9)
    if tolerance.quantity is Quantity.INPUT:
        assert float(limits.upper) == pytest.approx(float(tolerance.limit(p, reverse)) / 80.0 * 100.0)


def test_a_tolerance_drawn_in_to_nothing_leaves_no_limits() -> None:
    assert np.isnan(Tolerance.of_span(0.25).limits(100.0, RANGE, widen=-0.3).upper_ma)
    assert np.isnan(Tolerance.absolute(0.5).limits(100.0, RANGE, widen=-0.6).upper_ma)
    assert Tolerance.absolute(0.5).limits(100.0, RANGE, widen=-0.1).upper == pytest.approx(0.2)


def test_limits_follow_the_low_cut() -> None:
    held = Signal(0, 100, Transfer.SQUARE_ROOT, low_cut_percent=1.0, below_cut=BelowCut.ZERO)
    limits = Tolerance.absolute(0.5).limits(1.2, held)
    assert limits.lower_ma == 4.0
    assert limits.upper_ma == pytest.approx(4 + 16 * np.sqrt(0.017))


def test_tolerances_are_said_in_words() -> None:
    assert Tolerance.of_span(0.25).words() == "±0.25 % of span"
    assert Tolerance.of_reading(0.5, 0.2).words("kPa") == "±0.5 % of reading, at least 0.2 kPa"
    assert Tolerance.stated("larger", 0.25, 1).words("kPa") == "the larger of ±0.25 % of span and ±1 kPa"
    assert Tolerance.stated("sum", 0.25, 1).words("kPa") == "±0.25 % of span plus ±1 kPa"
    assert Tolerance.absolute(3).words() == "±3 (input units)"


@given(ANY)
def test_a_tolerance_kept_and_read_again_is_the_same(tolerance: Tolerance) -> None:
    assert Tolerance.from_dict(json.loads(json.dumps(tolerance.as_dict()))) == tolerance


@pytest.mark.parametrize(
    ("content", "words"),
    [
        (lambda: Tolerance.of_span(0.0), "must be above zero"),
        (lambda: Tolerance.of_span(-1.0), "zero or more"),
        (lambda: Tolerance.absolute(float("nan")), "zero or more"),
        (lambda: Tolerance(Form.SUM, first=Tolerance.of_span(1)), "two plain tolerances"),
        (lambda: Tolerance(Form.SPAN, 1.0, first=Tolerance.of_span(1)), "has parts"),
        (lambda: Tolerance.stated("sum", 0.25, 0.0), "must be above zero"),
        (lambda: Tolerance.stated("of course", 1.0), "of course"),
        (lambda: Tolerance.from_dict({"form": "sum"}), "not the content of a tolerance"),
    ],
)
def test_what_is_no_tolerance_is_refused_in_words(content: object, words: str) -> None:
    with pytest.raises(ValueError, match=words):
        content()  # type: ignore[operator]
