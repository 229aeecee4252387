"""The register of a plant in the columns of its import, so that what is taken out can be brought in again."""

from __future__ import annotations

import datetime
from collections.abc import Iterator
from typing import Any, Final

from register.engineering.typed import shortest
from register.engineering.units import label
from register.imports.sheet import OF_DEVICE, OF_TAG
from register.models import Plant, Range, Tag, Transmitter

_RELATED: Final = (
    "area",
    "current_range",
    "current_fitting__transmitter__type__maker",
    "current_fitting__transmitter__head",
)
_UNITS: Final = ("pressure_unit", "temperature_unit")


def rows_of(plant: Plant) -> Iterator[dict[str, str]]:
    """One row a tag, by tag; then the transmitters that are fitted nowhere, without a tag."""
    tags = Tag.objects.filter(plant=plant).select_related(*_RELATED).order_by("number")
    for tag in tags.iterator(chunk_size=1000):
        row = {"tag": tag.number, "area": tag.area.code, "area_name": tag.area.name}
        row |= {name: _text(getattr(tag, name)) for name in OF_TAG}
        row |= {name: label(getattr(tag, name)) for name in _UNITS}
        if tag.current_range is not None:
            row |= _range(tag.current_range)
        if tag.current_fitting is not None:
            row |= _device(tag.current_fitting.transmitter)
            row["fitted_on"] = _text(tag.current_fitting.fitted_on)
        yield row
    spares = Transmitter.objects.filter(plant=plant).exclude(whereabouts=Transmitter.Whereabouts.FITTED)
    for device in spares.select_related("type__maker", "maker", "head").order_by("serial").iterator(chunk_size=1000):
        yield _device(device)


def _range(setting: Range) -> dict[str, str]:
    row = {
        "lrv": setting.lrv,
        "urv": setting.urv,
        "range_unit": label(setting.unit),
        "range_reference": setting.reference,
        "transfer": setting.transfer,
        "range_from": _text(setting.effective_from),
        "range_reason": setting.reason,
    }
    if setting.transfer == Range.Transfer.SQUARE_ROOT:
        row |= {"low_cut_percent": _text(setting.low_cut_percent), "below_cut": setting.below_cut}
    return row


def _device(device: Transmitter) -> dict[str, str]:
    row = {
        "maker": device.maker.name,
        "type": device.type.designation,
        "head": device.head.code,
        "serial": device.serial,
    }
    return row | {name: _text(getattr(device, name)) for name in OF_DEVICE}


def _text(value: Any) -> str:
    """A value as it is typed in a cell."""
    if value is None:
        return ""
    if isinstance(value, bool):
        return "yes" if value else "no"
    if isinstance(value, float):
        return shortest(value)
    if isinstance(value, datetime.date):
        return value.isoformat()
    return "\n".join(str(value).splitlines())
