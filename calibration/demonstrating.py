"""Loads the demonstration plants into an empty database, by the acts that people use."""

from __future__ import annotations

import datetime
from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass, field
from typing import Any, Final
from zoneinfo import ZoneInfo

from django.contrib.auth.hashers import make_password
from django.db import transaction
from django.utils import timezone

from calibration import scheduling, standards
from calibration.demonstration.data import read
from calibration.demonstration.sheet import open_half_filled
from calibration.demonstration.told import Told
from calibration.models import PointList, Requirement, Standard
from calibration.recording import write_record, write_records
from fixtures.demonstration.people import PASSWORD, PEOPLE
from register import editing, fitting, flagging, intervening, membership, reranging
from register.auditing import Act, Actor
from register.models import (
    Area,
    Flag,
    Intervention,
    MeasuringHead,
    Plant,
    Tag,
    Transmitter,
    TransmitterType,
    User,
)

WHY: Final = "demonstration"


class NotEmptyError(RuntimeError):
    """There is something in the database already."""


@dataclass(slots=True)
class Loaded:
    """What was loaded, by what it is called in the data."""

    people: dict[str, User] = field(default_factory=dict)
    plants: dict[str, Plant] = field(default_factory=dict)
    areas: dict[tuple[str, str], Area] = field(default_factory=dict)
    heads: dict[str, MeasuringHead] = field(default_factory=dict)
    tags: dict[tuple[str, str], Tag] = field(default_factory=dict)
    transmitters: dict[str, Transmitter] = field(default_factory=dict)
    tests: int = 0

    def by(self, username: str, plant: str) -> Actor:
        """The person, or the one who does that work at a plant where he has no role."""
        works_there = {person.username for person in PEOPLE if plant in dict(person.roles)}
        return Actor(self.people[username if username in works_there else "jetty"])


@transaction.atomic
def load() -> Loaded:
    """Load plants, people, register, standards and eight years of tests that end today; all of it or nothing.

    Raises
    ------
    NotEmptyError
        There are people or plants already.
    """
    if User.objects.exists() or Plant.objects.exists():
        raise NotEmptyError("There are people or plants in the database already: the demonstration needs an empty one.")
    today = timezone.now().astimezone(ZoneInfo("Europe/London")).date()
    site, tests = read(today)
    loaded = Loaded()
    _places(loaded, site)
    _people(loaded)
    _catalogue(loaded, site)
    _standards(loaded, site)
    with flagging.settled_together(Act(Actor(loaded.people["engineer"]), WHY)):
        _devices(loaded, site)
        _life(loaded, site, today)
    _tests(loaded, tests)
    _decisions(loaded, site, today)
    for row in site["sheets"]:
        tag = loaded.tags[row["plant"], row["tag"]]
        open_half_filled(by=loaded.by(row["by"], row["plant"]), tag=tag, row=row)
    return loaded


def _places(loaded: Loaded, site: Mapping[str, Any]) -> None:
    program = Actor(None)
    for row in site["plants"]:
        values = {name: value for name, value in row.items() if name != "areas"}
        plant = editing.create_plant(by=program, reason=WHY, values=values)
        loaded.plants[plant.code] = plant
        for area in row["areas"]:
            made = editing.create_area(by=program, reason=WHY, plant=plant, values=area)
            loaded.areas[plant.code, area["code"]] = made


def _people(loaded: Loaded) -> None:
    """Administrators come first, since no plant is left without one. One hash serves all: they share the password."""
    hashed = make_password(PASSWORD)
    for person in sorted(PEOPLE, key=lambda person: "administrator" not in dict(person.roles).values()):
        user = loaded.people.get(person.username) or _person(person.username, person.printed_name, hashed)
        loaded.people[person.username] = user
        for code in dict(person.roles):
            roles = [role for plant, role in person.roles if plant == code]
            membership.set_roles(by=Actor(None), reason=WHY, person=user, plant=loaded.plants[code], roles=roles)


def _person(username: str, printed_name: str, hashed: str) -> User:
    user = User(username=username, printed_name=printed_name, password=hashed, is_demonstration=True)
    user.save()
    act = Act(by=Actor(None), reason=WHY)
    act.created(user, plant=None)
    act.write()
    return user


