"""Form fields of a register kept as typed: numbers stay text, units have a kind, changes have a reason."""

from __future__ import annotations

import datetime
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from typing import Any, ClassVar, TypeVar

from django import forms
from django.core.exceptions import ValidationError
from django.http import HttpRequest, QueryDict

from register.days import beyond
from register.engineering.typed import NumberError, parse_number, shortest
from register.engineering.units import choices

T = TypeVar("T")


@dataclass(frozen=True, slots=True)
class Group:
    """Fields that belong together, under one heading; `say` is a sentence below it."""

    legend: str
    fields: list[forms.BoundField]
    say: str = ""


class TypedNumberField(forms.CharField):
    """A number kept as typed: cleaned to its text, so that 12.00 stays 12.00.

    `decimal_comma` and `plausible` are those of `parse_number`; `form.decimal_comma` sets the first for all
    fields of a form. A text that only they can settle ("1,234") is kept with a decimal point, so that it reads
    the same wherever it is read again.
    """

    def __init__(
        self,
        *,
        plausible: tuple[float, float] | None = None,
        decimal_comma: bool = False,
        max_length: int = 40,
        **kwargs: Any,
    ) -> None:
        self.plausible = plausible
        self.decimal_comma = decimal_comma
        super().__init__(max_length=max_length, **kwargs)
        self.widget.attrs |= {"inputmode": "decimal", "autocomplete": "off", "class": "num"}

    def clean(self, value: Any) -> Any:
        text = super().clean(value)
        if not text:
            return text
        try:
            number = parse_number(text, decimal_comma=self.decimal_comma, plausible=self.plausible)
        except NumberError as error:
            raise ValidationError(str(error), code="not a number") from error
        try:
            parse_number(text)
        except NumberError:
            return shortest(number)
        return text


class NumberField(TypedNumberField):
    """A number used as a number (volts, ohms): cleaned to a float, shown again as typed; empty is None."""

    def __init__(self, *, least: float | None = None, most: float | None = None, **kwargs: Any) -> None:
        self.least, self.most = least, most
        super().__init__(**kwargs)

    def prepare_value(self, value: Any) -> Any:
        return shortest(value) if isinstance(value, (int, float)) else value

    def has_changed(self, initial: Any, data: Any) -> bool:
        return super().has_changed(self.prepare_value(initial), data)

    def clean(self, value: Any) -> float | None:
        text = super().clean(value)
        if not text:
            return None
        number = parse_number(text)
        if self.least is not None and number < self.least:
            raise ValidationError(f"“{text}” is below {shortest(self.least)}, the least that makes sense here.")
        if self.most is not None and number > self.most:
            raise ValidationError(f"“{text}” is above {shortest(self.most)}, the most that makes sense here.")
        return number


class WholeNumberField(NumberField):
    """A count (months, positions): cleaned to an int; empty is None."""

    def clean(self, value: Any) -> int | None:
        number = super().clean(value)
        if number is None:
            return None
        if number != int(number):
            raise ValidationError(f"“{str(value).strip()}” is not a whole number: write 3 or 24.")
        return int(number)


class UnitField(forms.ChoiceField):
    """A unit of one kind, cleaned to its key; `kind` is one of the kinds of `register.engineering.units`."""

    def __init__(self, *kinds: str, empty: str | None = None, **kwargs: Any) -> None:
        units = choices(*kinds)
        super().__init__(choices=units if empty is None else [("", empty), *units], **kwargs)
        self.error_messages["invalid_choice"] = "“%(value)s” is not one of the units offered here."


class ReasonField(forms.CharField):
    """Why something is changed; it stays with the change for good."""

    def __init__(self, *, label: str = "Reason", max_length: int = 300, **kwargs: Any) -> None:
        kwargs.setdefault("widget", forms.Textarea(attrs={"rows": 2}))
        super().__init__(label=label, max_length=max_length, **kwargs)
        self.error_messages["required"] = "Say why: the reason stays with the change."


