"""The days that the site takes: wide enough for any plant, narrow enough that intervals and time zones can be added."""

from __future__ import annotations

import datetime
from typing import Final

EARLIEST: Final = datetime.date(1950, 1, 1)
LATEST: Final = datetime.date(2199, 12, 31)


def beyond(day: datetime.date) -> str:
    """What is wrong with a day outside these; empty where nothing is."""
    if EARLIEST <= day <= LATEST:
        return ""
    return f"{day} is no day of a plant: write one from {EARLIEST} to {LATEST}."
