"""What the process demands of a tag and what the fitted device can carry, in SI, with where it comes from.

None is a number that is not recorded. Units beside the numbers are those in which people see them.
"""

from __future__ import annotations

from dataclasses import dataclass

from register.engineering.rating import Table

LINEAR = "linear"
SQUARE_ROOT = "square root"


@dataclass(frozen=True, slots=True, kw_only=True)
class HeadLimits:
    """Measuring head: pressures [Pa] against `reference`; without a greatest span it is URL − LRL."""

    reference: str
    unit: str
    lrl_si: float | None = None
    url_si: float | None = None
    least_span_si: float | None = None
    greatest_span_si: float | None = None
    source: str = "measuring head"


@dataclass(frozen=True, slots=True, kw_only=True)
class TypeLimits:
    """Transmitter type: gauge pressures [Pa] (vacuum limit absolute), temperatures [K], supply [V, mA].

    `capsule_max_k` stands for the highest process temperature where none is stated for the capsule.
    """

    pressure_unit: str
    temperature_unit: str
    body_rating: Table = ()
    one_side_limit_pa: float | None = None
    vacuum_limit_pa: float | None = None
    ambient_min_k: float | None = None
    ambient_max_k: float | None = None
    process_min_k: float | None = None
    process_max_k: float | None = None
    capsule_max_k: float | None = None
    least_supply_v: float | None = None
    high_failure_ma: float | None = None
    source: str = "transmitter type"


@dataclass(frozen=True, slots=True, kw_only=True)
class Process:
    """Process at the tag: static pressures [Pa] against `reference`, temperatures [K].

    Without a greatest pressure on one side the static pressure is taken: what one side sees when the other
    is vented.
    """

    reference: str
    pressure_unit: str
    temperature_unit: str
    operating_pressure_pa: float | None = None
    design_pressure_pa: float | None = None
    lowest_pressure_pa: float | None = None
    one_side_pressure_pa: float | None = None
    process_min_k: float | None = None
    process_max_k: float | None = None
    tracing_temperature_k: float | None = None
    traced: bool = False
    source: str = "tag"


@dataclass(frozen=True, slots=True, kw_only=True)
class Surroundings:
    """Ambient temperatures [K] at the tag and barometric pressure [Pa] of the plant."""

    temperature_unit: str
    ambient_min_k: float | None = None
    ambient_max_k: float | None = None
    barometric_pa: float | None = None
    source: str = "area"


@dataclass(frozen=True, slots=True, kw_only=True)
class RangeSetting:
    """Range in force: range-values [Pa] against `reference`.

    `root_extraction` is where the tag says the square root is taken: "transmitter", "control system", "none",
    or "" where it says nothing; `of_flow` whether the tag measures a flow.
    """

    lrv_si: float
    urv_si: float
    unit: str
    reference: str
    transfer: str = LINEAR
    root_extraction: str = ""
    of_flow: bool = False
    source: str = "range"


@dataclass(frozen=True, slots=True, kw_only=True)
class LoopSupply:
    """Two-wire loop: supply [V] and resistance [Ω] outside the transmitter."""

    supply_v: float | None = None
    loop_ohm: float | None = None
    source: str = "tag"


@dataclass(frozen=True, slots=True, kw_only=True)
class TagInputs:
    """All that the limit checks of one tag need; no head and type where no transmitter is fitted."""

    process: Process
    surroundings: Surroundings
    loop: LoopSupply
    head: HeadLimits | None = None
    type: TypeLimits | None = None
    range: RangeSetting | None = None
