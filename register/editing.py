"""Creates and edits what the register holds: plants, areas, catalogue, transmitters, tags.

`values` maps field names to values as a form or an import gives them; where a thing is edited, fields that are
not named stay as they are. Acts raise `ValidationError` by field, in the user's words.

What tags share (plant, area, catalogue) is locked before its tags, but without its key: an act on one tag, which
holds the tag and then refers to its plant, never waits for it.
"""

from __future__ import annotations

import datetime
from collections.abc import Callable, Mapping
from typing import Any, TypeVar

from django.core.exceptions import ValidationError
from django.db import models, transaction

from register import changes
from register.auditing import Act, Actor, snapshot
from register.flagging import settle
from register.models import (
    Area,
    Maker,
    MeasuringHead,
    Plant,
    Tag,
    Transmitter,
    TransmitterType,
)
from register.storing import fill, store

Values = Mapping[str, Any]
T = TypeVar("T", bound=models.Model)


@transaction.atomic
def create_plant(*, by: Actor, reason: str = "", values: Values) -> Plant:
    """Create a plant; the functions named in `AFTER_PLANT_CREATED` give it what it starts with."""
    plant = Plant()
    act = Act(by, reason)
    fill(plant, values)
    store(plant)
    act.created(plant, plant=plant)
    act.write()
    changes.plant_created(plant, by)
    return plant


@transaction.atomic
def edit_plant(*, by: Actor, reason: str, plant: Plant, values: Values) -> Plant:
    """Edit a plant; another barometric pressure is checked at all of its tags."""
    plant = Plant.objects.select_for_update(no_key=True).get(pk=plant.pk)
    act = Act(by, reason)
    changed = _edit(act, plant, values, plant)
    barometric = changed & {"barometric_pressure", "barometric_unit"}
    settle(act, _ids(Tag.objects.filter(plant=plant)) if barometric else [])
    return plant


@transaction.atomic
def create_area(*, by: Actor, reason: str = "", plant: Plant, values: Values) -> Area:
    area = Area(plant=plant)
    act = Act(by, reason)
    fill(area, values)
    store(area)
    act.created(area, plant=plant)
    act.write()
    return area


@transaction.atomic
def edit_area(*, by: Actor, reason: str, area: Area, values: Values) -> Area:
    """Edit an area; all of its tags are checked again."""
    area = Area.objects.select_for_update(of=("self",), no_key=True).select_related("plant").get(pk=area.pk)
    act = Act(by, reason)
    changed = _edit(act, area, values, area.plant)
    settle(act, _ids(Tag.objects.filter(area=area)) if changed else [])
    return area


@transaction.atomic
def create_maker(*, by: Actor, reason: str = "", values: Values) -> Maker:
    return _created(Maker(), by, reason, values)


@transaction.atomic
def edit_maker(*, by: Actor, reason: str, maker: Maker, values: Values) -> Maker:
    """Rename a maker; what tags show of it is told to the schedule."""
    maker = Maker.objects.select_for_update(no_key=True).get(pk=maker.pk)
    act = Act(by, reason)
    changed = _edit(act, maker, values, None)
    settle(act, _fitted(transmitter__maker=maker) if changed else [])
    return maker


@transaction.atomic
def create_type(*, by: Actor, reason: str = "", maker: Maker, values: Values) -> TransmitterType:
    type_ = TransmitterType(maker=maker)
    _check_rating(values, type_)
    return _created(type_, by, reason, values)


@transaction.atomic
def edit_type(*, by: Actor, reason: str, type_: TransmitterType, values: Values) -> TransmitterType:
    """Edit a type; every tag at which one of it is fitted is checked again, in all plants."""
    type_ = (
        TransmitterType.objects.select_for_update(of=("self",), no_key=True).select_related("maker").get(pk=type_.pk)
    )
    _check_rating(values, type_)
    if values.get("maker", type_.maker) != type_.maker and type_.transmitters.exists():
        raise ValidationError({"maker": f"Transmitters of this type are registered under {type_.maker} already."})
    act = Act(by, reason)
    changed = _edit(act, type_, values, None)
    settle(act, _fitted(transmitter__type=type_) if changed else [])
    return type_


