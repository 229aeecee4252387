"""A register in a file is brought in whole, and does to what is there only what it says."""

from __future__ import annotations

import datetime
from typing import Any

import pytest
from django.db import connection
from django.test.utils import CaptureQueriesContext

from register import access, importing, reranging
from register.auditing import Actor
from register.editing import edit_tag
from register.importing import ChangedMeanwhileError, import_register
from register.imports.columns import guessed
from register.imports.proposing import Proposal, propose
from register.imports.sheet import COLUMNS
from register.models import Area, AuditEntry, Fitting, Flag, Plant, Range, Tag, Transmitter, User
from tests.cast import Cast, make_area, make_fitting, make_range, make_tag, make_transmitter
from tests.register.bringing import (
    bring_in,
    brought_in,
    head,
    make_catalogue,
    proposed,
    row,
    rows,
    table,
    tag,
    told,
    values,
)


@pytest.fixture
def plant(cast: Cast) -> Plant:
    make_catalogue(cast.plant)
    return cast.plant


@pytest.fixture
def engineer(cast: Cast) -> User:
    return cast.engineer


def test_a_new_row_makes_tag_range_transmitter_and_fitting(plant: Plant, engineer: User) -> None:
    proposal = brought_in(plant, engineer, row())
    assert (proposal.count("new"), proposal.count("changed"), proposal.count("unchanged")) == (1, 0, 0)
    new = tag(plant, "PT-2041")
    assert values(new, ["service", "operating_pressure", "pressure_unit", "pressure_reference", "supply_v"]) == {
        "service": "Feed water to drum",
        "operating_pressure": "6.0",
        "pressure_unit": "bar",
        "pressure_reference": "gauge",
        "supply_v": 24.0,
    }
    assert new.operating_pressure_pa == pytest.approx(600_000) and new.process_max_k == pytest.approx(333.15)
    assert new.current_range is not None and new.current_fitting is not None
    assert (new.current_range.urv, new.current_range.urv_si) == ("12.50", pytest.approx(1_250_000))
    assert new.current_range.reference == "gauge", "as the fitted transmitter measures"
    assert new.current_range.applied_at is not None and new.current_range.person == engineer
    device = new.current_fitting.transmitter
    assert (device.serial, device.head, device.whereabouts) == ("QG-100", head("G16"), "fitted")
    assert new.current_fitting.fitted_on == datetime.date(2024, 5, 6)
    assert new.standing.serial == "Quillhaven Gauge Works QG-100"


def test_every_new_thing_leaves_one_entry_with_the_reason(plant: Plant, engineer: User) -> None:
    brought_in(plant, engineer, *rows(3))
    created = AuditEntry.objects.filter(kind="created", plant=plant)
    kinds = list(created.values_list("thing_type", flat=True))
    assert {kind: kinds.count(kind) for kind in kinds} == {
        "register.tag": 3,
        "register.transmitter": 3,
        "register.fitting": 3,
        "register.range": 3,
    }
    assert set(created.values_list("reason", flat=True)) == {"first list"}
    assert created.values("act").distinct().count() == 1
    assert set(created.values_list("person_name", flat=True)) == {str(engineer)}


def test_what_is_brought_in_is_checked_against_the_limits_at_once(plant: Plant, engineer: User) -> None:
    brought_in(plant, engineer, row(), row(Tag="PT-2042", Serial_number="QG-101", URV="17"))
    flags = Flag.objects.filter(severity=Flag.Severity.VIOLATION, closed_at=None)
    assert [(flag.tag.number, flag.check_key) for flag in flags] == [("PT-2042", "range_upper")]
    assert tag(plant, "PT-2042").standing.flag_rank == 0


