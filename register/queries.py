"""Reads over many rows of the register."""

from __future__ import annotations

import datetime
from collections.abc import Collection
from dataclasses import dataclass
from functools import cache
from typing import Any, NamedTuple
from zoneinfo import ZoneInfo

from django.apps import apps
from django.core.exceptions import FieldDoesNotExist
from django.db.models import Count, Exists, Model, OuterRef, Q, QuerySet, Subquery
from django.db.models.functions import Coalesce

from register.models import (
    Area,
    AuditEntry,
    Fitting,
    Maker,
    MeasuringHead,
    Membership,
    Plant,
    Tag,
    Transmitter,
    TransmitterType,
    User,
)
from register.searching import LAST, SearchKey, beginning, exactly, key


def people_of(plant: Plant, text: str = "") -> QuerySet[User]:
    """People with a role in a plant, and those without any role anywhere; by part of either name."""
    here = Membership.objects.filter(user=OuterRef("pk"), plant=plant)
    anywhere = Membership.objects.filter(user=OuterRef("pk"))
    found = User.objects.filter(Q(Exists(here)) | ~Q(Exists(anywhere)))
    if text:
        found = found.filter(Q(username__icontains=text) | Q(printed_name__icontains=text))
    return found


@dataclass(frozen=True, slots=True)
class Trail:
    """What is asked of the audit trail of one plant; empty means any."""

    plant: Plant
    person: str = ""
    thing: str = ""
    field: str = ""
    kind: str = ""
    since: datetime.date | None = None
    until: datetime.date | None = None

    def entries(self) -> tuple[QuerySet[AuditEntry], QuerySet[AuditEntry]]:
        """Entries of the plant, and entries of what all plants share: catalogue, and people of this plant.

        Two sets, so that each is read by the index on plant and id.
        """
        people = self.plant.memberships.order_by("user_id").values_list("user_id", flat=True).distinct()
        of_people = Q(thing_type=User._meta.label_lower)
        shared = AuditEntry.objects.filter(plant=None).filter(
            ~of_people | Q(thing_id="") | Q(thing_id__in=[str(pk) for pk in people])
        )
        return self._narrowed(AuditEntry.objects.filter(plant=self.plant)), self._narrowed(shared)

    def _narrowed(self, entries: QuerySet[AuditEntry]) -> QuerySet[AuditEntry]:
        zone = ZoneInfo(self.plant.time_zone)
        if self.person:
            entries = entries.filter(Q(person__username__iexact=self.person) | Q(person_name__icontains=self.person))
        if self.thing:
            entries = entries.filter(thing_label__icontains=self.thing)
        if self.field:
            entries = entries.filter(field__in=fields_called(self.field))
        if self.kind:
            entries = entries.filter(kind=self.kind)
        if self.since:
            entries = entries.filter(at__gte=datetime.datetime.combine(self.since, datetime.time(), tzinfo=zone))
        if self.until:
            next_day = self.until + datetime.timedelta(days=1)
            entries = entries.filter(at__lt=datetime.datetime.combine(next_day, datetime.time(), tzinfo=zone))
        return entries


def latest_change(thing: Model) -> int:
    """The id of the newest entry of the trail about a thing, 0 without any."""
    entries = AuditEntry.objects.filter(thing_type=thing._meta.label_lower, thing_id=str(thing.pk))
    return entries.order_by("-id").values_list("pk", flat=True).first() or 0


def changes_since(thing: Model, entry_id: int, fields: Collection[str]) -> list[str]:
    """What was changed in the named fields after an entry, newest first, as sentences."""
    entries = AuditEntry.objects.filter(
        thing_type=thing._meta.label_lower,
        thing_id=str(thing.pk),
        pk__gt=entry_id,
        kind=AuditEntry.Kind.CHANGED,
        field__in=fields,
    )
    return [
        f"{entry.person_name or 'The program'} changed {entry.field.replace('_', ' ')} from “{entry.before}” to "
        f"“{entry.after}” after you opened this page. See whether what you typed still holds, then save again."
        for entry in entries.order_by("-id")[:10]
    ]


def transmitters_with_serial(plant: Plant, text: str) -> list[Transmitter]:
    """Transmitters of a plant known by a typed serial number, or by maker and serial number."""
    rows = Transmitter.objects.filter(plant=plant).select_related("plant", "maker", "type", "head")
    found = list(exactly(rows, "serial", text))
    words = text.split()
    for end in range(1, len(words)) if not found else ():
        maker, serial = " ".join(words[:end]), " ".join(words[end:])
        found += exactly(rows.filter(maker__name__iexact=maker), "serial", serial)
    return found


def spares(plant: Plant, most: int = 200) -> QuerySet[Transmitter]:
    """Transmitters in stores, by serial number; offered while a serial number is typed."""
    rows = Transmitter.objects.filter(plant=plant, whereabouts=Transmitter.Whereabouts.STORES)
    return rows.select_related("maker", "type", "head").order_by(SearchKey("serial"), "pk")[:most]


@dataclass(frozen=True, slots=True)
class TransmitterFilter:
    """What is asked of the transmitters of one plant; empty means any."""

    plant: Plant
    text: str = ""
    whereabouts: str = ""
    type_id: int | None = None
    head_id: int | None = None

    def rows(self) -> QuerySet[Transmitter]:
        """The transmitters; `search_key` puts them into the order in which they are indexed."""
        rows = Transmitter.objects.filter(plant=self.plant).annotate(search_key=SearchKey("serial"))
        if self.text:
            start = key(self.text)
            rows = rows.filter(search_key__gte=start, search_key__lt=start + LAST)
        if self.whereabouts:
            rows = rows.filter(whereabouts=self.whereabouts)
        if self.type_id is not None:
            rows = rows.filter(type=self.type_id)
        if self.head_id is not None:
            rows = rows.filter(head=self.head_id)
        return rows