@transaction.atomic
def create_head(*, by: Actor, reason: str = "", type_: TransmitterType, values: Values) -> MeasuringHead:
    return _created(MeasuringHead(type=type_), by, reason, values)


@transaction.atomic
def edit_head(*, by: Actor, reason: str, head: MeasuringHead, values: Values) -> MeasuringHead:
    """Edit a measuring head; every tag at which a transmitter with it is fitted is checked again."""
    head = (
        MeasuringHead.objects.select_for_update(of=("self",), no_key=True).select_related("type__maker").get(pk=head.pk)
    )
    act = Act(by, reason)
    changed = _edit(act, head, values, None)
    settle(act, _fitted(transmitter__head=head) if changed else [])
    return head


@transaction.atomic
def create_transmitter(*, by: Actor, reason: str = "", plant: Plant, values: Values) -> Transmitter:
    """Register a transmitter; it lies in stores until it is fitted."""
    transmitter = Transmitter(plant=plant)
    fill(transmitter, values)
    _one_make(transmitter)
    act = Act(by, reason)
    store(transmitter)
    act.created(transmitter, plant=plant)
    act.write()
    return transmitter


@transaction.atomic
def edit_transmitter(*, by: Actor, reason: str, transmitter: Transmitter, values: Values) -> Transmitter:
    """Edit what is written about a transmitter.

    A new head is an intervention (`intervening.change_head`); type and head together, or a head that was entered
    wrongly (`correct_head`), are corrections of the register.
    """
    transmitter = _transmitter(transmitter.pk)
    same_type = values.get("type", transmitter.type) == transmitter.type
    if same_type and values.get("head", transmitter.head) != transmitter.head:
        raise ValidationError({"head": "Another measuring head is an intervention: record it as one, with its date."})
    act = Act(by, reason)
    changed = _edit(act, transmitter, values, transmitter.plant, check=lambda: _one_make(transmitter))
    settle(act, _fitted(transmitter=transmitter) if changed else [])
    return transmitter


@transaction.atomic
def correct_head(*, by: Actor, reason: str, transmitter: Transmitter, head: MeasuringHead) -> Transmitter:
    """Correct a head entered wrongly, with type and maker: the device had it all along, so its history goes on."""
    transmitter = _transmitter(transmitter.pk)
    act = Act(by, reason)
    values = {"maker": head.type.maker, "type": head.type, "head": head}
    if not _edit(act, transmitter, values, transmitter.plant):
        raise ValidationError({"head": f"The register has the head {head} already."})
    settle(act, _fitted(transmitter=transmitter))
    return transmitter


@transaction.atomic
def move_transmitter(*, by: Actor, reason: str, transmitter: Transmitter, whereabouts: str) -> Transmitter:
    """Note that a transmitter that is not fitted lies in stores, is away for repair, or is scrapped."""
    transmitter = _transmitter(transmitter.pk)
    if transmitter.whereabouts == Transmitter.Whereabouts.FITTED:
        raise ValidationError({"whereabouts": f"{transmitter} is fitted: remove it from its tag first."})
    if whereabouts == Transmitter.Whereabouts.FITTED:
        raise ValidationError({"whereabouts": "Fit it at a tag instead; that says where and since when."})
    act = Act(by, reason)
    _edit(act, transmitter, {"whereabouts": whereabouts}, transmitter.plant)
    act.write()
    return transmitter


@transaction.atomic
def create_tag(*, by: Actor, reason: str = "", plant: Plant, values: Values) -> Tag:
    """Create a tag; its checks say at once what is missing."""
    tag = Tag(plant=plant)
    fill(tag, values)
    _in_plant(tag)
    act = Act(by, reason)
    store(tag)
    act.created(tag, plant=plant)
    settle(act, [tag.pk])
    return tag


@transaction.atomic
def edit_tag(*, by: Actor, reason: str, tag: Tag, values: Values) -> Tag:
    """Edit a tag; its range and its transmitter change by acts of their own."""
    tag = _tag(tag.pk)
    act = Act(by, reason)
    changed = _edit(act, tag, values, tag.plant, check=lambda: _in_plant(tag))
    settle(act, [tag.pk] if changed else [])
    return tag


