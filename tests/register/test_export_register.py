"""The register taken out in the columns of its import, and the empty sheets that explain them."""

from __future__ import annotations

import csv
import datetime
import io
from collections.abc import Callable

import openpyxl
import pytest
from django.test import Client

from register.auditing import Actor
from register.editing import edit_tag
from register.exporting import csv_response
from register.imports.columns import guessed
from register.imports.proposing import propose
from register.imports.sheet import COLUMNS
from register.imports.tables import TableError, read_table
from register.models import Area, AuditEntry, Plant, User
from tests.cast import Cast, make_head, make_tag
from tests.register.bringing import brought_in, make_catalogue, row, rows, tag

SignIn = Callable[[User], Client]
OUT = "/import/register/export/"


@pytest.fixture
def plant(cast: Cast) -> Plant:
    """A plant whose register holds what is awkward in files."""
    make_catalogue(cast.plant)
    brought_in(
        cast.plant,
        cast.engineer,
        row(URV="1.250", Operating_pressure="-0.50", Lowest_pressure="-0.9"),
        *rows(2),
        row(
            Tag="FT-1",
            Serial_number="007",
            Head="D1",
            Type="Q-differential",
            Measures="flow",
            LRV="-10",
            URV="100",
            Range_unit="inH2O (68 °F)",
        )
        | {"Output": "square root", "Low cut (%)": "5", "Below the cut": "zero", "Square root taken": "transmitter"},
        {"Maker": "Quillhaven Gauge Works", "Type": "Q-gauge", "Head": "G40", "Serial number": "SP-1"},
    )
    awkward = {
        "service": "=cmd|' /C calc'!A0",
        "location": "-see drawing",
        "vent_direction": "'=quoted",
        "isolation_sequence": "Shut A, then B.\r\nVent; slowly.",
        "medium": '5 % "brine"',
        "scale_low": "0,0",
        "scale_high": "12,50",
        "oxygen_service": True,
    }
    edit_tag(by=Actor(cast.engineer), reason="awkward", tag=tag(cast.plant, "PT-3000"), values=awkward)
    make_tag(Area.objects.get(plant=cast.plant, code="20"), "LT-9", pressure_unit="inH2O_68F", operating_pressure="−5")
    return cast.plant


def taken_out(client: Client, form: str) -> bytes:
    answer = client.post(OUT, {"form": form})
    assert answer.status_code == 200
    return answer.content


@pytest.mark.parametrize("commas", [False, True])
@pytest.mark.parametrize("form", ["csv", "xlsx"])
def test_what_is_taken_out_and_brought_in_again_changes_nothing(
    cast: Cast, plant: Plant, client_as: SignIn, form: str, commas: bool
) -> None:
    Plant.objects.filter(pk=plant.pk).update(decimal_comma=commas)
    plant.refresh_from_db()
    table = read_table(taken_out(client_as(cast.engineer), form), f"a.{form}", decimal_comma=commas)
    matching = guessed(table.head, COLUMNS)
    assert len(matching) == len(COLUMNS)
    proposal = propose(plant=plant, table=table, matching=matching, today=plant.today())
    assert list(proposal.complaints) == []
    assert proposal.changes == []
    assert proposal.count("unchanged") == 6


def test_a_workbook_holds_numbers_as_numbers_and_no_formula(cast: Cast, plant: Plant, client_as: SignIn) -> None:
    book = openpyxl.load_workbook(io.BytesIO(taken_out(client_as(cast.engineer), "xlsx")))
    sheet = book.active
    assert sheet is not None
    head = [cell.value for cell in sheet[1]]
    lines = {line[0].value: dict(zip(head, line, strict=True)) for line in sheet.iter_rows(min_row=2)}
    sound = lines["PT-2041"]
    assert (sound["URV"].value, sound["URV"].number_format) == (1.25, "0.000")
    assert (sound["Operating pressure"].value, sound["Operating pressure"].number_format) == (-0.5, "0.00")
    assert sound["Fitted on"].value == datetime.datetime(2024, 5, 6)  # noqa: DTZ001 - spreadsheets know no zone
    assert lines["FT-1"]["Serial number"].value == "007"
    assert lines["PT-3000"]["Service"].value == "=cmd|' /C calc'!A0"
    assert {cell.data_type for line in sheet.iter_rows() for cell in line} <= {"s", "n", "d"}, "no cell is a formula"


