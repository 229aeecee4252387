"""A plant in which everything that has a page exists once, and for each url an address in it.

A new url with something to fill in needs a line in `SAMPLES`: `test_access_matrix` fails until it has one.
"""

from __future__ import annotations

import datetime
import uuid
from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass
from typing import Any, Final

from django.core.files.base import ContentFile
from django.core.files.storage import default_storage
from django.urls import URLPattern, URLResolver, get_resolver
from django.utils import timezone

from calibration import signing
from calibration.models import Certificate, Deferral, GuidanceLine, PointList, Requirement, Sheet, Standard, Test
from calibration.provision import provide_defaults
from calibration.scheduling import refresh
from register.auditing import Act, Actor
from register.imports.kinds import KINDS
from register.imports.uploads import Kept, path_of
from register.models import (
    Area,
    AuditEntry,
    Flag,
    Intervention,
    Maker,
    MeasuringHead,
    Plant,
    Range,
    Role,
    Tag,
    Transmitter,
    TransmitterType,
    User,
)
from tests import cast as people
from tests.calibration.at_work import opened, to_as_found, to_signature

#: In the number of every tag of the plant: must never show up on a page of somebody who has no role there.
MARK: Final = "NORTHMARK"
TOKEN: Final = uuid.UUID(int=7)


@dataclass
class World:
    """One of each; all of it belongs to “North works” but the catalogue, which all plants share."""

    cast: people.Cast
    elsewhere: User
    plant: Plant
    area: Area
    tag: Tag
    transmitter: Transmitter
    type: TransmitterType
    head: MeasuringHead
    maker: Maker
    range: Range
    flag: Flag
    intervention: Intervention
    requirement: Requirement
    deferral: Deferral
    standard: Standard
    certificate: Certificate
    point_list: PointList
    guidance: GuidanceLine
    sheet: Sheet
    test: Test
    entry: AuditEntry


def build(cast: people.Cast) -> World:
    plant = cast.plant
    provide_defaults(by=Actor(person=None), plant=plant)
    provide_defaults(by=Actor(person=None), plant=cast.other_plant)
    area = people.make_area(plant, "20", name=f"{MARK} area")
    tag = people.make_ready_tag(area, f"PT-{MARK}-1", service=f"{MARK} water")
    transmitter = tag.current_fitting.transmitter  # type: ignore[union-attr]
    pressure, _ = people.make_standard(plant, name=f"{MARK}-S1"), people.make_meter(plant, name=f"{MARK}-S2")
    tablet = opened(tag, cast.technician)
    to_signature(tablet)
    record = signing.sign(by=tablet.by, sheet_id=tablet.sheet.pk)
    open_tablet = opened(tag, cast.technician, "tablet-b")
    to_as_found(open_tablet)
    planned = people.make_range(tag, "0", "8", effective_from=datetime.date(2099, 1, 1), applied_at=None)
    requirement = people.make_requirement(tag, effective_from=datetime.date(2099, 1, 1), applied_at=None)
    flag = Flag.objects.create(
        tag=tag,
        check_key="urv",
        severity=Flag.Severity.VIOLATION,
        opened_at=timezone.now(),
        sentence=f"{MARK}: beyond the head.",
    )
    intervention = Intervention.objects.create(
        transmitter=transmitter, done_on=people.LONG_AGO, kind=Intervention.Kind.FLUSH, reason="lines flushed"
    )
    deferral = Deferral.objects.create(
        tag=tag,
        until=datetime.date(2098, 1, 1),
        risk_statement="low",
        mitigation="second gauge",
        requested_by=cast.planner,
    )
    refresh([tag.pk])
    for person in cast.by_role.values():
        _bring_files(person, plant)
    act = Act(Actor(cast.engineer), "a reason")
    act.created(tag, plant=plant)
    act.write()
    elsewhere = people.make_person("elsewhere", plant=cast.other_plant, roles=tuple(Role.values))
    return World(
        cast=cast,
        elsewhere=elsewhere,
        plant=plant,
        area=area,
        tag=tag,
        transmitter=transmitter,
        type=transmitter.type,
        head=transmitter.head,
        maker=transmitter.maker,
        range=planned,
        flag=flag,
        intervention=intervention,
        requirement=requirement,
        deferral=deferral,
        standard=pressure,
        certificate=pressure.certificates.get(),
        point_list=PointList.objects.filter(plant=plant)[0],
        guidance=GuidanceLine.objects.filter(plant=plant)[0],
        sheet=Sheet.objects.get(pk=open_tablet.sheet.pk),
        test=record.test,
        entry=AuditEntry.objects.filter(plant=plant).order_by("-id")[0],
    )


