"""The part of a row that is the tag's own: place, service, process, loop, isolation."""

from __future__ import annotations

from functools import lru_cache
from typing import Any, Final

from register.bulk import another
from register.engineering.typed import parse_number
from register.imports.cells import Number
from register.imports.drafts import Draft, Row
from register.imports.known import folded
from register.imports.sheet import BY_KEY, PRESSURES, TEMPERATURES
from register.models import Area, Tag

#: Field of a typed value → field of its figure in SI.
SI: Final = {quantity.text: quantity.si for quantity in Tag.QUANTITIES}
#: Pairs of typed values of which the first cannot be above the second.
ORDERED: Final = (
    ("operating_pressure", "design_pressure"),
    ("lowest_pressure", "operating_pressure"),
    ("process_min", "process_max"),
    ("ambient_min", "ambient_max"),
)
_AS_NUMBERS: Final = ("supply_v", "loop_ohm")


def propose_tag(draft: Draft, row: Row, number: str, given: dict[str, Any]) -> None:
    """Add the tag of a row, or change it where the row says something else; `given` holds the cells of its columns."""
    area_code, area_name = given.pop("area", None), given.pop("area_name", "")
    area = None if area_code is None else _area(draft, area_code, area_name)
    if row.tag is None:
        row.tag, row.tag_is_new = another(draft.blank_tag, number=number), True
        if area is None:
            draft.complain(row, "area", f"{number} is new: say in which area it lies.")
        if "measurand" not in given:
            draft.complain(row, "measurand", f"{number} is new: say what it measures.")
    values = _fields(draft, row, given)
    if area is not None:
        values["area"] = area
    if row.tag_is_new:
        for name, value in values.items():
            setattr(row.tag, name, value)
    else:
        _change(row, values)
    if not draft.is_bad(row):
        _check(draft, row, given)


def _area(draft: Draft, code: str, name: str) -> Area:
    known, new = draft.known.areas.get(folded(code)), draft.new_areas
    if known is not None:
        return known
    area = new.setdefault(folded(code), Area(plant=draft.known.plant, code=code, name=code))
    if name and area.name == area.code:
        area.name = name
    return area


def _fields(draft: Draft, row: Row, given: dict[str, Any]) -> dict[str, Any]:
    """Values of the tag's fields, with figures in SI beside the typed ones."""
    values = {name: value for name, value in given.items() if name not in ("pressure_unit", "pressure_reference", *SI)}
    for name in _AS_NUMBERS:
        if name in values:
            values[name] = values[name].value
    for name in ("scale_low", "scale_high"):
        if name in values:
            values[name] = values[name].text
    unit, reference = _pressure_basis(draft, row, given)
    if "pressure_unit" in given:
        values["pressure_unit"] = unit
    if reference:
        values["pressure_reference"] = reference
    _quantities(draft, row, given, values, PRESSURES, "pressure_unit", unit)
    degrees = given.get("temperature_unit") or ("" if row.tag_is_new else row.tag and row.tag.temperature_unit) or ""
    _quantities(draft, row, given, values, TEMPERATURES, "temperature_unit", degrees)
    return values


def _pressure_basis(draft: Draft, row: Row, given: dict[str, Any]) -> tuple[str, str]:
    """Unit and reference of the static pressures; the reference is empty where the row leaves it as it is."""
    written = given.get("pressure_unit")
    said, with_unit = given.get("pressure_reference", ""), written.reference if written else ""
    if with_unit == "differential" or (said and with_unit and said != with_unit):
        draft.complain(
            row,
            "pressure_unit",
            f"The unit says {with_unit}; the pressures of a line are {said or 'gauge or absolute'}.",
        )
    reference = said or with_unit
    if row.tag_is_new and written and not reference and any(name in given for name in PRESSURES):
        draft.complain(
            row,
            "pressure_reference",
            "Say whether the pressures of this row are gauge or absolute, here or by the unit.",
        )
    if written:
        return written.unit, reference
    return ("" if row.tag_is_new or row.tag is None else row.tag.pressure_unit), reference


def _quantities(
    draft: Draft,
    row: Row,
    given: dict[str, Any],
    values: dict[str, Any],
    names: tuple[str, ...],
    unit_name: str,
    unit: str,
) -> None:
    """Typed values of one unit, and their figures in SI."""
    from register.engineering.units import label, to_si

    typed = [name for name in names if name in given]
    tag = row.tag
    if typed and not unit:
        what = "pressures" if names is PRESSURES else "temperatures"
        draft.complain(row, unit_name, f"Say in which unit the {what} of this row are.")
        return
    if tag is not None and not row.tag_is_new and unit_name in values and unit != getattr(tag, unit_name):
        left = [BY_KEY[name].label for name in names if getattr(tag, name) and name not in given]
        if left:
            before = label(getattr(tag, unit_name))
            draft.complain(
                row,
                unit_name,
                f"The unit of {tag} would change from {before} to {label(unit)}: give {', '.join(left)} in it as well.",
            )
            return
    for name in typed:
        number: Number = given[name]
        values[name], values[SI[name]] = number.text, to_si(number.value, unit)


def _change(row: Row, values: dict[str, Any]) -> None:
    tag = row.tag
    assert tag is not None
    shifted = {
        name for name in ("pressure_unit", "temperature_unit") if name in values and values[name] != getattr(tag, name)
    }
    for name, value in values.items():
        before = getattr(tag, name)
        if name in SI:
            unit = "pressure_unit" if name in PRESSURES else "temperature_unit"
            same = unit not in shifted and bool(before) and _value(before) == _value(value)
        elif name in ("scale_low", "scale_high"):
            same = bool(before) and _value(before) == _value(value)
        else:
            same = before == value or (isinstance(before, str) and before.split() == str(value).split())
        if same or name in SI.values():
            continue
        row.tag_fields.append(name)
        row.tag_before[name] = before
        row.change(tag, BY_KEY[name].label, before, value)
        setattr(tag, name, value)
        if name in SI:
            row.tag_fields.append(SI[name])
            setattr(tag, SI[name], values[SI[name]])


def _check(draft: Draft, row: Row, given: dict[str, Any]) -> None:
    """What must hold between the fields of the tag as it would be stored."""
    tag = row.tag
    assert tag is not None
    for low, high in ORDERED:
        if low not in given and high not in given:
            continue
        low_si, high_si = getattr(tag, SI[low]), getattr(tag, SI[high])
        if low_si is not None and high_si is not None and low_si > high_si:
            blamed = low if low in given else high
            draft.complain(
                row,
                blamed,
                f"{BY_KEY[low].label} {getattr(tag, low)} is above {BY_KEY[high].label.lower()} {getattr(tag, high)}.",
            )
    if ("scale_low" in given or "scale_high" in given) and bool(tag.scale_low) != bool(tag.scale_high):
        draft.complain(row, "scale_high" if tag.scale_low else "scale_low", "Give both ends of the scale, or neither.")
    if "out_of_service_on" in given and given["out_of_service_on"] > draft.today:
        draft.complain(
            row, "out_of_service_on", f"{given['out_of_service_on']} is still to come: note it when it has happened."
        )


@lru_cache(maxsize=20_000)
def _value(text: str) -> float:
    return parse_number(text)
