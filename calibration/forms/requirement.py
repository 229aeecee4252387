"""Forms of what a tag asks of its tests, and of deferrals of its dates."""

from __future__ import annotations

from typing import Any, ClassVar

from django import forms

from calibration.models import PointList, Requirement, ToleranceForm
from register.engineering.units import PRESSURE
from register.forms.fields import (
    DateField,
    ReasonField,
    RegisterForm,
    TypedNumberField,
    UnitField,
    WholeNumberField,
)
from register.models import Tag


class RequirementForm(RegisterForm):
    """Tolerance, decision rule, interval and point list of a tag from a day on."""

    GROUPS: ClassVar = (
        (
            "Tolerance",
            ("mpe_form", "mpe_percent", "mpe_input", "input_unit", "as_left_percent", "as_left_input", "decision_rule"),
            "As-found is judged against the tolerance (MPE), as-left against the as-left tolerance; where that is "
            "empty, against the tolerance as well.",
        ),
        (
            "When",
            ("interval_months", "anchor", "anchor_on", "grace_days", "lead_days"),
            "",
        ),
        ("How", ("point_list",), ""),
        ("From when, and why", ("effective_from", "reason"), ""),
    )

    mpe_form = forms.ChoiceField(label="Stated as", choices=ToleranceForm.choices)
    mpe_percent = TypedNumberField(label="Tolerance, %", required=False, max_length=20)
    mpe_input = TypedNumberField(
        label="Tolerance, input units",
        required=False,
        max_length=20,
        help_text="The floor, where the tolerance is stated in % of reading.",
    )
    input_unit = UnitField(PRESSURE, empty="–", label="Unit of these figures", required=False)
    as_left_percent = TypedNumberField(label="As-left tolerance, %", required=False, max_length=20)
    as_left_input = TypedNumberField(label="As-left tolerance, input units", required=False, max_length=20)
    decision_rule = forms.ChoiceField(
        label="Decision rule",
        choices=Requirement.Rule.choices,
        help_text="Accepted up to the limit itself. An error that lies at the limit is wrongly accepted up to half "
        "of the time; the uncertainty of the test is not taken off the tolerance.",
    )
    interval_months = WholeNumberField(label="Interval (months)", least=1, most=240)
    anchor = forms.ChoiceField(label="Counted from", choices=Requirement.Anchor.choices)
    anchor_on = DateField(label="Calendar begins on", required=False, help_text="For a fixed calendar only.")
    grace_days = WholeNumberField(
        label="Grace (days)", required=False, least=0, most=2000, help_text="Empty: a quarter of the interval."
    )
    lead_days = WholeNumberField(
        label="Window opens before due (days)", least=0, most=366, help_text="At most half of the interval is taken."
    )
    point_list = forms.ModelChoiceField(
        PointList.objects.none(),
        label="Point list",
        empty_label=None,
        help_text="A square-root output starts at 5 to 10 %: near zero a tiny input error becomes a large one.",
    )
    effective_from = DateField(label="From", help_text="A day to come is planned and takes effect then.")
    reason = ReasonField()

    def __init__(self, *args: Any, tag: Tag, **kwargs: Any) -> None:
        super().__init__(*args, decimal_comma=tag.plant.decimal_comma, **kwargs)
        lists = self.fields["point_list"]
        assert isinstance(lists, forms.ModelChoiceField)
        lists.queryset = PointList.objects.filter(plant=tag.plant, withdrawn_at__isnull=True)


class DeferralForm(RegisterForm):
    until = DateField(label="Deferred until", help_text="The last day on which the deferral holds.")
    risk_statement = forms.CharField(
        label="What could go wrong meanwhile",
        widget=forms.Textarea(attrs={"rows": 3}),
        help_text="What an error beyond tolerance would do to people, environment and product until then.",
    )
    mitigation = forms.CharField(
        label="What is done about it",
        widget=forms.Textarea(attrs={"rows": 3}),
        help_text="Comparison with another measurement, a check at zero, a lower load …",
    )