@pytest.mark.parametrize(("measures", "flagged"), [("flow", True), ("differential pressure", False)])
def test_where_nobody_said_where_the_root_of_a_flow_is_taken_it_cannot_be_checked(
    plant: Plant, engineer: User, measures: str, flagged: bool
) -> None:
    line = row(Measures=measures, Type="Q-differential", Head="D1", URV="250", Range_unit="mbar")
    brought_in(plant, engineer, line)
    new = tag(plant, "PT-2041")
    assert new.root_extraction == ""
    flags = Flag.objects.filter(tag=new, check_key="square_root_place", closed_at=None)
    assert [flag.severity for flag in flags] == [Flag.Severity.CANNOT_CHECK] * flagged
    brought_in(plant, engineer, {"Tag": "PT-2041", "Square root taken": "control system"})
    assert not flags.all().exists()


def test_the_same_file_a_second_time_changes_nothing(plant: Plant, engineer: User) -> None:
    lines = [*rows(4), {"Maker": "Quillhaven Gauge Works", "Type": "Q-gauge", "Head": "G40", "Serial number": "SP-1"}]
    brought_in(plant, engineer, *lines)
    entries, stored = AuditEntry.objects.count(), sorted(Tag.objects.values_list())
    again = brought_in(plant, engineer, *lines)
    assert again.count("unchanged") == 5 and again.touched == []
    assert AuditEntry.objects.count() == entries
    assert sorted(Tag.objects.values_list()) == stored


def test_a_blank_cell_leaves_a_value_as_it_is(plant: Plant, engineer: User) -> None:
    brought_in(plant, engineer, row())
    proposal = brought_in(plant, engineer, {"Tag": "pt-2041", "Service": "", "Design pressure": "12", "Craft": " "})
    assert [(one.field, one.before, one.after) for one in proposal.changes] == [("Design pressure", "10", "12")]
    kept = tag(plant, "PT-2041")
    assert (kept.service, kept.design_pressure, kept.craft) == ("Feed water to drum", "12", "instrument")
    assert kept.design_pressure_pa == pytest.approx(1_200_000)


def test_a_change_leaves_before_and_after_in_the_trail(plant: Plant, engineer: User) -> None:
    brought_in(plant, engineer, row())
    brought_in(plant, engineer, {"Tag": "PT-2041", "Criticality": "safety", "Loop supply (V)": "26"})
    changed = AuditEntry.objects.filter(
        thing_type="register.tag", kind="changed", field__in=["criticality", "supply_v"]
    )
    assert sorted(changed.values_list("field", "before", "after")) == [
        ("criticality", "general", "safety"),
        ("supply_v", "24.0", "26.0"),
    ]


def test_a_number_written_otherwise_is_no_change(plant: Plant, engineer: User) -> None:
    brought_in(plant, engineer, row(URV="12.50", Operating_pressure="6.0"))
    assert proposed(plant, row(URV="12.5", Operating_pressure="6", Pressure_unit="bar")).touched == []
    assert tag(plant, "PT-2041").operating_pressure == "6.0"


def test_a_file_of_semicolons_has_decimal_commas(plant: Plant, engineer: User) -> None:
    line = row(URV="1,250", Design_pressure="10,5", Operating_pressure="-0,5", Lowest_pressure="-0,9")
    brought_in(plant, engineer, line, mark=";")
    new = tag(plant, "PT-2041")
    assert new.current_range is not None
    assert (new.current_range.urv, new.current_range.urv_si) == ("1.25", pytest.approx(125_000))
    assert (new.design_pressure, new.design_pressure_pa) == ("10,5", pytest.approx(1_050_000))
    assert new.operating_pressure_pa == pytest.approx(-50_000)
    assert brought_in(plant, engineer, line, mark=";").touched == []


def test_a_comma_that_can_be_read_in_two_ways_is_refused_in_a_file_of_commas(plant: Plant) -> None:
    ((line, column, words),) = told(proposed(plant, row(URV="1,250")))
    assert (line, column) == (2, "O “URV”")
    assert "can be read as 1.250 or as 1250" in words


