"""Filters of the lists of tests and of sheets; they live in the address."""

from __future__ import annotations

from django import forms

from calibration.models import Test, Verdict
from register.forms.fields import DateField


class TestsFilter(forms.Form):
    """Which tests are shown."""

    text = forms.CharField(
        required=False, label="Tag or serial number", widget=forms.TextInput(attrs={"type": "search"})
    )
    state = forms.ChoiceField(required=False, choices=[("", "any"), *Test.State.choices])
    verdict = forms.ChoiceField(
        required=False, label="As-found", choices=[("", "any"), *Verdict.choices, ("none", "could not be tested")]
    )
    since = DateField(required=False, label="From")
    until = DateField(required=False, label="To")


class SheetsFilter(forms.Form):
    """Which sheets are shown."""

    text = forms.CharField(
        required=False, label="Tag or serial number", widget=forms.TextInput(attrs={"type": "search"})
    )
    show = forms.ChoiceField(
        required=False,
        choices=[("", "open"), ("mine", "opened by me"), ("abandoned", "abandoned"), ("signed", "signed")],
    )