class DateField(forms.DateField):
    """A day written as 2026-03-09, of the years that the site takes."""

    def __init__(self, **kwargs: Any) -> None:
        attrs = {"placeholder": "2026-03-09", "autocomplete": "off", "class": "date"}
        kwargs.setdefault("widget", forms.DateInput(format="%Y-%m-%d", attrs=attrs))
        super().__init__(input_formats=["%Y-%m-%d"], **kwargs)

    def to_python(self, value: Any) -> datetime.date | None:
        try:
            day = super().to_python(value)
        except ValidationError:
            raise ValidationError(
                f"“{str(value).strip()}” is not a date of the calendar written as 2026-03-09: year, month, day.",
                code="invalid",
            ) from None
        if day is not None and (words := beyond(day)):
            raise ValidationError(words, code="invalid")
        return day


class RegisterForm(forms.Form):
    """Base of the site's forms: errors stand beside their field, and what was typed stays in it.

    `decimal_comma` (the plant's habit) is handed to every number field. A long form names its fields in groups:
    heading, names, and if need be a sentence.
    """

    GROUPS: ClassVar[tuple[tuple[str, tuple[str, ...], str], ...]] = ()

    def __init__(self, *args: Any, decimal_comma: bool = False, **kwargs: Any) -> None:
        kwargs.setdefault("label_suffix", "")
        kwargs.setdefault("use_required_attribute", False)
        super().__init__(*args, **kwargs)
        for field in self.fields.values():
            if isinstance(field, TypedNumberField) and decimal_comma:
                field.decimal_comma = True
            if field.error_messages.get("required") == forms.Field.default_error_messages["required"]:
                field.error_messages["required"] = "This is needed."
            if isinstance(field, forms.CharField) and field.max_length:
                field.error_messages.setdefault(
                    "max_length", f"At most {field.max_length} characters fit here; shorten it."
                )

    def groups(self) -> list[Group]:
        """The visible fields by group; a field that no group names, such as the reason, is in none."""
        return [Group(legend, [self[name] for name in names], say) for legend, names, say in self.GROUPS]

    def submit(self, act: Callable[[], T]) -> T | None:
        """Run an act if what was typed is valid; what it refuses stands in the form, and None comes back."""
        if not self.is_valid():
            return None
        try:
            return act()
        except ValidationError as error:
            self.refuse(error)
            return None

    def refuse(self, error: ValidationError) -> None:
        """Show what an act refused: beside the fields it names, else above the form."""
        if not hasattr(error, "error_dict"):
            self.add_error(None, error)
            return
        for name, errors in error.error_dict.items():
            known = name in self.fields and not self.fields[name].widget.is_hidden
            for one in errors:
                self.add_error(name if known else None, one)

    @property
    def why(self) -> str:
        """The reason typed into a valid form."""
        return str(self.cleaned_data["reason"])

    def values(self, *left_out: str) -> Mapping[str, Any]:
        """Cleaned values by field name, for an act; without the named ones and without `reason`."""
        return {name: value for name, value in self.cleaned_data.items() if name not in {"reason", *left_out}}


class ReasonForm(RegisterForm):
    """Only the reason of an act that needs nothing else; `asks` is its label."""

    reason = ReasonField()

    def __init__(self, *args: Any, asks: str = "Reason", **kwargs: Any) -> None:
        super().__init__(*args, **kwargs)
        self.fields["reason"].label = asks


class ChangeForm(RegisterForm):
    """Base of forms that change a thing: a reason, and a look at what others changed since the page was opened."""

    seen = forms.IntegerField(widget=forms.HiddenInput, required=False)
    reason = ReasonField()

    def __init__(self, *args: Any, changes: Callable[[int], list[str]], latest: int, **kwargs: Any) -> None:
        """`changes` says what was changed after an entry of the trail, `latest` is the newest entry now."""
        self.changes = changes
        self.latest = latest
        kwargs["initial"] = {**(kwargs.get("initial") or {}), "seen": latest}
        super().__init__(*args, **kwargs)
        self.order_fields([name for name in self.fields if name != "reason"])

    def clean(self) -> dict[str, Any]:
        cleaned: dict[str, Any] = super().clean() or self.cleaned_data
        seen = cleaned.pop("seen", None)
        if seen is not None and seen < self.latest:
            for sentence in self.changes(seen):
                self.add_error(None, sentence)
            # Told once: who saves again has read it.
            self.data = dict(self.data.items()) | {self.add_prefix("seen"): str(self.latest)}
        return cleaned


def typed(request: HttpRequest) -> QueryDict | None:
    """What was sent with a form, None where it is only asked for."""
    return request.POST if request.method == "POST" else None
