"""What the register says of the days of past tests: what was fitted, its head, range, requirement and standards."""

from __future__ import annotations

import datetime
from collections import defaultdict
from collections.abc import Collection, Iterable, Iterator, Mapping, Sequence
from dataclasses import dataclass, field
from typing import Any, Final

from calibration.models import Certificate, PointList, Requirement, Standard
from calibration.queries.choosing import BY_PART
from register.imports.known import folded
from register.models import Fitting, Intervention, MeasuringHead, Plant, Range, Tag, Transmitter
from register.searching import SearchKey, key

AT_ONCE: Final = 1000


@dataclass(slots=True)
class History:
    """Rows that tests of one plant may point at."""

    plant: Plant
    tags: Mapping[int, Tag]
    devices: Mapping[int, Transmitter]
    by_serial: Mapping[str, Sequence[Transmitter]]
    heads: Mapping[int, MeasuringHead]
    point_lists: Mapping[int, PointList]
    standards: Mapping[str, Standard]
    certificates: Mapping[int, Sequence[Certificate]]
    fittings_of_tag: dict[int, list[Fitting]] = field(default_factory=lambda: defaultdict(list))
    fittings_of_device: dict[int, list[Fitting]] = field(default_factory=lambda: defaultdict(list))
    ranges: dict[int, list[Range]] = field(default_factory=lambda: defaultdict(list))
    requirements: dict[int, list[Requirement]] = field(default_factory=lambda: defaultdict(list))
    new_heads: dict[int, list[Intervention]] = field(default_factory=lambda: defaultdict(list))

    def fitted_on(self, fittings: Iterable[Fitting], day: datetime.date) -> list[Fitting]:
        """Fittings that hold on a day; on the day of a swap there are two."""
        return [one for one in fittings if one.fitted_on <= day and (one.removed_on is None or day <= one.removed_on)]

    def head_on(self, device: Transmitter, day: datetime.date) -> MeasuringHead:
        """The head that was in a transmitter on a day; on the day of its change the new one."""
        later = next((one for one in self.new_heads[device.pk] if one.done_on > day), None)
        head_id = later.head_before_id if later is not None else device.head_id
        return self.heads[head_id or device.head_id]

    def certificate_on(self, standard: Standard, day: datetime.date) -> Certificate | None:
        """The newest certificate of a standard on a day."""
        held = [one for one in self.certificates.get(standard.pk, ()) if one.calibrated_on <= day]
        return held[-1] if held else None


def last(rows: Sequence[Any], day: datetime.date) -> Any:
    """The row that was in force on a day, or None."""
    begun = [row for row in rows if row.effective_from <= day]
    return begun[-1] if begun else None


def fits(standard: Standard, part: str) -> bool:
    """Whether a standard can have applied the input, or measured the output."""
    return standard.kind in BY_PART[part]


def read(plant: Plant, tags: Mapping[str, Tag], serials: Collection[str]) -> History:
    """Read the history of tags and of the transmitters with these serial numbers, and of what was fitted with them."""
    devices = _devices(plant, serials)
    by_tag = {tag.pk: tag for tag in tags.values()}
    fittings = list(_in_parts(Fitting, "tag", by_tag)) + list(_in_parts(Fitting, "transmitter", devices))
    fittings = list({one.pk: one for one in fittings}.values())
    missing = {one.transmitter_id for one in fittings}.difference(devices)
    devices |= {row.pk: row for row in _in_parts(Transmitter, "pk", missing)}
    others = {one.tag_id for one in fittings}.difference(by_tag)
    by_tag |= {row.pk: row for row in _in_parts(Tag, "pk", others)}
    heads = {head.pk: head for head in MeasuringHead.objects.select_related("type__maker")}
    for device in devices.values():
        device.plant, device.head = plant, heads[device.head_id]
        device.type, device.maker = device.head.type, device.head.type.maker
    for tag in by_tag.values():
        tag.plant = plant
    by_serial: dict[str, list[Transmitter]] = defaultdict(list)
    for device in devices.values():
        by_serial[key(device.serial)].append(device)
    certificates: dict[int, list[Certificate]] = defaultdict(list)
    for certificate in Certificate.objects.filter(standard__plant=plant, withdrawn_at=None).order_by(
        "calibrated_on", "pk"
    ):
        certificates[certificate.standard_id].append(certificate)
    found = History(
        plant=plant,
        tags=by_tag,
        devices=devices,
        by_serial=by_serial,
        heads=heads,
        point_lists=PointList.objects.filter(plant=plant).in_bulk(),
        standards={folded(one.name): one for one in Standard.objects.filter(plant=plant)},
        certificates=certificates,
    )
    _fill(found, fittings)
    return found


def _fill(found: History, fittings: Sequence[Fitting]) -> None:
    for fitting in sorted(fittings, key=lambda one: (one.fitted_on, one.pk)):
        fitting.tag, fitting.transmitter = found.tags[fitting.tag_id], found.devices[fitting.transmitter_id]
        found.fittings_of_tag[fitting.tag_id].append(fitting)
        found.fittings_of_device[fitting.transmitter_id].append(fitting)
    standing = {"applied_at__isnull": False, "withdrawn_at__isnull": True}
    for range_ in _in_parts(Range, "tag", found.tags, "effective_from", "pk", **standing):
        found.ranges[range_.tag_id].append(range_)
    for requirement in _in_parts(Requirement, "tag", found.tags, "effective_from", "pk", **standing):
        requirement.point_list = found.point_lists[requirement.point_list_id]
        found.requirements[requirement.tag_id].append(requirement)
    changed = {"head_after__isnull": False, "withdrawn_at__isnull": True}
    for change in _in_parts(Intervention, "transmitter", found.devices, "done_on", "pk", **changed):
        found.new_heads[change.transmitter_id].append(change)


def _devices(plant: Plant, serials: Collection[str]) -> dict[int, Transmitter]:
    keys = sorted({key(serial) for serial in serials})
    found: dict[int, Transmitter] = {}
    for start in range(0, len(keys), AT_ONCE):
        rows = Transmitter.objects.filter(plant=plant).alias(_key=SearchKey("serial"))
        found |= {row.pk: row for row in rows.filter(_key__in=keys[start : start + AT_ONCE])}
    return found


def _in_parts(model: Any, name: str, ids: Collection[int], *order: str, **more: Any) -> Iterator[Any]:
    listed = sorted(ids)
    for start in range(0, len(listed), AT_ONCE):
        lookups = {f"{name}__in": listed[start : start + AT_ONCE], **more}
        yield from model.objects.filter(**lookups).order_by(*(order or ("pk",)))
