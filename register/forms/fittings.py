"""Forms that fit, remove and swap transmitters."""

from __future__ import annotations

from typing import Any, Final

from django import forms
from django.core.exceptions import ValidationError

from register.forms.fields import DateField, ReasonField, RegisterForm
from register.models import Plant, Transmitter
from register.queries import spares, transmitters_with_serial

Whereabouts = Transmitter.Whereabouts
GOES_TO: Final = [
    (Whereabouts.STORES.value, "to stores"),
    (Whereabouts.REPAIR.value, "away for repair"),
    (Whereabouts.SCRAPPED.value, "to be scrapped"),
]


class TransmitterField(forms.CharField):
    """A transmitter of a plant by its serial number, as read off its plate; cleaned to the transmitter."""

    def __init__(self, **kwargs: Any) -> None:
        attrs = {"autocapitalize": "characters", "spellcheck": "false", "autocomplete": "off", "class": "mono"}
        super().__init__(label="Serial number", max_length=200, widget=forms.TextInput(attrs=attrs), **kwargs)
        self.plant: Plant | None = None

    def clean(self, value: Any) -> Any:
        typed = super().clean(value)
        if self.plant is None or not typed:
            return typed
        found = transmitters_with_serial(self.plant, typed)
        if len(found) == 1:
            return found[0]
        if found:
            names = " or ".join(f"“{transmitter}”" for transmitter in found)
            raise ValidationError(f"“{typed}” is a serial number of several makers: write {names}.")
        raise ValidationError(
            f"No transmitter of this plant has the serial number “{typed}”: look at its plate again, "
            "or register it first."
        )


class FitForm(RegisterForm):
    transmitter = TransmitterField()
    on = DateField(label="Fitted on")
    reason = ReasonField()

    def __init__(self, *args: Any, plant: Plant, **kwargs: Any) -> None:
        super().__init__(*args, **kwargs)
        field = self.fields["transmitter"]
        assert isinstance(field, TransmitterField)
        field.plant = plant
        field.widget.attrs["list"] = "spares"
        self.spares = spares(plant)


class RemoveForm(RegisterForm):
    on = DateField(label="Removed on")
    whereabouts = forms.ChoiceField(
        label="It goes", choices=GOES_TO, widget=forms.RadioSelect, initial=Whereabouts.STORES
    )
    reason = ReasonField()


class SwapForm(FitForm):
    field_order = ("transmitter", "on", "whereabouts", "reason")

    on = DateField(label="Swapped on")
    whereabouts = forms.ChoiceField(
        label="The old one goes", choices=GOES_TO, widget=forms.RadioSelect, initial=Whereabouts.STORES
    )
