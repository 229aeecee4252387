"""The steps of an import on pages: the file, its columns, the check, all or nothing; for those who may."""

from __future__ import annotations

import csv
import datetime
import io
import os
import re
import uuid
from collections.abc import Callable, Iterator
from pathlib import Path
from typing import Any

import pytest
import time_machine
from django.core.files.storage import default_storage
from django.core.files.uploadedfile import SimpleUploadedFile
from django.http import HttpResponse
from django.test import Client
from django.utils import timezone

from register.auditing import Actor
from register.editing import edit_tag
from register.imports import uploads
from register.imports.tables import LARGEST_FILE, Table
from register.models import Plant, Range, Tag, User
from tests.cast import Cast, make_person
from tests.register.bringing import brought_in, make_catalogue, row, rows, tag, text_of

SignIn = Callable[[User], Client]
START = "/import/register/"


@pytest.fixture
def plant(cast: Cast) -> Plant:
    make_catalogue(cast.plant)
    return cast.plant


@pytest.fixture(autouse=True)
def nothing_is_left_lying() -> Iterator[None]:
    yield
    for folder in default_storage.listdir(uploads.FOLDER)[0] if default_storage.exists(uploads.FOLDER) else ():
        for name in default_storage.listdir(f"{uploads.FOLDER}/{folder}")[1]:
            default_storage.delete(f"{uploads.FOLDER}/{folder}/{name}")


@pytest.fixture
def client(cast: Cast, client_as: SignIn) -> Client:
    return client_as(cast.engineer)


def send(client: Client, text: str | bytes, name: str = "register.csv") -> HttpResponse:
    data = text if isinstance(text, bytes) else text.encode()
    return client.post(START, {"file": SimpleUploadedFile(name, data)})  # type: ignore[return-value]


def checked(client: Client, text: str) -> str:
    """Bring a file and check it as its headings say; the address of the check."""
    match = send(client, text)["Location"]
    page = client.get(match).content.decode()
    chosen = dict(re.findall(r'<select name="(column-\d+)".*?<option value="([^"]*)" selected>', page, re.DOTALL))
    return str(client.post(match, chosen)["Location"])


def bring_in(client: Client, check: str, reason: str = "first list") -> HttpResponse:
    return client.post(check.replace("check/", "bring-in/"), {"reason": reason})  # type: ignore[return-value]


def kept(user: User) -> list[str]:
    folder = f"{uploads.FOLDER}/{user.pk}"
    return default_storage.listdir(folder)[1] if default_storage.exists(folder) else []


def test_a_register_is_brought_in_step_by_step(cast: Cast, plant: Plant, client: Client) -> None:
    check = checked(client, text_of(*rows(3)))
    page = client.get(check).content.decode()
    assert (
        "3 new" in page and "PT-3001" in page and "Added in all: 3 tags, 3 transmitters, 3 fittings, 3 ranges." in page
    )
    assert not Tag.objects.exists()
    answer = bring_in(client, check)
    assert answer["Location"] == "/register/?plant=north"
    assert Tag.objects.filter(plant=plant).count() == 3
    assert "“register.csv” is brought in: 3 new, 0 changed, 0 unchanged." in client.get("/register/").content.decode()
    assert kept(cast.engineer) == [], "the file is forgotten"


def test_the_columns_are_guessed_shown_and_correctable(plant: Plant, client: Client) -> None:
    text = text_of({"TAG NO.": "PT-1", "Remark": "Feed water", "Plant part": "20", "Measures": "pressure"})
    match = send(client, text)["Location"]
    page = client.get(match).content.decode()
    assert "4 columns, 2 of them known by their headings" in page
    assert "Feed water" in page, "the first values are shown"
    answer = client.post(match, {"column-0": "tag", "column-1": "service", "column-2": "area", "column-3": "measurand"})
    assert "Feed water" in client.get(answer["Location"]).content.decode()
    bring_in(client, answer["Location"])
    assert tag(plant, "PT-1").service == "Feed water"


