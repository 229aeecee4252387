"""The verdict beside a field, that of the run on the page and that of the record come from one arithmetic."""

from __future__ import annotations

import dataclasses
import random
from decimal import Decimal

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from calibration.contexts.results import result_now, result_of
from calibration.contexts.sheet import Viewer, reading_views, verdict_words
from calibration.metrology.writing import beside
from calibration.models import RunFigures, Sheet
from calibration.queries.drafts import Draft
from calibration.records.basis import Basis, StatedTolerance
from calibration.records.judging import Point, judge, judge_one
from tests.calibration.at_work import Device, run_texts, to_as_found, to_signature

BASIS = Basis(
    head_id=1,
    lrv="0",
    urv="10",
    unit="bar",
    reference="gauge",
    mpe=StatedTolerance("percent of span", percent="0.25"),
    points="0 25 50 75 100 75 50 25 0",
)
BASES = [
    BASIS,
    dataclasses.replace(BASIS, lrv="10", urv="-2"),
    dataclasses.replace(BASIS, mpe=StatedTolerance("absolute", amount="30", unit="mbar")),
    dataclasses.replace(BASIS, mpe=StatedTolerance("larger", percent="0.2", amount="0.03", unit="bar")),
    dataclasses.replace(BASIS, transfer="square root", low_cut_percent=1.0),
]


@settings(max_examples=200)
@given(
    st.sampled_from(BASES),
    st.lists(st.floats(-2, 12, allow_nan=False), min_size=9, max_size=9),
    st.lists(st.floats(3.2, 23, allow_nan=False), min_size=9, max_size=9),
)
def test_a_reading_judged_alone_equals_the_same_reading_in_its_run(
    basis: Basis, applied: list[float], measured: list[float]
) -> None:
    asked = basis.point_list()
    assert asked is not None
    points = [
        Point(p, i, int(direction), float(percent))
        for p, i, direction, percent in zip(applied, measured, asked.directions, asked.points, strict=True)
    ]
    whole = judge(basis, "as-found", points).judgement
    for place, point in enumerate(points):
        alone = judge_one(basis, "as-found", point.applied, point.measured)
        assert alone.verdicts[0] == whole.readings.verdicts[place]
        assert alone.error[0] == whole.readings.error[place]
        up = point.direction > 0
        assert result_now(basis, "as-found", point.applied, point.measured, up=up) == result_of(
            whole.readings, place, up=up
        )


@pytest.mark.parametrize("seed", range(4))
def test_the_verdict_on_the_page_is_the_verdict_on_the_record(tablet: Device, seed: int) -> None:
    errors = [random.Random(seed).choice([0.0, 0.3, 0.5, 0.51, -0.5, -0.7]) for _ in range(9)]
    to_as_found(tablet)
    tablet.type(run_texts("as-found", errors))
    draft = Draft(Sheet.objects.get())
    shown, _, why = verdict_words(draft, "as-found")
    outside = [view.result.outside for view in reading_views(draft, "as-found", Viewer(tablet.person)) if view.result]
    from calibration import sheets, signing
    from tests.calibration.at_work import answer_checklist

    sheets.close_as_found(by=tablet.by, sheet_id=tablet.sheet.pk)
    tablet.type({"adjust.choice": "not adjusted"})
    sheets.record_adjustment(by=tablet.by, sheet_id=tablet.sheet.pk)
    answer_checklist(tablet)
    signing.sign(by=tablet.by, sheet_id=tablet.sheet.pk)
    figures = RunFigures.objects.get()
    assert shown.startswith(figures.verdict)
    assert why == figures.why
    assert any(outside) == (figures.verdict == "fail")


def test_an_error_on_the_limit_is_inside_everywhere(tablet: Device) -> None:
    to_signature(tablet, (0.5,) * 9)
    draft = Draft(Sheet.objects.get())
    assert verdict_words(draft, "as-found")[0] == "pass, in tolerance"
    views = reading_views(draft, "as-found", Viewer(tablet.person))
    assert not any(view.result.outside for view in views if view.result)


def _number(text: str) -> Decimal:
    return Decimal(text.replace("−", "-").removeprefix("±"))


@pytest.mark.parametrize(
    ("basis", "applied", "measured", "error", "limit"),
    [
        # 0.0251 kPa off, with 0.025 kPa allowed.
        (
            dataclasses.replace(
                BASIS, urv="0.01", unit="MPa", mpe=StatedTolerance("absolute", amount="0.025", unit="kPa")
            ),
            0.005,
            12 + 0.0251 * 1.6,
            "+0.0000251 MPa",
            "±0.000025",
        ),
        (
            dataclasses.replace(BASIS, mpe=StatedTolerance("percent of span", percent="0.1")),
            5.0,
            12.01602,
            "+0.1001",
            "±0.1",
        ),
        (
            dataclasses.replace(BASIS, mpe=StatedTolerance("percent of span", percent="0.1")),
            5.0,
            12.016,
            "+0.100",
            "±0.1",
        ),
    ],
)
def test_the_figures_shown_give_the_verdict_beside_them(
    basis: Basis, applied: float, measured: float, error: str, limit: str
) -> None:
    result = result_now(basis, "as-found", applied, measured)
    assert (result.in_input or result.error, result.limit) == (error, limit)
    assert result.outside == (abs(_number(error.partition(" ")[0])) > _number(limit))


@given(st.floats(1e-6, 1e6), st.floats(-2, 2), st.floats(-1e-3, 1e-3))
def test_an_error_beside_its_limit_passes_it_just_where_it_is_outside(
    limit: float, share: float, little: float
) -> None:
    for error in (share * limit, (1 + little) * limit, -limit):
        shown, allowed = beside(error, limit)
        assert "e" not in shown + allowed.lower()
        if abs(abs(error) / limit - 1) > 2e-8 or error == -limit:
            assert (abs(_number(shown)) > _number(allowed)) == (abs(error) > limit)


def test_limits_that_differ_above_and_below_are_both_shown() -> None:
    """On a square root 0.1 bar more lifts the output less than 0.1 bar less lowers it."""
    basis = dataclasses.replace(
        BASIS, transfer="square root", mpe=StatedTolerance("sum", percent="0.1", amount="0.1", unit="bar")
    )
    above, below = (result_now(basis, "as-found", 1.0, 4 + 16 * (0.1**0.5 + off)) for off in (0.01, -0.01))
    # √0.11 − √0.1 = 1.543 %, √0.1 − √0.09 = 1.623 %; 0.1 % added.
    assert above.limit == below.limit == "−1.72 to +1.64"
    taken = [Point(1.0, 4 + 16 * 0.33, 1), Point(5.0, 4 + 16 * 0.5**0.5, 1), Point(10.0, 20.0, 1)]
    why = judge(dataclasses.replace(basis, points=""), "as-found", taken).judgement.why
    assert why.endswith("+1.38 % of span within +1.64 % of span.")


def test_an_output_held_at_4_ma_is_not_called_the_edge_of_the_signal() -> None:
    basis = dataclasses.replace(
        BASIS, transfer="square root", mpe=StatedTolerance("absolute", amount="0.01", unit="bar")
    )
    assert "held at 4 mA" in result_now(basis, "as-found", 0.0, 4.0).word
    assert "edge of the signal" in result_now(basis, "as-found", -0.1, 3.7).word
