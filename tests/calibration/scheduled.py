"""Short words for tests of the schedule: a tag tested on a day, and how it stands on another."""

from __future__ import annotations

import datetime
from typing import Any

from calibration.models import Record, ScheduleState, Standing
from calibration.recording import write_record
from register.auditing import Act, Actor
from register.models import Tag, User
from tests.calibration.described import described

OUTSIDE = (1.0,) * 9


def a_test(tag: Tag, on: datetime.date, *, signer: User | None = None, **values: Any) -> Record:
    """A test of a tag on a day, in tolerance unless `found` says otherwise; transcribed without a signer."""
    act = Act(Actor(signer), "")
    tag = Tag.objects.select_related(
        "plant", "current_range", "current_fitting__transmitter__head", "current_fitting__transmitter__maker"
    ).get(pk=tag.pk)
    record = write_record(described(tag, on=on, signer=signer, **values), act=act)
    act.write()
    return record


def state_of(tag: Tag, today: datetime.date) -> ScheduleState:
    return Standing.objects.get(pk=tag.pk).state(today)


def day(text: str) -> datetime.date:
    return datetime.date.fromisoformat(text)
