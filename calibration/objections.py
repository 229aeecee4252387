"""What stands in calibration against a change of the register that is dated back."""

from __future__ import annotations

import datetime

from calibration.models import Test
from register.models import Tag


def to_backdating(tag: Tag, on: datetime.date) -> str:
    """Name the newest test at the tag that was made after the day, in a sentence; empty where there is none.

    A test says what it says about the range and the transmitter of its day; a change dated before it would make the
    register contradict a record that cannot be altered.
    """
    test = Test.objects.filter(tag=tag, tested_on__gt=on).exclude(outcome=Test.Outcome.NOT_TESTED).first()
    if test is None:
        return ""
    return (
        f"{tag} was tested on {test.tested_on}, after {on}, by what the register says now: "
        f"nothing before {test.tested_on} is changed any more."
    )
