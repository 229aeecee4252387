"""Times the loading of the demonstration into an empty database."""

from __future__ import annotations

import time

import django

from tests.benchmarks import processes
from tests.benchmarks.report import Table, megabytes, seconds


def main() -> None:
    django.setup()
    print(measure().written())


def measure() -> Table:
    """Load the demonstration into an empty database, as the first start does."""
    from django.core.management import call_command

    from calibration.models import Test
    from register.models import Tag

    table = Table("Demonstration", ["what", "rows", "time"])
    start = time.perf_counter()
    call_command("demonstration", verbosity=0)
    spent = time.perf_counter() - start
    rows = f"{Tag.objects.count():,} tags, {Test.objects.count():,} tests"
    table.rows = [
        ["demonstration loaded by its acts", rows, seconds(spent)],
    ]
    table.remarks.append(f"Peak memory {megabytes(processes.peak_memory())}.")
    return table


if __name__ == "__main__":
    main()
