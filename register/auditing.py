"""The trail every act leaves: an act has an id, a person, a place, a time and a reason."""

from __future__ import annotations

import datetime
import uuid
from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field
from typing import Any, Final

from django.db import models
from django.http import HttpRequest
from django.utils import timezone

from register.bulk import insert
from register.models import AuditEntry, Plant, User

#: Things that belong to something else than a tag, a transmitter or a standard.
BELONGS_TO: Final[Mapping[str, tuple[str, ...]]] = {"measuringhead": ("type",)}
#: Of an entry: what the act gives, what is noted, the reason.
_COLUMNS: Final = (
    *("act", "at", "person_id", "person_name", "remote_address"),
    *("kind", "plant_id", "thing_type", "thing_id", "thing_label", "field", "before", "after"),
    "reason",
)


@dataclass(frozen=True, slots=True)
class Actor:
    """Who acts, and from where; no person means the program itself (a start, a timer)."""

    person: User | None
    remote_address: str = ""

    @classmethod
    def of(cls, request: HttpRequest) -> Actor:
        person = request.user if isinstance(request.user, User) else None
        return cls(person=person, remote_address=request.META.get("REMOTE_ADDR", "")[:60])


@dataclass(slots=True)
class Act:
    """Collects audit entries and writes them in one insert with `write`."""

    by: Actor
    reason: str = ""
    id: uuid.UUID = field(default_factory=uuid.uuid4)
    at: datetime.datetime = field(default_factory=timezone.now)
    _entries: list[tuple[Any, ...]] = field(default_factory=list)

    def created(self, thing: models.Model, *, plant: Plant | int | None) -> None:
        """Note a new thing: one entry."""
        self._note(thing, plant, kind=AuditEntry.Kind.CREATED)

    def changed(
        self, thing: models.Model, *, plant: Plant | int | None, before: Mapping[str, Any], after: Mapping[str, Any]
    ) -> int:
        """Note every field whose value differs, one entry each; returns how many there were."""
        count = 0
        for name, new in after.items():
            old = before.get(name)
            if old != new:
                self._note(thing, plant, kind=AuditEntry.Kind.CHANGED, name=name, before=old, after=new)
                count += 1
        return count

    def noted(
        self, kind: AuditEntry.Kind, thing: models.Model, *, plant: Plant | int | None = None, remark: str = ""
    ) -> None:
        """Note something that is neither a creation nor a change: a sign-in, an export."""
        self._note(thing, plant, kind=kind, after=remark)

    def write(self) -> None:
        """Insert what was collected; call inside the transaction of the act."""
        if not self._entries:
            return
        person = self.by.person
        name = str(person)[:120] if person else ""
        shared = (self.id, self.at, person.pk if person else None, name, self.by.remote_address)
        insert(AuditEntry, _COLUMNS, ((*shared, *entry, self.reason[:300]) for entry in self._entries))
        self._entries.clear()

    def _note(
        self,
        thing: models.Model,
        plant: Plant | int | None,
        *,
        kind: AuditEntry.Kind,
        name: str = "",
        before: Any = None,
        after: Any = None,
    ) -> None:
        self._entries.append(
            (
                str(kind),
                plant.pk if isinstance(plant, Plant) else plant,
                thing._meta.label_lower,
                "" if thing.pk is None else str(thing.pk),
                label(thing)[:200],
                name,
                as_text(before),
                as_text(after),
            )
        )


def snapshot(thing: models.Model, names: Iterable[str]) -> dict[str, Any]:
    """Values of the named fields, for `Act.changed`; foreign keys are shown by what they name."""
    return {name: _shown(getattr(thing, name)) for name in names}


def label(thing: models.Model) -> str:
    """What the trail calls a thing; one that belongs to another is called by that first, so that it is found there."""
    words = str(thing)
    for name in BELONGS_TO.get(thing._meta.model_name or "", ("tag", "transmitter", "standard")):
        place = getattr(thing, name, None)
        if place is not None and str(place) not in words:
            return f"{place}: {words}"
    return words


def as_text(value: Any) -> str:
    """How a value is written in the trail."""
    if value is None:
        return ""
    if isinstance(value, bool):
        return "yes" if value else "no"
    return str(_shown(value))


def _shown(value: Any) -> Any:
    return str(value) if isinstance(value, models.Model) else value
