"""Checks of static pressure: body rating, one side alone, vacuum."""

from __future__ import annotations

import math
from functools import partial
from itertools import pairwise

from register.engineering.comparing import (
    NARROW_SHARE,
    Comparison,
    Share,
    Side,
    Source,
    bracketed,
    in_unit,
    shared_decimals,
    tidy,
)
from register.engineering.demands import Process, TagInputs, TypeLimits
from register.engineering.findings import Finding
from register.engineering.pressure import Reference
from register.engineering.ranges import known
from register.engineering.rating import Table, rating_at
from register.engineering.recorded import LackingError, fitted_type, recorded, restated
from register.engineering.units import from_si, label

OVERRANGE_ADVICE = "Overrange up to the body rating is survivable; it is not good practice."


def body_rating_at(type_limits: TypeLimits | None, process: Process) -> float | None:
    """Give the lowest body rating [Pa gauge] over the temperatures of the process; None where it is not known."""
    if type_limits is None or process.process_max_k is None:
        return None
    return known(_weakest(process, process.process_max_k, type_limits.body_rating)[0])


def static_pressure(check: str, inputs: TagInputs) -> Finding:
    """Compare the design (else greatest operating) pressure with the body rating at the process temperature."""
    type_limits, process = fitted_type(inputs), inputs.process
    pressure, name = _static(process)
    (hottest,) = recorded(("the highest process temperature", process.process_max_k))
    table = type_limits.body_rating
    if not table:
        raise LackingError(("the body rating of the type",))
    rating, worst_at = _weakest(process, hottest, table)
    if math.isnan(rating):
        raise _unrated(type_limits, process, hottest)
    demanded, sums = restated(
        f"the {name}",
        pressure,
        process.reference,
        Reference.GAUGE,
        inputs.surroundings.barometric_pa,
        process.pressure_unit,
    )
    at = in_unit(worst_at, process.temperature_unit)
    return Comparison(
        check=check,
        demanded=Side(demanded, name.capitalize(), _pressure_source(process, name, pressure), " gauge" if sums else ""),
        limit=Side(
            rating,
            "the body rating",
            Source(type_limits.source, f"body rating at {at}", rating, type_limits.pressure_unit, " gauge"),
            f" at {at}",
        ),
        unit=process.pressure_unit,
        must_stay_below=True,
        share=Share(rating, "the body rating at the process temperature"),
        narrow=NARROW_SHARE * rating,
        working=(*sums, partial(_interpolation, worst_at, table, process)),
    ).finding()


def one_side(check: str, inputs: TagInputs) -> Finding:
    """Compare the greatest pressure that one side can see alone with the one-side limit."""
    type_limits, process = fitted_type(inputs), inputs.process
    pressure, behind = process.one_side_pressure_pa, "greatest pressure on one side"
    note, vented = "", ""
    if pressure is None:
        pressure, behind = _static(process)
        note, vented = f" (the {behind})", ", the other side vented"
    (limit,) = recorded(("the one-side limit of the type", type_limits.one_side_limit_pa))
    demanded, sums = restated(
        f"the {behind}",
        pressure,
        process.reference,
        Reference.GAUGE,
        inputs.surroundings.barometric_pa,
        process.pressure_unit,
    )
    return Comparison(
        check=check,
        demanded=Side(
            demanded,
            "Pressure on one side",
            _pressure_source(process, behind, pressure, vented),
            f"{' gauge' if sums else ''}{note}",
        ),
        limit=Side(
            limit,
            "the one-side limit",
            Source(type_limits.source, "one-side limit", limit, type_limits.pressure_unit, " gauge"),
        ),
        unit=process.pressure_unit,
        must_stay_below=True,
        share=Share(limit, "the one-side limit"),
        narrow=NARROW_SHARE * limit,
        working=sums,
        advice=OVERRANGE_ADVICE,
    ).finding()


