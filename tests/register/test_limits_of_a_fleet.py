"""The limit checks of many tags at once find what the checks of each tag alone find."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import replace
from typing import Any

import numpy as np
from hypothesis import given
from hypothesis import strategies as st

from register.engineering.findings import CHECKS
from register.engineering.fleet import PLACES, REFERENCES, Fleet, severities
from register.engineering.limits import TagInputs, check_all
from register.engineering.units import to_si
from tests.register.limit_cases import SOUND, any_inputs, changed


def fleet_of(tags: Sequence[TagInputs]) -> Fleet:
    """The arrays of some tags, column by column."""

    def numbers(read: Callable[[TagInputs], float | None]) -> Any:
        return np.array([read(tag) for tag in tags], dtype=float)

    def codes(read: Callable[[TagInputs], int]) -> Any:
        return np.array([read(tag) for tag in tags], dtype=np.int8)

    def head(name: str) -> Any:
        return numbers(lambda tag: getattr(tag.head, name) if tag.head else None)

    def type_(name: str) -> Any:
        return numbers(lambda tag: getattr(tag.type, name) if tag.type else None)

    def process(name: str) -> Any:
        return numbers(lambda tag: getattr(tag.process, name))

    return Fleet(
        reference=codes(lambda tag: REFERENCES[tag.process.reference]),
        operating_pressure_pa=process("operating_pressure_pa"),
        design_pressure_pa=process("design_pressure_pa"),
        lowest_pressure_pa=process("lowest_pressure_pa"),
        one_side_pressure_pa=process("one_side_pressure_pa"),
        process_min_k=process("process_min_k"),
        process_max_k=process("process_max_k"),
        tracing_temperature_k=process("tracing_temperature_k"),
        ambient_min_k=numbers(lambda tag: tag.surroundings.ambient_min_k),
        ambient_max_k=numbers(lambda tag: tag.surroundings.ambient_max_k),
        barometric_pa=numbers(lambda tag: tag.surroundings.barometric_pa),
        supply_v=numbers(lambda tag: tag.loop.supply_v),
        loop_ohm=numbers(lambda tag: tag.loop.loop_ohm),
        ranged=np.array([tag.range is not None for tag in tags]),
        lrv_si=numbers(lambda tag: tag.range.lrv_si if tag.range else None),
        urv_si=numbers(lambda tag: tag.range.urv_si if tag.range else None),
        range_reference=codes(lambda tag: REFERENCES[tag.range.reference] if tag.range else 0),
        square_root=np.array([tag.range is not None and tag.range.transfer == "square root" for tag in tags]),
        root_extraction=codes(lambda tag: PLACES[tag.range.root_extraction] if tag.range else 0),
        of_flow=np.array([tag.range is not None and tag.range.of_flow for tag in tags]),
        fitted=np.array([tag.head is not None for tag in tags]),
        head_reference=codes(lambda tag: REFERENCES[tag.head.reference] if tag.head else 0),
        lrl_si=head("lrl_si"),
        url_si=head("url_si"),
        least_span_si=head("least_span_si"),
        greatest_span_si=head("greatest_span_si"),
        type_index=np.array([index if tag.type else -1 for index, tag in enumerate(tags)]),
        ratings=[tag.type.body_rating if tag.type else () for tag in tags],
        one_side_limit_pa=type_("one_side_limit_pa"),
        vacuum_limit_pa=type_("vacuum_limit_pa"),
        type_ambient_min_k=type_("ambient_min_k"),
        type_ambient_max_k=type_("ambient_max_k"),
        type_process_min_k=type_("process_min_k"),
        type_process_max_k=type_("process_max_k"),
        capsule_max_k=type_("capsule_max_k"),
        least_supply_v=type_("least_supply_v"),
        high_failure_ma=type_("high_failure_ma"),
    )


def untraced(tag: TagInputs) -> TagInputs:
    """Heat tracing whose temperature is not known is a mark that the register does not have."""
    return replace(tag, process=replace(tag.process, traced=False))


def alone(tags: Sequence[TagInputs]) -> list[list[int]]:
    return [[found.severity.rank for found in check_all(tag)] for tag in tags]


@given(st.lists(any_inputs.map(untraced), min_size=1, max_size=8))
def test_a_fleet_has_the_findings_of_its_tags(tags: list[TagInputs]) -> None:
    assert severities(fleet_of(tags)).tolist() == alone(tags)


def test_demands_on_and_about_their_limits_are_told_apart_as_for_one_tag() -> None:
    bars = [to_si(psi, "psi") for psi in (1424.9, 1425.0, 1425.1, 1500.0, 1500.1)]
    tags = [changed(process={"design_pressure_pa": pressure}) for pressure in bars]
    tags += [changed(loop={"supply_v": 24.0, "loop_ohm": ohm}) for ohm in (506.6, 506.7, 533.3, 533.4)]
    tags += [changed(range={"urv_si": to_si(urv, "inH2O_68F")}) for urv in (24.9, 25.0, 26.2, 26.3, 250.0, 250.1)]
    found = severities(fleet_of(tags))
    assert found.tolist() == alone(tags)
    static = list(CHECKS).index("static_pressure")
    # 1500 psi less 5 % is 1425 psi: a margin of exactly 5 % is not narrow, the rating itself is not beyond it.
    assert found[:5, static].tolist() == [0, 0, 2, 2, 3]


def test_a_sound_fleet_is_clear() -> None:
    assert not severities(fleet_of([SOUND] * 3)).any()


def test_a_temperature_that_is_not_known_has_no_rating_even_in_a_table_of_one_line() -> None:
    tag = changed(process={"process_min_k": None, "process_max_k": None}, type={"body_rating": ((293.0, 1e7),)})
    found = severities(fleet_of([tag, SOUND]))
    assert found.tolist() == alone([tag, SOUND])
    assert found[0, list(CHECKS).index("static_pressure")] == 1
