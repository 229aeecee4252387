"""Past tests as old paper has them: without points, from before the register, or not made at all; drift follows."""

from __future__ import annotations

import datetime
from io import StringIO

import pytest
from django.core.management import call_command

from calibration.contexts import drift as drift_page
from calibration.metrology.pointlist import points_from_applied
from calibration.models import Reading, Test
from calibration.opening import current_requirement
from calibration.provision import provide_defaults
from calibration.queries import drifting
from calibration.records.basis import Basis, StatedTolerance
from calibration.records.judging import Point, judge
from calibration.views.import_tests import tell
from register.auditing import Actor
from register.models import Plant, Tag, User
from tests.calibration.telling import (
    BEGAN,
    Line,
    as_left,
    make_history_tag,
    make_standards,
    readings,
    said,
    told_tests,
    transcribed,
)
from tests.cast import Cast, make_requirement, make_tag

UNREAD: Line = {"Tag": "PT-2041", "Test date": "2022-05-02", "Why it could not be tested": "isolation valve passing"}


@pytest.fixture
def plant(cast: Cast) -> Plant:
    """PT-2041 at 0 to 10 bar and 0.5 % since March 2021, fitted two years before anything of it is known."""
    provide_defaults(by=Actor(None), plant=cast.plant)
    tag = make_history_tag(cast)
    tag.fittings.update(fitted_on="2019-01-01")
    nine = cast.plant.point_lists.get(name="Five points, up and down")
    make_requirement(tag, effective_from=BEGAN, point_list=nine)
    make_standards(cast.plant)
    return cast.plant


@pytest.fixture
def engineer(cast: Cast) -> User:
    return cast.engineer


def without(lines: list[Line], *names: str) -> list[Line]:
    return [{name: text for name, text in line.items() if name not in names} for line in lines]


def sentences(plant: Plant, *lines: Line) -> list[str]:
    return list(tell(told_tests(plant, *lines)).sentences)


def test_points_that_were_not_written_down_are_named_from_the_inputs(plant: Plant, engineer: User) -> None:
    lines = without(readings(shift=0.02), "Nominal (%)")
    for line, off in zip(lines, (0.01, -0.02, 0.0, 0.03, -0.01, 0.02, 0.0, -0.03, 0.01), strict=True):
        applied = float(line["Applied"]) + off
        line |= {"Applied": f"{applied:.3f}", "Measured": f"{4 + 1.6 * applied:.3f}"}
    transcribed(plant, engineer, *lines)
    taken = list(Reading.objects.values_list("nominal_percent", "direction"))
    percents = [10.0 * float(line["Applied"]) for line in lines]
    assert [nominal for nominal, _ in taken] == points_from_applied(percents).tolist()
    assert taken == [*((p, "up") for p in (0, 25, 50, 75, 100)), *((p, "down") for p in (75, 50, 25, 0))]
    record = Test.objects.select_related("current_record").get().current_record
    assert record is not None
    assert record.basis["points_named_from_inputs"] == ["as-found"]
    assert record.basis["points"] == "0 25 50 75 100 75 50 25 0", "the list that was asked for was followed"


def test_the_verdict_kept_is_the_one_that_the_arithmetic_gives(plant: Plant, engineer: User) -> None:
    shifts = (0.0, 0.08, 0.081, 0.12)
    lines = [line for year, shift in enumerate(shifts, 2021) for line in readings(day=f"{year}-05-06", shift=shift)]
    transcribed(plant, engineer, *lines)
    tests = Test.objects.select_related("current_record").order_by("tested_on")
    for test in tests:
        assert test.current_record is not None
        basis = Basis.read(test.current_record, test.current_record.head_id)
        points = [
            Point(float(row.applied), float(row.measured), 1 if row.direction == "up" else -1, row.nominal_percent)
            for row in Reading.objects.filter(run__record=test.current_record)
        ]
        judged = judge(basis, "as-found", points)
        assert test.as_found_verdict == str(judged.judgement.verdict)
        assert test.as_found_worst == pytest.approx(judged.evaluation.worst_error, abs=1e-12)
    # By hand: 0.5 % of 16 mA are 0.08 mA, and at the limit is still inside it (simple acceptance).
    assert [test.as_found_worst for test in tests] == pytest.approx([100 * shift / 16 for shift in shifts], abs=1e-9)
    assert [test.as_found_verdict for test in tests] == ["pass", "pass", "fail", "fail"]


