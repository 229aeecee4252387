"""Forms around a sheet: a bench sheet's range and tolerance, reasons, passwords."""

from __future__ import annotations

from typing import Any

from django import forms

from calibration.models import PointList, ToleranceForm
from register.engineering.typed import parse_number
from register.engineering.units import PRESSURE
from register.forms.fields import NumberField, ReasonField, RegisterForm, TypedNumberField, UnitField
from register.models import Plant, Range, ReferenceKind


class PasswordField(forms.CharField):
    """The password again, asked for where somebody signs."""

    def __init__(self, *, label: str = "Your password") -> None:
        super().__init__(
            label=label,
            strip=False,
            widget=forms.PasswordInput(attrs={"autocomplete": "current-password"}),
            error_messages={"required": "Type the password."},
        )


class BenchForm(RegisterForm):
    """Range and tolerance of a spare that is tested on the bench."""

    lrv = TypedNumberField(label="LRV")
    urv = TypedNumberField(label="URV")
    unit = UnitField(PRESSURE)
    reference = forms.ChoiceField(label="Measures", choices=ReferenceKind.choices)
    transfer = forms.ChoiceField(label="Output", choices=Range.Transfer.choices)
    low_cut_percent = NumberField(label="Low cut, % of input span", required=False, least=0, most=99)
    below_cut = forms.ChoiceField(label="Below the low cut", choices=Range.BelowCut.choices, required=False)
    mpe_form = forms.ChoiceField(label="Tolerance stated as", choices=ToleranceForm.choices)
    mpe_percent = TypedNumberField(label="Tolerance, %", required=False)
    mpe_input = TypedNumberField(label="Tolerance, input units", required=False)
    as_left_percent = TypedNumberField(label="As-left tolerance, %", required=False)
    as_left_input = TypedNumberField(label="As-left tolerance, input units", required=False)
    point_list = forms.ModelChoiceField(PointList.objects.none(), label="Point list", empty_label=None)

    def __init__(self, *args: Any, plant: Plant, **kwargs: Any) -> None:
        super().__init__(*args, decimal_comma=plant.decimal_comma, **kwargs)
        lists = self.fields["point_list"]
        assert isinstance(lists, forms.ModelChoiceField)
        lists.queryset = PointList.objects.filter(plant=plant, withdrawn_at=None)

    def clean(self) -> dict[str, Any]:
        values = super().clean() or {}
        lrv, urv = values.get("lrv"), values.get("urv")
        if lrv and urv and parse_number(lrv) == parse_number(urv):
            self.add_error("urv", f"LRV and URV are both {urv}: a range needs two different range-values.")
        for name, wanted in _WANTED.get(values.get("mpe_form", ""), {}).items():
            if wanted and not values.get(name) and name not in self.errors:
                self.add_error(name, "This form of tolerance needs this figure.")
        values["low_cut_percent"] = values.get("low_cut_percent") or 0.0
        values["below_cut"] = values.get("below_cut") or Range.BelowCut.LINEAR
        values["input_unit"] = values.get("unit", "")
        return values


_WANTED = {
    ToleranceForm.SPAN: {"mpe_percent": True},
    ToleranceForm.READING: {"mpe_percent": True},
    ToleranceForm.ABSOLUTE: {"mpe_input": True},
    ToleranceForm.LARGER: {"mpe_percent": True, "mpe_input": True},
    ToleranceForm.SUM: {"mpe_percent": True, "mpe_input": True},
}


class ExceptionForm(RegisterForm):
    """Why a lapsed certificate may be relied on, and who answers for it."""

    username = forms.CharField(label="Sign-in name of the person who allows it", max_length=150)
    password = PasswordField(label="His password")
    reason = ReasonField(label="Why it may be relied on")


class SignForm(RegisterForm):
    """The password, and the changes that were read."""

    password = PasswordField()


class ReviewForm(RegisterForm):
    """The reviewer's password and remarks."""

    remarks = forms.CharField(max_length=300, required=False, widget=forms.Textarea(attrs={"rows": 2}), label="Remarks")
    password = PasswordField()


class SendBackForm(ReviewForm):
    """Sending back wants to know what is to be corrected."""

    remarks = forms.CharField(
        max_length=300,
        widget=forms.Textarea(attrs={"rows": 2}),
        label="What must be corrected",
        error_messages={"required": "Say what must be corrected."},
    )
