"""Past tests on pages: a workbook goes the same way as text, who may not import stays out, nothing typed is lost."""

from __future__ import annotations

import csv
import datetime
import io
import re
from collections.abc import Callable
from typing import Any

import pytest
from django.core.files.uploadedfile import SimpleUploadedFile
from django.test import Client
from openpyxl import Workbook, load_workbook

from calibration.imports.test_columns import COLUMNS
from calibration.models import Reading, Test
from calibration.provision import provide_defaults
from register.auditing import Actor
from register.models import AuditEntry, Plant, Tag, User
from tests.calibration.telling import BEGAN, Line, make_history_tag, readings
from tests.cast import Cast, make_person, make_requirement

SignIn = Callable[[User], Client]
START = "/import/tests/"


@pytest.fixture
def plant(cast: Cast) -> Plant:
    provide_defaults(by=Actor(None), plant=cast.plant)
    make_requirement(
        make_history_tag(cast),
        effective_from=BEGAN,
        point_list=cast.plant.point_lists.get(name="Five points, up and down"),
    )
    return cast.plant


@pytest.fixture
def client(cast: Cast, client_as: SignIn) -> Client:
    return client_as(cast.engineer)


def text_of(lines: list[Line]) -> bytes:
    held = io.StringIO()
    writer = csv.DictWriter(held, list(lines[0]))
    writer.writeheader()
    writer.writerows(lines)
    return held.getvalue().encode()


def workbook_of(lines: list[Line]) -> bytes:
    """Days as days and numbers as numbers, as a spreadsheet keeps them."""
    book = Workbook()
    sheet = book.active
    assert sheet is not None
    sheet.append(list(lines[0]))
    for line in lines:
        sheet.append([_as_spreadsheet(name, text) for name, text in line.items()])
    held = io.BytesIO()
    book.save(held)
    return held.getvalue()


def _as_spreadsheet(name: str, text: str) -> Any:
    if name == "Test date":
        return datetime.date.fromisoformat(text)
    return float(text) if name in {"Applied", "Measured", "Nominal (%)"} else text


def checked(client: Client, data: bytes, name: str) -> str:
    """Bring a file and check it as its headings say; the address of the check."""
    match = client.post(START, {"file": SimpleUploadedFile(name, data)})["Location"]
    page = client.get(match).content.decode()
    chosen = dict(re.findall(r'<select name="(column-\d+)".*?<option value="([^"]*)" selected>', page, re.DOTALL))
    return str(client.post(match, chosen)["Location"])


def test_a_workbook_is_brought_in_like_text(plant: Plant, client: Client) -> None:
    check = checked(client, workbook_of(readings(shift=0.12)), "old.xlsx")
    page = client.get(check).content.decode()
    assert "9 readings are new, 0 readings are recorded already." in page and "As-found: 1 fail." in page
    assert client.post(check.replace("check/", "bring-in/"), {"reason": "binders"})["Location"] == "/tests/?plant=north"
    assert Test.objects.get().tested_on == datetime.date(2023, 5, 6)
    second = Reading.objects.get(order=2)
    assert (second.applied, second.measured) == ("2.5", "8.12")
    page = client.get(checked(client, text_of(readings(shift=0.12)), "old.csv")).content.decode()
    assert "This file changes nothing." in page, "the same readings as text are known again"


def test_each_record_is_in_the_trail_with_the_reason(cast: Cast, plant: Plant, client: Client) -> None:
    before = AuditEntry.objects.count()
    check = checked(client, text_of([*readings(), *readings(day="2022-05-02")]), "old.csv")
    client.post(check.replace("check/", "bring-in/"), {"reason": "binders of the old works"})
    new = list(AuditEntry.objects.order_by("pk")[before:])
    assert len(new) == 2
    assert {(entry.reason, entry.person) for entry in new} == {("binders of the old works", cast.engineer)}


