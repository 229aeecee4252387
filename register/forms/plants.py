"""Forms of plants and their areas."""

from __future__ import annotations

from typing import Any, ClassVar, Final

from django import forms

from register.engineering.units import PRESSURE, TEMPERATURE
from register.forms.fields import ChangeForm, NumberField, RegisterForm, TypedNumberField, UnitField
from register.models import Plant

PLANT_FIELDS: Final = (
    "code",
    "name",
    "time_zone",
    "barometric_pressure",
    "barometric_unit",
    "local_gravity",
    "decimal_comma",
)
AREA_FIELDS: Final = ("code", "name", "temperature_unit", "ambient_min", "ambient_max")


class PlantFields(RegisterForm):
    code = forms.SlugField(
        max_length=20, help_text="Short, for addresses and files: letters, digits and hyphens, such as north-works."
    )
    name = forms.CharField(max_length=120)
    time_zone = forms.CharField(
        max_length=60,
        initial="UTC",
        help_text="Such as Europe/Paris or America/Chicago: dates of the plant follow it.",
        widget=forms.TextInput(attrs={"list": "time-zones", "autocomplete": "off"}),
    )
    barometric_pressure = TypedNumberField(
        label="Barometric pressure",
        required=False,
        help_text="Usual at the site, absolute. Without it gauge and absolute are not compared.",
    )
    barometric_unit = UnitField(PRESSURE, label="Barometric pressure is in", initial="kPa")
    local_gravity = NumberField(
        label="Local gravity (m/s²)",
        required=False,
        least=9.7,
        most=9.9,
        help_text="For dead-weight testers and liquid heads.",
    )
    decimal_comma = forms.BooleanField(
        label="Numbers are typed with a decimal comma", required=False, help_text="Then 1,234 is read as 1.234."
    )

    def clean_code(self) -> str:
        return str(self.cleaned_data["code"]).lower()


class NewPlantForm(PlantFields):
    pass


class EditPlantForm(PlantFields, ChangeForm):
    pass


class AreaFields(RegisterForm):
    code = forms.CharField(label="Area", max_length=20, help_text="Its number or letters, such as 20.")
    name = forms.CharField(max_length=120)
    temperature_unit = UnitField(TEMPERATURE, label="Temperatures are in", initial="degC")
    ambient_min = TypedNumberField(label="Lowest ambient", required=False)
    ambient_max = TypedNumberField(label="Highest ambient", required=False)

    GROUPS: ClassVar = (
        ("Area", ("code", "name"), ""),
        (
            "Surroundings",
            ("temperature_unit", "ambient_min", "ambient_max"),
            "They hold for every tag of the area that has no figures of its own.",
        ),
    )

    def __init__(self, *args: Any, plant: Plant, **kwargs: Any) -> None:
        super().__init__(*args, decimal_comma=plant.decimal_comma, **kwargs)


class NewAreaForm(AreaFields):
    pass


class EditAreaForm(AreaFields, ChangeForm):
    pass
