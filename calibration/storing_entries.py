"""Stores entries of a sheet: only ever added, once each, in the stage that they belong to."""

from __future__ import annotations

import datetime
import uuid
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, field

from django.db import transaction
from django.utils import timezone
from django.utils.text import capfirst

from calibration.arriving import readable
from calibration.models import Entry, Run, Sheet
from calibration.queries.drafts import Draft
from calibration.queries.entries import NewEntry
from calibration.sheet_fields import label, reading_of, refusal
from register.auditing import Actor
from register.models import User

SCHEMA_VERSION = 1
LONGEST = 2000
UNITS = frozenset({"unit", "digital-unit", "ambient-unit", "height-unit", "static-unit"})


@dataclass(slots=True)
class Stored:
    """What became of a batch of entries; `draft` is the sheet with them."""

    draft: Draft
    saved: list[uuid.UUID] = field(default_factory=list)
    refused: list[tuple[uuid.UUID, str]] = field(default_factory=list)


def locked(sheet_id: uuid.UUID) -> Sheet:
    """The sheet, locked until the transaction ends; whatever writes to a sheet passes here."""
    return (
        Sheet.objects.select_for_update(of=("self",))
        .select_related("plant", "tag", "transmitter", "transmitter__maker", "fitting", "opened_by", "corrects")
        .get(pk=sheet_id)
    )


@transaction.atomic
def add_entries(*, by: Actor, sheet_id: uuid.UUID, entries: Sequence[NewEntry]) -> Stored:
    """Add what was typed. Sending the same entries again changes nothing.

    Parameters
    ----------
    entries : sequence of NewEntry
        From one or several devices, in any order; taken device by device in their sequence.

    Returns
    -------
    Stored
        With the reason for each entry that was not taken; the others are stored.

    Notes
    -----
    The entries are their own trail (frozen, with person and time); no audit entry doubles them.
    """
    sheet = locked(sheet_id)
    draft = Draft(sheet)
    stored = Stored(draft)
    known = {entry.id: entry for entry in Entry.objects.filter(pk__in=[new.id for new in entries])}
    used = set(sheet.entries.values_list("device", "sequence"))
    rows: list[Entry] = []
    replaced_by_refused: dict[uuid.UUID, uuid.UUID | None] = {}
    now = _after(sheet)
    for new in sorted(entries, key=lambda new: (new.device, new.sequence)):
        if (old := known.get(new.id)) is not None:
            _told_again(stored, sheet, old, new)
            continue
        why = capfirst(_refusal(draft, new, used))
        if why and draft.text(new.field) == new.text.strip() and new.field in draft.fields:
            # It came another way before the stage was closed: nothing is lost, nothing needs to be told.
            stored.saved.append(new.id)
            continue
        if why:
            stored.refused.append((new.id, why))
            replaced_by_refused[new.id] = new.base
            continue
        row = _row(sheet, new, by, now, base=_standing_on(new.base, replaced_by_refused))
        rows.append(row)
        known[row.id] = row
        used.add((row.device, row.sequence))
        stored.saved.append(row.id)
    if rows:
        Entry.objects.bulk_create(rows)
        stored.draft = Draft(sheet)
    return stored


def store(sheet: Sheet, texts: Mapping[str, str], *, by: User, device: str = "site") -> None:
    """Add fields on behalf of an act that has checked them, where they differ; call it with the sheet locked."""
    current = Draft(sheet).fields
    texts = {
        name: text
        for name, text in texts.items()
        if name not in current or current[name].clashes or current[name].text != text
    }
    if not texts:
        return
    last = sheet.entries.filter(device=device).order_by("-sequence").values_list("sequence", flat=True).first() or 0
    now = _after(sheet)
    Entry.objects.bulk_create(
        [
            Entry(
                id=uuid.uuid4(),
                sheet=sheet,
                field=name,
                text=text,
                device=device,
                sequence=last + number,
                base=current[name].entry.id if name in current else None,
                typed_at=now,
                received_at=now,
                person=by,
            )
            for number, (name, text) in enumerate(texts.items(), start=1)
        ]
    )


