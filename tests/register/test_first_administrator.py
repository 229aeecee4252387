"""An empty site: whoever can read the data folder makes the first plant and its administrator."""

from __future__ import annotations

import stat
from collections.abc import Callable
from io import StringIO
from pathlib import Path
from typing import Any

import pytest
from django.core.management import CommandError, call_command
from django.test import Client

from register import beginning
from register.models import AuditEntry, Membership, Plant, Role, User
from tests.cast import PASSWORD, Cast

pytestmark = pytest.mark.django_db


@pytest.fixture
def code(settings: Any, tmp_path: Path) -> str:
    settings.DATA_DIR = tmp_path
    out = StringIO()
    call_command("first_administrator_code", stdout=out)
    return out.getvalue().strip()


def filled(code: str, **other: str) -> dict[str, str]:
    return {
        "code": code,
        "plant_code": "north",
        "plant_name": "North works",
        "time_zone": "Europe/Paris",
        "username": "first",
        "printed_name": "F. Irst",
        "password": PASSWORD,
        "again": PASSWORD,
    } | other


def test_the_door_of_an_empty_site_leads_to_the_first_administrator() -> None:
    assert Client().get("/sign-in/").url == "/first-administrator/"
    assert Client().get("/first-administrator/").status_code == 200


def test_the_code_makes_plant_and_administrator_and_signs_him_in(code: str, tmp_path: Path) -> None:
    client = Client()
    assert client.post("/first-administrator/", filled(f" {code.upper()} ")).url == "/people/"
    assert client.get("/people/").status_code == 200
    plant, person = Plant.objects.get(), User.objects.get()
    assert (plant.code, plant.time_zone, person.username) == ("north", "Europe/Paris", "first")
    assert Membership.objects.get().role == Role.ADMINISTRATOR
    assert plant.point_lists.exists(), "a new plant has what AFTER_PLANT_CREATED gives it"
    assert AuditEntry.objects.filter(kind="created", thing_type="register.user", person=person).exists()
    assert not (tmp_path / "first_administrator_code").exists(), "the code works once"


def test_the_short_name_of_the_first_plant_is_written_small_like_that_of_any_other(code: str) -> None:
    Client().post("/first-administrator/", filled(code, plant_code="North-1"))
    assert Plant.objects.get().code == "north-1"


def test_nobody_becomes_administrator_without_the_code(code: str) -> None:
    answer = Client().post("/first-administrator/", filled("aaaa-bbbb-cccc-dddd"))
    assert answer.status_code == 200
    assert "This is not the code" in answer.content.decode()
    assert 'value="F. Irst"' in answer.content.decode(), "what was typed stays"
    assert not User.objects.exists()


def test_where_no_code_was_made_none_fits(settings: Any, tmp_path: Path) -> None:
    settings.DATA_DIR = tmp_path
    assert not beginning.matches("")
    assert "This is not the code" in Client().post("/first-administrator/", filled("x")).content.decode()


@pytest.mark.parametrize(
    ("field", "text"),
    [("again", "not the same"), ("time_zone", "Europe/Nowhere"), ("plant_code", "no blanks"), ("password", "short")],
)
def test_a_bad_field_makes_nothing(code: str, field: str, text: str) -> None:
    wrong = {"password": text, "again": text} if field == "password" else {field: text}
    answer = Client().post("/first-administrator/", filled(code, **wrong))
    assert answer.context["form"].errors.keys() == {field}
    assert not Plant.objects.exists()
    assert not User.objects.exists()


def test_with_people_the_page_is_gone(cast: Cast, client_as: Callable[[User], Client]) -> None:
    assert Client().get("/first-administrator/").status_code == 404
    with pytest.raises(CommandError):
        call_command("first_administrator_code")


def test_the_code_is_kept_for_its_owner_and_asked_twice_stays_the_same(code: str, tmp_path: Path) -> None:
    kept = tmp_path / "first_administrator_code"
    assert stat.S_IMODE(kept.stat().st_mode) == 0o600
    assert beginning.code() == code
    kept.write_text("")
    assert beginning.matches(beginning.code())