def test_a_column_cannot_be_matched_twice_and_a_key_must_be_matched(plant: Plant, client: Client) -> None:
    match = send(client, "Tag,A,B\nPT-1,x,y\n")["Location"]
    page = client.post(match, {"column-0": "tag", "column-1": "service", "column-2": "service"}).content.decode()
    assert "“Service” is matched to column B “A” already." in page
    page = client.post(match, {"column-1": "service"}).content.decode()
    assert "Say which column holds “Tag”, or “Maker” and “Serial number”" in page


def test_bad_rows_are_shown_and_taken_along_as_a_file(plant: Plant, client: Client) -> None:
    check = checked(client, text_of(row(URV="=1+1"), row(Tag="PT-2", Serial_number="Q-2", Head="Z")))
    page = client.get(check).content.decode()
    assert "2 bad rows" in page and "There is no head “Z” of the type Q-gauge." in page
    assert "bring-in" not in page, "nothing can be brought in"
    answer = client.get(check.replace("check/", "bad-rows.csv"))
    text = b"".join(answer.streaming_content).decode("utf-8-sig")  # type: ignore[attr-defined]
    lines = list(csv.reader(io.StringIO(text)))
    assert lines[0] == ["line", "column", "what stands there", "what is wrong"]
    assert [line[:3] for line in lines[1:]] == [["2", "O “URV”", "'=1+1"], ["3", "T “Head”", "Z"]]


def test_many_bad_rows_are_shown_a_page_at_a_time(plant: Plant, client: Client) -> None:
    check = checked(client, text_of(*(line | {"URV": "x"} for line in rows(230))))
    page = client.get(check).content.decode()
    assert "1 to 100 of 230" in page and "?bad=2#bad" in page
    last = client.get(f"{check}?bad=3").content.decode()
    assert "201 to 230 of 230" in last and '<td class="num">231</td>' in last
    assert client.get(f"{check}?bad=99999999999").status_code == 200


def test_a_stale_check_is_refused_shown_anew_and_the_reason_kept(cast: Cast, plant: Plant, client: Client) -> None:
    brought_in(plant, cast.engineer, row())
    check = checked(client, "Tag,Service\nPT-2041,New words\n")
    edit_tag(by=Actor(cast.engineer), reason="x", tag=tag(plant, "PT-2041"), values={"service": "Other words"})
    answer = bring_in(client, check, "spring cleaning")
    page = answer.content.decode()
    assert answer.status_code == 409
    assert "The register changed after the file was checked" in page
    assert "Other words" in page and "spring cleaning" in page
    assert tag(plant, "PT-2041").service == "Other words"
    assert bring_in(client, check, "spring cleaning")["Location"] == "/register/?plant=north"
    assert tag(plant, "PT-2041").service == "New words"


def test_who_may_not_re_range_sees_that_in_the_check(cast: Cast, plant: Plant, client_as: SignIn) -> None:
    brought_in(plant, cast.engineer, row())
    client = client_as(cast.administrator)
    check = checked(client, text_of(row(URV="8", Range_from="2025-05-06", Reason_for_the_range="smaller pump")))
    page = client.get(check).content.decode()
    assert "none of your roles here lets you re-range" in page
    assert bring_in(client, check).status_code == 409
    assert Range.objects.count() == 1


def test_a_reason_is_asked_for(plant: Plant, client: Client) -> None:
    check = checked(client, text_of(row()))
    answer = bring_in(client, check, " ")
    assert "Say why: the reason stays with the change." in answer.content.decode()
    assert not Tag.objects.exists()


def test_what_the_browser_sends_decides_nothing_but_the_matching(plant: Plant, client: Client) -> None:
    check = checked(client, text_of(row()))
    client.post(check.replace("check/", "bring-in/"), {"reason": "x", "digest": "0", "column-0": "service"})
    assert tag(plant, "PT-2041").service == "Feed water to drum"