@transaction.atomic
def take_out_of_service(*, by: Actor, reason: str, tag: Tag, on: datetime.date) -> Tag:
    """Take a tag out of service from a day on, today or earlier."""
    tag = _tag(tag.pk)
    if tag.out_of_service_on is not None:
        raise ValidationError({"on": f"{tag} is out of service since {tag.out_of_service_on}."})
    if on > tag.plant.today():
        raise ValidationError({"on": f"{on} is still to come: note it when it has happened."})
    act = Act(by, reason)
    _edit(act, tag, {"out_of_service_on": on}, tag.plant)
    settle(act, [tag.pk])
    return tag


@transaction.atomic
def return_to_service(*, by: Actor, reason: str, tag: Tag) -> Tag:
    """Put a tag back into service."""
    tag = _tag(tag.pk)
    if tag.out_of_service_on is None:
        raise ValidationError(f"{tag} is in service already.")
    act = Act(by, reason)
    _edit(act, tag, {"out_of_service_on": None}, tag.plant)
    settle(act, [tag.pk])
    return tag


def _created(thing: T, by: Actor, reason: str, values: Values) -> T:
    """A thing of the catalogue, which belongs to no plant."""
    fill(thing, values)
    act = Act(by, reason)
    store(thing)
    act.created(thing, plant=None)
    act.write()
    return thing


def _edit(
    act: Act,
    thing: models.Model,
    values: Values,
    plant: Plant | None,
    check: Callable[[], None] | None = None,
) -> set[str]:
    """Fill, store and note a locked row; returns the names of the fields that changed."""
    before = snapshot(thing, values)
    fill(thing, values)
    after = snapshot(thing, values)
    changed = {name for name in values if before[name] != after[name]}
    if changed:
        if check is not None:
            check()
        store(thing)
        act.changed(thing, plant=plant, before=_readable(before), after=_readable(after))
    return changed


def _readable(values: Values) -> dict[str, Any]:
    """A body rating is listed in the trail as "20 : 160; 120 : 140"."""
    return {
        name: "; ".join(" : ".join(pair) for pair in value) if isinstance(value, list) else value
        for name, value in values.items()
    }


def _check_rating(values: Values, type_: TransmitterType) -> None:
    """Refuse a body rating that cannot be read as rising temperatures and pressures above zero."""
    from register.engineering.rating import RatingError, rating_table
    from register.engineering.units import UnitError

    rating = values.get("body_rating", type_.body_rating)
    if not rating:
        return
    try:
        rating_table(
            rating,
            values.get("temperature_unit", type_.temperature_unit),
            values.get("pressure_unit", type_.pressure_unit),
        )
    except (RatingError, UnitError) as error:
        raise ValidationError({"body_rating": str(error)}) from error


def _one_make(transmitter: Transmitter) -> None:
    """The type is the maker's, and the head goes with the type."""
    refused = {}
    if transmitter.type.maker_id != transmitter.maker_id:
        refused["type"] = (
            f"{transmitter.type.designation} is a type of {transmitter.type.maker}, not of {transmitter.maker}."
        )
    if transmitter.head.type_id != transmitter.type_id:
        refused["head"] = f"The head {transmitter.head.code} does not go with the type {transmitter.type.designation}."
    if refused:
        raise ValidationError(refused)


def _in_plant(tag: Tag) -> None:
    if tag.area.plant_id != tag.plant_id:
        raise ValidationError({"area": f"The area {tag.area} belongs to another plant."})


def _tag(pk: int) -> Tag:
    """The tag, its row locked."""
    return Tag.objects.select_for_update(of=("self",)).select_related("plant", "area").get(pk=pk)


def _transmitter(pk: int) -> Transmitter:
    """The transmitter with its row locked, after that of the tag where it is fitted."""
    list(Tag.objects.select_for_update(of=("self",)).filter(current_fitting__transmitter=pk).values_list("pk"))
    rows = Transmitter.objects.select_for_update(of=("self",))
    return rows.select_related("plant", "maker", "type__maker", "head__type").get(pk=pk)


def _ids(tags: models.QuerySet[Tag]) -> list[int]:
    return list(tags.order_by("pk").values_list("pk", flat=True))


def _fitted(**which: Any) -> list[int]:
    """Tags at which the transmitters that `which` names (by lookups of a fitting) are fitted now."""
    lookups = {f"current_fitting__{name}": value for name, value in which.items()}
    return _ids(Tag.objects.filter(**lookups))
