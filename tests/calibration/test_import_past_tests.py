"""Past tests in a file: gathered from their readings, matched to what held on their day, recorded once."""

from __future__ import annotations

import datetime
from collections.abc import Callable
from typing import Any

import pytest
from django.core.files.uploadedfile import SimpleUploadedFile
from django.test import Client

from calibration.imports import past_tests, test_columns
from calibration.models import Reading, Record, RunFigures, Signature, StandardUse, Test
from calibration.provision import provide_defaults
from calibration.transcribing import import_tests
from register.auditing import Actor
from register.importing import ChangedMeanwhileError
from register.imports.columns import guessed
from register.models import AuditEntry, Intervention, Plant, Tag, User
from tests.calibration.telling import (
    BEGAN,
    as_left,
    make_history_tag,
    make_standards,
    readings,
    said,
    table,
    told_tests,
    transcribed,
)
from tests.cast import (
    Cast,
    make_fitting,
    make_head,
    make_range,
    make_requirement,
    make_tag,
    make_transmitter,
)


@pytest.fixture
def plant(cast: Cast) -> Plant:
    """PT-2041 at 0 to 10 bar since March 2021, 0.5 % and 0.25 % as-left from then on, every twelve months."""
    provide_defaults(by=Actor(None), plant=cast.plant)
    tag = make_history_tag(cast)
    nine = cast.plant.point_lists.get(name="Five points, up and down")
    make_requirement(tag, effective_from=BEGAN, point_list=nine)
    make_standards(cast.plant)
    return cast.plant


@pytest.fixture
def engineer(cast: Cast) -> User:
    return cast.engineer


def the_test(**which: Any) -> Test:
    return Test.objects.select_related("current_record", "fitting", "transmitter").get(**which)


def test_readings_become_a_test_judged_by_what_held_on_its_day(plant: Plant, engineer: User) -> None:
    transcribed(plant, engineer, *readings(shift=0.02))
    test = the_test()
    assert test.state == Test.State.TRANSCRIBED and test.tested_on == datetime.date(2023, 5, 6)
    assert (test.tag, test.fitting) == (Tag.objects.get(), test.transmitter.fittings.get())
    # 0.02 mA of 16 mA are 0.125 % of span, a quarter of the tolerance of 0.5 %.
    assert test.as_found_worst == pytest.approx(0.125) and test.as_found_ratio == pytest.approx(0.25)
    assert (test.as_found_verdict, test.accepted, test.adjusted) == ("pass", True, False)
    record = test.current_record
    assert record is not None and record.transcribed and record.made_by == engineer
    assert (record.lrv, record.urv, record.unit, record.reference) == ("0", "10", "bar", "gauge")
    assert record.basis["points"] == "0 25 50 75 100 75 50 25 0" and record.basis["mpe"]["percent"] == "0.5"
    assert not Signature.objects.exists(), "nobody signs what was made on paper"
    assert RunFigures.objects.get().zero_shift == pytest.approx(0.125)


def test_readings_are_kept_as_they_stand_in_the_file(plant: Plant, engineer: User) -> None:
    lines = readings()
    lines[1] |= {"Applied": "2.50", "Measured": "8.000"}
    transcribed(plant, engineer, *lines)
    second = Reading.objects.get(order=2)
    assert (second.applied, second.measured, second.nominal_percent, second.direction) == ("2.50", "8.000", 25.0, "up")
    assert list(Reading.objects.values_list("direction", flat=True)) == ["up"] * 5 + ["down"] * 4


def test_the_due_date_counts_from_the_last_accepted_test(plant: Plant, engineer: User) -> None:
    transcribed(plant, engineer, *readings(day="2022-05-02"), *readings(day="2023-05-06"))
    standing = Tag.objects.get().standing
    assert (standing.last_accepted_on, standing.due_on) == (datetime.date(2023, 5, 6), datetime.date(2024, 5, 6))


def test_as_found_and_as_left_are_two_runs_of_one_test(plant: Plant, engineer: User) -> None:
    found, left = readings(shift=0.12, Performed_by="A. Berg", Remarks="zero moved"), as_left(readings(shift=0.01))
    proposal = transcribed(plant, engineer, *found, *left)
    assert [(one.readings, one.verdict) for one in proposal.planned] == [
        ("as-found 9, as-left 9", "as-found fail, as-left pass")
    ]
    test = the_test()
    assert (test.as_found_verdict, test.as_left_verdict, test.adjusted, test.accepted) == ("fail", "pass", True, True)
    assert test.current_record is not None
    assert test.current_record.answers == {"performed_by": "A. Berg", "remarks": "zero moved"}


