"""Forms of reference standards and certificates."""

from __future__ import annotations

from typing import Any

from django import forms

from calibration.models import Standard
from register.engineering.units import CURRENT, PRESSURE, TEMPERATURE, kind_of, label
from register.forms.fields import DateField, NumberField, ReasonField, RegisterForm, TypedNumberField, UnitField
from register.models import ReferenceKind

KIND_OF_UNIT = {
    Standard.Kind.PRESSURE: PRESSURE,
    Standard.Kind.DEAD_WEIGHT: PRESSURE,
    Standard.Kind.CURRENT: CURRENT,
    Standard.Kind.TEMPERATURE: TEMPERATURE,
}


class StandardForm(RegisterForm):
    name = forms.CharField(label="Number", max_length=40, help_text="As it is marked in the plant.")
    kind = forms.ChoiceField(choices=Standard.Kind.choices)
    maker = forms.CharField(max_length=120, required=False)
    designation = forms.CharField(max_length=80, required=False)
    serial = forms.CharField(label="Serial number", max_length=60)
    unit = UnitField(PRESSURE, CURRENT, TEMPERATURE)
    reference = forms.ChoiceField(
        label="Measures against",
        required=False,
        choices=[("", "– (not a pressure)"), *ReferenceKind.choices],
    )
    low = TypedNumberField(label="Lower end of range")
    high = TypedNumberField(label="Upper end of range")
    spec_reading_percent = NumberField(label="± % of reading", required=False, least=0, most=100)
    spec_scale_percent = NumberField(label="± % of full scale", required=False, least=0, most=100)
    spec_absolute = NumberField(
        label="± in its unit", required=False, least=0, help_text="The three parts of a specification are added."
    )
    resolution = NumberField(label="Resolution", required=False, least=0, help_text="Last digit it shows, in its unit.")
    state = forms.ChoiceField(choices=Standard.State.choices)
    location = forms.CharField(max_length=120, required=False)
    reason = ReasonField()

    def clean(self) -> dict[str, Any]:
        values = super().clean() or {}
        kind, unit = values.get("kind"), values.get("unit")
        if kind and unit and kind_of(unit) != KIND_OF_UNIT[Standard.Kind(kind)]:
            wanted = KIND_OF_UNIT[Standard.Kind(kind)]
            self.add_error("unit", f"{label(unit)} is not a unit of {wanted}: choose one for this kind of standard.")
        if kind in {Standard.Kind.PRESSURE, Standard.Kind.DEAD_WEIGHT}:
            if not values.get("reference"):
                self.add_error("reference", "Say whether it measures gauge, absolute or differential pressure.")
        elif values.get("reference"):
            self.add_error("reference", "Only a pressure is gauge, absolute or differential.")
        return values


class CertificateForm(RegisterForm):
    number = forms.CharField(label="Certificate number", max_length=80)
    laboratory = forms.CharField(max_length=120)
    calibrated_on = DateField(label="Calibrated on")
    valid_until = DateField(label="Relied on until", help_text="The last day on which a test may be made with it.")
    remarks = forms.CharField(required=False, widget=forms.Textarea(attrs={"rows": 3}))
    reason = ReasonField(label="Remark for the audit trail")

    def __init__(self, *args: Any, standard: Standard, **kwargs: Any) -> None:
        self.standard = standard
        super().__init__(*args, **kwargs)

    def clean_calibrated_on(self) -> Any:
        day = self.cleaned_data["calibrated_on"]
        if day > self.standard.plant.today():
            raise forms.ValidationError(f"{day:%Y-%m-%d} is still to come.")
        return day
