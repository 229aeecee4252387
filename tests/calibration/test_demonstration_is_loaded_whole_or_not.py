"""The demonstration goes into an empty database only, and never by halves."""

from __future__ import annotations

from io import StringIO

import pytest
from django.core.management import CommandError, call_command

from calibration import demonstrating
from register.models import AuditEntry, Maker, Plant, User
from tests import cast as people


@pytest.mark.django_db
def test_a_loading_that_fails_on_its_way_leaves_nothing(monkeypatch: pytest.MonkeyPatch) -> None:
    def break_off(*args: object) -> None:
        assert Maker.objects.exists()
        raise RuntimeError("the disk is full")

    monkeypatch.setattr(demonstrating, "_standards", break_off)
    with pytest.raises(RuntimeError, match="the disk is full"):
        demonstrating.load()
    for model in (User, Plant, Maker, AuditEntry):
        assert not model._default_manager.exists()


@pytest.mark.django_db
def test_a_plant_in_use_is_left_alone() -> None:
    plant = people.make_plant()
    with pytest.raises(CommandError, match="needs an empty one"):
        call_command("demonstration", stdout=StringIO())
    assert list(Plant.objects.all()) == [plant]