def test_the_same_file_a_second_time_changes_nothing(plant: Plant, engineer: User) -> None:
    lines = [*readings(shift=0.12), *as_left(readings()), *readings(day="2022-05-02")]
    transcribed(plant, engineer, *lines)
    before = (Record.objects.count(), AuditEntry.objects.count(), list(Test.objects.values_list()))
    again = transcribed(plant, engineer, *reversed(lines[18:]), *lines[:18])
    assert (len(again.planned), again.unchanged) == (0, 2)
    assert (Record.objects.count(), AuditEntry.objects.count(), list(Test.objects.values_list())) == before


def test_the_same_readings_written_otherwise_are_recognised(plant: Plant, engineer: User) -> None:
    transcribed(plant, engineer, *readings())
    short = [line | {"Applied": f"{float(line['Applied']):g}", "Applied unit": "bar"} for line in readings()]
    kilopascals = [
        line | {"Applied": f"{float(line['Applied']) * 100:g}", "Applied unit": "kPa"} for line in readings()
    ]
    assert told_tests(plant, *short).unchanged == 1
    assert told_tests(plant, *kilopascals).planned == []


def test_another_test_of_a_recorded_day_must_be_told_apart(plant: Plant, engineer: User) -> None:
    transcribed(plant, engineer, *readings())
    ((line, column, words),) = said(told_tests(plant, *readings(shift=0.03)))
    assert (line, column) == (2, "B “Test date”")
    assert "is recorded already, with other readings, and a record is never changed by an import" in words
    transcribed(plant, engineer, *readings(shift=0.03, Test_number="2"))
    assert Test.objects.count() == 2


def test_two_tests_of_one_day_are_told_apart_by_their_number(plant: Plant, engineer: User) -> None:
    transcribed(plant, engineer, *readings(Test_number="morning"), *readings(shift=0.03, Test_number="evening"))
    assert Test.objects.count() == 2


def test_what_was_fitted_on_the_day_is_found(cast: Cast, plant: Plant, engineer: User) -> None:
    tag = Tag.objects.get()
    old = make_transmitter(plant, serial="QG-001")
    make_fitting(tag, old, fitted_on=datetime.date(2020, 2, 1), removed_on=BEGAN)
    make_range(tag, "0", "16", effective_from=datetime.date(2020, 2, 1))
    make_range(tag, "0", "10", effective_from=datetime.date(2021, 6, 1))
    make_requirement(tag, effective_from=datetime.date(2020, 2, 1), mpe_percent="1.0", as_left_percent="")
    transcribed(plant, engineer, *readings(day="2020-08-01"))
    test = the_test(tested_on="2020-08-01")
    assert test.transmitter == old and test.fitting == old.fittings.get()
    assert test.current_record is not None
    assert (test.current_record.urv, test.current_record.basis["mpe"]["percent"]) == ("16", "1.0")


def test_a_serial_number_alone_leads_to_the_tag_where_it_was(plant: Plant, engineer: User) -> None:
    lines = [
        {name: text for name, text in line.items() if name != "Tag"} | {"Serial number": "qg-100"}
        for line in readings()
    ]
    transcribed(plant, engineer, *lines)
    assert the_test().tag == Tag.objects.get()


def test_a_transmitter_in_stores_is_tested_on_the_bench(plant: Plant, engineer: User) -> None:
    make_transmitter(plant, serial="SP-1")
    lines = [
        {name: text for name, text in line.items() if name != "Tag"} | {"Serial number": "SP-1"} for line in readings()
    ]
    assert {(column, words) for _, column, words in said(told_tests(plant, *lines))} == {
        (
            "LRV",
            "Quillhaven Gauge Works SP-1 was fitted nowhere on 2023-05-06: give LRV, URV and unit of the test in the "
            "file.",
        ),
        ("Tolerance (%)", "There is no requirement on 2023-05-06: give the tolerance in the file."),
    }
    terms = {"LRV": "0", "URV": "10", "Range unit": "bar", "Tolerance (%)": "0.2"}
    transcribed(plant, engineer, *(line | terms for line in lines))
    test = the_test()
    assert (test.tag, test.fitting, test.transmitter.serial) == (None, None, "SP-1")