def _catalogue(loaded: Loaded, site: Mapping[str, Any]) -> None:
    by = Actor(loaded.people["engineer"])
    makers = {name: editing.create_maker(by=by, reason=WHY, values={"name": name}) for name in site["makers"]}
    types: dict[str, TransmitterType] = {}
    for row in site["types"]:
        values = {name: value for name, value in row.items() if name != "maker"}
        made = editing.create_type(by=by, reason=WHY, maker=makers[row["maker"]], values=values)
        types[str(made)] = made
    for row in site["heads"]:
        values = {name: value for name, value in row.items() if name not in ("key", "type")}
        loaded.heads[row["key"]] = editing.create_head(by=by, reason=WHY, type_=types[row["type"]], values=values)


def _standards(loaded: Loaded, site: Mapping[str, Any]) -> None:
    for row in site["standards"]:
        by = loaded.by("planner", row["plant"])
        values = {name: value for name, value in row.items() if name not in ("plant", "certificates")}
        plant = loaded.plants[row["plant"]]
        standard: Standard = standards.create_standard(by=by, plant=plant, reason=WHY, **values)
        for certificate in row["certificates"]:
            standards.add_certificate(by=by, standard=standard, reason=WHY, **certificate)


def _devices(loaded: Loaded, site: Mapping[str, Any]) -> None:
    for row in site["transmitters"]:
        head = loaded.heads[row["head"]]
        values = {name: value for name, value in row.items() if name not in ("plant", "head")}
        values |= {"head": head, "type": head.type, "maker": head.type.maker}
        loaded.transmitters[row["serial"]] = editing.create_transmitter(
            by=loaded.by("engineer", row["plant"]), reason=WHY, plant=loaded.plants[row["plant"]], values=values
        )
    for row in site["tags"]:
        values = row["values"] | {
            "number": row["number"],
            "area": loaded.areas[row["plant"], row["values"]["area"]],
        }
        loaded.tags[row["plant"], row["number"]] = editing.create_tag(
            by=loaded.by("engineer", row["plant"]), reason=WHY, plant=loaded.plants[row["plant"]], values=values
        )


@dataclass(frozen=True, slots=True)
class Turn:
    """One act of the register on its day; `order` settles what comes first on one day."""

    on: datetime.date
    order: int
    act: Callable[[], object]


def _life(loaded: Loaded, site: Mapping[str, Any], today: datetime.date) -> None:
    """Everything that happened to tags and transmitters, in the order of its days."""
    turns = [*_fittings(loaded, site), *_interventions(loaded, site)]
    for row in site["tags"]:
        turns += _ranges(loaded, row, today)
        turns += _requirements(loaded, row)
        if row["out_of_service_on"]:
            turns.append(_out_of_service(loaded, row))
    for turn in sorted(turns, key=lambda turn: (turn.on, turn.order)):
        turn.act()


def _fittings(loaded: Loaded, site: Mapping[str, Any]) -> Iterator[Turn]:
    begun = {(row["plant"], row["tag"], row["fitted_on"]): row for row in site["fittings"]}
    swapped = set()
    for row in site["fittings"]:
        tag = loaded.tags[row["plant"], row["tag"]]
        if not row["removed_on"]:
            continue
        following = begun.get((row["plant"], row["tag"], row["removed_on"]))
        if following is None:
            yield Turn(row["removed_on"], 1, _remove(loaded, row, tag))
        else:
            swapped.add(id(following))
            yield Turn(row["removed_on"], 1, _swap(loaded, row, following, tag))
    for row in site["fittings"]:
        if id(row) not in swapped:
            yield Turn(row["fitted_on"], 2, _fit(loaded, row, loaded.tags[row["plant"], row["tag"]]))


def _remove(loaded: Loaded, row: Mapping[str, Any], tag: Tag) -> Callable[[], object]:
    return lambda: fitting.remove(
        by=loaded.by("planner", row["plant"]),
        reason=row["removed_reason"],
        tag=tag,
        on=row["removed_on"],
        whereabouts=row["goes"],
    )


def _swap(loaded: Loaded, row: Mapping[str, Any], following: Mapping[str, Any], tag: Tag) -> Callable[[], object]:
    return lambda: fitting.swap(
        by=loaded.by("technician", row["plant"]),
        reason=row["removed_reason"],
        tag=tag,
        transmitter=loaded.transmitters[following["serial"]],
        on=row["removed_on"],
        whereabouts=row["goes"],
    )


def _fit(loaded: Loaded, row: Mapping[str, Any], tag: Tag) -> Callable[[], object]:
    return lambda: fitting.fit(
        by=loaded.by("technician", row["plant"]),
        reason=row["fitted_reason"],
        tag=tag,
        transmitter=loaded.transmitters[row["serial"]],
        on=row["fitted_on"],
    )


def _interventions(loaded: Loaded, site: Mapping[str, Any]) -> Iterator[Turn]:
    for row in site["interventions"]:
        yield Turn(row["done_on"], 3, _intervene(loaded, row))


