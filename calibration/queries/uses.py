"""Where a reference standard was used."""

from __future__ import annotations

import datetime
from dataclasses import dataclass, replace

from calibration.models import Standard, StandardUse


@dataclass(frozen=True)
class Use:
    """One test made with a standard."""

    test_id: int
    tested_on: datetime.date
    instrument: str
    runs: str
    part: str
    certificate: str
    exception: str


def recent_uses(standard: Standard, most: int = 50) -> list[Use]:
    """The newest tests of the counting versions made with a standard, one line each, newest first."""
    rows = (
        standard.uses.filter(run__record__superseded_by__isnull=True)
        .order_by("-run__tested_on", "-run__record__test_id", "run__kind")
        .values_list(
            "run__record__test_id",
            "run__tested_on",
            "run__record__test__tag__number",
            "run__record__test__transmitter__serial",
            "run__kind",
            "part",
            "certificate__number",
            "exception",
        )[: 2 * most + 1]
    )
    found: dict[tuple[int, str, str | None], Use] = {}
    for test_id, day, number, serial, kind, part, certificate, exception in rows:
        key = (test_id, part, certificate)
        if held := found.get(key):
            found[key] = replace(held, runs=f"{held.runs}, {kind}", exception=held.exception or exception)
        else:
            words = StandardUse.Part(part).label
            found[key] = Use(test_id, day, number or serial, kind, words, certificate or "none", exception)
    return list(found.values())[:most]
