"""Days that no plant has are refused beside the field or the cell, whatever would be reckoned with them."""

from __future__ import annotations

import datetime
from collections.abc import Callable

import pytest
from django import forms
from django.core.exceptions import ValidationError
from django.test import Client
from django.urls import get_resolver

from register.days import EARLIEST, LATEST
from register.forms.fields import DateField
from register.imports.cells import CellError, day
from tests import cast as people

ClientAs = Callable[[people.User], Client]


@pytest.mark.parametrize("text", ["9999-12-31", "2200-01-01", "1949-12-31", "0001-01-01"])
def test_a_day_beyond_the_years_of_plants_is_refused(text: str) -> None:
    words = f"{text} is no day of a plant: write one from 1950-01-01 to 2199-12-31."
    with pytest.raises(ValidationError) as refused:
        DateField().clean(text)
    assert refused.value.messages == [words]
    with pytest.raises(CellError) as told:
        day(text, False)
    assert str(told.value) == words


@pytest.mark.parametrize("held", [EARLIEST, LATEST])
def test_the_first_and_the_last_of_these_days_are_taken(held: datetime.date) -> None:
    assert DateField().clean(held.isoformat()) == held == day(held.isoformat(), False)


def test_every_form_of_the_site_takes_its_days_so() -> None:
    assert get_resolver().url_patterns, "all views are loaded, and their forms with them"
    every: list[type[forms.BaseForm]] = [forms.BaseForm]
    for one in every:
        every += one.__subclasses__()
    days = [
        (form, name, field)
        for form in every
        if form.__module__.startswith(("register.", "calibration."))
        for name, field in getattr(form, "base_fields", {}).items()
        if isinstance(field, forms.DateField | forms.DateTimeField)
    ]
    assert len(days) > 15
    assert [(form.__name__, name) for form, name, field in days if not isinstance(field, DateField)] == []


@pytest.mark.parametrize("query", ["until=9999-12-31", "since=0001-01-01"])
@pytest.mark.parametrize("url", ["/audit/", "/tests/"])
def test_a_filter_by_a_day_at_the_end_of_time_is_told_what_is_wrong(
    client_as: ClientAs, cast: people.Cast, url: str, query: str
) -> None:
    response = client_as(cast.administrator).get(f"{url}?{query}")
    assert response.status_code == 200
    assert "is no day of a plant" in response.content.decode()
