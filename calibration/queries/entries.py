"""What the entries of a sheet say: the version of each field that counts, and versions that disagree.

An entry names the entry it replaces (`base`). Entries that nobody replaced are the heads of a field; heads with
different texts are a clash, shown side by side until somebody settles it. Nothing is decided by which arrived last.
"""

from __future__ import annotations

import datetime
import uuid
from collections import defaultdict
from collections.abc import Iterable, Mapping
from dataclasses import dataclass

from calibration.models import Entry


@dataclass(frozen=True, slots=True)
class NewEntry:
    """One field as it was left on a device; `seen` names the versions that a settling entry decides between."""

    id: uuid.UUID
    field: str
    text: str
    device: str
    sequence: int
    base: uuid.UUID | None
    typed_at: datetime.datetime
    schema_version: int = 1
    settles: bool = False
    seen: tuple[uuid.UUID, ...] = ()


@dataclass(frozen=True, slots=True)
class Field:
    """A field as it stands; `versions` holds one entry per text, more than one where people disagree."""

    name: str
    versions: tuple[Entry, ...]

    @property
    def entry(self) -> Entry:
        """The version that counts, or the earliest of those that clash."""
        return self.versions[0]

    @property
    def clashes(self) -> bool:
        return len(self.versions) > 1

    @property
    def text(self) -> str:
        return "" if self.clashes else self.entry.text


def standing(entries: Iterable[Entry]) -> dict[str, Field]:
    """Every field that was ever entered, as it stands.

    Parameters
    ----------
    entries : iterable of Entry
        All entries of one sheet, in any order.
    """
    by_field: dict[str, list[Entry]] = defaultdict(list)
    for entry in entries:
        by_field[entry.field].append(entry)
    return {name: Field(name, _heads(rows)) for name, rows in by_field.items()}


def when(entry: Entry, opened_at: datetime.datetime) -> datetime.datetime:
    """When a field was left: the device's word for it where that can be true, else when it arrived."""
    return entry.typed_at if opened_at <= entry.typed_at <= entry.received_at else entry.received_at


def _heads(entries: list[Entry]) -> tuple[Entry, ...]:
    entries = sorted(entries, key=lambda entry: (entry.received_at, entry.device, entry.sequence))
    known = {entry.id: entry for entry in entries}
    replaced: set[uuid.UUID] = set()
    for place, entry in enumerate(entries):
        if entry.settles:
            replaced.update(earlier.id for earlier in entries[:place])
            continue
        replaced |= _replaced_by(entry, entries, place, known)
    heads = [entry for entry in entries if entry.id not in replaced]
    by_text: dict[str, Entry] = {}
    for head in heads:
        by_text.setdefault(head.text, head)
    return tuple(by_text.values())


def _replaced_by(entry: Entry, entries: list[Entry], place: int, known: Mapping[uuid.UUID, Entry]) -> set[uuid.UUID]:
    base = known.get(entry.base) if entry.base else None
    replaced = {other.id for other in entries if other.device == entry.device and other.sequence < entry.sequence}
    if base is not None:
        replaced.add(base.id)
        # Two people who typed the same agree: who replaces one of them replaces both.
        replaced |= {other.id for other in entries[:place] if other.text == base.text}
    return replaced