def test_a_file_that_changes_nothing_says_so(cast: Cast, plant: Plant, client: Client) -> None:
    brought_in(plant, cast.engineer, row())
    page = client.get(checked(client, text_of(row()))).content.decode()
    assert "This file changes nothing." in page and "1 unchanged" in page


@pytest.mark.parametrize(
    ("data", "words"),
    [
        (b"", "This file is empty."),
        (b"Tag\0\n1\n", "is no text and no .xlsx workbook"),
        (b"PK\x03\x04nonsense", "is a damaged .xlsx workbook, or none."),
        (b"a" * (LARGEST_FILE + 1), "The file is larger than 10 MB: bring it in parts."),
    ],
)
def test_a_file_that_cannot_be_read_is_refused_and_not_kept(
    cast: Cast, plant: Plant, client: Client, data: bytes, words: str
) -> None:
    answer = send(client, data)
    assert answer.status_code == 200
    assert words in answer.content.decode()
    assert kept(cast.engineer) == []


def test_no_file_is_no_import(plant: Plant, client: Client) -> None:
    assert "Choose a file first." in client.post(START, {}).content.decode()


def test_only_who_may_import_gets_there(cast: Cast, plant: Plant, client_as: SignIn) -> None:
    for role, person in cast.by_role.items():
        allowed = role in {"engineer", "administrator"}
        assert client_as(person).get(START).status_code == (200 if allowed else 403), role
    assert client_as(cast.stranger).get(START).status_code == 403
    away = make_person("away", plant=cast.other_plant, roles=("engineer",))
    assert client_as(away).get(f"{START}?plant=north").status_code == 404
    assert (
        client_as(away).post(f"{START}?plant=north", {"file": SimpleUploadedFile("a.csv", b"Tag\n1\n")}).status_code
        == 404
    )


def test_a_file_belongs_to_who_brought_it(cast: Cast, plant: Plant, client: Client, client_as: SignIn) -> None:
    check = checked(client, text_of(row()))
    colleague = client_as(cast.administrator)
    for path in (check, check.replace("check/", ""), check.replace("check/", "bad-rows.csv")):
        assert colleague.get(path).status_code == 404
    assert colleague.post(check.replace("check/", "bring-in/"), {"reason": "x"}).status_code == 404
    assert client.get(check.replace("import/register", "import/tests")).status_code == 404
    assert client.get(f"{START}{uuid.uuid4()}/check/").status_code == 404


def test_who_has_lost_his_role_in_the_plant_cannot_go_on(cast: Cast, plant: Plant, client_as: SignIn) -> None:
    client = client_as(cast.engineer)
    check = checked(client, text_of(row()))
    cast.engineer.memberships.all().delete()
    assert bring_in(client_as(cast.engineer), check).status_code == 403
    assert not Tag.objects.exists()


def test_files_left_lying_are_thrown_away_after_a_day(cast: Cast, plant: Plant, client: Client) -> None:
    first = checked(client, text_of(row()))
    assert len(kept(cast.engineer)) == 2
    with time_machine.travel(timezone.now() + datetime.timedelta(hours=25)):
        uploads.sweep()
        assert kept(cast.engineer) == []
    assert client.get(first).status_code == 404


def test_a_file_that_is_gone_is_not_found_at_any_step(cast: Cast, plant: Plant, client: Client) -> None:
    """What was found in it may still lie here."""
    check = checked(client, text_of(row()))
    [held] = [name for name in kept(cast.engineer) if name.endswith(".file")]
    default_storage.delete(f"{uploads.FOLDER}/{cast.engineer.pk}/{held}")
    for path in (check, check.replace("check/", ""), check.replace("check/", "bad-rows.csv")):
        assert client.get(path).status_code == 404
    assert bring_in(client, check).status_code == 404
    assert not Tag.objects.exists()


