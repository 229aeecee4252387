"""How a reference standard stands today, as its page and the list of standards say it."""

from __future__ import annotations

import datetime
from dataclasses import dataclass

from calibration.models import Standard


@dataclass(frozen=True)
class Reliance:
    """Whether a standard may be used today, in words, and how loudly to say it."""

    words: str
    css: str
    until: datetime.date | None


def reliance(standard: Standard, until: datetime.date | None, today: datetime.date) -> Reliance:
    """How a standard with its longest-lasting certificate stands today."""
    if standard.state != Standard.State.IN_USE:
        return Reliance(standard.get_state_display(), "quiet", until)
    if until is None:
        return Reliance("no certificate", "unknown", None)
    if until < today:
        return Reliance("certificate lapsed", "out", until)
    if (until - today).days <= 42:
        return Reliance("certificate lapses soon", "near", until)
    return Reliance("in date", "ok", until)