def test_an_area_that_is_not_there_is_added_and_said(plant: Plant, engineer: User) -> None:
    lines = [line | {"Area": "30", "Area name": "Turbines"} for line in rows(2)]
    proposal = proposed(plant, *lines)
    assert [str(area) for area in proposal.areas] == ["30 Turbines"]
    brought_in(plant, engineer, *lines)
    assert Area.objects.get(plant=plant, code="30").tags.count() == 2
    assert AuditEntry.objects.filter(thing_type="register.area", kind="created").count() == 1


def test_another_range_needs_a_day_and_a_reason(plant: Plant, engineer: User) -> None:
    brought_in(plant, engineer, row())
    bare = {"Tag": "PT-2041", "LRV": "0", "URV": "8"}
    assert [(column, words) for _, column, words in told(proposed(plant, bare))] == [
        ("Range from", "Say from which day PT-2041 has this range; it has another one now.")
    ]
    dated = bare | {"Range from": "2024-08-01"}
    ((_, column, words),) = told(proposed(plant, dated))
    assert column == "Reason for the range"
    assert (
        words
        == "The range of PT-2041 would change from 0 to 12.50 bar gauge, linear to 0 to 8 bar gauge, linear: say why."
    )
    proposal = brought_in(plant, engineer, dated | {"Reason for the range": "pump replaced"})
    assert [one.after for one in proposal.changes] == ["0 to 8 bar gauge, linear from 2024-08-01"]
    now = tag(plant, "PT-2041").current_range
    assert now is not None and (now.urv, now.reason) == ("8", "pump replaced")
    assert Range.objects.filter(tag__number="PT-2041").count() == 2
    assert brought_in(plant, engineer, dated | {"Reason for the range": "pump replaced"}).touched == []


def test_a_range_from_a_day_to_come_is_planned(plant: Plant, engineer: User) -> None:
    brought_in(plant, engineer, row())
    later = plant.today() + datetime.timedelta(days=30)
    line = {"Tag": "PT-2041", "LRV": "0", "URV": "8", "Range from": str(later), "Reason for the range": "outage"}
    brought_in(plant, engineer, line)
    held = tag(plant, "PT-2041")
    assert held.current_range is not None and held.current_range.urv == "12.50"
    assert Range.objects.get(tag=held, applied_at=None).effective_from == later
    assert brought_in(plant, engineer, line).touched == []


def test_an_old_file_does_not_undo_a_later_range(plant: Plant, engineer: User) -> None:
    brought_in(plant, engineer, row())
    values = {"lrv": "0", "urv": "8", "unit": "bar", "reference": "gauge"}
    reranging.set_range(
        by=Actor(engineer),
        reason="pump",
        tag=tag(plant, "PT-2041"),
        values=values,
        effective_from=datetime.date(2024, 8, 1),
    )
    assert proposed(plant, row()).touched == []


