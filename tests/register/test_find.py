"""From any page to a tag or a transmitter by typing its number."""

from __future__ import annotations

from collections.abc import Callable

import pytest
from django.db import connection
from django.test import Client

from register.models import Tag
from register.searching import beginning
from tests import cast as people

SignIn = Callable[[people.User], Client]


@pytest.fixture
def client(cast: people.Cast, client_as: SignIn) -> Client:
    return client_as(cast.technician)


@pytest.fixture
def area(cast: people.Cast) -> people.Area:
    return people.make_area(cast.plant, "20")


@pytest.mark.parametrize("typed", ["PT-2041", "pt-2041", "  PT-2041 "])
def test_a_whole_tag_number_opens_its_tag(client: Client, area: people.Area, typed: str) -> None:
    tag = people.make_tag(area, "PT-2041")
    people.make_tag(area, "PT-20411")
    assert client.get("/find/", {"q": typed})["Location"] == f"/tags/{tag.pk}/"


def test_a_whole_serial_number_opens_its_transmitter(cast: people.Cast, client: Client) -> None:
    transmitter = people.make_transmitter(cast.plant, serial="V4-19022a")
    assert client.get("/find/", {"q": "V4-19022A"})["Location"] == f"/transmitters/{transmitter.pk}/"


def test_several_things_of_one_name_are_listed(cast: people.Cast, client: Client, area: people.Area) -> None:
    people.make_tag(area, "PT-2041")
    people.make_transmitter(cast.plant, serial="PT-2041")
    html = client.get("/find/", {"q": "pt-2041"}).content.decode()
    assert html.count(">PT-2041</a>") == 2


def test_a_beginning_lists_what_begins_so(client: Client, area: people.Area) -> None:
    for number in ("PT-2041", "PT-2042", "PT-3041", "XPT-2041"):
        people.make_tag(area, number)
    found = client.get("/find/", {"q": "pt-20"}).context["found"]
    assert [tag.number for tag in found.tags] == ["PT-2041", "PT-2042"]


def test_signs_of_a_pattern_are_only_signs(client: Client, area: people.Area) -> None:
    people.make_tag(area, "PT-2041")
    for typed in ("%", "PT_2041", "PT*", "\\", "'"):
        assert client.get("/find/", {"q": typed}).context["found"].tags == []


def test_nothing_found_says_what_to_do(client: Client) -> None:
    html = client.get("/find/", {"q": "ZZ-1"}).content.decode()
    assert "No tag and no serial number begins so." in html
    assert "Type it from its beginning" in html


def test_nothing_typed_says_what_to_type(client: Client) -> None:
    assert "Type a tag number or a serial number." in client.get("/find/").content.decode()


def test_another_plant_is_not_searched(cast: people.Cast, client: Client) -> None:
    people.make_tag(people.make_area(cast.other_plant), "PT-2041")
    people.make_transmitter(cast.other_plant, serial="PT-2041")
    html = client.get("/find/", {"q": "PT-2041"}).content.decode()
    assert "No tag and no serial number begins so." in html


def test_a_person_of_two_plants_finds_in_both_and_sees_which(cast: people.Cast, client_as: SignIn) -> None:
    people.give_roles(cast.technician, cast.other_plant, "auditor")
    for plant in (cast.plant, cast.other_plant):
        people.make_tag(people.make_area(plant), "PT-2041")
    html = client_as(cast.technician).get("/find/", {"q": "PT-2041"}).content.decode()
    assert "North works" in html
    assert "South works" in html


@pytest.mark.parametrize("letters", ["é", "Ü", "ß"])
def test_letters_beyond_ascii_are_found_as_they_stand(client: Client, area: people.Area, letters: str) -> None:
    tag = people.make_tag(area, f"P{letters}-1")
    assert client.get("/find/", {"q": f"p{letters}-1"})["Location"] == f"/tags/{tag.pk}/"


def test_a_beginning_is_looked_up_on_an_index(cast: people.Cast, area: people.Area) -> None:
    Tag.objects.bulk_create(
        Tag(plant=cast.plant, area=area, number=f"PT-{number}", measurand="pressure") for number in range(1000)
    )
    with connection.cursor() as cursor:
        cursor.execute("ANALYZE")
    plan = beginning(Tag.objects.filter(plant=cast.plant), "number", "PT-20").explain()
    assert "tag_once_per_plant_in_any_case" in plan