def typed_in_form(draft: Draft, values: Mapping[str, str], seen: Mapping[str, str], *, device: str) -> list[NewEntry]:
    """Entries for the fields of a posted form that differ from what the form was shown with.

    Parameters
    ----------
    values : mapping
        Texts by field name.
    seen : mapping
        By field name, the id of the entry that the form was shown with; fields without one are not taken.
    """
    last = max((entry.sequence for entry in draft.entries if entry.device == device), default=0)
    kept = {str(entry.id): entry.text for entry in draft.entries}
    new = []
    for name, base in seen.items():
        text = values.get(name, "").strip()
        standing = draft.fields.get(name)
        # Where two versions differ the form shows neither: nothing was typed into the empty field.
        if standing is not None and standing.clashes and not text:
            continue
        if text == kept.get(base, "") or (standing is not None and not standing.clashes and text == standing.text):
            continue
        last += 1
        new.append(
            NewEntry(
                id=uuid.uuid4(),
                field=name,
                text=text,
                device=device,
                sequence=last,
                base=uuid_of(base),
                typed_at=timezone.now(),
            )
        )
    return new


def uuid_of(text: str) -> uuid.UUID | None:
    """The number in a hidden field of a page; None where it is none."""
    try:
        return uuid.UUID(text)
    except ValueError:
        return None


def _told_again(stored: Stored, sheet: Sheet, old: Entry, new: NewEntry) -> None:
    if old.sheet_id == sheet.pk and (old.field, old.text) == (new.field, new.text.strip()):
        stored.saved.append(old.id)
    else:
        stored.refused.append((new.id, "This entry number was used before for something else."))


def _refusal(draft: Draft, new: NewEntry, used: Iterable[tuple[str, int]]) -> str:
    sheet = draft.sheet
    if new.schema_version != SCHEMA_VERSION:
        return "This page is of another version of the program: load it again. What was typed is kept on this device."
    if len(new.text) > LONGEST:
        return f"{label(new.field)}: at most {LONGEST} characters fit here, {len(new.text)} were typed."
    if readable(new.text) != new.text:
        return f"{label(new.field)}: a character in it can be kept nowhere; type it again by hand."
    if (new.device, new.sequence) in used:
        return "This device has used this number before; load the page again."
    if why := refusal(sheet, new.field, points=draft.points):
        return why
    if why := _unknown_unit(new) or _unit_change(draft, new):
        return why
    if new.settles:
        standing = draft.fields.get(new.field)
        unseen = {entry.id for entry in standing.versions} - set(new.seen) if standing else set()
        if unseen:
            return f"{label(new.field)}: another version came in meanwhile; look at all of them first."
    return ""


def _unknown_unit(new: NewEntry) -> str:
    """A unit is chosen, not typed: another text than a unit of its kind is no entry but a mistake of the device."""
    from register.engineering.units import LENGTH, PRESSURE, TEMPERATURE, choices

    kinds = {"ambient-unit": TEMPERATURE, "height-unit": LENGTH}
    what = new.field.partition(".")[2]
    if what not in UNITS or new.text in {key for key, _ in choices(kinds.get(what, PRESSURE))}:
        return ""
    return f"{label(new.field)}: “{new.text[:40]}” is no unit offered here."


def _unit_change(draft: Draft, new: NewEntry) -> str:
    """A unit belongs to the numbers typed in it: changing it under them would change what was measured."""
    kind, _, what = new.field.partition(".")
    if what != "unit" or kind not in Run.Kind.values:
        return ""
    run = draft.runs[kind]
    if new.text == run.unit:
        return ""
    for name, kept in draft.fields.items():
        belongs = reading_of(name)
        if belongs and belongs[0] == kind and name.endswith(".applied") and (kept.text or kept.clashes):
            return "Inputs are already typed in the present unit: empty them first, then change the unit."
    return ""


def _standing_on(base: uuid.UUID | None, refused: Mapping[uuid.UUID, uuid.UUID | None]) -> uuid.UUID | None:
    """What an entry replaces where it was typed over one that was not taken."""
    for _ in range(len(refused)):
        if base is None or base not in refused:
            break
        base = refused[base]
    return base


def _row(sheet: Sheet, new: NewEntry, by: Actor, now: datetime.datetime, *, base: uuid.UUID | None) -> Entry:
    assert by.person is not None
    return Entry(
        id=new.id,
        sheet=sheet,
        field=new.field,
        text=new.text.strip(),
        device=new.device,
        sequence=new.sequence,
        base=base,
        typed_at=new.typed_at,
        received_at=now,
        person=by.person,
        schema_version=new.schema_version,
        settles=new.settles,
    )


def _after(sheet: Sheet) -> datetime.datetime:
    """Now, or just after the last entry where the clock was put back: arrival never runs backwards."""
    last = sheet.entries.order_by("-received_at").values_list("received_at", flat=True).first()
    now = timezone.now()
    return now if last is None or now > last else last + datetime.timedelta(microseconds=1)