def lowest_pressure(check: str, inputs: TagInputs) -> Finding:
    """Compare the lowest pressure, absolute, with the lowest absolute pressure that the type can stand."""
    type_limits, process = fitted_type(inputs), inputs.process
    pressure, limit = recorded(
        ("the lowest pressure at the tag", process.lowest_pressure_pa),
        ("the lowest absolute pressure of the type", type_limits.vacuum_limit_pa),
    )
    demanded, sums = restated(
        "the lowest pressure",
        pressure,
        process.reference,
        Reference.ABSOLUTE,
        inputs.surroundings.barometric_pa,
        process.pressure_unit,
    )
    return Comparison(
        check=check,
        demanded=Side(demanded, "Lowest pressure", _pressure_source(process, "lowest pressure", pressure), " absolute"),
        limit=Side(
            limit,
            "the vacuum limit",
            Source(type_limits.source, "lowest pressure", limit, type_limits.pressure_unit, " absolute"),
        ),
        unit=process.pressure_unit,
        must_stay_below=False,
        share=Share(limit, "the vacuum limit"),
        narrow=NARROW_SHARE * max(limit, 0.0),
        working=sums,
    ).finding()


def _static(process: Process) -> tuple[float, str]:
    """Give the greater of design and operating pressure; a design pressure exceeded in operation binds nobody."""
    known_ones = [
        (pressure, name)
        for pressure, name in (
            (process.design_pressure_pa, "design pressure"),
            (process.operating_pressure_pa, "operating pressure"),
        )
        if pressure is not None
    ]
    if not known_ones:
        raise LackingError(("the design or operating pressure at the tag",))
    return max(known_ones, key=lambda one: one[0])


def _pressure_source(process: Process, name: str, pressure: float, remark: str = "") -> Source:
    return Source(process.source, name, pressure, process.pressure_unit, f" {process.reference}{remark}")


def _weakest(process: Process, hottest: float, table: Table) -> tuple[float, float]:
    """Give the lowest rating from the coldest to the hottest process, and its temperature; nan outside the table."""
    coldest = hottest if process.process_min_k is None else process.process_min_k
    temperatures = [hottest, coldest, *(listed for listed, _ in table if coldest < listed < hottest)]
    ratings = [(float(rating_at(float(temperature), table)), temperature) for temperature in temperatures]
    return min(ratings, key=lambda one: (not math.isnan(one[0]), one[0]))


def _unrated(type_limits: TypeLimits, process: Process, hottest: float) -> LackingError:
    unit = process.temperature_unit
    first, last = type_limits.body_rating[0][0], type_limits.body_rating[-1][0]
    listed = (
        f"at {in_unit(first, unit)} only" if first == last else f"from {in_unit(first, unit)} to {in_unit(last, unit)}"
    )
    coldest = process.process_min_k
    runs = in_unit(hottest, unit) if coldest is None else f"{in_unit(coldest, unit)} to {in_unit(hottest, unit)}"
    return LackingError(
        ("the body rating at the process temperature",),
        f"the body rating is listed {listed}, the process is at {runs}, and a rating is never extrapolated",
    )


def _interpolation(temperature: float, table: Table, process: Process) -> str:
    at = in_unit(temperature, process.temperature_unit)
    unit = process.pressure_unit
    rating = float(rating_at(temperature, table))
    exact = [pressure for listed, pressure in table if abs(listed - temperature) <= 1e-9 * temperature]
    if exact:
        return f"body rating at {at} as listed: {in_unit(exact[0], unit)}"
    (t1, p1), (t2, p2) = next((low, high) for low, high in pairwise(table) if low[0] < temperature < high[0])
    pressures = [from_si(si, unit) for si in (p1, p2, rating)]
    temperatures = [from_si(si, process.temperature_unit) for si in (t1, t2, temperature)]
    p_decimals, t_decimals = shared_decimals(*pressures), shared_decimals(*temperatures)
    a, b, result = (tidy(value, p_decimals) for value in pressures)
    cold, warm, here = (bracketed(tidy(value, t_decimals)) for value in temperatures)
    return f"body rating at {at}: {a} + ({b} − {a}) × ({here} − {cold}) / ({warm} − {cold}) = {result} {label(unit)}"
