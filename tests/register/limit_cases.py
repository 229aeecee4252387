"""Inputs of limit checks for tests: one sound tag, from which each test departs."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

from hypothesis import strategies as st

from register.engineering.findings import Finding
from register.engineering.limits import (
    HeadLimits,
    LoopSupply,
    Process,
    RangeSetting,
    Surroundings,
    TagInputs,
    TypeLimits,
    check_all,
)
from register.engineering.rating import rating_table
from register.engineering.units import to_si

WATER = "inH2O_68F"

HEAD = HeadLimits(
    reference="differential",
    unit=WATER,
    lrl_si=to_si(-250.0, WATER),
    url_si=to_si(250.0, WATER),
    least_span_si=to_si(25.0, WATER),
    source="measuring head D3",
)
# Common practice, no source: −40 to 250 °F ambient for older electronic heads, a 1500 psi body rating with one-side
# overrange protection equal to it, a 24 V DC two-wire supply.
TYPE = TypeLimits(
    pressure_unit="psi",
    temperature_unit="degF",
    body_rating=rating_table([("-40", "1500"), ("250", "1500"), ("400", "1200")], "degF", "psi"),
    one_side_limit_pa=to_si(1500.0, "psi"),
    vacuum_limit_pa=to_si(0.5, "psi"),
    ambient_min_k=to_si(-40.0, "degF"),
    ambient_max_k=to_si(250.0, "degF"),
    process_min_k=to_si(-40.0, "degF"),
    process_max_k=to_si(300.0, "degF"),
    capsule_max_k=to_si(250.0, "degF"),
    least_supply_v=12.0,
    high_failure_ma=22.5,
    source="type M2",
)
PROCESS = Process(
    reference="gauge",
    pressure_unit="psi",
    temperature_unit="degF",
    operating_pressure_pa=to_si(900.0, "psi"),
    design_pressure_pa=to_si(1000.0, "psi"),
    lowest_pressure_pa=0.0,
    process_min_k=to_si(60.0, "degF"),
    process_max_k=to_si(200.0, "degF"),
    source="tag",
)
SURROUNDINGS = Surroundings(
    temperature_unit="degF",
    ambient_min_k=to_si(0.0, "degF"),
    ambient_max_k=to_si(110.0, "degF"),
    barometric_pa=101325.0,
    source="area 20",
)
RANGE = RangeSetting(
    lrv_si=0.0,
    urv_si=to_si(125.0, WATER),
    unit=WATER,
    reference="differential",
    transfer="square root",
    root_extraction="transmitter",
    of_flow=True,
    source="range",
)
LOOP = LoopSupply(supply_v=24.0, loop_ohm=400.0, source="tag")
SOUND = TagInputs(process=PROCESS, surroundings=SURROUNDINGS, loop=LOOP, head=HEAD, type=TYPE, range=RANGE)


def changed(**parts: dict[str, Any]) -> TagInputs:
    """The sound tag with fields of its parts replaced: `changed(process={"design_pressure_pa": 1e7})`."""
    return replace(SOUND, **{name: replace(getattr(SOUND, name), **fields) for name, fields in parts.items()})


def finding(check: str, inputs: TagInputs) -> Finding:
    """What one check finds."""
    return {found.check: found for found in check_all(inputs)}[check]


def _maybe(numbers: st.SearchStrategy[float]) -> st.SearchStrategy[float | None]:
    return st.one_of(st.none(), numbers)


_references = st.sampled_from(["gauge", "absolute", "differential"])
_pressures = st.floats(-1e5, 2e7)
_positive = st.floats(1.0, 2e7)
_kelvins = st.floats(150.0, 900.0)
_pressure_units = st.sampled_from(["bar", "psi", "kPa", WATER, "mmHg"])
_temperature_units = st.sampled_from(["degC", "degF", "K"])
_tables = st.lists(st.tuples(st.integers(200, 800), _positive), max_size=5, unique_by=lambda pair: pair[0]).map(
    lambda pairs: tuple((float(kelvin), pressure) for kelvin, pressure in sorted(pairs))
)
_heads = st.builds(
    lambda low, width, **rest: HeadLimits(lrl_si=low, url_si=low + width, **rest),
    _pressures,
    _positive,
    reference=_references,
    unit=_pressure_units,
    least_span_si=_maybe(_positive),
    greatest_span_si=_maybe(_positive),
)
_types = st.builds(
    TypeLimits,
    pressure_unit=_pressure_units,
    temperature_unit=_temperature_units,
    body_rating=_tables,
    one_side_limit_pa=_maybe(_positive),
    vacuum_limit_pa=_maybe(st.just(0.0) | st.floats(1e-3, 1e5)),  # below a thousandth of a pascal nobody states one
    ambient_min_k=_maybe(_kelvins),
    ambient_max_k=_maybe(_kelvins),
    process_min_k=_maybe(_kelvins),
    process_max_k=_maybe(_kelvins),
    capsule_max_k=_maybe(_kelvins),
    least_supply_v=_maybe(st.floats(8.0, 20.0)),
    high_failure_ma=_maybe(st.floats(20.0, 24.0)),
)
_processes = st.builds(
    Process,
    reference=_references,
    pressure_unit=_pressure_units,
    temperature_unit=_temperature_units,
    operating_pressure_pa=_maybe(_pressures),
    design_pressure_pa=_maybe(_pressures),
    lowest_pressure_pa=_maybe(_pressures),
    one_side_pressure_pa=_maybe(_pressures),
    process_min_k=_maybe(_kelvins),
    process_max_k=_maybe(_kelvins),
    tracing_temperature_k=_maybe(_kelvins),
    traced=st.booleans(),
)
_ranges = st.builds(
    RangeSetting,
    lrv_si=_pressures,
    urv_si=_pressures,
    unit=_pressure_units,
    reference=_references,
    transfer=st.sampled_from(["linear", "square root"]),
    root_extraction=st.sampled_from(["", "none", "transmitter", "control system"]),
    of_flow=st.booleans(),
)

#: Any tag at all, sound or not, with any of its numbers missing.
any_inputs: st.SearchStrategy[TagInputs] = st.builds(
    TagInputs,
    process=_processes,
    surroundings=st.builds(
        Surroundings,
        temperature_unit=_temperature_units,
        ambient_min_k=_maybe(_kelvins),
        ambient_max_k=_maybe(_kelvins),
        barometric_pa=_maybe(st.floats(6e4, 1.1e5)),
    ),
    loop=st.builds(LoopSupply, supply_v=_maybe(st.floats(0.0, 60.0)), loop_ohm=_maybe(st.floats(0.0, 2000.0))),
    head=st.one_of(st.none(), _heads),
    type=st.one_of(st.none(), _types),
    range=st.one_of(st.none(), _ranges),
)
