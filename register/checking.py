"""Brings what the rows say about tags to the limit checks; reads only."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Sequence
from typing import TYPE_CHECKING

from register.models import MeasuringHead, Range, Tag, Transmitter, TransmitterType

if TYPE_CHECKING:
    from register.engineering.findings import Finding
    from register.engineering.limits import (
        HeadLimits,
        LoopSupply,
        Process,
        RangeSetting,
        Surroundings,
        TagInputs,
        TypeLimits,
    )

CHUNK = 500
#: What the checks of one tag read besides the tag's own row.
RELATED = (
    "plant",
    "area",
    "current_range",
    "current_fitting__transmitter__type__maker",
    "current_fitting__transmitter__head",
)


def with_inputs(tag_ids: Iterable[int]) -> Iterator[Tag]:
    """Tags with everything that their checks read, one query per 500."""
    ids = sorted(set(tag_ids))
    for start in range(0, len(ids), CHUNK):
        yield from Tag.objects.filter(pk__in=ids[start : start + CHUNK]).select_related(*RELATED).order_by("pk")


def findings(tag: Tag, *, setting: Range | None = None, transmitter: Transmitter | None = None) -> tuple[Finding, ...]:
    """What every limit check finds at a tag; `setting` and `transmitter` stand in for its own, to ask “what if”."""
    from register.engineering.limits import check_all

    return check_all(inputs_of(tag, setting=setting, transmitter=transmitter))


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
        source="range",
    )
