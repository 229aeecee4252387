"""Stores one row for an act, and says in the user's words which rule of the data refuses it."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any, Final

from django.core.exceptions import NON_FIELD_ERRORS, ValidationError
from django.db import IntegrityError, models, transaction

from register.models import TypedQuantities
from register.models.typed import in_words

#: Constraint → (field it is shown beside, sentence); the sentence is filled from the row's own fields. Models of other
#: apps bring their own as `SENTENCES`.
SENTENCES: Final[dict[str, tuple[str, str]]] = {
    "plant_barometric_positive": (
        "barometric_pressure",
        "{barometric_pressure} {barometric_unit} is not above zero: the barometric pressure is an absolute pressure.",
    ),
    "area_code_once_per_plant": ("code", "There is already an area {code} in this plant."),
    "area_ambient_ordered": ("ambient_max", "{ambient_max} is below the lowest ambient, {ambient_min}."),
    "type_once_per_maker": ("designation", "{maker} already has a type {designation}."),
    "type_measures_known": ("measures", "“{measures}” is none of gauge, absolute, differential."),
    "type_ambient_ordered": ("ambient_max", "{ambient_max} is not above the lowest ambient, {ambient_min}."),
    "type_process_ordered": (
        "process_max",
        "{process_max} is not above the lowest process temperature, {process_min}.",
    ),
    "head_once_per_type": ("code", "The type {type} already has a head {code}."),
    "head_lrl_below_url": ("url", "URL {url} {unit} is not above LRL {lrl} {unit}."),
    "head_least_span_positive": ("least_span", "The least span is {least_span} {unit}; it must be above zero."),
    "head_least_span_not_above_greatest": (
        "greatest_span",
        "The greatest span {greatest_span} {unit} is below the least span {least_span} {unit}.",
    ),
    "tag_once_per_plant": ("number", "There is already a tag {number} in this plant."),
    "tag_once_per_plant_in_any_case": (
        "number",
        "There is already a tag {number} in this plant, if only in other capital or small letters.",
    ),
    "tag_number_given": ("number", "A tag needs its number."),
    "tag_static_gauge_or_absolute": (
        "pressure_reference",
        "“{pressure_reference}” is neither gauge nor absolute; a static pressure is one of these.",
    ),
    "tag_process_ordered": ("process_max", "{process_max} is below the lowest process temperature, {process_min}."),
    "tag_ambient_ordered": ("ambient_max", "{ambient_max} is below the lowest ambient, {ambient_min}."),
    "range_lrv_not_urv": ("urv", "LRV and URV are both {lrv} {unit}: a range without a span cannot be measured."),
    "range_low_cut_share": (
        "low_cut_percent",
        "A low cut of {low_cut_percent} % makes no sense: it is a share of the input span from 0 to below 100.",
    ),
    "range_one_per_tag_and_day": (
        "effective_from",
        "A range of this tag already begins on {effective_from}: withdraw it first if it was a mistake.",
    ),
    "transmitter_serial_once_per_maker": (
        "serial",
        "Serial number {serial} of {maker} is already registered; one device stands here once.",
    ),
    "transmitter_serial_once_in_any_case": (
        "serial",
        "Serial number {serial} of {maker} is already registered, if only in other capital or small letters.",
    ),
    "transmitter_serial_given": ("serial", "A transmitter needs its serial number."),
    "fitting_one_open_per_tag": ("transmitter", "At {tag} a transmitter is fitted already: swap it instead."),
    "fitting_one_open_per_transmitter": ("transmitter", "{transmitter} is fitted elsewhere: remove it there first."),
    "fitting_ends_after_it_begins": ("on", "It was fitted on {fitted_on}, after it is said to be removed."),
    "flag_acceptance_has_reason": ("reason", "An accepted flag needs a reason."),
}
#: Columns with `unique=True`.
UNIQUE: Final[dict[tuple[str, str], str]] = {
    ("plant", "code"): "The code {code} belongs to another plant.",
    ("maker", "name"): "There is already a maker named {name}.",
    ("user", "username"): "The sign-in name {username} is taken.",
}


def store(thing: models.Model) -> None:
    """Insert or update the row; call inside the transaction of an act.

    Raises
    ------
    ValidationError
        By field: a value that the column does not take, or a rule of the data that the row breaks, also where
        another person's row came first in between.
    """
    check(thing)
    try:
        with transaction.atomic():
            thing.save()
    except IntegrityError:
        check(thing)
        raise


def fill(thing: models.Model, values: Mapping[str, Any]) -> None:
    """Set the named fields of a row, and from its typed values their figures in SI.

    Raises
    ------
    ValidationError
        By field: a text that is not a number, a unit that is not known.
    """
    for name, value in values.items():
        thing._meta.get_field(name)
        setattr(thing, name, value.strip() if isinstance(value, str) else value)
    if isinstance(thing, TypedQuantities):
        try:
            thing.set_si()
        except ValueError as error:
            raise ValidationError(_unreadable(thing) or str(error)) from error


def _unreadable(thing: TypedQuantities) -> dict[str, str]:
    """Field → what is wrong, for every typed value that cannot be read."""
    from register.engineering.typed import NumberError, parse_number
    from register.engineering.units import UnitError, factor

    refused = {}
    for quantity in thing.QUANTITIES:
        text = str(getattr(thing, quantity.text)).strip()
        try:
            if text:
                parse_number(text)
                factor(getattr(thing, quantity.unit))
        except NumberError as error:
            refused[quantity.text] = str(error)
        except UnitError as error:
            refused[quantity.unit] = str(error)
    return refused


def check(thing: models.Model) -> None:
    """Compare a row with its columns and constraints.

    Raises
    ------
    ValidationError
        By field, in the user's words.
    """
    thing.clean_fields(exclude=[field.name for field in thing._meta.fields if field.null and _unset(thing, field)])
    refused: dict[str, list[str]] = {}
    model = type(thing)
    sentences = SENTENCES | getattr(model, "SENTENCES", {})
    for constraint in model._meta.constraints:
        try:
            constraint.validate(model, thing)
        except ValidationError:
            field, sentence = sentences.get(constraint.name, (NON_FIELD_ERRORS, "A rule of the data is broken."))
            refused.setdefault(field, []).append(_filled(sentence, thing))
    for (name, unique), sentence in UNIQUE.items():
        if model._meta.model_name == name:
            others = model._default_manager.filter(**{unique: getattr(thing, unique)}).exclude(pk=thing.pk)
            if others.exists():
                refused.setdefault(unique, []).append(_filled(sentence, thing))
    if refused:
        raise ValidationError(refused)


def _unset(thing: models.Model, field: models.Field[Any, Any]) -> bool:
    """A column that may be null and is: Django would ask for a value all the same."""
    return getattr(thing, field.attname) is None


def _filled(sentence: str, thing: models.Model) -> str:
    values = {field.name: getattr(thing, field.name) for field in thing._meta.concrete_fields}
    if "unit" in values:
        values["unit"] = in_words(values["unit"])
    return sentence.format(**values)
