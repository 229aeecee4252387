"""Brings a register in from a file: all of it, or nothing."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Sequence
from typing import Final, TypeVar

from django.core.exceptions import ValidationError
from django.db import IntegrityError, transaction
from django.db.models import OuterRef, Subquery

from register.auditing import Act, Actor, snapshot
from register.bulk import many_objects_alive
from register.flagging import settle
from register.imports.columns import Matching
from register.imports.drafts import Row
from register.imports.proposing import Proposal, propose
from register.imports.tables import Table
from register.models import Area, Fitting, Plant, Range, Tag, Transmitter
from register.searching import SearchKey, key

T = TypeVar("T")
AT_ONCE: Final = 1000
Whereabouts = Transmitter.Whereabouts
MEANWHILE: Final = (
    "The register changed after the file was checked, and the file would now do something else. Nothing was brought "
    "in: look at the check again."
)


class ChangedMeanwhileError(ValidationError):
    """What the file would do now is not what was looked at."""

    def __init__(self) -> None:
        super().__init__(MEANWHILE)


def import_register(*, by: Actor, reason: str, plant: Plant, table: Table, matching: Matching, seen: str) -> Proposal:
    """Bring in a table of tags; the file is read against the register once more, in the same transaction.

    Parameters
    ----------
    seen : str
        Digest of the proposal that the person looked at.

    Returns
    -------
    Proposal
        What was done.

    Raises
    ------
    ChangedMeanwhileError
        The file has bad rows, or would now do something else than what was looked at.
    """
    try:
        with many_objects_alive():
            return _import(by, reason, plant, table, matching, seen)
    except IntegrityError as error:
        # Another act added the same tag or transmitter between reading and writing.
        raise ChangedMeanwhileError from error


@transaction.atomic
def _import(by: Actor, reason: str, plant: Plant, table: Table, matching: Matching, seen: str) -> Proposal:
    lock_tags(plant, table.column(matching["tag"]) if "tag" in matching else ())
    proposal = propose(plant=plant, table=table, matching=matching, today=plant.today(), by=by.person)
    if proposal.complaints or proposal.digest() != seen:
        raise ChangedMeanwhileError
    act = Act(by, reason)
    rows = proposal.touched
    if not rows:
        return proposal
    Area.objects.bulk_create(proposal.areas)
    for area in proposal.areas:
        act.created(area, plant=plant)
    _store_tags(act, rows, plant)
    _store_devices(act, rows, plant)
    moved = _store_fittings(act, rows, plant)
    ranged = _store_ranges(act, rows, plant)
    _point(moved | ranged)
    settle(act, [row.tag.pk for row in rows if row.tag is not None])
    return proposal


def lock_tags(plant: Plant, numbers: Iterable[str], serials: Iterable[str] = ()) -> set[int]:
    """Lock tags in the order of their ids, inside the transaction of an act; returns their ids.

    Those with these numbers, and those where transmitters with these serial numbers are or were fitted.
    """
    ids: set[int] = set()
    for part in _parts(sorted({key(number) for number in numbers})):
        named = Tag.objects.filter(plant=plant).alias(_key=SearchKey("number")).filter(_key__in=part)
        ids.update(named.values_list("pk", flat=True))
    for part in _parts(sorted({key(serial) for serial in serials if serial})):
        devices = Transmitter.objects.filter(plant=plant).alias(_key=SearchKey("serial")).filter(_key__in=part)
        ids.update(Fitting.objects.filter(transmitter__in=devices).values_list("tag_id", flat=True))
    for some in _parts(sorted(ids)):
        list(Tag.objects.select_for_update(of=("self",)).filter(pk__in=some).order_by("pk").values_list("pk"))
    return ids


def _store_tags(act: Act, rows: Sequence[Row], plant: Plant) -> None:
    for row in rows:
        # The area had no key yet when it was put on the tag.
        if row.tag is not None:
            row.tag.area = row.tag.area
    new = [row.tag for row in rows if row.tag is not None and row.tag_is_new]
    Tag.objects.bulk_create(new, batch_size=AT_ONCE)
    for tag in new:
        act.created(tag, plant=plant)
    changed = [row for row in rows if row.tag_fields]
    fields = sorted({name for row in changed for name in row.tag_fields})
    Tag.objects.bulk_update([row.tag for row in changed if row.tag], fields or ["service"], batch_size=AT_ONCE // 4)
    for row in changed:
        assert row.tag is not None
        before = {name: str(value) if isinstance(value, Area) else value for name, value in row.tag_before.items()}
        act.changed(row.tag, plant=plant, before=before, after=snapshot(row.tag, before))


def _store_devices(act: Act, rows: Sequence[Row], plant: Plant) -> None:
    new, changed = [], []
    for row in rows:
        device = row.device
        if device is None:
            continue
        if row.fitting is not None:
            if not row.device_is_new:
                row.device_before.setdefault("whereabouts", device.whereabouts)
                row.device_fields.append("whereabouts")
            device.whereabouts = Whereabouts.FITTED
        if row.device_is_new:
            new.append(device)
        elif row.device_fields:
            changed.append(row)
    Transmitter.objects.bulk_create(new, batch_size=AT_ONCE)
    for device in new:
        act.created(device, plant=plant)
    fields = sorted({name for row in changed for name in row.device_fields})
    devices = [row.device for row in changed if row.device]
    Transmitter.objects.bulk_update(devices, fields or ["whereabouts"], batch_size=AT_ONCE // 2)
    for row in changed:
        assert row.device is not None
        after = snapshot(row.device, row.device_before)
        act.changed(row.device, plant=plant, before=row.device_before, after=after)
    # What is given up goes to stores, unless another row fits it at once.
    ended = [row.ended.transmitter for row in rows if row.ended is not None]
    fitted = {row.device.pk for row in rows if row.fitting is not None and row.device is not None}
    stored = [device for device in ended if device.pk not in fitted]
    for device in stored:
        before = snapshot(device, ["whereabouts"])
        device.whereabouts = Whereabouts.STORES
        act.changed(device, plant=plant, before=before, after=snapshot(device, before))
    Transmitter.objects.bulk_update(stored, ["whereabouts"], batch_size=AT_ONCE)


def _store_fittings(act: Act, rows: Sequence[Row], plant: Plant) -> set[int]:
    """End and begin fittings; returns the ids of the tags concerned."""
    ended = []
    for row in rows:
        if row.ended is None or row.fitting is None:
            continue
        before = snapshot(row.ended, ("removed_on", "removed_reason", "removed_by"))
        row.ended.removed_on, row.ended.removed_reason = row.fitting.fitted_on, act.reason
        row.ended.removed_by = act.by.person
        act.changed(row.ended, plant=plant, before=before, after=snapshot(row.ended, before))
        ended.append(row.ended)
    Fitting.objects.bulk_update(ended, ["removed_on", "removed_reason", "removed_by"], batch_size=AT_ONCE)
    new = []
    for row in rows:
        if row.fitting is None or row.tag is None:
            continue
        row.fitting.tag, row.fitting.transmitter = row.tag, row.fitting.transmitter
        row.fitting.fitted_reason, row.fitting.fitted_by = act.reason, act.by.person
        new.append(row.fitting)
    Fitting.objects.bulk_create(new, batch_size=AT_ONCE)
    for row in rows:
        if row.fitting is None or row.tag is None:
            continue
        act.created(row.fitting, plant=plant)
        if not row.tag_is_new:
            held = {"fitted transmitter": row.ended.transmitter if row.ended else None}
            act.changed(row.tag, plant=plant, before=held, after={"fitted transmitter": row.fitting.transmitter})
    return {fitting.tag_id for fitting in new}


def _store_ranges(act: Act, rows: Sequence[Row], plant: Plant) -> set[int]:
    """Add ranges, in force at once or planned; returns the ids of the tags concerned."""
    today = plant.today()
    new = []
    for row in rows:
        if row.range is None or row.tag is None:
            continue
        row.range.tag, row.range.person = row.tag, act.by.person
        row.range.reason = row.range.reason or act.reason
        row.range.applied_at = act.at if row.range.effective_from <= today else None
        new.append(row.range)
    Range.objects.bulk_create(new, batch_size=AT_ONCE)
    for row in rows:
        if row.range is None or row.tag is None:
            continue
        act.created(row.range, plant=plant)
        if not row.tag_is_new and row.range.applied_at is not None:
            before = {"current_range": str(row.tag.current_range) if row.tag.current_range else None}
            act.changed(row.tag, plant=plant, before=before, after={"current_range": str(row.range)})
    return {range_.tag_id for range_ in new}


def _point(tag_ids: Iterable[int]) -> None:
    """Let tags point at the fitting that is open and at the range in force."""
    opened = Fitting.objects.filter(tag=OuterRef("pk"), removed_on__isnull=True)
    in_force = Range.objects.filter(tag=OuterRef("pk"), applied_at__isnull=False, withdrawn_at__isnull=True)
    latest = in_force.order_by("-effective_from", "-pk")
    for part in _parts(sorted(tag_ids)):
        Tag.objects.filter(pk__in=part).update(
            current_fitting=Subquery(opened.values("pk")[:1]), current_range=Subquery(latest.values("pk")[:1])
        )


def _parts(listed: Sequence[T]) -> Iterator[Sequence[T]]:
    for start in range(0, len(listed), AT_ONCE):
        yield listed[start : start + AT_ONCE]
