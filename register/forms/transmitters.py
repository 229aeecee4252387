"""Forms of transmitters: registered, edited, moved, given another head, worked on."""

from __future__ import annotations

from itertools import groupby
from typing import Any, Final

from django import forms
from django.core.exceptions import ValidationError

from register.forms.fields import ChangeForm, DateField, ReasonField, RegisterForm
from register.models import Intervention, MeasuringHead, Transmitter, TransmitterType

Whereabouts = Transmitter.Whereabouts
FIELDS: Final = ("serial", "fill_fluid", "seals", "wetted_material", "made_on", "remarks")


class HeadField(forms.ChoiceField):
    """A measuring head, listed below its type; cleaned to the head, whose type and maker come with it."""

    def __init__(self, **kwargs: Any) -> None:
        super().__init__(label="Measuring head", **kwargs)
        self.heads: dict[str, MeasuringHead] = {}

    def offer(self, type_: TransmitterType | None = None) -> None:
        """Read the heads to choose from: all, or those of one type."""
        rows = MeasuringHead.objects.select_related("type__maker")
        rows = rows.order_by("type__maker__name", "type__designation", "url_si", "code")
        listed = list(rows if type_ is None else rows.filter(type=type_))
        self.heads = {str(head.pk): head for head in listed}
        groups = groupby(listed, key=lambda head: str(head.type))
        self.choices = [
            ("", "Choose a head"),
            *((name, [(str(head.pk), str(head)) for head in heads]) for name, heads in groups),
        ]

    def clean(self, value: Any) -> Any:
        chosen = super().clean(value)
        if chosen and chosen not in self.heads:
            raise ValidationError("That head is not among those offered.")
        return self.heads.get(chosen)


class TransmitterFields(RegisterForm):
    serial = forms.CharField(
        label="Serial number",
        max_length=60,
        help_text="As on its plate.",
        widget=forms.TextInput(
            attrs={"class": "mono", "autocapitalize": "characters", "spellcheck": "false", "autocomplete": "off"}
        ),
    )
    fill_fluid = forms.CharField(label="Fill fluid", max_length=60, required=False)
    seals = forms.CharField(label="Seals", max_length=120, required=False, help_text="Remote seals, if it has any.")
    wetted_material = forms.CharField(label="Wetted material", max_length=80, required=False)
    made_on = DateField(label="Made on", required=False)
    remarks = forms.CharField(required=False, max_length=2000, widget=forms.Textarea(attrs={"rows": 3}))

    def clean_serial(self) -> str:
        return " ".join(str(self.cleaned_data["serial"]).split())


class NewTransmitterForm(TransmitterFields):
    field_order = ("head", *FIELDS)

    head = HeadField(help_text="The type and its maker come with it. Missing? Add it under “Types and heads” first.")

    def __init__(self, *args: Any, **kwargs: Any) -> None:
        super().__init__(*args, **kwargs)
        head = self.fields["head"]
        assert isinstance(head, HeadField)
        head.offer()

    def device(self) -> dict[str, Any]:
        """Values of the new transmitter, with what its head says of it."""
        head: MeasuringHead = self.cleaned_data["head"]
        return {**self.values(), "type": head.type, "maker": head.type.maker}


class EditTransmitterForm(TransmitterFields, ChangeForm):
    pass


class MoveForm(RegisterForm):
    whereabouts = forms.ChoiceField(
        label="It is",
        choices=[(place.value, place.label) for place in Whereabouts if place != Whereabouts.FITTED],
        widget=forms.RadioSelect,
    )
    reason = ReasonField()


class HeadForm(RegisterForm):
    """Another head: put in on a day, or only written down wrongly until now."""

    PUT_IN: Final = "put in"
    WRONG: Final = "wrong"

    head = HeadField()
    how = forms.ChoiceField(
        label="What happened",
        choices=[
            (PUT_IN, "This head was put in: the drift history begins anew"),
            (WRONG, "The register was wrong: this head was in it all along"),
        ],
        widget=forms.RadioSelect,
        initial=PUT_IN,
    )
    on = DateField(label="Put in on", required=False, help_text="Not asked where the register was wrong.")
    reason = ReasonField()

    def __init__(self, *args: Any, **kwargs: Any) -> None:
        super().__init__(*args, **kwargs)
        head = self.fields["head"]
        assert isinstance(head, HeadField)
        head.offer()

    def clean(self) -> dict[str, Any]:
        cleaned: dict[str, Any] = super().clean() or self.cleaned_data
        if cleaned.get("how") == self.PUT_IN and "on" in cleaned and cleaned["on"] is None:
            self.add_error("on", "Say on which day it was put in.")
        return cleaned


class InterventionForm(RegisterForm):
    kind = forms.ChoiceField(
        label="What was done",
        choices=[(kind.value, kind.label) for kind in Intervention.Kind if kind != Intervention.Kind.NEW_HEAD],
        widget=forms.RadioSelect,
        help_text="A new measuring head has its own page.",
    )
    done_on = DateField(label="Done on")
    breaks_history = forms.BooleanField(
        label="Breaks the drift history",
        required=False,
        initial=True,
        help_text="Drift is not worked out across it; the transmitter must be tested again.",
    )
    reason = ReasonField(label="What was done and why")
