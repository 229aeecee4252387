"""Changes the range of a tag from a date on: applied at once, or planned until its day comes."""

from __future__ import annotations

import datetime

from django.core.exceptions import ValidationError
from django.db import transaction

from register.auditing import Act, Actor, snapshot
from register.changes import object_to_backdating
from register.editing import Values
from register.flagging import settle
from register.models import Plant, Range, Tag
from register.storing import fill, store

BEFORE = (
    "The range in force, {}, began on {}: a new one cannot begin before it. If that one was a mistake, withdraw it."
)


@transaction.atomic
def set_range(*, by: Actor, reason: str, tag: Tag, values: Values, effective_from: datetime.date) -> Range:
    """Give a tag another range.

    Up to today it is in force at once, if it begins after the range in force now and no test stands after its
    day; later it is planned and `apply_planned` puts it in force.

    Parameters
    ----------
    values : mapping
        lrv, urv (texts), unit, reference, transfer, low_cut_percent, below_cut.
    """
    tag = _locked(tag.pk)
    act = Act(by, reason)
    new = Range(tag=tag, effective_from=effective_from, reason=reason, person=by.person)
    fill(new, values)
    _check(new)
    if effective_from <= tag.plant.today():
        now = tag.current_range
        if now is not None and effective_from < now.effective_from:
            raise ValidationError({"effective_from": BEFORE.format(now, now.effective_from)})
        if now is not None:
            object_to_backdating(tag, effective_from, field="effective_from")
        new.applied_at = act.at
    store(new)
    act.created(new, plant=tag.plant_id)
    _point(act, tag)
    settle(act, [tag.pk])
    return new


@transaction.atomic
def withdraw_range(*, by: Actor, reason: str, range_: Range) -> Range:
    """Mark a range as a mistake; the one before it is in force again if it was the one in force."""
    tag = _locked(range_.tag_id)
    range_ = Range.objects.get(pk=range_.pk)
    if range_.withdrawn_at is not None:
        raise ValidationError(f"This range was withdrawn already: {range_.withdrawn_reason}")
    if range_.applied_at is not None:
        object_to_backdating(tag, range_.effective_from, field="reason")
    act = Act(by, reason)
    before = snapshot(range_, ("withdrawn_at", "withdrawn_reason"))
    range_.withdrawn_at, range_.withdrawn_reason = act.at, reason
    range_.save(update_fields=list(before))
    act.changed(range_, plant=tag.plant_id, before=before, after=snapshot(range_, before))
    _point(act, tag)
    settle(act, [tag.pk])
    return range_


def apply_planned(*, by: Actor, today: datetime.date | None = None) -> int:
    """Put every planned range in force whose day has come at its plant; returns how many. For the daily timer."""
    return sum(_apply(by, plant, today or plant.today()) for plant in Plant.objects.all())


def _apply(by: Actor, plant: Plant, today: datetime.date) -> int:
    planned = Range.objects.filter(
        tag__plant=plant, applied_at__isnull=True, withdrawn_at__isnull=True, effective_from__lte=today
    )
    applied = 0
    for tag_id in planned.order_by("tag_id").values_list("tag_id", flat=True).distinct():
        with transaction.atomic():
            tag = _locked(tag_id)
            act = Act(by, "the day of the planned range has come")
            for row in planned.filter(tag=tag).order_by("effective_from"):
                row.applied_at = act.at
                row.save(update_fields=["applied_at"])
                act.changed(row, plant=plant, before={"applied_at": None}, after={"applied_at": act.at})
                applied += 1
            _point(act, tag)
            settle(act, [tag.pk])
    return applied


def _check(new: Range) -> None:
    """Refuse what no range can be, before it is compared with the rows that stand."""
    if new.transfer != Range.Transfer.SQUARE_ROOT:
        new.low_cut_percent = 0.0
        return
    if new.reference != "differential":
        raise ValidationError(
            {"transfer": f"A square root is taken of a differential pressure only; this range is {new.reference}."}
        )


def _locked(pk: int) -> Tag:
    return Tag.objects.select_for_update(of=("self",)).select_related("plant", "current_range").get(pk=pk)


def _point(act: Act, tag: Tag) -> None:
    """Let the tag point at the range in force: the latest begun that is applied and not withdrawn."""
    before = snapshot(tag, ["current_range"])
    rows = Range.objects.filter(tag=tag, applied_at__isnull=False, withdrawn_at__isnull=True)
    tag.current_range = rows.order_by("-effective_from", "-pk").first()
    tag.save(update_fields=["current_range"])
    act.changed(tag, plant=tag.plant_id, before=before, after=snapshot(tag, before))
