"""Forms of the catalogue: makers, transmitter types with their body rating, measuring heads."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any, ClassVar, Final

from django import forms

from register.engineering.units import PRESSURE, TEMPERATURE
from register.forms.fields import (
    ChangeForm,
    NumberField,
    RegisterForm,
    TypedNumberField,
    UnitField,
    WholeNumberField,
)
from register.models import Maker, MeasuringHead, ReferenceKind, TransmitterType

#: Rows offered for a body rating: at least so many, and so many empty ones below those that stand.
LEAST_ROWS: Final = 8
SPARE_ROWS: Final = 4


class MakerForm(RegisterForm):
    name = forms.CharField(label="Maker", max_length=120)

    def clean_name(self) -> str:
        return " ".join(str(self.cleaned_data["name"]).split())


class EditMakerForm(MakerForm, ChangeForm):
    pass


@dataclass(frozen=True, slots=True)
class RatingRow:
    """One line of the body rating: its two fields."""

    temperature: forms.BoundField
    pressure: forms.BoundField


class TypeFields(RegisterForm):
    """A transmitter type; its body rating is a table of temperature and gauge pressure."""

    GROUPS: ClassVar = (
        ("What it is", ("maker", "designation", "measures", "digital"), ""),
        ("Units of its limits", ("pressure_unit", "temperature_unit"), ""),
        (
            "Limits",
            (
                "one_side_limit",
                "vacuum_limit",
                "ambient_min",
                "ambient_max",
                "process_min",
                "process_max",
                "capsule_max",
                "least_supply_v",
                "high_failure_ma",
            ),
            "As the maker states them. What is left empty cannot be checked, and the tags say so.",
        ),
    )

    maker = forms.ModelChoiceField(queryset=Maker.objects.all(), empty_label="Choose a maker")
    designation = forms.CharField(max_length=80, help_text="What the maker calls it.")
    measures = forms.ChoiceField(choices=ReferenceKind.choices)
    digital = forms.BooleanField(label="Has a digital value besides the loop current", required=False)
    pressure_unit = UnitField(PRESSURE, label="Pressures are in", initial="bar")
    temperature_unit = UnitField(TEMPERATURE, label="Temperatures are in", initial="degC")
    one_side_limit = TypedNumberField(
        label="One-side limit", required=False, help_text="Greatest pressure on one side alone, gauge."
    )
    vacuum_limit = TypedNumberField(
        label="Lowest pressure", required=False, help_text="Absolute: below it the fill fluid boils."
    )
    ambient_min = TypedNumberField(label="Lowest ambient", required=False)
    ambient_max = TypedNumberField(label="Highest ambient", required=False)
    process_min = TypedNumberField(label="Lowest process temperature", required=False)
    process_max = TypedNumberField(label="Highest process temperature", required=False)
    capsule_max = TypedNumberField(
        label="Highest at the capsule",
        required=False,
        help_text="Heat tracing is compared with it. Empty: the highest process temperature.",
    )
    least_supply_v = NumberField(label="Least supply voltage (V)", required=False, least=0, most=60)
    high_failure_ma = NumberField(
        label="High failure current (mA)", required=False, least=20, most=30, help_text="Empty: 22.5."
    )

    def __init__(self, *args: Any, rating: Sequence[Sequence[str]] = (), **kwargs: Any) -> None:
        super().__init__(*args, **kwargs)
        rows = max(LEAST_ROWS, len(rating) + SPARE_ROWS)
        if self.is_bound:
            rows = 0
            while self.add_prefix(f"temperature_{rows}") in self.data:
                rows += 1
        self.rows = rows
        for row in range(self.rows):
            for column, label in enumerate(("temperature", "pressure")):
                name = f"{label}_{row}"
                field = TypedNumberField(label=f"{label.capitalize()}, row {row + 1}", required=False)
                field.widget.attrs["aria-label"] = field.label
                self.fields[name] = field
                if row < len(rating):
                    self.initial[name] = rating[row][column]

    def rating_rows(self) -> list[RatingRow]:
        return [RatingRow(self[f"temperature_{row}"], self[f"pressure_{row}"]) for row in range(self.rows)]

    def clean_high_failure_ma(self) -> float:
        given: float | None = self.cleaned_data["high_failure_ma"]
        return 22.5 if given is None else given

    def clean(self) -> dict[str, Any]:
        from register.engineering.rating import RatingError, rating_table

        cleaned: dict[str, Any] = super().clean() or self.cleaned_data
        pairs: list[list[str]] = []
        for row in range(self.rows):
            temperature = cleaned.pop(f"temperature_{row}", None)
            pressure = cleaned.pop(f"pressure_{row}", None)
            if temperature and pressure:
                pairs.append([temperature, pressure])
            elif temperature and pressure == "":
                self.add_error(f"pressure_{row}", f"What may the body carry at {temperature}?")
            elif pressure and temperature == "":
                self.add_error(f"temperature_{row}", f"At which temperature does {pressure} hold?")
        cleaned["body_rating"] = pairs
        units = cleaned.get("temperature_unit"), cleaned.get("pressure_unit")
        if pairs and all(units) and not self.errors:
            try:
                rating_table(pairs, *map(str, units))
            except RatingError as error:
                self.add_error(None, f"Body rating: {error}")
        return cleaned


class NewTypeForm(TypeFields):
    pass


class EditTypeForm(TypeFields, ChangeForm):
    pass


def initial_of_type(type_: TransmitterType) -> dict[str, Any]:
    return {name: getattr(type_, name) for name in TypeFields.base_fields}


class HeadFields(RegisterForm):
    GROUPS: ClassVar = (
        ("What it is", ("code", "unit"), ""),
        ("Limits", ("lrl", "url", "least_span", "greatest_span"), "All four in the unit above."),
        (
            "Performance",
            ("accuracy_percent", "accuracy_turndown", "stability_percent", "stability_months"),
            "As the maker states them.",
        ),
    )

    code = forms.CharField(label="Head", max_length=40, help_text="The maker's code or range number of the capsule.")
    unit = UnitField(PRESSURE, label="Unit", initial="bar")
    lrl = TypedNumberField(label="LRL", help_text="Lower range limit; often below zero on a differential head.")
    url = TypedNumberField(label="URL", help_text="Upper range limit.")
    least_span = TypedNumberField(label="Least span")
    greatest_span = TypedNumberField(label="Greatest span", required=False, help_text="Empty: URL − LRL.")
    accuracy_percent = NumberField(label="Reference accuracy (% of span)", required=False, least=0, most=20)
    accuracy_turndown = NumberField(
        label="Turndown to which it holds",
        required=False,
        least=1,
        most=1000,
        help_text="URL divided by span; beyond it the figure grows in proportion.",
    )
    stability_percent = NumberField(label="Stability (% of URL)", required=False, least=0, most=20)
    stability_months = WholeNumberField(label="Stability over (months)", required=False, least=1, most=240)

    def clean_code(self) -> str:
        return " ".join(str(self.cleaned_data["code"]).split())

    def clean(self) -> dict[str, Any]:
        cleaned: dict[str, Any] = super().clean() or self.cleaned_data
        for figure, over in (("stability_percent", "stability_months"), ("stability_months", "stability_percent")):
            if cleaned.get(figure) is not None and over in cleaned and cleaned[over] is None:
                self.add_error(over, "A stability needs both: how much, and over how many months.")
        return cleaned


class NewHeadForm(HeadFields):
    pass


class EditHeadForm(HeadFields, ChangeForm):
    pass


def initial_of_head(head: MeasuringHead) -> dict[str, Any]:
    return {name: getattr(head, name) for name in HeadFields.base_fields}
