"""The limit checks of a tag: can the fitted transmitter carry what the process and the range demand?

Every check gives a finding; missing data gives "cannot check". The shares that make a margin narrow, and so a
caution, are this project's own choice (no source): 5 % of a pressure, span or resistance limit, 5 K of a
temperature limit. A range that ends on a limit of its head is not narrow.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Mapping
from functools import partial
from types import MappingProxyType

from register.engineering.comparing import (
    NARROW_KELVIN,
    NARROW_SHARE,
    Comparison,
    Share,
    Side,
    Source,
    bracketed,
    cannot,
    in_unit,
    shared_decimals,
    tidy,
)
from register.engineering.demands import (
    SQUARE_ROOT,
    HeadLimits,
    LoopSupply,
    Process,
    RangeSetting,
    Surroundings,
    TagInputs,
    TypeLimits,
)
from register.engineering.findings import CHECKS, Finding, Said, Severity, worst
from register.engineering.loop import DEFAULT_HIGH_FAILURE_CURRENT_MA, available_resistance
from register.engineering.pressure import Reference
from register.engineering.ranges import known
from register.engineering.recorded import (
    LackingError,
    fitted_head,
    fitted_type,
    head_and_range,
    range_in_force,
    recorded,
    restated,
)
from register.engineering.static import body_rating_at, lowest_pressure, one_side, static_pressure
from register.engineering.units import from_si, label

__all__ = [
    "HeadLimits",
    "LoopSupply",
    "Process",
    "RangeSetting",
    "Surroundings",
    "TagInputs",
    "TypeLimits",
    "body_rating_at",
    "check_all",
    "check_these",
    "worst",
]


ONLY_DIFFERENTIAL = "only a differential pressure rises with the square of the flow"


def check_all(inputs: TagInputs) -> tuple[Finding, ...]:
    """Make every limit check of one tag.

    Parameters
    ----------
    inputs : TagInputs
        Demands and limits in SI with their sources; None for what is not recorded.

    Returns
    -------
    tuple of Finding
        One finding per key of `CHECKS`, in that order, whatever is missing.

    Notes
    -----
    Nothing is guessed: gauge meets absolute only with a barometric pressure, a differential pressure meets
    neither, and a body rating holds only between the temperatures for which it is listed.
    """
    return check_these(inputs, CHECKS)


def check_these(inputs: TagInputs, checks: Iterable[str]) -> tuple[Finding, ...]:
    """Make some limit checks of one tag; their keys are those of `CHECKS`, and so is their order."""
    wanted = set(checks)
    return tuple(_made(key, inputs) for key in CHECKS if key in wanted)


def _made(check: str, inputs: TagInputs) -> Finding:
    try:
        return _CHECK_OF[check](check, inputs)
    except LackingError as lack:
        return cannot(check, lack.missing, lack.why)


def _range_end(check: str, inputs: TagInputs) -> Finding:
    head, setting = head_and_range(inputs)
    upward = check == "range_upper"
    limit_name = "URL" if upward else "LRL"
    (limit_si,) = recorded((f"the head's {limit_name}", head.url_si if upward else head.lrl_si))
    limit, sums = restated(
        f"the head's {limit_name}",
        limit_si,
        head.reference,
        setting.reference,
        inputs.surroundings.barometric_pa,
        setting.unit,
    )
    lrv_ends = (setting.lrv_si < setting.urv_si) != upward
    end_name, end_si = ("LRV", setting.lrv_si) if lrv_ends else ("URV", setting.urv_si)
    bounds = {name: abs(si) for name, si in (("URL", head.url_si), ("LRL", head.lrl_si)) if si is not None}
    greater = max(bounds, key=lambda name: bounds[name])
    return Comparison(
        check=check,
        demanded=Side(end_si, end_name, Source(setting.source, end_name, end_si, setting.unit)),
        limit=Side(
            limit,
            f"the head's {'upper' if upward else 'lower'} limit",
            Source(head.source, limit_name, limit_si, head.unit, f" {head.reference}"),
        ),
        unit=setting.unit,
        must_stay_below=upward,
        share=Share(bounds[greater], f"the head's {greater}"),
        working=sums,
    ).finding()


def _least_span(check: str, inputs: TagInputs) -> Finding:
    head, setting = head_and_range(inputs)
    (least,) = recorded(("the head's least span", head.least_span_si))
    limit = Side(least, "the head's least span", Source(head.source, "least span", least, head.unit))
    return _span(check, setting, limit, must_stay_below=False, narrow=NARROW_SHARE * least)


def _greatest_span(check: str, inputs: TagInputs) -> Finding:
    head, setting = head_and_range(inputs)
    greatest, said = head.greatest_span_si, "greatest span"
    if greatest is None:
        said = "URL − LRL"
        lower, upper = recorded(("the head's LRL", head.lrl_si), ("the head's URL", head.url_si))
        greatest = upper - lower
    source = Source(head.source, said, greatest, head.unit)
    limit = Side(greatest, "the head's greatest span", source)
    return _span(check, setting, limit, must_stay_below=True, narrow=0.0)


def _span(check: str, setting: RangeSetting, limit: Side, *, must_stay_below: bool, narrow: float) -> Finding:
    magnitude = abs(setting.urv_si - setting.lrv_si)
    return Comparison(
        check=check,
        demanded=Side(magnitude, "Span", Source(setting.source, "span", magnitude, setting.unit)),
        limit=limit,
        unit=setting.unit,
        must_stay_below=must_stay_below,
        share=Share(limit.si, limit.name),
        narrow=narrow,
        working=(partial(_span_said, setting),),
    ).finding()


def _span_said(setting: RangeSetting) -> str:
    ends = setting.urv_si, setting.lrv_si
    shown = [from_si(si, setting.unit) for si in (*ends, abs(ends[0] - ends[1]))]
    decimals = shared_decimals(*shown)
    urv, lrv, magnitude = (tidy(value, decimals) for value in shown)
    return f"|{urv} − {bracketed(lrv)}| = {magnitude}"


def _square_root(check: str, inputs: TagInputs) -> Finding:
    setting = range_in_force(inputs)
    source = f"{setting.source}: transfer {setting.transfer}, {setting.reference}"
    if setting.transfer != SQUARE_ROOT:
        said = Said(f"The transfer is {setting.transfer}; no square root is taken here.", source)
        return Finding(check, Severity.CLEAR, said)
    if setting.reference != Reference.DIFFERENTIAL:
        said = Said(f"Square root is set on a range of {setting.reference} pressure: {ONLY_DIFFERENTIAL}.", source)
        return Finding(check, Severity.VIOLATION, said)
    head = fitted_head(inputs)
    head_source = f"{head.source}: measures {head.reference} pressure"
    if head.reference != Reference.DIFFERENTIAL:
        sentence = f"Square root is set on a head that measures {head.reference} pressure: {ONLY_DIFFERENTIAL}."
        return Finding(check, Severity.VIOLATION, Said(sentence, source, head_source))
    return Finding(check, Severity.CLEAR, Said("Square root is set on a differential pressure.", source, head_source))


def _square_root_place(check: str, inputs: TagInputs) -> Finding:
    setting = range_in_force(inputs)
    place = setting.root_extraction
    rooted = setting.transfer == SQUARE_ROOT
    if not place:
        if rooted or (setting.of_flow and setting.reference == Reference.DIFFERENTIAL):
            raise LackingError(("where the square root is taken",))
        said = Said(
            "No square root is called for: this is no flow measured by a differential pressure.",
            f"{setting.source}: transfer {setting.transfer}, {setting.reference}",
        )
        return Finding(check, Severity.CLEAR, said)
    severity, sentence = _PLACES[rooted, place]
    said = Said(
        sentence,
        f"{setting.source}: transfer {setting.transfer}",
        f"{inputs.process.source}: square root taken: {place}",
    )
    return Finding(check, severity, said)


_PLACES: Mapping[tuple[bool, str], tuple[Severity, str]] = MappingProxyType(
    {
        (True, "transmitter"): (Severity.CLEAR, "The square root is taken once, in the transmitter."),
        (True, "control system"): (
            Severity.VIOLATION,
            "The square root is taken twice: the range is set to square root, and the control system takes it again.",
        ),
        (True, "none"): (
            Severity.CAUTION,
            "The range is set to square root, but the tag says that no square root is taken: one of them is wrong.",
        ),
        (False, "transmitter"): (
            Severity.VIOLATION,
            "The tag says that the transmitter takes the square root, but the range is linear: nobody takes it.",
        ),
        (False, "control system"): (Severity.CLEAR, "The square root is taken once, in the control system."),
        (False, "none"): (Severity.CLEAR, "No square root is taken."),
    }
)


def _temperature(check: str, inputs: TagInputs) -> Finding:
    type_limits, around, process = fitted_type(inputs), inputs.surroundings, inputs.process
    upward, kind = check.endswith("high"), check.partition("_")[0]
    if kind == "ambient":
        demands = (around.ambient_min_k, around.ambient_max_k)
        low, high = type_limits.ambient_min_k, type_limits.ambient_max_k
        source, unit = around.source, around.temperature_unit
    else:
        demands = (process.process_min_k, process.process_max_k)
        low, high = type_limits.process_min_k, type_limits.process_max_k
        source, unit = process.source, process.temperature_unit
    what = f"{'highest' if upward else 'lowest'} {kind} temperature"
    demanded, limit = recorded(
        (f"the {what} at the tag", demands[upward]), (f"the {what} of the type", high if upward else low)
    )
    width = high - low if low is not None and high is not None else 0.0
    return Comparison(
        check=check,
        demanded=Side(demanded, what.capitalize(), Source(source, what, demanded, unit)),
        limit=Side(limit, "the type's limit", Source(type_limits.source, what, limit, type_limits.temperature_unit)),
        unit=unit,
        must_stay_below=upward,
        share=Share(width, f"the width of the type's {kind} limits"),
        narrow=NARROW_KELVIN,
    ).finding()


def _tracing(check: str, inputs: TagInputs) -> Finding:
    process = inputs.process
    demanded = process.tracing_temperature_k
    if demanded is None and not process.traced:
        return Finding(check, Severity.CLEAR, Said("No heat tracing is recorded at the tag.", process.source))
    type_limits = fitted_type(inputs)
    stated, low = type_limits.capsule_max_k, type_limits.process_min_k
    temperature, limit = recorded(
        ("the temperature of the heat tracing", demanded),
        ("the highest temperature at the capsule", type_limits.process_max_k if stated is None else stated),
    )
    limit_what = "highest process temperature" if stated is None else "highest temperature at the capsule"
    return Comparison(
        check=check,
        demanded=Side(
            temperature,
            "Heat tracing of",
            Source(process.source, "heat tracing", temperature, process.temperature_unit),
        ),
        limit=Side(
            limit,
            "the capsule's limit",
            Source(type_limits.source, limit_what, limit, type_limits.temperature_unit),
        ),
        unit=process.temperature_unit,
        must_stay_below=True,
        share=None if low is None else Share(limit - low, "the width of the type's process limits"),
        narrow=NARROW_KELVIN,
        advice="Heat tracing above the capsule's limit can destroy the capsule for good.",
    ).finding()


def _supply_voltage(check: str, inputs: TagInputs) -> Finding:
    type_limits = fitted_type(inputs)
    supply, least = recorded(
        ("the loop supply", inputs.loop.supply_v), ("the least supply voltage of the type", type_limits.least_supply_v)
    )
    return Comparison(
        check=check,
        demanded=Side(supply, "Supply", Source(inputs.loop.source, "loop supply", supply, "V")),
        limit=Side(
            least,
            "the transmitter's lift-off voltage",
            Source(type_limits.source, "least supply voltage", least, "V"),
        ),
        unit="V",
        must_stay_below=False,
        share=Share(least, "the lift-off voltage"),
    ).finding()


def _loop_resistance(check: str, inputs: TagInputs) -> Finding:
    type_limits = fitted_type(inputs)
    supply, resistance, least = recorded(
        ("the loop supply", inputs.loop.supply_v),
        ("the loop resistance", inputs.loop.loop_ohm),
        ("the least supply voltage of the type", type_limits.least_supply_v),
    )
    stated = type_limits.high_failure_ma
    current = DEFAULT_HIGH_FAILURE_CURRENT_MA if stated is None else stated
    available = known(available_resistance(supply, least, current))
    if available is None:
        raise LackingError(("a high failure current above zero",))
    milliamps = in_unit(current / 1e3, "mA")
    taken = ", the usual high failure current" if stated is None else ", its high failure current"
    return Comparison(
        check=check,
        demanded=Side(resistance, "Loop resistance", Source(inputs.loop.source, "loop resistance", resistance, "ohm")),
        limit=Side(
            available,
            "the limit",
            Source(type_limits.source, f"at {milliamps}{taken}, the supply can drive", available, "ohm"),
            f" {label('ohm')} that {in_unit(supply, 'V')} can drive at {milliamps}",
        ),
        unit="ohm",
        must_stay_below=True,
        share=Share(available, "what the supply can drive"),
        narrow=NARROW_SHARE * max(available, 0.0),
        working=(partial(_drivable, supply, least, current, available),),
    ).finding()


def _drivable(supply_v: float, least_v: float, greatest_ma: float, available_ohm: float) -> str:
    supply, least = (in_unit(volts, "V").removesuffix(" V") for volts in (supply_v, least_v))
    current = in_unit(greatest_ma / 1e3, "mA").removesuffix(" mA")
    return f"({supply} − {least}) / ({current} / 1000) = {in_unit(available_ohm, 'ohm')}"


_CHECK_OF: Mapping[str, Callable[[str, TagInputs], Finding]] = MappingProxyType(
    {
        "range_lower": _range_end,
        "range_upper": _range_end,
        "least_span": _least_span,
        "greatest_span": _greatest_span,
        "square_root": _square_root,
        "square_root_place": _square_root_place,
        "static_pressure": static_pressure,
        "one_side": one_side,
        "lowest_pressure": lowest_pressure,
        "ambient_low": _temperature,
        "ambient_high": _temperature,
        "process_low": _temperature,
        "process_high": _temperature,
        "tracing": _tracing,
        "supply_voltage": _supply_voltage,
        "loop_resistance": _loop_resistance,
    }
)
