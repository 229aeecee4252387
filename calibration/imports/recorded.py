"""What is recorded already of the tests in a file, so that the same file brings nothing in twice."""

from __future__ import annotations

import datetime
from collections import defaultdict
from collections.abc import Iterable, Sequence

from calibration.imports.history import History
from calibration.imports.visits import KINDS
from calibration.models import Reading, Test
from calibration.records.basis import Basis
from calibration.records.content import RunContent
from calibration.records.reckoning import reading_row

#: Of each run of a test: its kind, and input [SI] and output [mA] of its readings.
Substance = tuple[tuple[str, tuple[tuple[float, float], ...]], ...]


def substance_of(runs: Sequence[RunContent], basis: Basis) -> Substance:
    """What a test to be added holds, in the form in which recorded ones are compared with it."""
    return tuple(
        (
            run.kind,
            tuple(
                (row.applied_si, row.measured_ma)
                for row, _ in (reading_row(one, order, basis) for order, one in enumerate(run.readings, start=1))
            ),
        )
        for run in runs
    )


def recorded(history: History, days: set[datetime.date]) -> dict[tuple[int, datetime.date], list[Substance]]:
    """What is recorded of the transmitters on these days."""
    found: dict[tuple[int, datetime.date], list[Substance]] = defaultdict(list)
    devices, wanted = sorted(history.devices), sorted(days)
    for start in range(0, len(devices), 500):
        tests = Test.objects.filter(
            transmitter__in=devices[start : start + 500], tested_on__gte=wanted[0], tested_on__lte=wanted[-1]
        )
        named = {
            record_id: (device_id, day)
            for record_id, device_id, day in tests.values_list("current_record_id", "transmitter_id", "tested_on")
            if day in days
        }
        for record_id, substance in _readings_of(sorted(named)):
            found[named[record_id]].append(substance)
    return found


def _readings_of(record_ids: Sequence[int]) -> Iterable[tuple[int, Substance]]:
    for start in range(0, len(record_ids), 500):
        runs: dict[int, dict[str, list[tuple[float, float]]]] = {pk: {} for pk in record_ids[start : start + 500]}
        rows = Reading.objects.filter(run__record__in=list(runs)).order_by("run__record_id", "run_id", "order")
        for record_id, kind, applied, measured in rows.values_list(
            "run__record_id", "run__kind", "applied_si", "measured_ma"
        ):
            runs[record_id].setdefault(kind, []).append((applied, measured))
        for record_id, kinds in runs.items():
            yield record_id, tuple((kind, tuple(kinds[kind])) for kind in KINDS if kind in kinds)
