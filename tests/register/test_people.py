"""People and roles: an administrator governs the people of his plants, and nobody else does."""

from __future__ import annotations

import contextlib
import re
import threading
from collections.abc import Callable
from functools import partial
from typing import Any

import pytest
from django.core.exceptions import ValidationError
from django.db import connection
from django.test import Client
from django.test.utils import CaptureQueriesContext

from register import access, membership
from register.auditing import Actor
from register.models import AuditEntry, Membership, Plant, Role, User
from tests.at_once import AtTheSameTime
from tests.cast import PASSWORD, Cast, give_roles, make_cast, make_person

SignIn = Callable[[User], Client]
NEW = {
    "username": "n.ewman",
    "printed_name": "N. Ewman",
    "email": "",
    "roles": ["technician", "reviewer"],
    "password": "",
    "reason": "starts on Monday",
}


@pytest.fixture
def administrator(cast: Cast, client_as: SignIn) -> Client:
    return client_as(cast.administrator)


def test_a_new_person_gets_roles_and_a_password_that_is_shown_once(cast: Cast, administrator: Client) -> None:
    made = administrator.post("/people/new/", NEW)
    person = User.objects.get(username="n.ewman")
    assert made.url == f"/people/{person.pk}/"
    shown = administrator.get(made.url).content.decode()
    password = re.search(r'<b class="mono">([a-z0-9-]{19})</b>', shown)
    assert password is not None
    assert person.check_password(password[1])
    assert password[1] not in administrator.get(made.url).content.decode()
    assert {m.role for m in person.memberships.filter(plant=cast.plant)} == {"technician", "reviewer"}
    entries = {
        entry.field: entry for entry in AuditEntry.objects.filter(thing_id=str(person.pk), thing_type="register.user")
    }
    assert set(entries) == {"", "password", "roles"}
    assert entries["roles"].after == "technician, reviewer"
    assert {entry.reason for entry in entries.values()} == {"starts on Monday"}
    assert {entry.act for entry in entries.values()} == {entries[""].act}
    assert password[1] not in repr([vars(entry) for entry in entries.values()])


def test_the_new_person_signs_in_and_must_choose_his_own_password(cast: Cast, administrator: Client) -> None:
    administrator.post("/people/new/", NEW | {"password": "set by hand 42"})
    client = Client()
    client.post("/sign-in/", {"username": "n.ewman", "password": "set by hand 42"})
    assert client.get("/audit/").url == "/password/"


@pytest.mark.parametrize(
    ("field", "value", "said"),
    [
        ("username", "Planner", "taken"),
        ("username", "two words", "Enter a valid username"),
        ("printed_name", "", "This is needed."),
        ("roles", [], "at least one role"),
        ("password", "12345678901", "too common"),
        ("password", "short", "too short"),
        ("reason", "", "Say why"),
    ],
)
def test_bad_input_is_said_beside_the_field_and_nothing_is_lost(
    administrator: Client, field: str, value: object, said: str
) -> None:
    answer = administrator.post("/people/new/", NEW | {field: value})
    assert answer.status_code == 200
    assert said in " ".join(answer.context["form"].errors[field])
    page = answer.content.decode()
    kept = "printed_name" if field == "username" else "username"
    assert f'value="{NEW[kept]}"' in page
    assert not User.objects.filter(username="n.ewman").exists()


def test_an_edit_shows_before_and_after_in_the_trail(cast: Cast, administrator: Client) -> None:
    page = f"/people/{cast.planner.pk}/edit/"
    values = {"username": "planner", "printed_name": "P. Lanner-Smith", "email": "", "reason": "married"}
    assert administrator.post(page, values).status_code == 302
    entry = AuditEntry.objects.get(field="printed_name")
    assert (entry.before, entry.after, entry.reason, entry.person) == (
        "Planner",
        "P. Lanner-Smith",
        "married",
        cast.administrator,
    )


def test_roles_change_at_once(cast: Cast, administrator: Client, client_as: SignIn) -> None:
    planner = client_as(cast.planner)
    assert planner.get("/people/").status_code == 403
    administrator.post(
        f"/people/{cast.planner.pk}/roles/north/", {"roles": ["administrator"], "reason": "covers the holidays"}
    )
    assert planner.get("/people/").status_code == 200
    entry = AuditEntry.objects.get(field="roles")
    assert (entry.before, entry.after, entry.plant) == ("maintenance planner", "administrator", cast.plant)


