"""What holds for the limit checks of every tag, sound or not, alone or in a fleet."""

from __future__ import annotations

import re
from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from register.engineering.findings import CHECKS, Finding, Severity
from register.engineering.limits import TagInputs, check_all
from register.engineering.margins import range_margins, severity_codes, span_margins
from tests.register.limit_cases import any_inputs

NUMBER = re.compile(r"-?\d+(?:\.\d+)?")
MIRRORED = {"range_lower": "range_upper", "range_upper": "range_lower"}

pressures = st.floats(-1e7, 1e7)


def by_check(inputs: TagInputs) -> dict[str, Finding]:
    return {found.check: found for found in check_all(inputs)}


def add_again(line: str) -> None:
    """Work out the left side of "a − b = c unit" from the text alone and compare it with the right side."""
    left, right = line.rsplit(" = ", 1)
    left = left.rpartition(": ")[2].replace("−", "-").replace("×", "*")
    left = re.sub(r"\|(.*)\|", r"abs(\1)", left)
    assert set(re.sub("abs", "", left)) <= set("0123456789.+-*/() "), left
    worked_out = float(eval(left, {"__builtins__": {}}, {"abs": abs}))  # digits and signs only, asserted above
    printed = NUMBER.match(right.replace("−", "-"))
    assert printed is not None, line
    result = float(printed[0]) / (100.0 if right.endswith("%") else 1.0)
    operands = [abs(float(number)) for number in NUMBER.findall(left)]
    decimals = max(len(number.partition(".")[2]) for number in [*NUMBER.findall(left), printed[0]])
    rounding = 2.0 * 10.0**-decimals
    if "/" in left:  # a quotient carries the relative rounding of its parts, two digits at least
        rounding = 0.06 * abs(result) + (0.0006 if right.endswith("%") else 1e-4 * max(operands))
    assert worked_out == pytest.approx(result, abs=rounding), line


@given(any_inputs)
def test_every_check_answers_and_fits_its_row(inputs: TagInputs) -> None:
    found = check_all(inputs)
    assert [one.check for one in found] == list(CHECKS)
    for one in found:
        assert one.sentence.endswith((".", "…")) and one.title
        assert max(len(one.sentence), len(one.arithmetic)) <= 400
        assert max(len(one.demanded_source), len(one.limit_source)) <= 120
        assert len(one.percent_of) <= 60
        assert (one.severity is Severity.CANNOT_CHECK) == bool(one.missing)


@given(any_inputs)
def test_every_line_of_arithmetic_can_be_added_again(inputs: TagInputs) -> None:
    for one in check_all(inputs):
        for line in filter(None, one.arithmetic.split("; ")):
            if " = " in line:
                add_again(line)


@given(any_inputs)
def test_severity_and_margin_agree(inputs: TagInputs) -> None:
    for one in check_all(inputs):
        if one.margin_si is None:
            continue
        assert (one.margin_si < 0) == (one.severity is Severity.VIOLATION)
        assert one.demanded_si is not None and one.limit_si is not None
        assert abs(one.margin_si) == pytest.approx(
            abs(one.demanded_si - one.limit_si), abs=1e-9 * abs(one.limit_si) + 1e-9
        )
        if one.margin_percent is not None:
            assert (one.margin_percent < 0) == (one.margin_si < 0)
        said = one.sentence
        assert ("exactly at" in said) == (one.margin_si == 0)


@given(any_inputs, st.sampled_from(["Pa", "MPa", "inH2O_4C", "atm"]), st.sampled_from(["degC", "degF", "K"]))
def test_the_unit_in_which_people_look_changes_no_finding(inputs: TagInputs, pressure: str, temperature: str) -> None:
    other = replace(
        inputs,
        process=replace(inputs.process, pressure_unit=pressure, temperature_unit=temperature),
        surroundings=replace(inputs.surroundings, temperature_unit=temperature),
        head=inputs.head and replace(inputs.head, unit=pressure),
        type=inputs.type and replace(inputs.type, pressure_unit=pressure, temperature_unit=temperature),
        range=inputs.range and replace(inputs.range, unit=pressure),
    )
    for here, there in zip(check_all(inputs), check_all(other), strict=True):
        assert (here.severity, here.margin_si, here.margin_percent) == (
            there.severity,
            there.margin_si,
            there.margin_percent,
        )


@given(any_inputs)
def test_reversing_the_range_leaves_every_margin(inputs: TagInputs) -> None:
    if inputs.range is None:
        return
    reverse = replace(inputs, range=replace(inputs.range, lrv_si=inputs.range.urv_si, urv_si=inputs.range.lrv_si))
    there, back = by_check(inputs), by_check(reverse)
    for check in CHECKS:
        assert (there[check].severity, there[check].margin_si) == (back[check].severity, back[check].margin_si)


@given(any_inputs)
def test_exchanging_the_sides_exchanges_the_ends_of_the_range(inputs: TagInputs) -> None:
    setting, head = inputs.range, inputs.head
    if setting is None or head is None or head.reference != setting.reference:
        return
    assert head.lrl_si is not None and head.url_si is not None
    exchanged = replace(
        inputs,
        range=replace(setting, lrv_si=-setting.lrv_si, urv_si=-setting.urv_si),
        head=replace(head, lrl_si=-head.url_si, url_si=-head.lrl_si),
    )
    there, back = by_check(inputs), by_check(exchanged)
    for check in ("range_lower", "range_upper", "least_span", "greatest_span"):
        mirror = back[MIRRORED.get(check, check)]
        assert (there[check].severity, there[check].margin_si) == (mirror.severity, mirror.margin_si)
        assert there[check].margin_percent == mirror.margin_percent


@given(st.lists(st.tuples(pressures, pressures, pressures, pressures), min_size=1, max_size=10))
def test_a_fleet_of_ranges_has_the_margins_of_its_tags(rows: list[tuple[float, float, float, float]]) -> None:
    lrv, urv, low, high = np.array(rows).T
    ranges, spans = range_margins(lrv, urv, low, high), span_margins(lrv, urv, low, high)
    for index, row in enumerate(rows):
        alone, span_alone = range_margins(*row), span_margins(*row)
        assert (ranges.lower[index], ranges.upper[index]) == (alone.lower, alone.upper)
        assert (spans.least[index], spans.greatest[index]) == (span_alone.least, span_alone.greatest)


@given(
    st.lists(
        st.tuples(st.one_of(st.just(float("nan")), pressures), st.floats(0.0, 1e9), st.floats(0.0, 1e6)),
        min_size=1,
        max_size=10,
    )
)
def test_a_fleet_is_classified_as_its_tags_are(rows: list[tuple[float, float, float]]) -> None:
    together = severity_codes(*np.array(rows).T)
    assert together.tolist() == [severity_codes(*row) for row in rows]


def test_a_margin_is_classified_by_its_size() -> None:
    margins = [10.0, 5.0, 4.9, 0.0, -1e-8, -1.0, float("nan")]
    assert severity_codes(np.array(margins), 100.0, 5.0).tolist() == [0, 0, 2, 2, 2, 3, 1]
    assert severity_codes(0.0, 100.0) == 0
    assert severity_codes(None, 100.0) == 1