@pytest.mark.parametrize(
    ("changed", "column", "words"),
    [
        ({"LRV": "5", "URV": "5"}, "O “URV”", "LRV and URV are both 5 bar: a range without a span cannot be measured."),
        ({"URV": ""}, "O “URV”", "A range needs LRV, URV and their unit; URV stands nowhere."),
        ({"Range unit": "inH2O"}, "P “Range unit”", "does not say at which water temperature"),
        ({"Range unit": "psia"}, "", ""),
        (
            {"Output": "square root"},
            "W “Output”",
            "A square root is taken of a differential pressure only; this range is gauge.",
        ),
        (
            {"Low cut (%)": "5"},
            "W “Low cut (%)”",
            "A low cut goes with a square root; the output of this range is linear.",
        ),
        (
            {"Range unit": "barg", "Range reference": "absolute"},
            "W “Range reference”",
            "The unit of the range says gauge",
        ),
        ({"Head": "G17"}, "T “Head”", "There is no head “G17” of the type Q-gauge. Known are: G16, G40."),
        (
            {"Type": "Q gauge"},
            "S “Type”",
            "There is no type “Q gauge” of Quillhaven Gauge Works. Known are: Q-differential, Q-gauge.",
        ),
        ({"Maker": "Quilhaven"}, "R “Maker”", "There is no maker “Quilhaven” under “Types and heads”."),
        ({"Serial number": ""}, "U “Serial number”", "Which transmitter is meant? Its serial number is missing."),
        (
            {"Fitted on": ""},
            "V “Fitted on”",
            "Quillhaven Gauge Works QG-100 would be fitted at PT-2041: say on which day.",
        ),
        (
            {"Fitted on": "2099-01-01"},
            "V “Fitted on”",
            "2099-01-01 is still to come: note a fitting when it has happened.",
        ),
        ({"Made on": "2024-06-01"}, "V “Fitted on”", "was made on 2024-06-01, after 2024-05-06."),
        ({"Fitted on": "2024-02-30"}, "V “Fitted on”", "“2024-02-30” is no day of the calendar written as 2026-03-09."),
        ({"Fitted on": "05/06/2024"}, "V “Fitted on”", "can be read as 2024-05-06 or as 2024-06-05"),
        ({"Area": ""}, "C “Area”", "PT-2041 is new: say in which area it lies."),
        (
            {"Measures": "presure"},
            "D “Measures”",
            "“presure” is none of “pressure”, “differential pressure”, “flow”, “level”.",
        ),
        ({"Pressure unit": ""}, "E “Pressure unit”", "Say in which unit the pressures of this row are."),
        ({"Pressure unit": "bar"}, "Pressure reference", "Say whether the pressures of this row are gauge or absolute"),
        ({"Operating pressure": "11"}, "F “Operating pressure”", "Operating pressure 11 is above design pressure 10."),
        (
            {"Lowest process temperature": "70"},
            "J “Lowest process temperature”",
            "Lowest process temperature 70 is above",
        ),
        ({"Loop supply (V)": "240"}, "L “Loop supply (V)”", "240 is above 60, the most that makes sense here."),
        ({"Design pressure": "ten"}, "G “Design pressure”", "“ten” is not a number"),
        ({"Scale low": "0"}, "Scale high", "Give both ends of the scale, or neither."),
        ({"Out of service since": "2099-01-01"}, "W “Out of service since”", "still to come"),
        ({"Service": "x" * 161}, "B “Service”", "161 characters stand here; at most 160 fit."),
        ({"Oxygen service": "perhaps"}, "W “Oxygen service”", "“perhaps” is neither yes nor no."),
        ({"Tag": ""}, "A “Tag”", "The tag is missing, but “Area” of one is given."),
    ],
)
def test_a_bad_row_is_named_by_line_column_and_reason(
    plant: Plant, changed: dict[str, str], column: str, words: str
) -> None:
    proposal = proposed(plant, *rows(1), row() | changed)
    if not words:
        assert told(proposal) == []
        return
    (line, named, said), *more = told(proposal)
    assert more == [], "one mistake is told once"
    assert line == 3
    assert named.endswith(column)
    assert words in said


def test_bad_rows_are_all_told_at_once_and_nothing_is_brought_in(plant: Plant, engineer: User) -> None:
    lines = [*rows(3), row(URV="x"), row(Tag="PT-2042", Head="Z"), row(Tag="PT-3000"), row(Tag="PT-2043")]
    read = table(*lines)
    matching = guessed(read.head, COLUMNS)
    proposal = propose(plant=plant, table=read, matching=matching, today=plant.today())
    assert {(one.line, one.column.partition("“")[2].rstrip("”")) for one in proposal.complaints} == {
        (5, "URV"),
        (6, "Serial number"),
        (7, "Tag"),
        (8, "Serial number"),
    }
    assert "stands in line 5 already" in " ".join(one.words for one in proposal.complaints)
    with pytest.raises(ChangedMeanwhileError):
        import_register(
            by=Actor(engineer), reason="no", plant=plant, table=read, matching=matching, seen=proposal.digest()
        )
    assert not Tag.objects.exists() and not Transmitter.objects.exists()


