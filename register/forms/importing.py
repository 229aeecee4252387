"""Forms of the steps of an import: the file, the matching of its columns, the word to bring it in."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any, Final

from django import forms
from django.core.exceptions import ValidationError

from register.forms.fields import ReasonField, RegisterForm
from register.imports.columns import Column, grouped
from register.imports.tables import LARGEST_FILE, Table, TableError, read_table
from register.models import Plant

MEGABYTES: Final = LARGEST_FILE // 1024 // 1024
TOO_LARGE: Final = f"The file is larger than {MEGABYTES} MB: bring it in parts."


class FileForm(RegisterForm):
    """A file that can be read as a table; `data` and `name` are what it holds and is called."""

    file = forms.FileField(
        label="File",
        help_text=f"CSV (columns by commas, semicolons or tabs) or .xlsx, up to {MEGABYTES} MB and 100,000 rows.",
        widget=forms.ClearableFileInput(attrs={"accept": ".csv,.txt,.xlsx"}),
        error_messages={
            "required": "Choose a file first.",
            "empty": "This file is empty.",
            "max_length": "The name of the file is longer than any that is kept here: shorten it.",
        },
        max_length=200,
    )

    def __init__(self, *args: Any, plant: Plant, too_large: bool = False, **kwargs: Any) -> None:
        self.plant = plant
        self.too_large = too_large
        self.data_of_file = b""
        super().__init__(*args, **kwargs)
        if too_large:
            self.fields["file"].error_messages["required"] = TOO_LARGE

    def clean_file(self) -> str:
        brought = self.cleaned_data["file"]
        if brought.size > LARGEST_FILE:
            raise ValidationError(TOO_LARGE)
        data = brought.read()
        try:
            read_table(data, brought.name, decimal_comma=self.plant.decimal_comma)
        except TableError as error:
            raise ValidationError(str(error)) from error
        self.data_of_file = data
        return str(brought.name)


class MatchingForm(RegisterForm):
    """Which column of the file holds what: one choice a heading, each column of the import at most once."""

    def __init__(
        self, *args: Any, table: Table, columns: Sequence[Column], matching: Mapping[str, int], **kwargs: Any
    ) -> None:
        self.table = table
        self.labels = {column.key: column.label for column in columns}
        super().__init__(*args, **kwargs)
        held = {place: key for key, place in matching.items()}
        choices: list[Any] = [("", "leave out")]
        for group, members in grouped(columns):
            offered = [(column.key, column.label) for column in members]
            choices += [(group, offered)] if group else offered
        for place in range(len(table.head)):
            self.fields[_name(place)] = forms.ChoiceField(
                label=table.called(place), choices=choices, required=False, initial=held.get(place, "")
            )

    def lines(self) -> list[dict[str, Any]]:
        """One line a column of the file: its letter, heading, first values, and the field."""
        return [
            {
                "letter": self.table.called(place).partition(" ")[0],
                "heading": heading,
                "samples": self.table.samples(place),
                "field": self[_name(place)],
            }
            for place, heading in enumerate(self.table.head)
        ]

    def clean(self) -> dict[str, Any]:
        cleaned: dict[str, Any] = super().clean() or self.cleaned_data
        taken: dict[str, int] = {}
        for place in range(len(self.table.head)):
            key = cleaned.get(_name(place))
            if not key:
                continue
            if key in taken:
                other = self.table.called(taken[key])
                self.add_error(_name(place), f"“{self.labels[key]}” is matched to column {other} already.")
            taken.setdefault(key, place)
        return cleaned

    @property
    def matching(self) -> dict[str, int]:
        """Column key → place in the file."""
        return {key: place for place in range(len(self.table.head)) if (key := self.cleaned_data[_name(place)])}


class BringInForm(RegisterForm):
    """The word to bring a checked file in, with the reason that stays with every entry."""

    reason = ReasonField(help_text="Such as: taken over from the old list.")


def _name(place: int) -> str:
    return f"column-{place}"
