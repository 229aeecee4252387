"""Brings what the rows say about tags to the limit checks, one by one or as a fleet; reads only."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Mapping, Sequence
from typing import TYPE_CHECKING, Any, Final, TypeVar

from django.db.models import Model, QuerySet

from register.bulk import among
from register.models import Area, Measurand, MeasuringHead, Plant, Range, Tag, Transmitter, TransmitterType

if TYPE_CHECKING:
    from register.engineering.findings import Finding
    from register.engineering.fleet import Fleet
    from register.engineering.limits import (
        HeadLimits,
        LoopSupply,
        Process,
        RangeSetting,
        Surroundings,
        TagInputs,
        TypeLimits,
    )

M = TypeVar("M", bound=Model)
CHUNK = 500
#: What the checks of one tag read besides the tag's own row; the rest is shared by many tags.
RELATED = ("current_range", "current_fitting__transmitter")
#: Columns that the checks of a fleet read as numbers, after the texts and ids of `OTHERS`.
NUMBERS: Final = (
    "operating_pressure_pa",
    "design_pressure_pa",
    "lowest_pressure_pa",
    "one_side_pressure_pa",
    "process_min_k",
    "process_max_k",
    "tracing_temperature_k",
    "ambient_min_k",
    "ambient_max_k",
    "supply_v",
    "loop_ohm",
    "current_range__lrv_si",
    "current_range__urv_si",
    "plant__barometric_pa",
    "area__ambient_min_k",
    "area__ambient_max_k",
)
OTHERS: Final = (
    "pk",
    "pressure_reference",
    "root_extraction",
    "measurand",
    "current_range__reference",
    "current_range__transfer",
    "current_fitting__transmitter__head_id",
    "current_fitting__transmitter__type_id",
)
HEAD_NUMBERS: Final = ("lrl_si", "url_si", "least_span_si", "greatest_span_si")
TYPE_NUMBERS: Final = (
    "one_side_limit_pa",
    "vacuum_limit_pa",
    "ambient_min_k",
    "ambient_max_k",
    "process_min_k",
    "process_max_k",
    "capsule_max_k",
    "least_supply_v",
    "high_failure_ma",
)


def with_inputs(tag_ids: Iterable[int]) -> Iterator[Tag]:
    """Tags with everything that their checks read; what many tags share is read once and is one object."""
    ids = sorted(set(tag_ids))
    shared = Shared()
    for start in range(0, len(ids), CHUNK):
        chosen = among("pk", ids[start : start + CHUNK])
        tags = list(Tag.objects.filter(**chosen).select_related(*RELATED).order_by("pk"))
        shared.attach(tags)
        yield from tags


class Shared:
    """Plants, areas, makers, types and heads that many tags point at, each read once."""

    def __init__(self) -> None:
        self._plants: dict[int, Plant] = {}
        self._areas: dict[int, Area] = {}
        self._heads: dict[int, MeasuringHead] = {}

    def attach(self, tags: Iterable[Tag]) -> None:
        """Put them where a row was read without: plant and area of a tag; head, type and maker of what is fitted."""
        tags = list(tags)
        devices = [tag.current_fitting.transmitter for tag in tags if tag.current_fitting]
        _read(self._plants, Plant.objects.all(), {tag.plant_id for tag in tags})
        _read(self._areas, Area.objects.all(), {tag.area_id for tag in tags})
        heads = MeasuringHead.objects.select_related("type__maker")
        _read(self._heads, heads, {device.head_id for device in devices})
        for tag in tags:
            tag.plant, tag.area = self._plants[tag.plant_id], self._areas[tag.area_id]
        for device in devices:
            device.head = self._heads[device.head_id]
            if device.type_id == device.head.type_id:
                device.type, device.maker = device.head.type, device.head.type.maker


def _read(known: dict[int, M], rows: QuerySet[M], ids: set[int]) -> None:
    missing = ids.difference(known)
    if missing:
        known.update(rows.in_bulk(missing))


def fleet_of(tag_ids: Iterable[int]) -> tuple[list[int], Fleet]:
    """The ids of tags, and the same tags as the arrays that their checks run over."""
    import numpy as np

    from register.engineering.fleet import PLACES, REFERENCES, Fleet

    chosen = among("pk", sorted(set(tag_ids)))
    rows = list(Tag.objects.filter(**chosen).order_by("pk").values_list(*OTHERS, *NUMBERS))
    columns = list(zip(*rows, strict=True)) if rows else [()] * (len(OTHERS) + len(NUMBERS))
    ids, references, places, measurands, range_references, transfers, head_ids, type_ids = columns[: len(OTHERS)]
    number = dict(zip(NUMBERS, np.array(columns[len(OTHERS) :], dtype=float), strict=True))
    heads, types = _indexed(MeasuringHead, head_ids), _indexed(TransmitterType, type_ids)
    head = _limits(heads, head_ids, HEAD_NUMBERS)
    type_ = _limits(types, type_ids, TYPE_NUMBERS)
    measures = [types[type_id][1].measures if type_id else "gauge" for type_id in type_ids]

    def codes(texts: Iterable[str | None], table: Mapping[str, int]) -> Any:
        return np.array([table[text] if text is not None else 0 for text in texts], dtype=np.int8)

    def own(low_or_high: str) -> Any:
        tag, area = number[f"ambient_{low_or_high}_k"], number[f"area__ambient_{low_or_high}_k"]
        return np.where(np.isnan(tag), area, tag)

    return list(ids), Fleet(
        reference=codes(references, REFERENCES),
        **{name: number[name] for name in NUMBERS if "__" not in name and not name.startswith("ambient")},
        ambient_min_k=own("min"),
        ambient_max_k=own("max"),
        barometric_pa=number["plant__barometric_pa"],
        ranged=np.array([reference is not None for reference in range_references], dtype=bool),
        lrv_si=number["current_range__lrv_si"],
        urv_si=number["current_range__urv_si"],
        range_reference=codes(range_references, REFERENCES),
        square_root=np.array([transfer == Range.Transfer.SQUARE_ROOT for transfer in transfers], dtype=bool),
        root_extraction=codes(places, PLACES),
        of_flow=np.array([measurand == Measurand.FLOW for measurand in measurands], dtype=bool),
        fitted=np.array([head_id is not None for head_id in head_ids], dtype=bool),
        head_reference=codes(measures, REFERENCES),
        **head,
        type_index=np.array([types[type_id][0] if type_id else -1 for type_id in type_ids], dtype=int),
        ratings=[type_limits(type_row).body_rating for _, type_row in types.values()],
        **{f"type_{name}" if name.startswith(("ambient", "process")) else name: type_[name] for name in TYPE_NUMBERS},
    )


def _indexed(model: type[M], ids: Iterable[int | None]) -> dict[int, tuple[int, M]]:
    """Rows by id, each with its place in the order of the ids."""
    rows = model._default_manager.in_bulk({pk for pk in ids if pk is not None})
    return {pk: (place, rows[pk]) for place, pk in enumerate(sorted(rows))}


def _limits(rows: Mapping[int, tuple[int, M]], ids: Iterable[int | None], names: Iterable[str]) -> dict[str, Any]:
    """Named numbers of the rows that the ids point at, one array a name; nan where there is no row."""
    import numpy as np

    places = np.array([rows[pk][0] if pk is not None else len(rows) for pk in ids], dtype=int)
    return {
        name: np.array([*(getattr(row, name) for _, row in rows.values()), None], dtype=float)[places] for name in names
    }


def findings(
    tag: Tag,
    *,
    setting: Range | None = None,
    transmitter: Transmitter | None = None,
    checks: Iterable[str] | None = None,
) -> tuple[Finding, ...]:
    """What every limit check, or each of those named, finds at a tag.

    `setting` and `transmitter` stand in for its own, to ask “what if”.
    """
    from register.engineering.limits import check_all, check_these

    inputs = inputs_of(tag, setting=setting, transmitter=transmitter)
    return check_all(inputs) if checks is None else check_these(inputs, checks)


def inputs_of(tag: Tag, *, setting: Range | None = None, transmitter: Transmitter | None = None) -> TagInputs:
    """The inputs of the limit checks of one tag, from rows already read."""
    from register.engineering.limits import TagInputs

    transmitter = transmitter or (tag.current_fitting.transmitter if tag.current_fitting else None)
    chosen = setting or tag.current_range
    return TagInputs(
        process=process_of(tag),
        surroundings=surroundings_of(tag),
        loop=loop_of(tag),
        head=head_limits(transmitter.head, transmitter.type) if transmitter else None,
        type=type_limits(transmitter.type) if transmitter else None,
        range=setting_of(tag, chosen) if chosen else None,
    )


def process_of(tag: Tag) -> Process:
    from register.engineering.limits import Process

    return Process(
        reference=tag.pressure_reference,
        pressure_unit=tag.pressure_unit,
        temperature_unit=tag.temperature_unit,
        operating_pressure_pa=tag.operating_pressure_pa,
        design_pressure_pa=tag.design_pressure_pa,
        lowest_pressure_pa=tag.lowest_pressure_pa,
        one_side_pressure_pa=tag.one_side_pressure_pa,
        process_min_k=tag.process_min_k,
        process_max_k=tag.process_max_k,
        tracing_temperature_k=tag.tracing_temperature_k,
    )


def surroundings_of(tag: Tag) -> Surroundings:
    """The tag's own ambient where it has one, else its area's; each figure for itself."""
    from register.engineering.limits import Surroundings

    area = tag.area
    own = [figure is not None for figure in (tag.ambient_min_k, tag.ambient_max_k)]
    source = "tag" if all(own) else f"tag and area {area.code}" if any(own) else f"area {area.code}"
    return Surroundings(
        ambient_min_k=tag.ambient_min_k if own[0] else area.ambient_min_k,
        ambient_max_k=tag.ambient_max_k if own[1] else area.ambient_max_k,
        barometric_pa=tag.plant.barometric_pa,
        temperature_unit=tag.temperature_unit if any(own) else area.temperature_unit,
        source=source,
    )


def loop_of(tag: Tag) -> LoopSupply:
    from register.engineering.limits import LoopSupply

    return LoopSupply(supply_v=tag.supply_v, loop_ohm=tag.loop_ohm)


def head_limits(head: MeasuringHead, type_: TransmitterType) -> HeadLimits:
    from register.engineering.limits import HeadLimits

    return HeadLimits(
        reference=type_.measures,
        unit=head.unit,
        lrl_si=head.lrl_si,
        url_si=head.url_si,
        least_span_si=head.least_span_si,
        greatest_span_si=head.greatest_span_si,
        source=f"measuring head {head.code}",
    )


def type_limits(type_: TransmitterType) -> TypeLimits:
    from register.engineering.limits import TypeLimits
    from register.engineering.rating import rating_table

    return TypeLimits(
        pressure_unit=type_.pressure_unit,
        temperature_unit=type_.temperature_unit,
        body_rating=rating_table(pairs(type_), type_.temperature_unit, type_.pressure_unit) if pairs(type_) else (),
        one_side_limit_pa=type_.one_side_limit_pa,
        vacuum_limit_pa=type_.vacuum_limit_pa,
        ambient_min_k=type_.ambient_min_k,
        ambient_max_k=type_.ambient_max_k,
        process_min_k=type_.process_min_k,
        process_max_k=type_.process_max_k,
        capsule_max_k=type_.capsule_max_k,
        least_supply_v=type_.least_supply_v,
        high_failure_ma=type_.high_failure_ma,
        source=f"type {type_.designation}",
    )


def pairs(type_: TransmitterType) -> Sequence[Sequence[str]]:
    """The body rating of a type as typed: (temperature, gauge pressure)."""
    return type_.body_rating or ()


def setting_of(tag: Tag, range_: Range) -> RangeSetting:
    from register.engineering.limits import RangeSetting

    return RangeSetting(
        lrv_si=range_.lrv_si,
        urv_si=range_.urv_si,
        unit=range_.unit,
        reference=range_.reference,
        transfer=range_.transfer,
        root_extraction=tag.root_extraction,
        of_flow=tag.measurand == Measurand.FLOW,
        source="range",
    )