class Fitted(NamedTuple):
    """Where a transmitter is fitted, and since when."""

    tag_id: int
    number: str
    since: datetime.date


def fitted(transmitters: Collection[Transmitter]) -> dict[int, Fitted]:
    """Where transmitters are fitted now, by their ids."""
    rows = Fitting.objects.filter(transmitter__in=[one.pk for one in transmitters], removed_on__isnull=True)
    columns = rows.values_list("transmitter_id", "tag_id", "tag__number", "fitted_on")
    return {pk: Fitted(tag_id, number, since) for pk, tag_id, number, since in columns}


def types_with_counts(plant: Plant, maker_id: int | None = None) -> QuerySet[TransmitterType]:
    """Transmitter types with their number of heads, and of transmitters in a plant."""
    rows = TransmitterType.objects.select_related("maker").annotate(
        head_count=_count_of(MeasuringHead.objects.all(), "type"),
        transmitter_count=_count_of(Transmitter.objects.filter(plant=plant), "type"),
    )
    return rows if maker_id is None else rows.filter(maker=maker_id)


def heads_of(type_: TransmitterType, plant: Plant) -> QuerySet[MeasuringHead]:
    """Heads of a type, smallest first, with the number of transmitters in a plant."""
    count = _count_of(Transmitter.objects.filter(plant=plant), "head")
    return type_.heads.annotate(transmitter_count=count).order_by("url_si", "code")


def makers_with_counts() -> QuerySet[Maker]:
    return Maker.objects.annotate(type_count=_count_of(TransmitterType.objects.all(), "maker")).order_by("name")


def areas_with_counts(plant: Plant) -> QuerySet[Area]:
    return plant.areas.annotate(tag_count=_count_of(Tag.objects.all(), "area")).order_by("code")


def _count_of(rows: QuerySet[Any], name: str) -> Coalesce:
    """How many of the rows point by the named column at the row that is read; counted on an index, row by row."""
    counted = rows.filter(**{name: OuterRef("pk")}).order_by().values(name).annotate(count=Count("pk")).values("count")
    return Coalesce(Subquery(counted), 0)


@dataclass(frozen=True, slots=True)
class Found:
    """What a typed tag or serial number led to; `exact` where it names them wholly."""

    exact: bool
    tags: list[Tag]
    transmitters: list[Transmitter]

    @property
    def only(self) -> Tag | Transmitter | None:
        """The one thing that is named wholly."""
        both: list[Tag | Transmitter] = [*self.tags, *self.transmitters]
        return both[0] if self.exact and len(both) == 1 else None


def find(plants: Collection[int], text: str, most: int = 50) -> Found:
    """Look a tag or serial number up in some plants: the whole number first, else its beginning."""
    tags = Tag.objects.filter(plant__in=plants).select_related("plant", "area")
    devices = Transmitter.objects.filter(plant__in=plants).select_related("plant", "maker", "type", "head")
    found = Found(True, list(exactly(tags, "number", text)[:most]), list(exactly(devices, "serial", text)[:most]))
    if found.tags or found.transmitters:
        return found
    return Found(
        False,
        list(beginning(tags, "number", text).order_by(SearchKey("number"), "pk")[:most]),
        list(beginning(devices, "serial", text).order_by(SearchKey("serial"), "pk")[:most]),
    )


def fields_called(words: str) -> list[str]:
    """Names under which the trail holds a field that people call by these words, or part of them."""
    wanted = words.strip().lower()
    names = {
        field.name
        for model in apps.get_models()
        if model._meta.app_label in {"register", "calibration"}
        for field in model._meta.concrete_fields
        if wanted in str(field.verbose_name).lower() or wanted == field.name
    }
    return sorted(names | {wanted})


@cache
def field_in_words(thing_type: str, field: str) -> str:
    """What people call a field of the trail."""
    try:
        return str(apps.get_model(thing_type)._meta.get_field(field).verbose_name)
    except (LookupError, FieldDoesNotExist, AttributeError):
        return field.replace("_", " ")


@cache
def type_in_words(thing_type: str) -> str:
    """What people call the kind of a thing of the trail."""
    try:
        return str(apps.get_model(thing_type)._meta.verbose_name)
    except LookupError:
        return thing_type.rpartition(".")[2]


@dataclass(frozen=True, slots=True)
class DemonstrationPerson:
    """A person whose password is public, as the sign-in page and `manage.py start` show him."""

    name: str
    role: str
    password: str


def demonstration_people() -> list[DemonstrationPerson]:
    """Demonstration people who can sign in, in the order of the demonstration, without those of another password."""
    from fixtures.demonstration.people import PASSWORD, PEOPLE

    active = dict(User.objects.filter(is_demonstration=True, is_active=True).values_list("username", "pk"))
    changed = set(
        AuditEntry.objects.filter(
            thing_type=User._meta.label_lower, thing_id__in=[str(pk) for pk in active.values()], field="password"
        ).values_list("thing_id", flat=True)
    )
    return [
        DemonstrationPerson(person.username, person.does, PASSWORD)
        for person in PEOPLE
        if person.username in active and str(active[person.username]) not in changed
    ]
