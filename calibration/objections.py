"""What stands in calibration against a change of the register that is dated back."""

from __future__ import annotations

import datetime

from calibration.models import Test
from register.models import Tag, Transmitter


def to_backdating(thing: Tag | Transmitter, on: datetime.date) -> str:
    """Name the newest test at the tag, or of the transmitter wherever it was, after the day; empty without any.

    A test says what it says about the range and the transmitter of its day; a change dated before it would make the
    register contradict a record that cannot be altered.
    """
    tests = Test.objects.filter(tag=thing) if isinstance(thing, Tag) else Test.objects.filter(transmitter=thing)
    test = tests.filter(tested_on__gt=on).exclude(outcome=Test.Outcome.NOT_TESTED).first()
    if test is None:
        return ""
    return (
        f"{thing} was tested on {test.tested_on}, after {on}, by what the register says now: "
        f"nothing before {test.tested_on} is changed any more."
    )
