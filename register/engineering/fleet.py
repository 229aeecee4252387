"""The limit checks of many tags at once: how severe, not in which words.

`limits.check_all` says what is found at one tag. Here the same comparisons run over arrays, so that of a large
register only the tags with something to say need to be looked at one by one.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from types import MappingProxyType
from typing import Any

import numpy as np
from numpy.typing import NDArray

from register.engineering.comparing import NARROW_KELVIN, NARROW_SHARE
from register.engineering.findings import CHECKS
from register.engineering.loop import DEFAULT_HIGH_FAILURE_CURRENT_MA, available_resistance
from register.engineering.margins import (
    CANNOT_CHECK,
    CAUTION,
    CLEAR,
    VIOLATION,
    lower_margin,
    range_margins,
    severity_codes,
    span_margins,
    upper_margin,
)
from register.engineering.rating import Table, least_rating

#: Codes of pressure references, and of the places where the tag says that the square root is taken.
REFERENCES: Mapping[str, int] = MappingProxyType({"gauge": 0, "absolute": 1, "differential": 2})
PLACES: Mapping[str, int] = MappingProxyType({"": 0, "none": 1, "transmitter": 2, "control system": 3})
_GAUGE, _ABSOLUTE, _DIFFERENTIAL = range(3)
#: Severity of (linear, square root) by place.
_PLACE_SEVERITY = np.array(
    [[CANNOT_CHECK, CANNOT_CHECK], [CLEAR, CAUTION], [VIOLATION, CLEAR], [CLEAR, VIOLATION]], dtype=np.int8
)

Numbers = NDArray[np.float64]
Codes = NDArray[np.int8]
Mask = NDArray[np.bool_]


@dataclass(frozen=True, slots=True, kw_only=True)
class Fleet:
    """What the limit checks of n tags need: SI numbers, nan where not recorded; fields as in `demands`.

    References are codes of `REFERENCES`, `root_extraction` codes of `PLACES`. Limits of head and type are nan, and
    `type_index` is −1, where nothing is fitted; `ratings` holds the body ratings that `type_index` points at.
    """

    reference: Codes
    operating_pressure_pa: Numbers
    design_pressure_pa: Numbers
    lowest_pressure_pa: Numbers
    one_side_pressure_pa: Numbers
    process_min_k: Numbers
    process_max_k: Numbers
    tracing_temperature_k: Numbers
    ambient_min_k: Numbers
    ambient_max_k: Numbers
    barometric_pa: Numbers
    supply_v: Numbers
    loop_ohm: Numbers
    ranged: Mask
    lrv_si: Numbers
    urv_si: Numbers
    range_reference: Codes
    square_root: Mask
    root_extraction: Codes
    of_flow: Mask
    fitted: Mask
    head_reference: Codes
    lrl_si: Numbers
    url_si: Numbers
    least_span_si: Numbers
    greatest_span_si: Numbers
    type_index: NDArray[np.intp]
    ratings: Sequence[Table]
    one_side_limit_pa: Numbers
    vacuum_limit_pa: Numbers
    type_ambient_min_k: Numbers
    type_ambient_max_k: Numbers
    type_process_min_k: Numbers
    type_process_max_k: Numbers
    capsule_max_k: Numbers
    least_supply_v: Numbers
    high_failure_ma: Numbers


def severities(fleet: Fleet) -> Codes:
    """Make every limit check of every tag.

    Parameters
    ----------
    fleet : Fleet
        Demands and limits of n tags in SI.

    Returns
    -------
    array of int8, shape (n, number of checks)
        CLEAR 0, CANNOT_CHECK 1, CAUTION 2, VIOLATION 3; columns in the order of `CHECKS`.

    Notes
    -----
    Agrees with `limits.check_all` tag by tag.
    """
    with np.errstate(invalid="ignore"):
        return np.stack([_CHECK_OF[check](fleet) for check in CHECKS], axis=1).astype(np.int8)


def _compared(demand: Numbers, limit: Numbers, narrow: Any = 0.0, *, must_stay_below: bool) -> Codes:
    margin = upper_margin(demand, limit) if must_stay_below else lower_margin(demand, limit)
    codes: Codes = severity_codes(margin, np.maximum(np.abs(demand), np.abs(limit)), narrow)
    return codes


def _restated(pressure: Numbers, reference: Codes, wanted: Any, barometric_pa: Numbers) -> Numbers:
    """Pressures against another reference; nan where that cannot be said."""
    either = (reference == _DIFFERENTIAL) | (wanted == _DIFFERENTIAL)
    shifted = np.where(wanted == _ABSOLUTE, pressure + barometric_pa, pressure - barometric_pa)
    return np.where(reference == wanted, pressure, np.where(either, np.nan, shifted))


def _range_end(fleet: Fleet, *, upward: bool) -> Codes:
    limit = _restated(
        fleet.url_si if upward else fleet.lrl_si, fleet.head_reference, fleet.range_reference, fleet.barometric_pa
    )
    margins = range_margins(fleet.lrv_si, fleet.urv_si, limit, limit)
    end = (np.maximum if upward else np.minimum)(fleet.lrv_si, fleet.urv_si)
    codes: Codes = severity_codes(margins.upper if upward else margins.lower, np.maximum(np.abs(end), np.abs(limit)))
    return codes


def _span(fleet: Fleet, *, greatest: bool) -> Codes:
    widest = np.where(np.isnan(fleet.greatest_span_si), fleet.url_si - fleet.lrl_si, fleet.greatest_span_si)
    margins = span_margins(fleet.lrv_si, fleet.urv_si, fleet.least_span_si, widest)
    limit = widest if greatest else fleet.least_span_si
    size = np.maximum(np.abs(fleet.urv_si - fleet.lrv_si), np.abs(limit))
    codes: Codes = severity_codes(
        margins.greatest if greatest else margins.least, size, 0.0 if greatest else NARROW_SHARE * limit
    )
    return codes


def _square_root(fleet: Fleet) -> Codes:
    wrong = (fleet.range_reference != _DIFFERENTIAL) | (fleet.fitted & (fleet.head_reference != _DIFFERENTIAL))
    codes = np.where(wrong, VIOLATION, np.where(fleet.fitted, CLEAR, CANNOT_CHECK))
    return np.where(fleet.ranged, np.where(fleet.square_root, codes, CLEAR), CANNOT_CHECK)


def _square_root_place(fleet: Fleet) -> Codes:
    codes = _PLACE_SEVERITY[fleet.root_extraction, fleet.square_root.astype(np.intp)]
    called_for = fleet.square_root | (fleet.of_flow & (fleet.range_reference == _DIFFERENTIAL))
    codes = np.where((fleet.root_extraction == PLACES[""]) & ~called_for, CLEAR, codes)
    return np.where(fleet.ranged, codes, CANNOT_CHECK)


def _static_pressure(fleet: Fleet) -> Codes:
    coldest = np.where(np.isnan(fleet.process_min_k), fleet.process_max_k, fleet.process_min_k)
    rating = np.full(fleet.process_max_k.shape, np.nan)
    for index, table in enumerate(fleet.ratings):
        chosen = fleet.type_index == index
        if table and chosen.any():
            rating[chosen] = least_rating(coldest[chosen], fleet.process_max_k[chosen], table)
    demand = _restated(_greatest_static(fleet), fleet.reference, _GAUGE, fleet.barometric_pa)
    return _compared(demand, rating, NARROW_SHARE * rating, must_stay_below=True)


def _one_side(fleet: Fleet) -> Codes:
    stated = fleet.one_side_pressure_pa
    pressure = np.where(np.isnan(stated), _greatest_static(fleet), stated)
    demand = _restated(pressure, fleet.reference, _GAUGE, fleet.barometric_pa)
    limit = fleet.one_side_limit_pa
    return _compared(demand, limit, NARROW_SHARE * limit, must_stay_below=True)


def _lowest_pressure(fleet: Fleet) -> Codes:
    demand = _restated(fleet.lowest_pressure_pa, fleet.reference, _ABSOLUTE, fleet.barometric_pa)
    limit = fleet.vacuum_limit_pa
    return _compared(demand, limit, NARROW_SHARE * np.maximum(limit, 0.0), must_stay_below=False)


def _greatest_static(fleet: Fleet) -> Numbers:
    greatest: Numbers = np.fmax(fleet.design_pressure_pa, fleet.operating_pressure_pa)
    return greatest


def _tracing(fleet: Fleet) -> Codes:
    limit = np.where(np.isnan(fleet.capsule_max_k), fleet.type_process_max_k, fleet.capsule_max_k)
    codes = _compared(fleet.tracing_temperature_k, limit, NARROW_KELVIN, must_stay_below=True)
    return np.where(np.isnan(fleet.tracing_temperature_k), CLEAR, codes)


def _loop_resistance(fleet: Fleet) -> Codes:
    current = np.where(np.isnan(fleet.high_failure_ma), DEFAULT_HIGH_FAILURE_CURRENT_MA, fleet.high_failure_ma)
    available = available_resistance(fleet.supply_v, fleet.least_supply_v, current)
    return _compared(fleet.loop_ohm, available, NARROW_SHARE * np.maximum(available, 0.0), must_stay_below=True)


_CHECK_OF: Mapping[str, Callable[[Fleet], Codes]] = MappingProxyType(
    {
        "range_lower": lambda fleet: _range_end(fleet, upward=False),
        "range_upper": lambda fleet: _range_end(fleet, upward=True),
        "least_span": lambda fleet: _span(fleet, greatest=False),
        "greatest_span": lambda fleet: _span(fleet, greatest=True),
        "square_root": _square_root,
        "square_root_place": _square_root_place,
        "static_pressure": _static_pressure,
        "one_side": _one_side,
        "lowest_pressure": _lowest_pressure,
        "ambient_low": lambda fleet: _compared(
            fleet.ambient_min_k, fleet.type_ambient_min_k, NARROW_KELVIN, must_stay_below=False
        ),
        "ambient_high": lambda fleet: _compared(
            fleet.ambient_max_k, fleet.type_ambient_max_k, NARROW_KELVIN, must_stay_below=True
        ),
        "process_low": lambda fleet: _compared(
            fleet.process_min_k, fleet.type_process_min_k, NARROW_KELVIN, must_stay_below=False
        ),
        "process_high": lambda fleet: _compared(
            fleet.process_max_k, fleet.type_process_max_k, NARROW_KELVIN, must_stay_below=True
        ),
        "tracing": _tracing,
        "supply_voltage": lambda fleet: _compared(fleet.supply_v, fleet.least_supply_v, must_stay_below=False),
        "loop_resistance": _loop_resistance,
    }
)