def test_a_plant_never_loses_its_last_administrator(cast: Cast, administrator: Client) -> None:
    own = f"/people/{cast.administrator.pk}/roles/north/"
    refused = administrator.post(own, {"roles": ["planner"], "reason": "enough"})
    assert "left without an administrator" in refused.content.decode()
    assert Membership.objects.filter(user=cast.administrator, role=Role.ADMINISTRATOR).exists()
    other = make_person("second", plant=cast.plant, roles=(Role.ADMINISTRATOR,))
    assert administrator.post(own, {"roles": ["planner"], "reason": "enough"}).status_code == 302
    with pytest.raises(ValidationError, match="left without an administrator"):
        membership.deactivate(by=Actor(cast.planner), reason="x", person=other)
    assert User.objects.get(pk=other.pk).is_active


def test_nobody_deactivates_himself(cast: Cast, administrator: Client) -> None:
    make_person("second", plant=cast.plant, roles=(Role.ADMINISTRATOR,))
    answer = administrator.post(f"/people/{cast.administrator.pk}/deactivate/", {"reason": "retiring"})
    assert "You cannot deactivate yourself" in answer.content.decode()
    assert User.objects.get(pk=cast.administrator.pk).is_active


def test_leaving_and_coming_back_keep_the_roles(cast: Cast, administrator: Client) -> None:
    administrator.post(f"/people/{cast.technician.pk}/deactivate/", {"reason": "left"})
    assert not Client().login(username="technician", password=PASSWORD)
    administrator.post(f"/people/{cast.technician.pk}/reactivate/", {"reason": "came back"})
    assert User.objects.get(pk=cast.technician.pk).is_active
    assert cast.technician.memberships.get().role == Role.TECHNICIAN
    said = list(AuditEntry.objects.filter(field="may sign in").order_by("id").values_list("before", "after", "reason"))
    assert said == [("yes", "no", "left"), ("no", "yes", "came back")]


def test_people_of_other_plants_do_not_exist_here(cast: Cast, administrator: Client) -> None:
    for page in ("", "edit/", "roles/north/", "password/", "deactivate/", "reactivate/"):
        assert administrator.get(f"/people/{cast.stranger.pk}/{page}").status_code == 404
    assert "stranger" not in administrator.get("/people/").content.decode()
    assert administrator.get(f"/people/{cast.planner.pk}/roles/south/").status_code == 404


def test_somebody_of_another_plant_is_added_by_his_sign_in_name(cast: Cast, administrator: Client) -> None:
    unknown = administrator.post("/people/join/", {"username": "strangr", "roles": ["auditor"], "reason": "audit"})
    assert "Nobody signs in as “strangr”" in unknown.content.decode()
    administrator.post("/people/join/", {"username": "stranger", "roles": ["auditor"], "reason": "audit"})
    assert set(cast.stranger.memberships.values_list("plant__code", "role")) == {
        ("south", "planner"),
        ("north", "auditor"),
    }


def test_who_also_belongs_elsewhere_is_governed_only_as_to_roles_here(cast: Cast, administrator: Client) -> None:
    give_roles(cast.stranger, cast.plant, Role.AUDITOR)
    for page in ("edit", "password", "deactivate", "reactivate"):
        assert administrator.get(f"/people/{cast.stranger.pk}/{page}/").status_code == 403
    assert administrator.get(f"/people/{cast.stranger.pk}/roles/north/").status_code == 200
    assert administrator.get(f"/people/{cast.stranger.pk}/roles/south/").status_code == 404
    give_roles(cast.administrator, cast.other_plant, Role.ADMINISTRATOR)
    assert administrator.get(f"/people/{cast.stranger.pk}/edit/").status_code == 200


def test_one_administrator_of_two_plants_changes_only_the_plant_named(cast: Cast, administrator: Client) -> None:
    give_roles(cast.administrator, cast.other_plant, Role.ADMINISTRATOR)
    administrator.post(f"/people/{cast.stranger.pk}/roles/south/", {"roles": [], "reason": "moved away"})
    assert not access.roles(User.objects.get(pk=cast.stranger.pk))
    assert "stranger" in administrator.get("/people/").content.decode(), "who has no role is not lost"