def _intervene(loaded: Loaded, row: Mapping[str, Any]) -> Callable[[], object]:
    by, transmitter = loaded.by("technician", row["plant"]), loaded.transmitters[row["serial"]]
    if row["kind"] == Intervention.Kind.NEW_HEAD:
        return lambda: intervening.change_head(
            by=by,
            reason=row["reason"],
            transmitter=transmitter,
            head=loaded.heads[row["head_after"]],
            on=row["done_on"],
        )
    return lambda: intervening.record_intervention(
        by=by, reason=row["reason"], transmitter=transmitter, kind=row["kind"], done_on=row["done_on"]
    )


def _ranges(loaded: Loaded, row: Mapping[str, Any], today: datetime.date) -> Iterator[Turn]:
    tag, by = loaded.tags[row["plant"], row["number"]], loaded.by("engineer", row["plant"])
    for given in row["ranges"]:
        if given["effective_from"] <= today:
            yield Turn(given["effective_from"], 4, _range(by, tag, given))


def _range(by: Actor, tag: Tag, given: Mapping[str, Any]) -> Callable[[], object]:
    values = {name: value for name, value in given.items() if name not in ("effective_from", "reason", "withdrawn")}

    def set_range() -> None:
        made = reranging.set_range(
            by=by, reason=given["reason"], tag=tag, values=values, effective_from=given["effective_from"]
        )
        if "withdrawn" in given:
            reranging.withdraw_range(by=by, reason=given["withdrawn"], range_=made)

    return set_range


def _requirements(loaded: Loaded, row: Mapping[str, Any]) -> Iterator[Turn]:
    tag, by = loaded.tags[row["plant"], row["number"]], loaded.by("engineer", row["plant"])
    lists = {found.points: found for found in PointList.objects.filter(plant=tag.plant)}
    for given in row["requirements"]:
        values = {
            name: value
            for name, value in given.items()
            if name not in ("effective_from", "reason", "points", "anchor_on")
        }
        values["point_list"] = lists[given["points"]]
        if given["anchor_on"]:
            values |= {"anchor": Requirement.Anchor.CALENDAR, "anchor_on": given["anchor_on"]}
        yield Turn(given["effective_from"], 5, _requirement(by, tag, given, values))


def _requirement(by: Actor, tag: Tag, given: Mapping[str, Any], values: Mapping[str, Any]) -> Callable[[], object]:
    return lambda: scheduling.set_requirement(
        by=by, reason=given["reason"], tag=tag, values=values, effective_from=given["effective_from"]
    )


def _out_of_service(loaded: Loaded, row: Mapping[str, Any]) -> Turn:
    tag, on = loaded.tags[row["plant"], row["number"]], row["out_of_service_on"]
    by = loaded.by("engineer", row["plant"])
    return Turn(
        on, 6, lambda: editing.take_out_of_service(by=by, reason="not needed while the line stands", tag=tag, on=on)
    )


def _tests(loaded: Loaded, rows: list[dict[str, Any]]) -> None:
    for plant in loaded.plants.values():
        told = Told.read(plant, loaded.people)
        made_here = [row for row in rows if row["plant"] == plant.code]
        act = Act(by=Actor(None), reason=WHY)
        records = write_records([told.content(row) for row in made_here], act=act)
        for row, record in zip(made_here, records, strict=True):
            if "correction" in row:
                write_record(told.corrected(row, record.test_id), act=act)
        act.write()
        loaded.tests += len(records)


def _decisions(loaded: Loaded, site: Mapping[str, Any], today: datetime.date) -> None:
    """What people decided of late: deferrals, accepted flags, ranges planned ahead."""
    for row in site["tags"]:
        tag, engineer = loaded.tags[row["plant"], row["number"]], loaded.by("engineer", row["plant"])
        if "deferral" in row:
            asked = {name: value for name, value in row["deferral"].items() if name != "approved"}
            deferral = scheduling.defer(by=loaded.by("planner", row["plant"]), tag=tag, **asked)
            if row["deferral"]["approved"]:
                scheduling.approve_deferral(by=engineer, reason="risk accepted for the time asked", deferral=deferral)
        if "accepted" in row:
            accepted = row["accepted"]
            flag = Flag.objects.get(tag=tag, check_key=accepted["check"])
            flagging.accept_flag(by=engineer, reason=accepted["reason"], flag=flag, until=accepted["until"])
        for given in row["ranges"]:
            if given["effective_from"] > today:
                _range(engineer, tag, given)()