@pytest.mark.parametrize("step", ["", "check/"])
def test_a_file_that_goes_while_a_step_is_at_it_is_not_found(
    cast: Cast, plant: Plant, client: Client, step: str, monkeypatch: pytest.MonkeyPatch
) -> None:
    check = checked(client, text_of(row()))
    found = uploads.kept_by

    def then_it_goes(*arguments: Any) -> uploads.Kept | None:
        held = found(*arguments)
        assert held is not None
        held.discard()
        return held

    monkeypatch.setattr(uploads, "kept_by", then_it_goes)
    answer = client.get(check.replace("check/", "")) if step == "" else bring_in(client, check)
    assert answer.status_code == 404
    assert kept(cast.engineer) == []


def test_who_brings_in_what_another_window_has_brought_in_leaves_nothing_lying(
    cast: Cast, plant: Plant, client: Client, monkeypatch: pytest.MonkeyPatch
) -> None:
    check = checked(client, text_of(row()))
    read = uploads.Kept.table

    def then_the_other_window_is_first(held: uploads.Kept, plant: Plant) -> Table:
        table = read(held, plant)
        monkeypatch.setattr(uploads.Kept, "table", read)
        assert bring_in(client, check).status_code == 302
        return table

    monkeypatch.setattr(uploads.Kept, "table", then_the_other_window_is_first)
    assert bring_in(client, check).status_code == 404
    assert Tag.objects.count() == 1
    assert kept(cast.engineer) == []


def test_a_file_that_is_still_worked_on_stays_whole(cast: Cast, plant: Plant, client: Client) -> None:
    now = timezone.now()
    with time_machine.travel(now, tick=False):
        check = checked(client, text_of(row()))
    match = check.replace("check/", "")
    touch(cast.engineer, now)
    page = client.get(match).content.decode()
    chosen = dict(re.findall(r'<select name="(column-\d+)".*?<option value="([^"]*)" selected>', page, re.DOTALL))
    with time_machine.travel(now + datetime.timedelta(hours=20), tick=False):
        client.post(match, chosen)
        touch(cast.engineer, timezone.now(), only=".json")
    with time_machine.travel(now + datetime.timedelta(hours=30), tick=False):
        uploads.sweep()
        assert len(kept(cast.engineer)) == 2
    with time_machine.travel(now + datetime.timedelta(hours=45), tick=False):
        uploads.sweep()
        assert kept(cast.engineer) == []


def touch(user: User, at: datetime.datetime, *, only: str = "") -> None:
    """Files on a disk take the time of the machine, not that of the test."""
    for name in kept(user):
        if name.endswith(only):
            os.utime(default_storage.path(f"{uploads.FOLDER}/{user.pk}/{name}"), (at.timestamp(),) * 2)


def test_two_sweeps_at_once_do_not_stumble(
    cast: Cast, plant: Plant, client: Client, monkeypatch: pytest.MonkeyPatch
) -> None:
    checked(client, text_of(row()))
    look = default_storage.get_modified_time

    def after_the_other_sweep(path: str) -> datetime.datetime:
        default_storage.delete(path)
        return look(path)

    monkeypatch.setattr(default_storage, "get_modified_time", after_the_other_sweep)
    uploads.sweep()
    assert kept(cast.engineer) == []


def test_what_was_found_is_written_in_one_go(
    cast: Cast, plant: Plant, client: Client, monkeypatch: pytest.MonkeyPatch
) -> None:
    """Whoever asks while it is written finds what stood there before."""
    check = checked(client, text_of(row()))
    token = uuid.UUID(check.split("/")[3])
    replace, seen = Path.replace, []

    def looked_at_before(new: Path, old: str) -> Path:
        seen.append(uploads.kept_by(cast.engineer, "register", token))
        return replace(new, old)

    monkeypatch.setattr(Path, "replace", looked_at_before)
    held = uploads.kept_by(cast.engineer, "register", token)
    assert held is not None
    held.matching = {}
    held.store()
    assert seen[0] is not None and seen[0].matching
    assert len(kept(cast.engineer)) == 2