def test_the_list_costs_the_same_queries_with_more_people(cast: Cast, administrator: Client) -> None:
    def count() -> int:
        with CaptureQueriesContext(connection) as queries:
            assert administrator.get("/people/").status_code == 200
        return len(queries)

    few = count()
    for number in range(30):
        make_person(f"more-{number}", plant=cast.plant, roles=(Role.TECHNICIAN, Role.AUDITOR))
    assert count() == few


def test_the_part_that_htmx_gets_is_part_of_the_page(administrator: Client) -> None:
    part = administrator.get("/people/?text=tech", headers={"HX-Request": "true"}).content.decode()
    page = administrator.get("/people/?text=tech").content.decode()
    assert part.strip() in page
    assert "technician" in part
    assert "planner" not in part


@pytest.mark.postgresql
@pytest.mark.django_db(transaction=True)
def test_two_administrators_who_deactivate_one_another_leave_the_plant_with_one(
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    cast = make_cast()
    second = make_person("second", plant=cast.plant, roles=(Role.ADMINISTRATOR,))
    both, set_active = threading.Barrier(2), membership._set_active

    def beside_the_other(*arguments: Any, **more: Any) -> None:
        with contextlib.suppress(threading.BrokenBarrierError):
            both.wait(1)
        set_active(*arguments, **more)

    monkeypatch.setattr(membership, "_set_active", beside_the_other)
    together = AtTheSameTime()
    for by, person in ((cast.administrator, second), (second, cast.administrator)):
        together.do(partial(membership.deactivate, by=Actor(by), reason="?", person=person), by.username)
    together.end()
    [refused] = together.failures
    assert isinstance(refused, ValidationError)
    assert "left without an administrator" in refused.messages[0]
    assert User.objects.filter(memberships__role=Role.ADMINISTRATOR, is_active=True).count() == 1


@pytest.mark.postgresql
@pytest.mark.django_db(transaction=True)
def test_roles_and_deactivation_of_one_person_come_one_after_the_other(monkeypatch: pytest.MonkeyPatch) -> None:
    """He becomes the only administrator of another plant while he is deactivated in his own."""
    cast = make_cast()
    second = make_person("second", plant=cast.plant, roles=(Role.ADMINISTRATOR,))
    give_roles(cast.administrator, cast.other_plant, Role.ADMINISTRATOR)
    both, keep = threading.Barrier(2), membership._keep_an_administrator

    def beside_the_other(plant: Plant) -> None:
        keep(plant)
        with contextlib.suppress(threading.BrokenBarrierError):
            both.wait(1)

    monkeypatch.setattr(membership, "_keep_an_administrator", beside_the_other)
    together, by = AtTheSameTime(), Actor(cast.administrator)
    together.do(partial(membership.deactivate, by=by, reason="?", person=second), "leaves")
    together.do(
        partial(
            membership.set_roles, by=by, reason="?", person=second, plant=cast.other_plant, roles=[Role.ADMINISTRATOR]
        ),
        "comes",
    )
    together.end()
    assert together.failures == []
    assert both.broken, "neither saw what the other had not finished"


@pytest.mark.postgresql
@pytest.mark.django_db(transaction=True)
def test_a_site_begins_once(monkeypatch: pytest.MonkeyPatch) -> None:
    both, check = threading.Barrier(2), membership._check_password

    def beside_the_other(*arguments: Any) -> None:
        with contextlib.suppress(threading.BrokenBarrierError):
            both.wait(1)
        check(*arguments)

    monkeypatch.setattr(membership, "_check_password", beside_the_other)
    together = AtTheSameTime()
    for name in ("one", "two"):
        together.do(
            partial(
                membership.begin,
                remote_address="127.0.0.1",
                plant={"code": name, "name": name.title(), "time_zone": "UTC"},
                person={"username": name, "printed_name": name.title()},
                password=PASSWORD,
            ),
            name,
        )
    together.end()
    assert [str(error) for error in together.failures] == [
        "['There are people already: an administrator makes new ones.']"
    ]
    assert User.objects.count() == Plant.objects.count() == 1