def test_range_and_tolerance_in_the_file_win_and_are_kept(plant: Plant, engineer: User) -> None:
    terms = {"LRV": "0", "URV": "1000", "Range unit": "kPa", "Tolerance (%)": "0.1", "As-left tolerance (%)": "0.05"}
    lines = readings(shift=0.02, Applied_unit="bar")
    transcribed(plant, engineer, lines[0] | terms, *lines[1:])
    test = the_test()
    record = test.current_record
    assert record is not None
    assert (record.urv, record.unit, record.reference) == ("1000", "kPa", "gauge")
    assert record.basis["mpe"] == {"form": "percent of span", "percent": "0.1", "amount": "", "unit": ""}
    assert record.basis["range"] == record.basis["tolerance"] == "from the file of the past test"
    assert test.as_found_verdict == "fail", "0.125 % against 0.1 %"


def test_the_head_of_the_day_is_kept(plant: Plant, engineer: User) -> None:
    device = Tag.objects.get().fittings.get().transmitter
    before, after = make_head(device.type), device.head
    Intervention.objects.create(
        transmitter=device,
        done_on="2023-08-01",
        kind="new head",
        head_before=before,
        head_after=after,
        reason="wider range",
    )
    transcribed(plant, engineer, *readings(day="2023-05-06"), *readings(day="2023-09-01"))
    heads = list(Record.objects.order_by("position").values_list("head_id", flat=True))
    assert heads == [before.pk, after.pk]


def test_a_run_that_lacks_points_of_the_list_of_its_day_is_incomplete(plant: Plant, engineer: User) -> None:
    """IEC 61298-2 runs go up and down; five readings up of a list of nine say nothing of the way down."""
    proposal = transcribed(plant, engineer, *readings()[:5])
    assert [one.verdict for one in proposal.planned] == [
        "as-found incomplete (lacks 75 % down, 50 % down, 25 % down, 0 % down)"
    ]
    test = the_test()
    assert (test.as_found_verdict, test.accepted) == ("incomplete", False)
    assert test.current_record is not None and test.current_record.basis["points"] == "0 25 50 75 100 75 50 25 0"
    assert Tag.objects.get().standing.due_on == BEGAN, "never tested"


def test_a_run_with_gaps_that_is_outside_fails_all_the_same(plant: Plant, engineer: User) -> None:
    transcribed(plant, engineer, *readings(shift=0.12)[:5])
    assert (the_test().as_found_verdict, the_test().accepted) == ("fail", False)


def test_more_readings_than_were_asked_for_are_no_fault(plant: Plant, engineer: User) -> None:
    lines = readings()
    transcribed(
        plant,
        engineer,
        *lines[:2],
        {**lines[1], "Nominal (%)": "40", "Applied": "4.000", "Measured": "10.400"},
        *lines[2:],
    )
    assert (the_test().as_found_verdict, the_test().accepted) == ("pass", True)


def test_cycles_and_directions_are_found_from_the_readings(plant: Plant, engineer: User) -> None:
    lines = [{name: text for name, text in line.items() if name != "Nominal (%)"} for line in readings() * 2]
    transcribed(plant, engineer, *lines)
    cycles = list(Reading.objects.values_list("cycle", "direction"))
    assert cycles == [(1, "up")] * 5 + [(1, "down")] * 4 + [(2, "up")] * 5 + [(2, "down")] * 4


def test_an_order_puts_the_readings_in_place(plant: Plant, engineer: User) -> None:
    lines = [line | {"Order": str(place)} for place, line in enumerate(readings(), start=1)]
    transcribed(plant, engineer, *reversed(lines))
    assert list(Reading.objects.values_list("nominal_percent", flat=True)) == [0, 25, 50, 75, 100, 75, 50, 25, 0]


def test_standards_are_kept_with_the_certificate_of_the_day(plant: Plant, engineer: User) -> None:
    standards = {"Standard for the input": "ps-01", "Standard for the output": "MA-01"}
    transcribed(plant, engineer, *(line | standards for line in readings()))
    uses = {use.part: use for use in StandardUse.objects.select_related("standard", "certificate")}
    assert {part: use.standard.name for part, use in uses.items()} == {"applied": "PS-01", "measured": "MA-01"}
    assert uses["applied"].certificate == uses["applied"].standard.certificates.get()
    assert uses["applied"].exception == ""


def test_a_standard_without_a_certificate_of_that_day_is_kept_with_a_remark(plant: Plant, engineer: User) -> None:
    standard = plant.standards.get(name="PS-01")
    standard.certificates.update(calibrated_on="2024-01-01")
    transcribed(plant, engineer, *(line | {"Standard for the input": "PS-01"} for line in readings()))
    use = StandardUse.objects.get()
    assert (use.certificate, use.exception) == (None, "Transcribed: no certificate of that day is registered.")


