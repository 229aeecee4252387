"""The form of a new range of a tag."""

from __future__ import annotations

from typing import Any

from django import forms

from register.engineering.units import PRESSURE
from register.forms.fields import DateField, NumberField, ReasonField, RegisterForm, TypedNumberField, UnitField
from register.models import Plant, Range, ReferenceKind


class RangeForm(RegisterForm):
    """LRV to URV from a date on; a later day is planned."""

    lrv = TypedNumberField(label="LRV")
    urv = TypedNumberField(label="URV", help_text="Below LRV for a reverse range.")
    unit = UnitField(PRESSURE, label="Unit")
    reference = forms.ChoiceField(label="Measured as", choices=ReferenceKind.choices)
    transfer = forms.ChoiceField(label="Output", choices=Range.Transfer.choices)
    low_cut_percent = NumberField(
        label="Low cut (% of input span)",
        required=False,
        least=0,
        most=99,
        help_text="Square root only. Empty: none is set.",
    )
    below_cut = forms.ChoiceField(label="Below the cut", choices=Range.BelowCut.choices, help_text="Square root only.")
    effective_from = DateField(label="From", help_text="A day to come is planned and takes effect then.")
    reason = ReasonField()

    def __init__(self, *args: Any, plant: Plant, **kwargs: Any) -> None:
        super().__init__(*args, decimal_comma=plant.decimal_comma, **kwargs)

    def clean_low_cut_percent(self) -> float:
        return self.cleaned_data["low_cut_percent"] or 0.0


class AcceptFlagForm(RegisterForm):
    until = DateField(label="Accepted up to", help_text="The last day on which the acceptance holds.")
    reason = ReasonField(label="Why it can be accepted")