def test_bad_rows_are_named_and_nothing_can_be_brought_in(plant: Plant, client: Client) -> None:
    lines = readings()
    lines[4] |= {"Measured": "2O.00"}
    check = checked(client, text_of(lines), "old.csv")
    page = client.get(check).content.decode()
    assert "1 bad row" in page and "“2O.00” is not a number" in page and "bring-in/" not in page
    assert client.post(check.replace("check/", "bring-in/"), {"reason": "anyway"}).status_code == 409
    assert not Test.objects.exists()
    taken = client.get(check.replace("check/", "bad-rows.csv"))
    text = b"".join(taken).decode("utf-8-sig")
    assert re.search(r"^6,.*Measured.*,2O\.00,", text, re.MULTILINE), text


def test_the_reason_stays_where_the_register_has_changed_meanwhile(plant: Plant, client: Client) -> None:
    check = checked(client, text_of(readings()), "old.csv")
    make_requirement(Tag.objects.get(), effective_from=datetime.date(2023, 1, 1), mpe_percent="0.1", as_left_percent="")
    answer = client.post(check.replace("check/", "bring-in/"), {"reason": "binders of the old works"})
    page = answer.content.decode()
    assert answer.status_code == 409
    assert "binders of the old works" in page and "±0.1 % of span" in page, "reason kept, check shown anew"
    assert not Test.objects.exists()
    assert client.post(check.replace("check/", "bring-in/"), {"reason": "binders of the old works"}).status_code == 302
    assert Test.objects.count() == 1


def test_the_page_of_a_test_says_what_was_assumed_and_what_was_named(plant: Plant, client: Client) -> None:
    Tag.objects.get().fittings.update(fitted_on="2019-01-01")
    lines = [
        {name: text for name, text in line.items() if name != "Nominal (%)"} for line in readings(day="2019-06-01")
    ]
    check = checked(client, text_of(lines), "old.csv")
    page = client.get(check).content.decode()
    assert "Assumed for 1 test" in page and "assumed: the range, known from 2021-03-01 on" in page
    client.post(check.replace("check/", "bring-in/"), {"reason": "binders"})
    page = client.get(f"/tests/{Test.objects.get().pk}/").content.decode()
    assert "the range, known from 2021-03-01 on; the test is older" in page
    assert "the requirement, known from 2021-03-01 on; the test is older" in page
    assert "named from the inputs applied" in page


def test_a_matching_that_lacks_something_keeps_what_was_chosen(plant: Plant, client: Client) -> None:
    match = client.post(START, {"file": SimpleUploadedFile("old.csv", text_of(readings()))})["Location"]
    page = client.post(match, {"column-0": "remarks", "column-1": "tested_on"}).content.decode()
    assert "without that no row can be told from another" in page
    assert '<option value="remarks" selected>' in page and '<option value="tested_on" selected>' in page


def test_only_who_may_import_gets_there(cast: Cast, plant: Plant, client_as: SignIn) -> None:
    for role, person in cast.by_role.items():
        allowed = role in {"engineer", "administrator"}
        assert client_as(person).get(START).status_code == (200 if allowed else 403), role
        assert (START in client_as(person).get("/tests/").content.decode()) is allowed, role
    assert client_as(cast.stranger).get(START).status_code == 403
    away = make_person("away", plant=cast.other_plant, roles=("engineer",))
    data = {"file": SimpleUploadedFile("old.csv", text_of(readings()))}
    assert client_as(away).post(f"{START}?plant={plant.code}", data).status_code == 404


def test_the_empty_sheet_explains_each_column(plant: Plant, client: Client) -> None:
    rows = list(csv.reader(io.StringIO(b"".join(client.get(f"{START}sheet.csv")).decode("utf-8-sig"))))
    assert rows[0] == [column.label for column in COLUMNS]
    assert all(len(row) == len(COLUMNS) for row in rows)
    book = load_workbook(io.BytesIO(b"".join(client.get(f"{START}sheet.xlsx"))))
    explained = {str(cell.value) for sheet in book.worksheets for row in sheet.iter_rows() for cell in row}
    for column in COLUMNS:
        assert column.label in explained and column.explain in explained, column.label
