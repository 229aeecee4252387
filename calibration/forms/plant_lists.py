"""Forms of what a plant keeps for its tests: point lists, cautions and the return-to-service checklist."""

from __future__ import annotations

from django import forms

from calibration.models import GuidanceLine
from register.forms.fields import ReasonField, RegisterForm, WholeNumberField


class PointListForm(RegisterForm):
    name = forms.CharField(max_length=80)
    points = forms.CharField(
        max_length=400,
        label="Points, % of input span",
        help_text="In the order applied, with spaces between: 0 25 50 75 100 75 50 25 0. A | begins a new cycle.",
        widget=forms.TextInput(attrs={"inputmode": "text", "autocomplete": "off"}),
    )
    for_square_root = forms.BooleanField(
        required=False,
        label="Meant for square root",
        help_text="Near zero a square-root output turns a tiny input error into a large one: begin at 5 to 10 %.",
    )
    reason = ReasonField()

    def clean_points(self) -> str:
        from calibration.metrology.pointlist import PointList as Points

        try:
            return Points.parse(self.cleaned_data["points"]).text
        except ValueError as error:
            raise forms.ValidationError(str(error)) from error


class GuidanceForm(RegisterForm):
    part = forms.ChoiceField(choices=GuidanceLine.Part.choices)
    order = WholeNumberField(label="Place in the list", least=0, most=30000)
    key = forms.CharField(
        max_length=40, label="Short name", help_text="Small letters, digits and hyphens; answers are kept under it."
    )
    text = forms.CharField(max_length=400, widget=forms.Textarea(attrs={"rows": 3}))
    applies = forms.ChoiceField(choices=GuidanceLine.Applies.choices, label="Shown for")
    condensing = forms.ChoiceField(
        choices=GuidanceLine.Condensing.choices,
        label="In hot condensing service",
        help_text="The equaliser stays shut there: a line that asks to open it is not shown.",
        initial=GuidanceLine.Condensing.AS_ELSEWHERE,
    )
    answer = forms.ChoiceField(choices=GuidanceLine.Answer.choices, label="Answered by")
    required = forms.BooleanField(required=False, label="Must be answered")
    reason = ReasonField()

    def clean_key(self) -> str:
        return str(self.cleaned_data["key"]).lower()