def test_a_file_of_semicolons_has_decimal_commas(plant: Plant, engineer: User) -> None:
    lines = [
        line | {name: line[name].replace(".", ",") for name in ("Applied", "Measured")} for line in readings(shift=0.02)
    ]
    transcribed(plant, engineer, *lines, mark=";")
    assert Reading.objects.get(order=2).applied == "2,500"
    assert the_test().as_found_worst == pytest.approx(0.125)
    assert told_tests(plant, *readings(shift=0.02)).unchanged == 1


def test_an_output_in_percent_is_understood(plant: Plant, engineer: User) -> None:
    lines = [line | {"Measured": f"{float(line['Nominal (%)']) + 0.1:g}", "Measured unit": "%"} for line in readings()]
    transcribed(plant, engineer, *lines)
    assert the_test().as_found_worst == pytest.approx(0.1)


@pytest.mark.parametrize(
    ("row", "changed", "column", "words"),
    [
        (3, {"Measured": "8,0,0"}, "Measured", "“8,0,0” has 2 decimal marks"),
        (3, {"Applied": "x"}, "Applied", "“x” is not a number"),
        (3, {"Applied": ""}, "Applied", "Applied is missing; leave a reading out as a whole if it was not taken."),
        (3, {"Test date": ""}, "Test date", "On which day was this read? Its date is missing."),
        (3, {"Test date": "2023-13-06"}, "Test date", "is no day of the calendar"),
        (3, {"Nominal (%)": ""}, "Nominal (%)", "say it for all of them, or for none."),
        (3, {"Direction": "sideways"}, "Direction", "“sideways” is none of “up”, “down”."),
        (3, {"Run": "as built"}, "Run", "“as built” is none of “as-found”, “as-left”."),
        (
            3,
            {"Measured unit": "V"},
            "Measured unit",
            "“V” is a unit of voltage; one of current or ratio is wanted here.",
        ),
        (3, {"Measured unit": "A"}, "Measured", "An output is read in mA or in percent of span, not in A."),
        (3, {"Tag": "", "Serial number": ""}, "Tag", "What was tested? Neither a tag nor a serial number stands here."),
        (2, {"Tag": "PT-2014"}, "Tag", "There is no tag “PT-2014” in North works. Known are: PT-2041."),
        (
            2,
            {"Standard for the input": "PS-09"},
            "Standard for the input",
            "There is no standard “PS-09” under “Standards”.",
        ),
        (2, {"Standard for the input": "MA-01"}, "Standard for the input", "is no standard that applies an input."),
        (2, {"LRV": "0"}, "URV", "A range needs LRV, URV and their unit; URV and the unit must stand here too."),
        (
            2,
            {"Tolerance (input units)": "1"},
            "Tolerance unit",
            "Say in which unit the tolerance in input units stands.",
        ),
    ],
)
def test_a_bad_row_is_named_by_line_column_and_reason(
    plant: Plant, engineer: User, row: int, changed: dict[str, str], column: str, words: str
) -> None:
    lines = readings(day="2022-05-02")
    lines[row - 2] = lines[row - 2] | changed
    if row == 2 and "Tag" in changed:
        lines = [line | changed for line in lines]
    proposal = told_tests(plant, *lines, *readings())
    (line, named, sentence), *more = said(proposal)
    assert more == []
    assert (line, column in named) == (row, True), named
    assert words in sentence


@pytest.mark.parametrize(
    ("day", "words"),
    [
        ("2099-01-01", "2099-01-01 is still to come: a past test has been made."),
        ("2020-05-06", "Nothing was fitted at PT-2041 on 2020-05-06; the first fitting there begins on 2021-03-01."),
    ],
)
def test_a_day_that_cannot_be_is_refused(plant: Plant, day: str, words: str) -> None:
    assert said(told_tests(plant, *readings(day=day))) == [(2, "B “Test date”", words)]


def test_a_transmitter_that_was_not_there_is_refused(cast: Cast, plant: Plant) -> None:
    make_transmitter(plant, serial="QG-200")
    lines = [line | {"Serial number": "QG-200"} for line in readings()]
    assert [words for _, _, words in said(told_tests(plant, *lines))] == [
        "Quillhaven Gauge Works QG-200 was not fitted at PT-2041 on 2023-05-06, but Quillhaven Gauge Works QG-100."
    ]


def test_a_transmitter_of_another_plant_is_not_found(cast: Cast, plant: Plant) -> None:
    make_transmitter(cast.other_plant, serial="SO-1")
    lines = [{**line, "Tag": "", "Serial number": "SO-1"} for line in readings()]
    assert [words for _, _, words in said(told_tests(plant, *lines))] == [
        "No transmitter with the serial number SO-1 is registered here."
    ]


