"""Notes what was done to a transmitter between tests; a new measuring head is one of these."""

from __future__ import annotations

import datetime

from django.core.exceptions import ValidationError
from django.db import transaction
from django.db.models import Q

from register.auditing import Act, Actor, snapshot
from register.changes import object_to_backdating
from register.flagging import settle
from register.models import Fitting, Intervention, MeasuringHead, Tag, Transmitter
from register.storing import store

NEW_HEAD = Intervention.Kind.NEW_HEAD


@transaction.atomic
def record_intervention(
    *,
    by: Actor,
    reason: str,
    transmitter: Transmitter,
    kind: str,
    done_on: datetime.date,
    breaks_history: bool = True,
) -> Intervention:
    """Note an intervention on a day up to today, at the tag where the transmitter was fitted on that day."""
    if kind == NEW_HEAD:
        raise ValidationError({"kind": "A new head also changes the limits: record it with “Change the head”."})
    transmitter = _locked(transmitter.pk)
    _check_day(transmitter, done_on, field="done_on")
    act = Act(by, reason)
    done = Intervention(
        transmitter=transmitter, kind=kind, done_on=done_on, breaks_history=breaks_history, reason=reason
    )
    return _record(act, done)


@transaction.atomic
def change_head(
    *, by: Actor, reason: str, transmitter: Transmitter, head: MeasuringHead, on: datetime.date
) -> Intervention:
    """Note that another measuring head was put in; its limits hold from now on."""
    transmitter = _locked(transmitter.pk)
    if head.type_id != transmitter.type_id:
        raise ValidationError(
            {"head": f"The head {head.code} does not go with the type {transmitter.type.designation}."}
        )
    _check_day(transmitter, on, field="on")
    later = transmitter.interventions.filter(kind=NEW_HEAD, withdrawn_at__isnull=True, done_on__gt=on).first()
    if later is not None:
        raise ValidationError(
            {"on": f"A head was changed on {later.done_on}, after {on}: changes come in their order."}
        )
    object_to_backdating(transmitter, on, field="on")
    act = Act(by, reason)
    done = Intervention(
        transmitter=transmitter,
        kind=NEW_HEAD,
        done_on=on,
        head_before=transmitter.head,
        head_after=head,
        breaks_history=True,
        reason=reason,
    )
    _put_in(act, transmitter, head)
    return _record(act, done)


@transaction.atomic
def withdraw_intervention(*, by: Actor, reason: str, intervention: Intervention) -> Intervention:
    """Mark an intervention as a mistake.

    A head goes back to what it was, if none was changed after it, the register still has the one that was put in, and
    nothing was tested with that one.
    """
    transmitter = _locked(intervention.transmitter_id)
    intervention = Intervention.objects.select_related("head_before", "head_after").get(pk=intervention.pk)
    if intervention.withdrawn_at is not None:
        raise ValidationError(f"This was withdrawn already: {intervention.withdrawn_reason}")
    act = Act(by, reason)
    if intervention.kind == NEW_HEAD:
        later = transmitter.interventions.filter(kind=NEW_HEAD, withdrawn_at__isnull=True).exclude(pk=intervention.pk)
        later = later.filter(
            Q(done_on__gt=intervention.done_on) | Q(done_on=intervention.done_on, pk__gt=intervention.pk)
        )
        if later.exists() or intervention.head_before is None:
            raise ValidationError("The head was changed again after this: withdraw the later change first.")
        if transmitter.head_id != intervention.head_after_id:
            raise ValidationError(
                f"The register was corrected since: it has the head {transmitter.head} now, not "
                f"{intervention.head_after}, so this change no longer says what was before it."
            )
        object_to_backdating(transmitter, intervention.done_on, field="reason")
        _put_in(act, transmitter, intervention.head_before)
    before = snapshot(intervention, ("withdrawn_at", "withdrawn_reason"))
    intervention.withdrawn_at, intervention.withdrawn_reason = act.at, reason
    intervention.save(update_fields=list(before))
    act.changed(intervention, plant=transmitter.plant_id, before=before, after=snapshot(intervention, before))
    settle(act, _touched(intervention))
    return intervention


def _record(act: Act, done: Intervention) -> Intervention:
    done.tag = _tag_on(done.transmitter, done.done_on)
    done.person = act.by.person
    store(done)
    act.created(done, plant=done.transmitter.plant_id)
    settle(act, _touched(done))
    return done


def _touched(done: Intervention) -> list[int]:
    """The tag where it was done and the one where the transmitter is fitted now."""
    now = Tag.objects.filter(current_fitting__transmitter=done.transmitter_id).values_list("pk", flat=True)
    return sorted({*now, *([done.tag_id] if done.tag_id is not None else [])})


def _put_in(act: Act, transmitter: Transmitter, head: MeasuringHead) -> None:
    before = snapshot(transmitter, ["head"])
    if transmitter.head_id == head.pk:
        raise ValidationError({"head": f"{head.code} is the head that is in it: choose the one that was put in."})
    transmitter.head = head
    transmitter.save(update_fields=["head"])
    act.changed(transmitter, plant=transmitter.plant_id, before=before, after=snapshot(transmitter, ["head"]))


def _locked(pk: int) -> Transmitter:
    """The transmitter with its row locked, after that of the tag where it is fitted."""
    list(Tag.objects.select_for_update(of=("self",)).filter(current_fitting__transmitter=pk).values_list("pk"))
    rows = Transmitter.objects.select_for_update(of=("self",))
    return rows.select_related("plant", "maker", "type", "head").get(pk=pk)


def _check_day(transmitter: Transmitter, on: datetime.date, *, field: str) -> None:
    today = transmitter.plant.today()
    if on > today:
        raise ValidationError({field: f"{on} is still to come (today is {today}): note it when it has happened."})
    if transmitter.made_on is not None and on < transmitter.made_on:
        raise ValidationError({field: f"{transmitter} was made on {transmitter.made_on}, after {on}."})


def _tag_on(transmitter: Transmitter, on: datetime.date) -> Tag | None:
    """Where the transmitter was fitted on a day; on the day of a swap, where it was fitted that day."""
    fittings = Fitting.objects.filter(transmitter=transmitter, fitted_on__lte=on)
    here = fittings.filter(Q(removed_on__isnull=True) | Q(removed_on__gte=on)).order_by("-fitted_on", "-pk")
    fitting = here.select_related("tag__plant").first()
    return fitting.tag if fitting else None
