"""Times the recomputing of the flags of many tags: where nothing changed, and where every tag gets another flag."""

from __future__ import annotations

import argparse
import time
from collections.abc import Callable

import django

from tests.benchmarks import processes
from tests.benchmarks.report import Table, megabytes, seconds


def main() -> None:
    parser = argparse.ArgumentParser()
    parser.add_argument("--tags", type=int, required=True)
    django.setup()
    print(measure(parser.parse_args().tags).written())


def measure(tags: int) -> Table:
    """Recompute as an act does that changes a transmitter type, in a transaction that is taken back at the end."""
    from django.db import transaction

    from register import changes, flagging
    from register.engineering.units import prepare
    from register.models import Flag, Tag, TransmitterType

    prepare()
    table = Table(f"Flags of {tags:,} tags", ["what", "time", "a tag", "flags that changed"])
    ids = list(Tag.objects.filter(plant__code="bench").order_by("pk").values_list("pk", flat=True)[:tags])

    def timed(what: str, work: Callable[[], object]) -> None:
        before = dict(Flag.objects.filter(closed_at=None).values_list("pk", "severity"))
        start = time.perf_counter()
        work()
        spent = time.perf_counter() - start
        changed = set(Flag.objects.filter(closed_at=None).values_list("pk", "severity")) ^ set(before.items())
        table.rows.append([what, seconds(spent), f"{spent / len(ids) * 1000:.2f} ms", f"{len(changed):,}"])

    with transaction.atomic():
        timed("recomputed, nothing changed", lambda: flagging.recompute(ids))
        TransmitterType.objects.update(ambient_max="20", ambient_max_k=293.15)
        timed("recomputed, one limit of their type lowered", lambda: flagging.recompute(ids))
        timed("schedule and lists told of it", lambda: changes.announce(ids))
        transaction.set_rollback(True)
    table.remarks.append(f"Peak memory {megabytes(processes.peak_memory())}.")
    return table


if __name__ == "__main__":
    main()