def test_another_transmitter_takes_the_place_of_the_fitted_one(plant: Plant, engineer: User) -> None:
    brought_in(plant, engineer, row())
    line = {
        "Tag": "PT-2041",
        "Maker": "Quillhaven Gauge Works",
        "Type": "Q-gauge",
        "Head": "G16",
        "Serial number": "QG-200",
    }
    proposal = brought_in(plant, engineer, line | {"Fitted on": "2024-09-01"})
    assert [one.after for one in proposal.changes] == [
        "Quillhaven Gauge Works QG-200 since 2024-09-01; Quillhaven Gauge Works QG-100 goes to stores"
    ]
    old = Fitting.objects.get(transmitter__serial="QG-100")
    assert old.removed_on == datetime.date(2024, 9, 1) and old.transmitter.whereabouts == "stores"
    held = tag(plant, "PT-2041")
    assert held.current_fitting is not None and held.current_fitting.transmitter.serial == "QG-200"


def test_two_tags_can_exchange_their_transmitters_in_one_file(plant: Plant, engineer: User) -> None:
    brought_in(plant, engineer, *rows(2))
    moved = {"Maker": "Quillhaven Gauge Works", "Fitted on": "2024-09-01"}
    there = moved | {"Tag": "PT-3000", "Serial number": "QG-3001"}
    back = moved | {"Tag": "PT-3001", "Serial number": "QG-3000"}
    ((line, _, words),) = told(proposed(plant, there))
    assert (line, words) == (
        2,
        "Quillhaven Gauge Works QG-3001 is fitted at PT-3001 since 2024-05-06: remove it there first.",
    )
    brought_in(plant, engineer, there, back)
    fitted = Tag.objects.order_by("number").values_list("number", "current_fitting__transmitter__serial")
    assert list(fitted) == [("PT-3000", "QG-3001"), ("PT-3001", "QG-3000")]
    assert set(Transmitter.objects.values_list("whereabouts", flat=True)) == {"fitted"}


def test_a_row_without_a_tag_is_a_transmitter_in_stores(plant: Plant, engineer: User) -> None:
    line = {"Tag": "", "Maker": "Quillhaven Gauge Works", "Type": "Q-gauge", "Head": "G40", "Serial number": "SP-1"}
    brought_in(plant, engineer, line)
    assert Transmitter.objects.get(serial="SP-1").whereabouts == "stores"
    brought_in(plant, engineer, line | {"Fill fluid": "silicone"})
    assert Transmitter.objects.get(serial="sp-1".upper()).fill_fluid == "silicone"
    ((_, _, words),) = told(proposed(plant, line | {"Head": "G16"}))
    assert "another head is an intervention or a correction" in words


def test_a_transmitter_of_another_plant_is_not_taken(cast: Cast, plant: Plant) -> None:
    make_transmitter(cast.other_plant, head("G16"), serial="QG-100")
    ((_, _, words),) = told(proposed(plant, row()))
    assert words == "Quillhaven Gauge Works QG-100 is registered in another plant."


def test_a_unit_cannot_change_under_values_that_stay(plant: Plant, engineer: User) -> None:
    brought_in(plant, engineer, row())
    ((_, column, words),) = told(
        proposed(plant, {"Tag": "PT-2041", "Pressure unit": "psi(g)", "Design pressure": "150"})
    )
    assert column == "B “Pressure unit”"
    assert words == (
        "The unit of PT-2041 would change from bar to psi: give Operating pressure, Lowest pressure in it as well."
    )


def test_a_tag_of_this_number_at_another_plant_is_another_tag(cast: Cast, plant: Plant, engineer: User) -> None:
    other = make_tag(make_area(cast.other_plant, "20"), "PT-2041")
    brought_in(plant, engineer, row())
    other.refresh_from_db()
    assert other.service == "Cooling water to the condenser"
    assert Tag.objects.filter(number="PT-2041").count() == 2


