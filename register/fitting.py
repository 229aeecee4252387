"""Fits transmitters at tags, removes and swaps them; a fitting says from which day to which."""

from __future__ import annotations

import datetime

from django.core.exceptions import ValidationError
from django.db import transaction
from django.db.models import QuerySet

from register.auditing import Act, Actor, snapshot
from register.changes import object_to_backdating
from register.flagging import settle
from register.models import Fitting, Tag, Transmitter
from register.storing import store

Whereabouts = Transmitter.Whereabouts


@transaction.atomic
def fit(*, by: Actor, reason: str, tag: Tag, transmitter: Transmitter, on: datetime.date) -> Fitting:
    """Fit a transmitter that is free at a tag that is empty, on a day up to today."""
    tag = _locked(tag)
    act = Act(by, reason)
    fitting = _fit(act, tag, _device(transmitter), on)
    settle(act, [tag.pk])
    return fitting


@transaction.atomic
def remove(*, by: Actor, reason: str, tag: Tag, on: datetime.date, whereabouts: str = Whereabouts.STORES) -> Fitting:
    """Remove the fitted transmitter on a day up to today; `whereabouts` says where it goes."""
    tag = _locked(tag)
    act = Act(by, reason)
    fitting = _remove(act, tag, on, whereabouts)
    settle(act, [tag.pk])
    return fitting


@transaction.atomic
def swap(
    *,
    by: Actor,
    reason: str,
    tag: Tag,
    transmitter: Transmitter,
    on: datetime.date,
    whereabouts: str = Whereabouts.STORES,
) -> Fitting:
    """Remove the fitted transmitter and fit another one on the same day, as one act."""
    tag = _locked(tag)
    act = Act(by, reason)
    if tag.current_fitting is not None and tag.current_fitting.transmitter_id == transmitter.pk:
        raise ValidationError({"transmitter": f"{transmitter} is the one fitted now: choose the one that replaces it."})
    _remove(act, tag, on, whereabouts)
    fitting = _fit(act, tag, _device(transmitter), on)
    settle(act, [tag.pk])
    return fitting


def _locked(tag: Tag) -> Tag:
    rows = Tag.objects.select_for_update(of=("self",)).select_related("plant", "current_fitting__transmitter__maker")
    return rows.get(pk=tag.pk)


def _device(transmitter: Transmitter) -> Transmitter:
    rows = Transmitter.objects.select_for_update(of=("self",)).select_related("maker", "plant")
    return rows.get(pk=transmitter.pk)


def _fit(act: Act, tag: Tag, transmitter: Transmitter, on: datetime.date) -> Fitting:
    _check_device(tag, transmitter)
    _check_day(tag, on)
    if transmitter.made_on is not None and on < transmitter.made_on:
        raise ValidationError({"on": f"{transmitter} was made on {transmitter.made_on}, after {on}."})
    _check_earlier("Another transmitter", Fitting.objects.filter(tag=tag), on)
    _check_earlier(str(transmitter), Fitting.objects.filter(transmitter=transmitter), on)
    fitting = Fitting(tag=tag, transmitter=transmitter, fitted_on=on, fitted_reason=act.reason, fitted_by=act.by.person)
    store(fitting)
    act.created(fitting, plant=tag.plant_id)
    _place(act, transmitter, Whereabouts.FITTED)
    _point(act, tag, fitting)
    return fitting


def _check_earlier(what: str, earlier: QuerySet[Fitting], on: datetime.date) -> None:
    last = earlier.filter(removed_on__gt=on).order_by("-removed_on").select_related("tag").first()
    if last is not None:
        when = f"{last.fitted_on} to {last.removed_on}"
        raise ValidationError(
            {"on": f"{what} was fitted from {when} at {last.tag}: begin on or after the end of that."}
        )


def _check_device(tag: Tag, transmitter: Transmitter) -> None:
    if tag.current_fitting is not None:
        raise ValidationError(
            {"transmitter": f"At {tag} {tag.current_fitting.transmitter} is fitted already: swap it instead."}
        )
    if transmitter.plant_id != tag.plant_id:
        raise ValidationError({"transmitter": f"{transmitter} is registered in another plant, {transmitter.plant}."})
    if transmitter.whereabouts == Whereabouts.SCRAPPED:
        raise ValidationError({"transmitter": f"{transmitter} is scrapped: it cannot be fitted again."})
    elsewhere = transmitter.fittings.filter(removed_on__isnull=True).select_related("tag").first()
    if elsewhere is not None:
        where = f"at {elsewhere.tag} since {elsewhere.fitted_on}"
        raise ValidationError({"transmitter": f"{transmitter} is fitted {where}: remove it there first."})


def _check_day(tag: Tag, on: datetime.date) -> None:
    today = tag.plant.today()
    if on > today:
        raise ValidationError({"on": f"{on} is still to come (today is {today}): note it when it has happened."})
    object_to_backdating(tag, on, field="on")


def _remove(act: Act, tag: Tag, on: datetime.date, whereabouts: str) -> Fitting:
    fitting = tag.current_fitting
    if fitting is None:
        raise ValidationError(f"At {tag} no transmitter is fitted.")
    if whereabouts == Whereabouts.FITTED or whereabouts not in Whereabouts.values:
        raise ValidationError({"whereabouts": "Say where it goes: to stores, to repair, or scrapped."})
    if on < fitting.fitted_on:
        raise ValidationError(
            {"on": f"It was fitted on {fitting.fitted_on}; it cannot be removed on {on}, before that."}
        )
    _check_day(tag, on)
    before = snapshot(fitting, ("removed_on", "removed_reason", "removed_by"))
    fitting.removed_on, fitting.removed_reason, fitting.removed_by = on, act.reason, act.by.person
    store(fitting)
    act.changed(fitting, plant=tag.plant_id, before=before, after=snapshot(fitting, before))
    _place(act, fitting.transmitter, whereabouts)
    _point(act, tag, None)
    return fitting


def _place(act: Act, transmitter: Transmitter, whereabouts: str) -> None:
    before = snapshot(transmitter, ["whereabouts"])
    transmitter.whereabouts = whereabouts
    transmitter.save(update_fields=["whereabouts"])
    act.changed(transmitter, plant=transmitter.plant_id, before=before, after=snapshot(transmitter, before))


def _point(act: Act, tag: Tag, fitting: Fitting | None) -> None:
    before = {"fitted transmitter": tag.current_fitting.transmitter if tag.current_fitting else None}
    tag.current_fitting = fitting
    tag.save(update_fields=["current_fitting"])
    after = {"fitted transmitter": fitting.transmitter if fitting else None}
    act.changed(tag, plant=tag.plant_id, before=before, after=after)