def test_a_visit_without_a_test_keeps_its_reason(plant: Plant, engineer: User) -> None:
    transcribed(plant, engineer, UNREAD | {"Performed by": "A. Berg"}, *readings())
    test = Test.objects.select_related("current_record").get(tested_on="2022-05-02")
    assert (test.outcome, test.state, test.as_found_verdict, test.accepted) == (
        Test.Outcome.NOT_TESTED,
        Test.State.TRANSCRIBED,
        "",
        False,
    )
    assert test.current_record is not None
    assert test.current_record.answers == {"could_not_test": "isolation valve passing", "performed_by": "A. Berg"}
    again = told_tests(plant, UNREAD | {"Performed by": "A. Berg"}, *readings())
    assert (len(again.planned), again.unchanged) == (0, 2)
    assert Tag.objects.get().standing.last_accepted_on == datetime.date(2023, 5, 6)


@pytest.mark.parametrize(
    ("more", "column", "words"),
    [
        ({"Measured": "4.01"}, "Measured", "The same row says why it could not be tested: then nothing was read"),
        ({"Standard for the input": "PS-01"}, "Standard for the input", "then nothing was read with it."),
        ({"Adjusted": "yes"}, "Adjusted", "It could not be tested, but “Adjusted” says yes."),
    ],
)
def test_what_was_not_tested_has_no_readings(plant: Plant, more: Line, column: str, words: str) -> None:
    ((line, named, sentence),) = said(told_tests(plant, UNREAD | more, *readings()))
    assert (line, column in named) == (2, True), named
    assert words in sentence


def test_a_test_with_readings_could_be_tested(plant: Plant) -> None:
    told = said(told_tests(plant, *readings(day="2022-05-02"), UNREAD))
    assert [(line, words) for line, _, words in told] == [
        (11, "Other rows hold readings of this test: then it was tested.")
    ]


def test_digital_values_are_kept_and_must_be_numbers(plant: Plant, engineer: User) -> None:
    lines = readings()
    lines[1] |= {"Digital value": "2.503"}
    lines[2] |= {"Digital value": "500.4", "Digital unit": "kPa"}
    transcribed(plant, engineer, *lines)
    kept = list(Reading.objects.values_list("digital", "digital_unit", "digital_si"))
    assert kept[0] == ("", "", None)
    assert [row[:2] for row in kept[1:3]] == [("2.503", "bar"), ("500.4", "kPa")]
    assert [row[2] for row in kept[1:3]] == pytest.approx([250_300.0, 500_400.0])
    wrong = readings(day="2022-05-02")
    wrong[3] |= {"Digital value": "7.5.0"}
    ((line, column, words),) = said(told_tests(plant, *wrong))
    assert (line, "Digital value" in column) == (5, True)
    assert "7.5.0" in words


def test_a_test_older_than_range_and_requirement_is_judged_by_the_first_and_says_so(
    plant: Plant, engineer: User
) -> None:
    lines = [*readings(day="2019-06-01"), *readings()]
    old, recent = told_tests(plant, *lines).planned
    assert old.terms.endswith(
        "; assumed: the range, known from 2021-03-01 on and the requirement, known from 2021-03-01 on"
    )
    assert "assumed" not in recent.terms
    (assumed,) = [words for words in sentences(plant, *lines) if words.startswith("Assumed")]
    assert assumed.startswith("Assumed for 1 test, which is older than what the register knows of the tag")
    transcribed(plant, engineer, *lines)
    record = Test.objects.select_related("current_record").get(tested_on="2019-06-01").current_record
    assert record is not None
    assert record.basis["assumed"] == [
        "the range, known from 2021-03-01 on",
        "the requirement, known from 2021-03-01 on",
    ]


@pytest.mark.parametrize(
    ("levels", "lacks"),
    [
        ((50,), "0 % up, 100 % up"),
        ((0, 100), "50 % up"),
        ((50, 75, 100), "0 % up"),
        ((0, 25, 50, 75), "100 % up"),
        ((0, 1, 100), "50 % up"),
        ((0, 50, 100), ""),
        ((9, 50, 91), ""),
        ((11, 50, 89), "0 % up, 100 % up"),
    ],
)
def test_where_nothing_was_required_yet_a_run_must_cover_the_range(
    plant: Plant, engineer: User, levels: tuple[int, ...], lacks: str
) -> None:
    line = readings(day="2019-06-01")[0]
    lines = [line | {"Applied": f"{level / 10:.3f}", "Measured": f"{4 + 0.16 * level:.3f}"} for level in levels]
    for one in lines:
        del one["Nominal (%)"]
    told = transcribed(plant, engineer, *lines)
    test = Test.objects.get()
    expected = f"as-found incomplete (lacks {lacks})" if lacks else "as-found pass"
    assert ([one.verdict for one in told.planned], test.accepted) == ([expected], not lacks)
    said_so = [words for words in tell(told).sentences if words.startswith("In 1 test readings are missing")]
    assert len(said_so) == bool(lacks)