def test_on_the_day_of_a_swap_the_serial_number_decides(plant: Plant, engineer: User) -> None:
    tag = Tag.objects.get()
    make_fitting(tag, make_transmitter(plant, serial="QG-001"), fitted_on=datetime.date(2020, 1, 1), removed_on=BEGAN)
    ((_, column, words),) = said(told_tests(plant, *readings(day=str(BEGAN))))
    assert column == "Serial number" and "were both at PT-2041 on 2021-03-01: say which of them was tested." in words
    transcribed(plant, engineer, *readings(day=str(BEGAN), Serial_number="QG-100"))
    assert the_test().transmitter.serial == "QG-100"


def test_rows_of_one_test_that_contradict_each_other_are_refused(plant: Plant) -> None:
    lines = readings(Performed_by="A. Berg")
    lines[4] |= {"Performed by": "C. Holm"}
    ((line, column, words),) = said(told_tests(plant, *lines))
    assert (line, words) == (6, "Another row of the same test says otherwise: A. Berg.")
    assert "Performed by" in column


def test_an_as_left_run_and_not_adjusted_is_a_contradiction(plant: Plant) -> None:
    lines = [line | {"Adjusted": "no"} for line in [*readings(), *as_left(readings())]]
    assert [words for _, _, words in said(told_tests(plant, *lines))] == [
        "An as-left run stands here, but “Adjusted” says no."
    ]


def test_nothing_is_recorded_while_a_row_is_bad(plant: Plant, engineer: User) -> None:
    lines = [*readings(), *readings(day="2022-05-02")[:8], readings(day="2022-05-02")[8] | {"Measured": "?"}]
    read = table(*lines)
    matching = guessed(read.head, test_columns.COLUMNS)
    proposal = past_tests.propose(plant=plant, table=read, matching=matching, today=plant.today())
    assert (len(proposal.planned), proposal.bad_rows) == (1, 1)
    with pytest.raises(ChangedMeanwhileError):
        import_tests(by=Actor(engineer), reason="x", plant=plant, table=read, matching=matching, seen=proposal.digest())
    assert not Test.objects.exists()


def test_a_check_that_has_gone_stale_is_refused(plant: Plant, engineer: User) -> None:
    read = table(*readings())
    matching = guessed(read.head, test_columns.COLUMNS)
    seen = past_tests.propose(plant=plant, table=read, matching=matching, today=plant.today()).digest()
    make_requirement(Tag.objects.get(), effective_from=datetime.date(2023, 1, 1), mpe_percent="0.1", as_left_percent="")
    with pytest.raises(ChangedMeanwhileError):
        import_tests(by=Actor(engineer), reason="x", plant=plant, table=read, matching=matching, seen=seen)
    assert not Test.objects.exists()


def test_past_tests_are_brought_in_on_pages(cast: Cast, plant: Plant, client_as: Callable[[User], Client]) -> None:
    client = client_as(cast.engineer)
    head = list(readings()[0])
    text = "\n".join([",".join(head), *(",".join(line.values()) for line in readings(shift=0.12))])
    match = client.post("/import/tests/", {"file": SimpleUploadedFile("old.csv", text.encode())})["Location"]
    columns = {f"column-{place}": key for key, place in guessed(head, test_columns.COLUMNS).items()}
    check = client.post(match, columns)["Location"]
    page = client.get(check).content.decode()
    assert "1 new" in page and "as-found fail" in page and "0 to 10 bar gauge, linear; ±0.5 % of span" in page
    assert client.post(check.replace("check/", "bring-in/"), {"reason": "binders"})["Location"] == "/tests/?plant=north"
    test = the_test()
    shown = client.get(f"/tests/{test.pk}/").content.decode()
    assert "transcribed, unsigned" in shown
    assert client_as(cast.technician).get("/import/tests/").status_code == 403


def test_the_number_of_queries_grows_with_no_test(plant: Plant, engineer: User) -> None:
    from django.db import connection
    from django.test.utils import CaptureQueriesContext

    make_tag(plant.areas.get(), "unused")
    counts = []
    for year in (2022, 2023):
        days = [f"{year}-{month:02}-06" for month in range(1, 2 if year == 2022 else 9)]
        with CaptureQueriesContext(connection) as captured:
            transcribed(plant, engineer, *(line for day in days for line in readings(day=day)))
        counts.append(len(captured))
    assert counts[1] <= counts[0] + 2, "readings of what is there already are read in one more query"
