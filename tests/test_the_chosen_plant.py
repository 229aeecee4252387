"""What is looked at in another window never decides for which plant something is done, shown or taken out."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass, field
from html.parser import HTMLParser
from typing import Any
from urllib.parse import parse_qs, urljoin, urlsplit

import pytest
from django.http import HttpRequest, HttpResponse
from django.test import Client
from django.urls import Resolver404, resolve, reverse

from calibration import scheduling
from register import access
from register.auditing import Act, Actor
from register.models import AuditEntry, Plant, Role, User
from tests.access_samples import SAMPLES, Sample, World, build, every_url
from tests.cast import Cast, give_roles, make_area, make_tag, make_transmitter
from tests.register.test_people import NEW

SignIn = Callable[[User], Client]
NO_VALUES = Sample(lambda world: {}, shared=True)
DOORS = {"sign-in", "sign-out", "first-administrator", "plant-choose"}


@pytest.fixture
def both(cast: Cast) -> User:
    """Somebody who may do everything in both plants."""
    person = cast.administrator
    for role in set(Role.values) - {Role.ADMINISTRATOR}:
        give_roles(person, cast.plant, role)
    give_roles(person, cast.other_plant, *Role.values)
    return person


@dataclass(frozen=True)
class Way:
    """A way from a page to another address: a form, a part fetched by htmx, a link."""

    what: str
    address: str
    plant: tuple[str, ...]


@dataclass
class Page(HTMLParser):
    """Every way that leads on from a page, with the plant that it names."""

    at: str
    ways: list[Way] = field(default_factory=list)
    _form: dict[str, str] | None = None
    _hidden: list[str] = field(default_factory=list)

    def __post_init__(self) -> None:
        super().__init__()

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        has = {name: value or "" for name, value in attrs}
        if tag == "form":
            self._form, self._hidden = has, []
        elif tag == "input" and has.get("name") == "plant":
            self._hidden.append(has.get("value", ""))
        elif tag == "button" and "formaction" in has:
            self._way("button", has["formaction"])
        elif tag == "a" and not has.get("href", "#").startswith("#"):
            self._way("link", has["href"])
        if tag != "form":
            for name in ("hx-get", "hx-post"):
                if name in has:
                    self._way(name, has[name])

    def handle_endtag(self, tag: str) -> None:
        if tag != "form" or self._form is None:
            return
        by_get = self._form.get("method", "get").lower() == "get"
        action = self._form.get("action", "")
        # A form that is sent by GET has its fields for the whole query; one that is posted keeps that of its action.
        self._way(
            "form", urlsplit(urljoin(self.at, action)).path if by_get else action, *(self._hidden if by_get else ())
        )
        if "hx-get" in self._form:
            self._way("form hx-get", self._form["hx-get"], *self._hidden)
        self._form = None

    def _way(self, what: str, address: str, *plant: str) -> None:
        whole = urlsplit(urljoin(self.at, address))
        self.ways.append(Way(what, whole.path, (*parse_qs(whole.query).get("plant", []), *plant)))


def ways_from(client: Client, address: str) -> list[Way]:
    """The ways that lead on from a page; of what is only sent, none."""
    page = Page(address)
    answer: Any = client.get(address)
    if answer.status_code == 405:
        client.post(f"{address}?plant=north")
    elif answer.status_code == 200 and "html" in answer["Content-Type"]:
        page.feed(answer.content.decode())
    return page.ways


def pages(world: World) -> Iterator[tuple[str, str]]:
    for url in every_url():
        assert url.name
        if url.name not in DOORS:
            yield url.name, reverse(url.name, kwargs=dict(SAMPLES.get(url.name, NO_VALUES).values(world)))


@pytest.fixture
def depending(monkeypatch: pytest.MonkeyPatch) -> set[str]:
    """Names of the urls that have asked for the chosen plant."""
    asked: set[str] = set()
    original = access.chosen_plant

    def noted(request: HttpRequest, *args: Any, **more: Any) -> Any:
        asked.add(access.view_name(request))
        return original(request, *args, **more)

    monkeypatch.setattr(access, "chosen_plant", noted)
    return asked


def test_every_way_to_a_page_of_the_chosen_plant_names_it(
    cast: Cast, both: User, client_as: SignIn, depending: set[str]
) -> None:
    world = build(cast)
    client = client_as(both)
    found: list[tuple[str, Way]] = []
    for name, address in pages(world):
        # The page itself is reached without a word of the plant; from there on another window may change the cookie.
        client.cookies["plant"] = "north"
        found += [(name, way) for way in ways_from(client, address)]
    assert {"register", "register-export", "due-export", "person-new", "audit-export", "standard-new"} <= depending
    # Types and heads are the same in all plants: their pages only add what this one has of them.
    unnamed = {
        (name, way.what, way.address)
        for name, way in found
        if target(way.address) in depending - {"type", "head"} and set(way.plant) != {"north"}
    }
    assert sorted(unnamed) == []
    kinds = {way.what for _, way in found if target(way.address) in depending}
    assert kinds == {"form", "form hx-get", "link"}, "what is not seen proves nothing"


def target(address: str) -> str:
    try:
        return resolve(address).url_name or ""
    except Resolver404:
        return ""


def test_a_person_added_in_one_window_gets_roles_where_the_page_said(cast: Cast, both: User, client_as: SignIn) -> None:
    elsewhere = make_tag(make_area(cast.other_plant, "S1"))
    scheduling.refresh([elsewhere.pk])
    client = client_as(both)
    [action] = [way for way in ways_from(client, "/people/new/?plant=north") if way.what == "form" and way.plant]
    client.get(f"/tags/{elsewhere.pk}/")
    assert client.cookies["plant"].value == "south"
    client.post(f"{action.address}?plant={action.plant[0]}", NEW)
    person = User.objects.get(username="n.ewman")
    assert {membership.plant for membership in person.memberships.all()} == {cast.plant}


@pytest.mark.parametrize("address", ["/people/new/", "/standards/new/", "/register/export/", "/audit/export/"])
def test_what_is_sent_without_a_plant_is_refused_where_there_is_a_choice(
    cast: Cast, both: User, client_as: SignIn, address: str
) -> None:
    client = client_as(both)
    client.cookies["plant"] = "south"
    answer = client.post(address, NEW)
    assert answer.status_code == 400
    assert "Nothing was changed." in answer.content.decode()
    assert not User.objects.filter(username="n.ewman").exists()
    assert not AuditEntry.objects.filter(kind=AuditEntry.Kind.EXPORTED).exists()


def test_a_part_of_a_page_without_a_plant_is_refused_where_there_is_a_choice(both: User, client_as: SignIn) -> None:
    client = client_as(both)
    part = {"HX-Request": "true"}
    assert client.get("/register/", headers=part).status_code == 400
    assert client.get("/register/?plant=north", headers=part).status_code == 200


def test_a_person_of_one_plant_need_not_name_it(cast: Cast, client_as: SignIn) -> None:
    client = client_as(cast.administrator)
    client.post("/people/new/", NEW)
    assert User.objects.get(username="n.ewman").memberships.first().plant == cast.plant  # type: ignore[union-attr]
    assert client.get("/register/", headers={"HX-Request": "true"}).status_code == 200


def test_the_file_of_a_list_is_that_of_the_plant_on_the_page(cast: Cast, both: User, client_as: SignIn) -> None:
    tags = [make_tag(make_area(plant, "20"), f"PT-{plant.code}") for plant in (cast.plant, cast.other_plant)]
    scheduling.refresh([tag.pk for tag in tags])
    client = client_as(both)
    [button] = [way for way in ways_from(client, "/register/?plant=north") if way.address == "/register/export/"]
    client.cookies["plant"] = "south"
    lines = text(client.post(f"{button.address}?plant={button.plant[0]}", {"plant": "north", "sort": "tag"}))
    assert "PT-north" in lines
    assert "PT-south" not in lines


@pytest.mark.parametrize("name", ["register", "due-list", "transmitters", "audit"])
def test_the_next_page_of_a_list_stays_in_its_plant(cast: Cast, both: User, client_as: SignIn, name: str) -> None:
    area = make_area(cast.plant, "20")
    scheduling.refresh([make_tag(area, f"PT-{number}").pk for number in range(60)])
    make_entries(cast.plant, 60)
    for _ in range(60):
        make_transmitter(cast.plant)
    client = client_as(both)
    client.cookies["plant"] = "north"
    assert parse_qs(client.get(reverse(name)).context["paging"].later.removeprefix("?"))["plant"] == ["north"]


def make_entries(plant: Plant, count: int) -> None:
    act = Act(Actor(person=None), "a reason")
    for _ in range(count):
        act.created(plant, plant=plant)
    act.write()


def text(answer: HttpResponse) -> str:
    return b"".join(answer.streaming_content).decode()  # type: ignore[attr-defined]
