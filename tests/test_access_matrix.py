"""Every url for every role, for somebody not signed in, and for people of another plant."""

from __future__ import annotations

from collections.abc import Callable

import pytest
from django.db import connection, transaction
from django.http import HttpResponse
from django.test import Client
from django.urls import URLPattern, reverse

from register.access import OPEN, PERMISSIONS
from register.backing_up import table_names
from register.models import Role, User
from tests.access_samples import MARK, SAMPLES, Sample, World, build, every_url
from tests.cast import Cast, make_person

SignIn = Callable[[User], Client]
#: Ends the session or makes one: walked by tests of their own.
DOORS = {"sign-in", "sign-out", "first-administrator"}
URLS = list(every_url())
NO_VALUES = Sample(lambda world: {}, shared=True)


@pytest.fixture
def world(cast: Cast) -> World:
    return build(cast)


def permission(url: URLPattern) -> str:
    return str(getattr(url.callback, "permission", ""))


def address(url: URLPattern, world: World) -> str:
    assert url.name
    return reverse(url.name, kwargs=dict(SAMPLES.get(url.name, NO_VALUES).values(world)))


def ask(client: Client, path: str) -> HttpResponse:
    """GET, or POST where only that is answered; whatever it did to the data is undone."""
    with transaction.atomic():
        answer = client.get(path)
        if answer.status_code == 405:
            answer = client.post(path)
        transaction.set_rollback(True)
    return answer  # type: ignore[return-value]


def text(answer: HttpResponse) -> str:
    content = b"".join(answer.streaming_content) if answer.streaming else answer.content  # type: ignore[attr-defined]
    return content.decode(errors="replace")


def content() -> dict[str, list[tuple[str, ...]]]:
    """Every row of every table but sessions."""
    found = {}
    with connection.cursor() as cursor:
        for table in table_names(connection):
            if table != "django_session":
                cursor.execute(f'SELECT * FROM "{table}"')
                found[table] = sorted(tuple(map(repr, row)) for row in cursor.fetchall())
    return found


def test_every_url_has_a_name_a_permission_and_a_sample() -> None:
    names = [url.name for url in URLS]
    assert None not in names
    assert len(names) == len(set(names)), "two urls have one name"
    assert [url.name for url in URLS if permission(url) not in {*PERMISSIONS, *OPEN}] == []
    assert [url.name for url in URLS if url.pattern.converters and url.name not in SAMPLES] == []
    assert sorted(set(SAMPLES) - set(names)) == [], "samples of urls that are gone"


def test_only_the_doors_are_open_to_everybody() -> None:
    assert {url.name for url in URLS if permission(url) == "public"} == {"sign-in", "first-administrator"}
    assert {url.name for url in URLS if permission(url) == "signed in"} == {
        "home",
        "password",
        "sign-out",
        "plant-choose",
    }


def test_an_auditor_only_reads() -> None:
    assert {name for name, roles in PERMISSIONS.items() if Role.AUDITOR in roles} == {"read"}


def test_who_is_not_signed_in_is_led_to_the_door(world: World) -> None:
    wrong = {}
    for url in URLS:
        if permission(url) == "public":
            continue
        answer = ask(Client(), address(url, world))
        if answer.status_code != 302 or not answer["Location"].startswith("/sign-in/"):
            wrong[url.name] = answer.status_code
    assert wrong == {}


@pytest.mark.parametrize("role", Role.values)
def test_a_role_reaches_what_its_permissions_name_and_nothing_else(world: World, client_as: SignIn, role: str) -> None:
    client = client_as(world.cast.by_role[role])
    wrong = {}
    for url in URLS:
        if url.name in DOORS:
            continue
        answer = ask(client, address(url, world))
        allowed = permission(url) in OPEN or role in PERMISSIONS[permission(url)]
        if (
            (answer.status_code in {403, 404, 405} or answer.status_code >= 500)
            if allowed
            else answer.status_code != 403
        ):
            wrong[url.name] = (answer.status_code, "allowed" if allowed else "refused")
    assert wrong == {}


def test_an_auditor_changes_nothing_whatever_he_sends(world: World, client_as: SignIn) -> None:
    """Nor does anybody else by looking: only that something was taken out is noted."""
    client = client_as(world.cast.auditor)
    before = content()
    wrong = {}
    for url in URLS:
        if url.name in DOORS:
            continue
        for send in (client.get, client.post):
            answer = send(address(url, world))
            if answer.status_code >= 500:
                wrong[url.name] = answer.status_code
    assert wrong == {}
    after = content()
    assert [name for name in before if before[name] != after[name]] == ["register_auditentry"]
    added = [row for row in after["register_auditentry"] if row not in before["register_auditentry"]]
    assert added
    assert all("'exported'" in row for row in added)


@pytest.mark.parametrize("who", ["stranger", "elsewhere"])
def test_things_of_another_plant_do_not_exist(world: World, client_as: SignIn, who: str) -> None:
    """`elsewhere` may do everything at another plant: all that is not his must be missing, not forbidden."""
    person = world.elsewhere if who == "elsewhere" else world.cast.stranger
    client = client_as(person)
    wrong = {}
    for url in URLS:
        if url.name in DOORS or SAMPLES.get(url.name or "", NO_VALUES).shared:
            continue
        answer = ask(client, address(url, world))
        held = who == "elsewhere" or permission(url) in OPEN or Role.PLANNER in PERMISSIONS[permission(url)]
        if answer.status_code != (404 if held else 403):
            wrong[url.name] = answer.status_code
    assert wrong == {}


def test_no_page_of_another_plant_shows_what_belongs_here(world: World, client_as: SignIn) -> None:
    own, other = client_as(world.cast.auditor), client_as(world.elsewhere)
    shown, leaked = set(), set()
    for url in URLS:
        if url.name in DOORS or not SAMPLES.get(url.name or "", NO_VALUES).shared:
            continue
        path = address(url, world)
        for query in ("", f"?q={MARK}", f"?text={MARK}", "?plant=north"):
            if MARK in text(ask(own, path + query)).replace(f'value="{MARK}"', "").replace(f"“{MARK}”", ""):
                shown.add(url.name)
            if f"PT-{MARK}" in text(ask(other, path + query)) or f"{MARK}-S1" in text(ask(other, path + query)):
                leaked.add(url.name)
    assert leaked == set()
    assert {"register", "due-list", "standards", "audit", "tests", "sheets"} <= shown, (
        "the mark proves nothing if unseen"
    )


def test_who_has_no_role_sees_only_that(world: World, client_as: SignIn) -> None:
    client = client_as(make_person("newcomer"))
    wrong = {}
    for url in URLS:
        if url.name in DOORS:
            continue
        answer = ask(client, address(url, world))
        expected = {200} if url.name in {"home", "password"} else {404} if url.name == "plant-choose" else {403}
        if answer.status_code not in expected:
            wrong[url.name] = answer.status_code
    assert wrong == {}
    assert "You have no role in any plant yet" in client.get("/").content.decode()
