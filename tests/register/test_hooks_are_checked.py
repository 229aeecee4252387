"""A function named in the settings that is not there is said at once, not when an act or midnight calls it."""

from __future__ import annotations

from typing import Any

import pytest
from django.conf import settings as site

from register.checks import hooks_can_be_called

LISTS = ("AFTER_REGISTER_CHANGE", "AFTER_PLANT_CREATED", "BEFORE_BACKDATING")


def test_the_functions_of_the_settings_are_there() -> None:
    assert all(getattr(site, name) for name in (*LISTS, "EVERY_DAY")), "there is something to be checked"
    assert hooks_can_be_called() == []


@pytest.mark.parametrize("name", ["calibration.scheduling.refesh", "calibration.schedling.refresh", "refresh"])
@pytest.mark.parametrize("hook", [*LISTS, "EVERY_DAY"])
def test_a_mistyped_function_is_said_by_setting_and_name(settings: Any, hook: str, name: str) -> None:
    setattr(settings, hook, {name: ("thing is done", "things are done")} if hook == "EVERY_DAY" else [name])
    found = hooks_can_be_called()
    assert [(one.id, one.msg) for one in found] == [("register.E001", f"{hook} names {name}, which is no function.")]
