"""What the register holds about the tags, transmitters and names that a file speaks of; read with few queries."""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Collection, Iterable, Iterator
from dataclasses import dataclass, field
from typing import Any, Final, TypeVar

from django.db.models import Model, QuerySet

from register.models import (
    Area,
    Fitting,
    Maker,
    MeasuringHead,
    Plant,
    Range,
    Tag,
    Transmitter,
    TransmitterType,
)
from register.searching import SearchKey, key

M = TypeVar("M", bound=Model)
AT_ONCE: Final = 2000


@dataclass(slots=True)
class Known:
    """Rows by the keys under which a file names them; names are compared without regard to capital letters."""

    plant: Plant
    areas: dict[str, Area]
    makers: dict[str, Maker]
    types: dict[tuple[int, str], TransmitterType]
    heads: dict[tuple[int, str], MeasuringHead]
    tags: dict[str, Tag]
    devices: dict[tuple[int, str], Transmitter]
    ranges: dict[int, list[Range]] = field(default_factory=lambda: defaultdict(list))
    fittings_of_tag: dict[int, list[Fitting]] = field(default_factory=lambda: defaultdict(list))
    fittings_of_device: dict[int, list[Fitting]] = field(default_factory=lambda: defaultdict(list))


def known(plant: Plant, numbers: Iterable[str], serials: Iterable[str]) -> Known:
    """Read what is registered under tag numbers and serial numbers, and the names that rows may use."""
    makers = {maker.pk: maker for maker in Maker.objects.all()}
    types = {row.pk: row for row in TransmitterType.objects.all()}
    for row in types.values():
        row.maker = makers[row.maker_id]
    heads = {head.pk: head for head in MeasuringHead.objects.all()}
    for head in heads.values():
        head.type = types[head.type_id]
    areas = {area.pk: area for area in plant.areas.all()}
    tags = Tag.objects.filter(plant=plant).select_related("current_range", "current_fitting__transmitter")
    found = Known(
        plant=plant,
        areas={folded(area.code): area for area in areas.values()},
        makers={folded(maker.name): maker for maker in makers.values()},
        types={(row.maker_id, folded(row.designation)): row for row in types.values()},
        heads={(head.type_id, folded(head.code)): head for head in heads.values()},
        tags={key(tag.number): tag for tag in _called(tags, "number", numbers)},
        devices={
            (device.maker_id, key(device.serial)): device
            for device in _called(Transmitter.objects.all(), "serial", serials)
        },
    )
    for device in found.devices.values():
        _named(device, makers, types, heads)
    for tag in found.tags.values():
        tag.plant, tag.area = plant, areas[tag.area_id]
        if tag.current_fitting:
            _named(tag.current_fitting.transmitter, makers, types, heads)
    _read_history(found)
    return found


def folded(name: str) -> str:
    """A name as it is compared."""
    return " ".join(name.casefold().split())


def _named(
    device: Transmitter, makers: dict[int, Maker], types: dict[int, TransmitterType], heads: dict[int, MeasuringHead]
) -> None:
    device.maker, device.type, device.head = makers[device.maker_id], types[device.type_id], heads[device.head_id]


def _read_history(found: Known) -> None:
    tags = {tag.pk: tag for tag in found.tags.values()}
    devices = {device.pk: device for device in found.devices.values()}
    for row in _in_parts(Range.objects.filter(withdrawn_at__isnull=True), "tag", tags):
        row.tag = tags[row.tag_id]
        found.ranges[row.tag_id].append(row)
    for fitting in _in_parts(Fitting.objects.select_related("tag"), "tag", tags):
        found.fittings_of_tag[fitting.tag_id].append(fitting)
    for fitting in _in_parts(Fitting.objects.select_related("tag"), "transmitter", devices):
        found.fittings_of_device[fitting.transmitter_id].append(fitting)


def _called(rows: QuerySet[M], name: str, texts: Iterable[str]) -> Iterator[M]:
    keys = sorted({key(text) for text in texts})
    for start in range(0, len(keys), AT_ONCE):
        yield from rows.alias(_key=SearchKey(name)).filter(_key__in=keys[start : start + AT_ONCE])


def _in_parts(rows: QuerySet[M], name: str, ids: Collection[Any]) -> Iterator[M]:
    listed = sorted(ids)
    for start in range(0, len(listed), AT_ONCE):
        yield from rows.filter(**{f"{name}__in": listed[start : start + AT_ONCE]}).order_by("pk")