def test_a_csv_file_guards_what_a_spreadsheet_would_run(cast: Cast, plant: Plant, client_as: SignIn) -> None:
    text = taken_out(client_as(cast.engineer), "csv").decode("utf-8-sig")
    lines = {line["Tag"]: line for line in csv.DictReader(io.StringIO(text))}
    assert lines["PT-3000"]["Service"] == "'=cmd|' /C calc'!A0"
    assert lines["PT-3000"]["Location"] == "'-see drawing"
    assert lines["PT-2041"]["Operating pressure"] == "-0.50", "a negative number stays one"


def test_a_plant_with_decimal_commas_gets_semicolons(cast: Cast, plant: Plant, client_as: SignIn) -> None:
    Plant.objects.filter(pk=plant.pk).update(decimal_comma=True)
    text = taken_out(client_as(cast.engineer), "csv").decode("utf-8-sig")
    lines = {line["Tag"]: line for line in csv.DictReader(io.StringIO(text), delimiter=";")}
    assert lines["PT-2041"]["URV"] == "1,250"


def test_taking_out_is_noted_and_open_to_readers_of_the_plant_only(cast: Cast, plant: Plant, client_as: SignIn) -> None:
    taken_out(client_as(cast.auditor), "csv")
    entry = AuditEntry.objects.filter(kind="exported").get()
    assert (entry.person, entry.plant, entry.after) == (cast.auditor, plant, "register as CSV")
    assert b"PT-2041" not in client_as(cast.stranger).post(OUT, {}).content
    assert client_as(cast.stranger).post(f"{OUT}?plant=north", {}).status_code == 404
    assert client_as(cast.auditor).get(OUT).status_code == 405


@pytest.mark.parametrize("form", ["csv", "xlsx"])
def test_an_empty_sheet_has_every_column_and_no_row(cast: Cast, client_as: SignIn, form: str) -> None:
    data = client_as(cast.engineer).get(f"/import/register/sheet.{form}").content
    with pytest.raises(TableError, match="no row below"):
        read_table(data, "empty")
    filled = read_table(data + b"PT-1\n", "empty") if form == "csv" else None
    if filled is not None:
        assert (filled.left_out, filled.rows[0][0]) == (2, "PT-1")
        assert len(guessed(filled.head, COLUMNS)) == len(COLUMNS)


def test_the_example_of_the_empty_sheet_can_be_brought_in(cast: Cast) -> None:
    area = make_catalogue(cast.plant)
    make_head(code="unused")
    example = {column.label: column.example for column in COLUMNS if column.example and column.key != "fitted_on"}
    example |= {"Area": area.code, "Measures": "pressure"}
    device = {"Maker": "Quillhaven Gauge Works", "Type": "Q-gauge", "Head": "G16", "Serial number": "Q-1"}
    brought_in(cast.plant, cast.engineer, example | device | {"Fitted on": "2024-05-06"})
    assert tag(cast.plant, "PT-2041").current_range is not None


def test_the_empty_workbook_explains_each_column_on_a_second_sheet(cast: Cast, client_as: SignIn) -> None:
    data = client_as(cast.engineer).get("/import/register/sheet.xlsx").content
    book = openpyxl.load_workbook(io.BytesIO(data))
    assert book.sheetnames == ["Register", "Columns"]
    explained = {line[0]: line[2] for line in book["Columns"].iter_rows(min_row=2, values_only=True) if line[0]}
    assert explained == {column.label: column.explain for column in COLUMNS}
    assert [cell.value for cell in book["Register"][1]] == [column.label for column in COLUMNS]
    assert str(book["Register"]["A2"].value).startswith("# ")


@pytest.mark.parametrize(
    ("name", "header"),
    [
        ("drift-PT-1.csv", 'attachment; filename="drift-PT-1.csv"'),
        ('drift-PT "old"\r\nX: y.csv', 'attachment; filename="drift-PT -old---X- y.csv"'),
        ("drift-../PT\\1.csv", 'attachment; filename="drift-..-PT-1.csv"'),
        ("drift-PÜ-1.csv", "attachment; filename*=utf-8''drift-P%C3%9C-1.csv"),
    ],
)
def test_a_file_has_a_name_that_any_browser_can_keep(name: str, header: str) -> None:
    assert csv_response(name, ["a"], [])["Content-Disposition"] == header
