"""Forms of what a plant keeps for its tests: point lists, cautions and the return-to-service checklist."""

from __future__ import annotations

from typing import Any

from django import forms

from calibration.models import GuidanceLine, PointList
from calibration.models.guidance import GOOD_KEY
from register.forms.fields import ReasonField, RegisterForm, WholeNumberField
from register.models import Plant


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

    def __init__(self, *args: Any, plant: Plant, point_list: PointList | None = None, **kwargs: Any) -> None:
        self.plant, self.point_list = plant, point_list
        super().__init__(*args, **kwargs)

    def clean_name(self) -> str:
        name: str = self.cleaned_data["name"]
        others = PointList.objects.filter(plant=self.plant, name=name)
        if self.point_list:
            others = others.exclude(pk=self.point_list.pk)
        if others.exists():
            raise forms.ValidationError(f"“{name}” is the name of another point list of this plant.")
        return name

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

    def __init__(self, *args: Any, plant: Plant, line: GuidanceLine | None = None, **kwargs: Any) -> None:
        self.plant, self.line = plant, line
        super().__init__(*args, **kwargs)

    def clean_key(self) -> str:
        key: str = self.cleaned_data["key"].lower()
        GOOD_KEY(key)
        return key

    def clean(self) -> dict[str, Any]:
        values = super().clean() or {}
        key = values.get("key")
        others = GuidanceLine.objects.filter(
            plant=self.plant, part=values.get("part"), key=key, withdrawn_at__isnull=True
        )
        if self.line:
            others = others.exclude(pk=self.line.pk)
        if key and others.exists():
            self.add_error("key", f"“{key}” is the short name of another line of this part.")
        return values
