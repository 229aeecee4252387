"""The limit checks of a tag: can the fitted transmitter carry what the process and the range demand?

Every check gives a finding; missing data gives "cannot check". The shares that make a margin narrow, and so a
caution, are this project's own choice (no source): 5 % of a pressure, span or resistance limit, 5 K of a
temperature limit. A range that ends on a limit of its head is not narrow.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from types import MappingProxyType

from register.engineering.comparing import (
    NARROW_KELVIN,
    NARROW_SHARE,
    Comparison,
    Share,
    Side,
    bracketed,
    cannot,
    in_unit,
    shared_decimals,
    short_label,
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
from register.engineering.findings import CHECKS, Finding, Severity, worst
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
from register.engineering.units import from_si

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
    "worst",
]


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
    return tuple(_made(key, inputs) for key in CHECKS)


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
        demanded=Side(end_si, end_name, f"{setting.source}: {end_name} {in_unit(end_si, setting.unit)}"),
        limit=Side(
            limit,
            f"the head's {'upper' if upward else 'lower'} limit",
            f"{head.source}: {limit_name} {in_unit(limit_si, head.unit)} {head.reference}",
        ),
        unit=setting.unit,
        must_stay_below=upward,
        share=Share(bounds[greater], f"the head's {greater}"),
        working=sums,
    ).finding()


def _least_span(check: str, inputs: TagInputs) -> Finding:
    head, setting = head_and_range(inputs)
    (least,) = recorded(("the head's least span", head.least_span_si))
    limit = Side(least, "the head's least span", f"{head.source}: least span {in_unit(least, head.unit)}")
    return _span(check, setting, limit, must_stay_below=False, narrow=NARROW_SHARE * least)


def _greatest_span(check: str, inputs: TagInputs) -> Finding:
    head, setting = head_and_range(inputs)
    greatest, said = head.greatest_span_si, "greatest span"
    if greatest is None:
        said = "URL − LRL"
        lower, upper = recorded(("the head's LRL", head.lrl_si), ("the head's URL", head.url_si))
        greatest = upper - lower
    source = f"{head.source}: {said} {in_unit(greatest, head.unit)}"
    limit = Side(greatest, "the head's greatest span", source)
    return _span(check, setting, limit, must_stay_below=True, narrow=0.0)


def _span(check: str, setting: RangeSetting, limit: Side, *, must_stay_below: bool, narrow: float) -> Finding:
    magnitude = abs(setting.urv_si - setting.lrv_si)
    shown = [from_si(si, setting.unit) for si in (setting.urv_si, setting.lrv_si, magnitude)]
    decimals = shared_decimals(*shown)
    urv, lrv, said = (tidy(value, decimals) for value in shown)
    return Comparison(
        check=check,
        demanded=Side(magnitude, "Span", f"{setting.source}: |URV − LRV| = {in_unit(magnitude, setting.unit)}"),
        limit=limit,
        unit=setting.unit,
        must_stay_below=must_stay_below,
        share=Share(limit.si, limit.name),
        narrow=narrow,
        working=(f"|{urv} − {bracketed(lrv)}| = {said}",),
    ).finding()


def _square_root(check: str, inputs: TagInputs) -> Finding:
    setting = range_in_force(inputs)
    source = f"{setting.source}: transfer {setting.transfer}, {setting.reference}"
    if setting.transfer != SQUARE_ROOT:
        return Finding(
            check,
            Severity.CLEAR,
            f"The transfer is {setting.transfer}; no square root is taken here.",
            demanded_source=source,
        )
    if setting.reference != Reference.DIFFERENTIAL:
        return Finding(
            check,
            Severity.VIOLATION,
            f"Square root is set on a range of {setting.reference} pressure: only a differential pressure rises with "
            "the square of the flow.",
            demanded_source=source,
        )
    head = fitted_head(inputs)
    differential = head.reference == Reference.DIFFERENTIAL
    return Finding(
        check,
        Severity.CLEAR if differential else Severity.VIOLATION,
        "Square root is set on a differential pressure."
        if differential
        else f"Square root is set on a head that measures {head.reference} pressure: only a differential pressure "
        "rises with the square of the flow.",
        demanded_source=source,
        limit_source=f"{head.source}: measures {head.reference} pressure",
    )


def _square_root_place(check: str, inputs: TagInputs) -> Finding:
    setting = range_in_force(inputs)
    place = setting.root_extraction
    if not place:
        raise LackingError(("where the square root is taken",))
    rooted = setting.transfer == SQUARE_ROOT
    severity, sentence = _PLACES[rooted, place]
    return Finding(
        check,
        severity,
        sentence,
        demanded_source=f"{setting.source}: transfer {setting.transfer}",
        limit_source=f"{inputs.process.source}: square root taken: {place}",
    )


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
        demanded=Side(demanded, what.capitalize(), f"{source}: {what} {in_unit(demanded, unit)}"),
        limit=Side(
            limit, "the type's limit", f"{type_limits.source}: {what} {in_unit(limit, type_limits.temperature_unit)}"
        ),
        unit=unit,
        must_stay_below=upward,
        share=Share(width, f"the width of the type's {kind} limits"),
        narrow=NARROW_KELVIN,
    ).finding()


def _tracing(check: str, inputs: TagInputs) -> Finding:
    process = inputs.process
    demanded = process.tracing_temperature_k
    if demanded is None and not process.traced:
        return Finding(check, Severity.CLEAR, "No heat tracing is recorded at the tag.", demanded_source=process.source)
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
            f"{process.source}: heat tracing {in_unit(temperature, process.temperature_unit)}",
        ),
        limit=Side(
            limit,
            "the capsule's limit",
            f"{type_limits.source}: {limit_what} {in_unit(limit, type_limits.temperature_unit)}",
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
        demanded=Side(supply, "Supply", f"{inputs.loop.source}: loop supply {in_unit(supply, 'V')}"),
        limit=Side(
            least,
            "the transmitter's lift-off voltage",
            f"{type_limits.source}: least supply voltage {in_unit(least, 'V')}",
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
    volts, lift_off, milliamps = in_unit(supply, "V"), in_unit(least, "V"), in_unit(current / 1e3, "mA")
    sum_ = " ".join(
        (
            f"({volts.removesuffix(' V')} − {lift_off.removesuffix(' V')})",
            f"/ ({milliamps.removesuffix(' mA')} / 1000) = {in_unit(available, 'ohm')}",
        )
    )
    assumed = " taken as usual" if stated is None else ""
    return Comparison(
        check=check,
        demanded=Side(
            resistance, "Loop resistance", f"{inputs.loop.source}: loop resistance {in_unit(resistance, 'ohm')}"
        ),
        limit=Side(
            available,
            "the limit",
            f"{type_limits.source}: lift-off {lift_off}, high failure current {milliamps}{assumed}; supply {volts}",
            f" {short_label('ohm')} that {volts} can drive at {milliamps}",
        ),
        unit="ohm",
        must_stay_below=True,
        share=Share(available, "what the supply can drive"),
        narrow=NARROW_SHARE * max(available, 0.0),
        working=(sum_,),
    ).finding()


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
