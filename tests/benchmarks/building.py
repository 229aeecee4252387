"""Builds a database with many tags and tests, and says how long each part took and how large it became."""

from __future__ import annotations

import argparse
import sys
import time
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import TYPE_CHECKING

import django
import numpy as np
from numpy.typing import NDArray

from tests.benchmarks import processes
from tests.benchmarks.report import Table, megabytes, seconds

if TYPE_CHECKING:
    from register.models import Area, Plant


def main() -> None:
    parser = argparse.ArgumentParser()
    parser.add_argument("--tags", type=int, required=True)
    parser.add_argument("--tests", type=int, required=True)
    parser.add_argument("--share", type=float, required=True)
    chosen = parser.parse_args()
    django.setup()
    print(build(chosen.tags, chosen.tests, chosen.share / 100).written())


def build(tags: int, tests: int, share: float) -> Table:
    """Build the database that the environment names.

    Parameters
    ----------
    tags, tests : int
        How many.
    share : float
        Part of the tests that have readings and signatures.
    """
    from django.db import connection

    from calibration import scheduling
    from register import flagging
    from register.models import Tag
    from tests.benchmarks import invented, past_tests, register_rows
    from tests.benchmarks.loading import hurried

    table = Table(f"Database of {tags:,} tags and {tests:,} tests ({connection.vendor})", ["part", "rows", "time"])

    @contextmanager
    def timed(part: str, rows: int) -> Iterator[None]:
        start = time.perf_counter()
        yield
        table.rows.append([part, f"{rows:,}", seconds(time.perf_counter() - start)])
        print(f"  {table.title}: {part}, {table.rows[-1][-1]}", file=sys.stderr)

    plant, areas = new_plant()
    plan, kinds = invented.Plan.of(tags), invented.kinds()
    counts = _counts(plan.tested, tests)
    whole = np.where(np.cumsum(counts) <= round(share * tests), counts, 0)
    whole[plan.state == "no requirement"] = 0
    with hurried(*register_rows.LOADED, *past_tests.LOADED):
        with timed("tags, ranges, transmitters, fittings, requirements", 5 * tags):
            register_rows.load_register(plant, areas, kinds, plan, int(counts.max(initial=1)))
        with timed("transcribed tests with record, runs, figures", int((counts - whole).sum())):
            past_tests.load_tests(plant, kinds, plan, counts - whole)
        start = time.perf_counter()
    table.rows.append(["indexes", "", seconds(time.perf_counter() - start)])
    with timed("signed tests with readings, by the act that records them", int(whole.sum())):
        readings = past_tests.write_whole_tests(plant, plan, whole)
    ids = list(Tag.objects.filter(plant=plant).values_list("pk", flat=True))
    with timed("flags, by the act that recomputes them", tags):
        flagging.recompute(ids)
        _accept_some()
    with timed("standings and search words, by the act that refreshes them", tags):
        scheduling.refresh(ids)
    _settle()
    table.remarks += [
        f"{int(whole.sum()):,} of the tests ({100 * whole.sum() / tests:.2f} %) have readings, {readings:,} in all; "
        "the others are transcribed results without readings.",
        f"Size {megabytes(_size())}; peak memory of the builder {megabytes(processes.peak_memory())}.",
    ]
    return table


def new_plant() -> tuple[Plant, list[Area]]:
    """A plant with its areas and one person for each role."""
    from calibration.provision import provide_defaults
    from register.auditing import Actor
    from register.models import Role
    from tests import cast
    from tests.benchmarks.invented import AREAS

    plant = cast.make_plant("bench", name="Great works")
    provide_defaults(by=Actor(None), plant=plant)
    for role in Role.values:
        cast.make_person(role, plant=plant, roles=(role,))
    return plant, [cast.make_area(plant, f"{number}00") for number in range(1, AREAS + 1)]


def _counts(tested: NDArray[np.bool_], tests: int) -> NDArray[np.int64]:
    """Tests of each tag: as even as the total allows."""
    counts = np.zeros(len(tested), dtype=np.int64)
    places = np.flatnonzero(tested)
    counts[places] = tests // len(places)
    counts[places[: tests % len(places)]] += 1
    return counts


def _accept_some() -> None:
    """An acceptance on every eighth flag that is open."""
    import datetime

    from django.db.models import F
    from django.db.models.functions import Mod
    from django.utils import timezone

    from register.models import Flag, User

    now = timezone.now()
    Flag.objects.annotate(eighth=Mod("id", 8)).filter(eighth=0, closed_at=None).update(
        accepted_by=User.objects.get(username="engineer"),
        accepted_at=now,
        accepted_reason="watched until the next outage",
        accepted_until=now.date() + datetime.timedelta(days=200),
        accepted_severity=F("severity"),
    )


def _settle() -> None:
    """Let the database keep what it knows of its tables, as it does by itself in time, and write everything down."""
    from django.db import connection

    with connection.cursor() as cursor:
        cursor.execute("ANALYZE" if connection.vendor == "postgresql" else "PRAGMA wal_checkpoint(TRUNCATE)")


def _size() -> int:
    from django.conf import settings
    from django.db import connection

    if connection.vendor == "postgresql":
        with connection.cursor() as cursor:
            cursor.execute("SELECT pg_database_size(current_database())")
            size: int = cursor.fetchone()[0]
            return size
    return Path(settings.DATABASES["default"]["NAME"]).stat().st_size


if __name__ == "__main__":
    main()