def _bring_files(person: User, plant: Plant) -> None:
    """A file between the steps of each import, for each person his own under the same token."""
    for kind in KINDS:
        token = str(_token(kind))
        path = path_of(person.pk, token, "file")
        default_storage.delete(path)
        default_storage.save(path, ContentFile(b"Tag\nPT-1\n"))
        Kept(token, person.pk, kind, plant.pk, "register.csv").store()


def _token(kind: str) -> uuid.UUID:
    return uuid.uuid5(TOKEN, kind)


@dataclass(frozen=True, slots=True)
class Sample:
    """What a url is filled in with; `shared` things belong to all plants."""

    values: Callable[[World], Mapping[str, Any]]
    shared: bool = False


def _of(name: str, *, shared: bool = False, **more: Any) -> Sample:
    return Sample(lambda world: {"pk": getattr(world, name).pk} | more, shared)


TAG, TRANSMITTER, SHEET, TEST = _of("tag"), _of("transmitter"), _of("sheet"), _of("test")
PLANT = Sample(lambda world: {"code": world.plant.code})
PERSON = Sample(lambda world: {"pk": world.cast.planner.pk})


def _brought(kind: str) -> Sample:
    return Sample(lambda world: {"token": _token(kind)})


SAMPLES: Final[dict[str, Sample]] = {
    "person": PERSON,
    "person-edit": PERSON,
    "person-roles": Sample(lambda world: {"pk": world.cast.planner.pk, "code": world.plant.code}),
    "person-password": PERSON,
    "person-deactivate": PERSON,
    "person-reactivate": PERSON,
    "person-unlock": PERSON,
    "audit-act": Sample(lambda world: {"pk": world.entry.act}),
    "plant-choose": PLANT,
    "plant-edit": PLANT,
    "area-edit": _of("area"),
    "maker-edit": _of("maker", shared=True),
    "type": _of("type", shared=True),
    "type-edit": _of("type", shared=True),
    "head-new": _of("type", shared=True),
    "head": _of("head", shared=True),
    "head-edit": _of("head", shared=True),
    "tag": TAG,
    "tag-edit": TAG,
    "tag-out-of-service": TAG,
    "tag-fit": TAG,
    "tag-remove": TAG,
    "tag-swap": TAG,
    "tag-range": TAG,
    "tag-requirement": TAG,
    "tag-defer": TAG,
    "tag-drift-export": TAG,
    "range-withdraw": _of("range"),
    "flag-accept": _of("flag"),
    "flag-withdraw": _of("flag"),
    "transmitter": TRANSMITTER,
    "transmitter-edit": TRANSMITTER,
    "transmitter-move": TRANSMITTER,
    "transmitter-head": TRANSMITTER,
    "transmitter-drift-export": TRANSMITTER,
    "intervention-new": TRANSMITTER,
    "intervention-withdraw": _of("intervention"),
    "requirement-withdraw": _of("requirement"),
    "deferral-approve": _of("deferral"),
    "deferral-withdraw": _of("deferral"),
    "standard": _of("standard"),
    "standard-edit": _of("standard"),
    "certificate-new": _of("standard"),
    "certificate-withdraw": _of("certificate"),
    "point-list-edit": _of("point_list"),
    "point-list-withdraw": _of("point_list"),
    "guidance-edit": _of("guidance"),
    "guidance-withdraw": _of("guidance"),
    "sheet-open": TAG,
    "sheet-bench": TRANSMITTER,
    "sheet-correct": TEST,
    "sheet": SHEET,
    "sheet-entries": SHEET,
    "sheet-judge": SHEET,
    "sheet-news": SHEET,
    "sheet-settle": SHEET,
    "sheet-sign": SHEET,
    "sheet-step": Sample(lambda world: {"pk": world.sheet.pk, "name": "close-as-found"}),
    "sheet-could-not-test": SHEET,
    "sheet-abandon": SHEET,
    "sheet-exception": Sample(lambda world: {"pk": world.sheet.pk, "standard": world.standard.pk}),
    "test": TEST,
    "test-readings": TEST,
    "test-review": TEST,
    "test-send-back": TEST,
}


def every_url() -> Iterator[URLPattern]:
    """Every address that the site answers at."""

    def walk(patterns: list[URLPattern | URLResolver]) -> Iterator[URLPattern]:
        for pattern in patterns:
            if isinstance(pattern, URLResolver):
                yield from walk(pattern.url_patterns)
            else:
                yield pattern

    yield from walk(get_resolver().url_patterns)


SAMPLES.update(
    {
        f"import-{kind}-{step}": _brought(kind)
        for kind in (list(every_url()) and KINDS)  # the urls fill in which imports there are
        for step in ("match", "check", "bring-in", "bad-rows")
    }
)