def test_a_dry_run_that_has_gone_stale_is_refused(plant: Plant, engineer: User) -> None:
    brought_in(plant, engineer, row())
    read = table({"Tag": "PT-2041", "Service": "New words"})
    matching = guessed(read.head, COLUMNS)
    seen = propose(plant=plant, table=read, matching=matching, today=plant.today()).digest()
    edit_tag(by=Actor(engineer), reason="meanwhile", tag=tag(plant, "PT-2041"), values={"service": "Other words"})
    with pytest.raises(ChangedMeanwhileError):
        import_register(by=Actor(engineer), reason="x", plant=plant, table=read, matching=matching, seen=seen)
    assert tag(plant, "PT-2041").service == "Other words"


def test_a_tag_that_another_adds_between_reading_and_writing_stops_the_whole_import(
    plant: Plant, engineer: User, monkeypatch: pytest.MonkeyPatch
) -> None:
    read = table(*rows(3))
    matching = guessed(read.head, COLUMNS)
    seen = propose(plant=plant, table=read, matching=matching, today=plant.today())

    def and_meanwhile(**asked: Any) -> Proposal:
        found = propose(**asked)
        make_tag(Area.objects.get(plant=plant, code="20"), "PT-3001")
        return found

    monkeypatch.setattr(importing, "propose", and_meanwhile)
    with pytest.raises(ChangedMeanwhileError):
        import_register(by=Actor(engineer), reason="x", plant=plant, table=read, matching=matching, seen=seen.digest())
    assert not Tag.objects.exists() and not Transmitter.objects.exists()


def test_a_change_elsewhere_does_not_make_a_dry_run_stale(plant: Plant, engineer: User) -> None:
    brought_in(plant, engineer, *rows(2))
    read = table({"Tag": "PT-3000", "Service": "New words"})
    matching = guessed(read.head, COLUMNS)
    seen = propose(plant=plant, table=read, matching=matching, today=plant.today()).digest()
    for number, field in (("PT-3001", "service"), ("PT-3000", "location")):
        edit_tag(by=Actor(engineer), reason="meanwhile", tag=tag(plant, number), values={field: "meanwhile"})
    import_register(by=Actor(engineer), reason="x", plant=plant, table=read, matching=matching, seen=seen)
    assert values(tag(plant, "PT-3000"), ["service", "location"]) == {"service": "New words", "location": "meanwhile"}


def test_a_tag_that_is_there_gets_its_first_range_and_transmitter(plant: Plant, engineer: User) -> None:
    make_tag(Area.objects.get(plant=plant, code="20"), "PT-2041")
    make_transmitter(plant, head("G16"), serial="QG-100")
    proposal = brought_in(plant, engineer, row(Range_from=""))
    held = tag(plant, "PT-2041")
    assert held.current_fitting is not None and held.current_range is not None
    assert held.current_range.effective_from == datetime.date(2024, 5, 6), "the day of the fitting"
    assert held.current_fitting.transmitter.whereabouts == "fitted"
    assert {one.field for one in proposal.changes} >= {"Fitted transmitter", "Range", "Service"}
    entries = AuditEntry.objects.filter(thing_type="register.tag", kind="changed").values_list("field", flat=True)
    assert {"fitted transmitter", "current_range", "service"} <= set(entries)


def test_the_number_of_queries_grows_with_no_row(plant: Plant, engineer: User) -> None:
    counts = []
    access.roles(engineer)  # read once a request
    for lines in (rows(2), [line | {"Tag": f"X{n}", "Serial number": f"X{n}"} for n, line in enumerate(rows(15))]):
        with CaptureQueriesContext(connection) as captured:
            bring_in(plant, engineer, table(*lines))
        counts.append(len(captured))
    assert counts[0] == counts[1]


