"""The form of a tag: what the process asks of a measuring point."""

from __future__ import annotations

from typing import Any, ClassVar, Final

from django import forms

from register.engineering.typed import parse_number
from register.engineering.units import PRESSURE, TEMPERATURE, label
from register.forms.fields import (
    ChangeForm,
    DateField,
    NumberField,
    ReasonField,
    RegisterForm,
    TypedNumberField,
    UnitField,
)
from register.models import Area, Criticality, Measurand, Plant, ReferenceKind, RootExtraction, Tag

#: Pairs of typed values of one unit of which the first cannot be above the second.
ORDERED: Final = (
    ("operating_pressure", "design_pressure", "the design pressure"),
    ("lowest_pressure", "operating_pressure", "the operating pressure"),
    ("process_min", "process_max", "the highest process temperature"),
    ("ambient_min", "ambient_max", "the highest ambient temperature"),
)


class TagFields(RegisterForm):
    """Fields of a tag in the groups in which an engineer knows them."""

    GROUPS: ClassVar = (
        (
            "Place and service",
            (
                "number",
                "service",
                "measurand",
                "area",
                "location",
                "criticality",
                "craft",
                "outage_only",
                "trip_function",
            ),
            "",
        ),
        (
            "Process",
            (
                "medium",
                "pressure_unit",
                "pressure_reference",
                "operating_pressure",
                "design_pressure",
                "lowest_pressure",
                "one_side_pressure",
                "temperature_unit",
                "process_min",
                "process_max",
            ),
            "The static pressure and temperature that the transmitter sees, not its range. "
            "What is not known is left empty: a check that needs it says so.",
        ),
        (
            "Surroundings",
            ("ambient_min", "ambient_max", "tracing_temperature"),
            "In the temperature unit chosen above.",
        ),
        (
            "Loop and control system",
            ("supply_v", "loop_ohm", "root_extraction", "scale_low", "scale_high", "scale_unit"),
            "",
        ),
        (
            "Isolation and hazards",
            (
                "isolation_sequence",
                "vent_direction",
                "oxygen_service",
                "toxic_service",
                "condensing_service",
                "hazardous_area",
            ),
            "Shown to whoever tests here. Site procedures, local codes and licensed practice come first.",
        ),
    )

    number = forms.CharField(
        label="Tag",
        max_length=40,
        help_text="ISA-5.1 number, such as PT-2041.",
        widget=forms.TextInput(attrs={"autocapitalize": "characters", "spellcheck": "false", "autocomplete": "off"}),
    )
    service = forms.CharField(max_length=160, required=False, help_text="What is measured, in plain words.")
    measurand = forms.ChoiceField(label="Measures", choices=Measurand.choices)
    area = forms.ModelChoiceField(queryset=Area.objects.none(), empty_label="Choose an area")
    location = forms.CharField(max_length=160, required=False, help_text="How one gets there.")
    criticality = forms.ChoiceField(choices=Criticality.choices, initial=Criticality.GENERAL)
    craft = forms.CharField(max_length=40, required=False, initial="instrument", help_text="Who tests it.")
    outage_only = forms.BooleanField(label="Can be tested only in an outage", required=False)
    trip_function = forms.CharField(
        label="Trips", max_length=160, required=False, help_text="What this measurement can trip."
    )

    medium = forms.CharField(max_length=80, required=False)
    pressure_unit = UnitField(PRESSURE, label="Pressures are in", initial="bar")
    pressure_reference = forms.ChoiceField(
        label="Pressures are",
        choices=[(kind.value, kind.label) for kind in (ReferenceKind.GAUGE, ReferenceKind.ABSOLUTE)],
    )
    operating_pressure = TypedNumberField(label="Operating pressure", required=False)
    design_pressure = TypedNumberField(label="Design pressure", required=False)
    lowest_pressure = TypedNumberField(
        label="Lowest pressure", required=False, help_text="Vacuum is hard on the fill fluid."
    )
    one_side_pressure = TypedNumberField(
        label="Greatest pressure on one side",
        required=False,
        help_text="What one side can see while the other is open. Empty: the design pressure.",
    )
    temperature_unit = UnitField(TEMPERATURE, label="Temperatures are in", initial="degC")
    process_min = TypedNumberField(label="Lowest process temperature", required=False)
    process_max = TypedNumberField(label="Highest process temperature", required=False)
    ambient_min = TypedNumberField(label="Lowest ambient", required=False)
    ambient_max = TypedNumberField(label="Highest ambient", required=False)
    tracing_temperature = TypedNumberField(
        label="Heat tracing up to", required=False, help_text="Empty: no heat tracing."
    )

    supply_v = NumberField(label="Loop supply (V)", required=False, least=0, most=60)
    loop_ohm = NumberField(
        label="Loop resistance (Ω)", required=False, least=0, most=10_000, help_text="Outside the transmitter."
    )
    root_extraction = forms.ChoiceField(
        label="Square root taken",
        choices=RootExtraction.choices,
        required=False,
        help_text="Of a flow measured by differential pressure: once, in one place.",
    )
    scale_low = TypedNumberField(label="Control-system scale, low", required=False)
    scale_high = TypedNumberField(label="Control-system scale, high", required=False)
    scale_unit = forms.CharField(
        label="Control-system unit",
        max_length=20,
        required=False,
        help_text="As on the operator's screen, such as t/h.",
    )

    isolation_sequence = forms.CharField(
        required=False, max_length=2000, widget=forms.Textarea(attrs={"rows": 4}), help_text="Valve by valve, in order."
    )
    vent_direction = forms.CharField(max_length=160, required=False)
    oxygen_service = forms.BooleanField(label="Oxygen service", required=False)
    toxic_service = forms.BooleanField(label="Toxic service", required=False)
    condensing_service = forms.BooleanField(label="Hot condensing service", required=False)
    hazardous_area = forms.CharField(
        label="Hazardous area", max_length=80, required=False, help_text="Its class or zone."
    )

    def __init__(self, *args: Any, plant: Plant, **kwargs: Any) -> None:
        super().__init__(*args, decimal_comma=plant.decimal_comma, **kwargs)
        areas = self.fields["area"]
        assert isinstance(areas, forms.ModelChoiceField)
        areas.queryset = plant.areas.all()

    def clean_number(self) -> str:
        return " ".join(str(self.cleaned_data["number"]).split())

    def clean(self) -> dict[str, Any]:
        cleaned: dict[str, Any] = super().clean() or self.cleaned_data
        for low, high, words in ORDERED:
            low_text, high_text = cleaned.get(low), cleaned.get(high)
            if low_text and high_text and parse_number(low_text) > parse_number(high_text):
                unit = label(cleaned.get("pressure_unit" if "pressure" in low else "temperature_unit") or "bar")
                self.add_error(low, f"{low_text} {unit} is above {words}, {high_text} {unit}.")
        low_text, high_text = cleaned.get("scale_low"), cleaned.get("scale_high")
        if bool(low_text) != bool(high_text):
            missing = "scale_high" if low_text else "scale_low"
            if missing not in self.errors:
                self.add_error(missing, "Give both ends of the scale, or neither.")
        return cleaned


class NewTagForm(TagFields):
    pass


class EditTagForm(TagFields, ChangeForm):
    pass


def initial_of_tag(tag: Tag) -> dict[str, Any]:
    """What the form of a tag shows before anything is typed."""
    return {name: getattr(tag, name) for name in TagFields.base_fields}


class OutOfServiceForm(RegisterForm):
    on = DateField(label="Out of service since")
    reason = ReasonField()


class BackInServiceForm(RegisterForm):
    reason = ReasonField()