@pytest.mark.parametrize(("lowest", "verdict"), [(25.0, "pass"), (26.0, "incomplete")])
def test_of_a_square_root_a_quarter_of_the_input_is_low_enough(lowest: float, verdict: str) -> None:
    basis = Basis(
        head_id=1,
        lrv="0",
        urv="100",
        unit="mbar",
        reference="differential",
        transfer="square root",
        mpe=StatedTolerance("percent of span", percent="0.5"),
    )
    points = [Point(percent, 4 + 1.6 * percent**0.5, 1, percent) for percent in (lowest, 60.0, 100.0)]
    assert str(judge(basis, "as-found", points).judgement.verdict) == verdict


def test_what_the_file_says_itself_is_not_assumed(plant: Plant) -> None:
    terms = {"LRV": "0", "URV": "10", "Range unit": "bar", "Tolerance (%)": "1.0"}
    (planned,) = told_tests(plant, *(line | terms for line in readings(day="2019-06-01"))).planned
    assert "assumed" not in planned.content.basis.notes
    assert planned.content.basis.mpe.percent == "1.0"


def test_a_tag_of_which_nothing_is_known_needs_its_own_terms(plant: Plant) -> None:
    tag, bare = Tag.objects.get(), make_tag(plant.areas.get(), "PT-2050")
    tag.fittings.update(tag=bare)
    told = said(told_tests(plant, *(line | {"Tag": "PT-2050"} for line in readings())))
    assert told == [
        (2, "LRV", "No range of PT-2050 is known: give LRV, URV and unit in the file."),
        (2, "Tolerance (%)", "PT-2050 has no requirement: give the tolerance in the file."),
    ]


def test_the_check_counts_readings_and_verdicts(plant: Plant, engineer: User) -> None:
    transcribed(plant, engineer, *readings(day="2021-05-06"))
    lines = [
        *readings(day="2021-05-06"),
        UNREAD,
        *readings(day="2023-05-06", shift=0.12, Standard_for_the_input="PS-01"),
        *as_left(readings(day="2023-05-06")),
        *readings(day="2024-05-06"),
    ]
    plant.standards.get(name="PS-01").certificates.update(calibrated_on="2024-01-01")
    assert sentences(plant, *lines) == [
        "27 readings are new, 9 readings are recorded already.",
        "As-found: 1 fail, 1 pass.",
        "As-left: 1 pass.",
        "1 could not be tested.",
        "In 1 test a standard has no certificate on record that held on the day; that is kept as a remark.",
    ]


def test_drift_is_read_from_five_yearly_tests(plant: Plant, engineer: User) -> None:
    # The zero walks by 0.01 mA of 16 mA a year, 0.0625 % of span.
    lines = [line for year in range(5) for line in readings(day=f"{2021 + year}-05-06", shift=0.01 * year)]
    transcribed(plant, engineer, *lines)
    tag = Tag.objects.select_related("current_range", "current_fitting__transmitter__head").get()
    history = drifting.of_tag(tag)
    channel = drifting.choose(history, "zero")
    assert channel is not None
    fitting = tag.fittings.select_related("transmitter__head").get()
    found = drifting.drift(
        history,
        channel,
        transmitter_id=fitting.transmitter_id,
        terms=drifting.terms_now(tag, current_requirement(tag), fitting.transmitter.head),
        due=None,
    )
    assert len(history.pairing.pairs) == 4 and found.rate.enough
    assert found.rate.rate == pytest.approx(0.0625, rel=1e-3)
    view = drift_page.view_of(
        history, "zero", whose=str(tag), transmitter_id=fitting.transmitter_id, terms=None, due=None
    )
    assert not any("not enough data" in words for _, words in view.facts)


def test_what_was_brought_in_is_verified_like_any_record(plant: Plant, engineer: User) -> None:
    lines = [*without(readings(), "Nominal (%)"), UNREAD, *readings(day="2019-06-01"), *as_left(readings())]
    transcribed(plant, engineer, *lines[:-9])
    told = StringIO()
    call_command("verify_records", stdout=told)
    assert "Every hash and every verdict agrees." in told.getvalue()