def test_a_fitted_transmitter_keeps_its_day(plant: Plant, engineer: User) -> None:
    brought_in(plant, engineer, row())
    ((_, column, words),) = told(proposed(plant, row(Fitted_on="2024-05-07")))
    assert column == "V “Fitted on”"
    assert words == "Quillhaven Gauge Works QG-100 is fitted at PT-2041 since 2024-05-06, not 2024-05-07."


def test_a_fitting_cannot_begin_inside_an_earlier_one(plant: Plant) -> None:
    held = make_tag(Area.objects.get(plant=plant, code="20"), "PT-2041")
    make_range(held)
    make_fitting(held, make_transmitter(plant, head("G16")), removed_on=datetime.date(2024, 7, 1))
    said = [words for _, _, words in told(proposed(plant, row(LRV="", URV="", Range_unit="", Range_from="")))]
    assert said == ["A fitting at PT-2041 lasted from 2020-01-06 to 2024-07-01: begin on or after its end."]


@pytest.mark.parametrize(
    "column", ["Operating pressure", "URV", "Highest process temperature", "Loop resistance (ohm)"]
)
def test_a_number_that_no_arithmetic_can_bear_is_a_bad_cell(plant: Plant, column: str) -> None:
    [(_, where, words)] = told(proposed(plant, row() | {column: "1e305"}))
    assert f"“{column}”" in where
    assert "too large to be a measured value" in words


@pytest.mark.parametrize(
    ("changed", "column", "words"),
    [
        (
            {"URV": "8", "Range from": "2025-05-06", "Reason for the range": "smaller pump"},
            "LRV",
            "PT-2041 has the range 0 to 12.50 bar gauge, linear already: none of your roles here lets you re-range.",
        ),
        (
            {"Serial number": "QG-200", "Fitted on": "2025-05-06"},
            "Serial number",
            "Quillhaven Gauge Works QG-100 is fitted at PT-2041: none of your roles here lets you swap it.",
        ),
    ],
)
def test_what_a_person_may_not_change_by_hand_he_may_not_change_by_a_file(
    cast: Cast, plant: Plant, changed: dict[str, str], column: str, words: str
) -> None:
    """The check says so, and the act refuses it too."""
    brought_in(plant, cast.engineer, row())
    read = table(row() | changed)
    asked = {"plant": plant, "table": read, "matching": guessed(read.head, COLUMNS)}
    [(line, named, said)] = told(propose(**asked, today=plant.today(), by=cast.administrator))
    assert (line, named.partition(" ")[2]) == (2, f"“{column}”")
    assert said.startswith(words)
    seen = propose(**asked, today=plant.today(), by=cast.engineer)
    assert list(seen.complaints) == []
    with pytest.raises(ChangedMeanwhileError):
        import_register(by=Actor(cast.administrator), reason="?", **asked, seen=seen.digest())
    assert (Range.objects.count(), Fitting.objects.count()) == (1, 1)
    import_register(by=Actor(cast.engineer), reason="?", **asked, seen=seen.digest())
    assert Range.objects.count() + Fitting.objects.count() == 3


def test_first_ranges_and_what_stands_there_already_need_no_further_role(cast: Cast, plant: Plant) -> None:
    brought_in(plant, cast.administrator, row())
    bare = make_tag(plant.areas.get(), "PT-9")
    lines = (
        row(Service="Other words"),
        {"Tag": "PT-9", "LRV": "0", "URV": "8", "Range unit": "bar(g)"} | {"Range from": "2025-05-06"},
    )
    read = table(*lines)
    proposal = propose(
        plant=plant,
        table=read,
        matching=guessed(read.head, COLUMNS),
        today=plant.today(),
        by=cast.administrator,
    )
    assert told(proposal) == []
    bring_in(plant, cast.administrator, read)
    bare.refresh_from_db()
    assert str(bare.current_range).startswith("0 to 8 bar")
