"""`python -m tests.benchmarks`: builds, measures, prints ratios with the aim beside each; leaves nothing behind."""

from __future__ import annotations

import argparse
import platform
import sqlite3
import sys
import tempfile
import time
from collections.abc import Iterator, Mapping
from pathlib import Path
from typing import Final

from tests.benchmarks import evaluation, importing, pages, processes, starting
from tests.benchmarks.report import Aim, Table

FEW: Final = 1000
#: Sections in the order in which they run.
SECTIONS: Final = ("pages", "flags", "import", "evaluation", "demonstration", "start")


def main(given: list[str] | None = None) -> int:
    """Run what was asked for; 1 where a process failed, 0 otherwise, whether aims are met or missed."""
    chosen = _options(given)
    print(f"Python {platform.python_version()}, SQLite {sqlite3.sqlite_version}, {platform.machine()}")
    print(f"Load average at the start: {processes.load_average()}\n", flush=True)
    aims: list[Aim] = []
    begun = time.perf_counter()
    with tempfile.TemporaryDirectory(prefix="foundleft-bench-", ignore_cleanup_errors=True) as folder:
        try:
            for table in _sections(chosen, Path(folder)):
                print(f"{table}\n  load average {processes.load_average()}\n", flush=True)
                aims += table.aims
        except processes.FailedError as error:
            print(error, file=sys.stderr)
            return 1
    print("Aims\n----")
    for aim in aims:
        print(f"  {aim}")
    print(f"{time.perf_counter() - begun:.0f} s in all; load average {processes.load_average()}")
    return 0


def _options(given: list[str] | None) -> argparse.Namespace:
    parser = argparse.ArgumentParser(prog="python -m tests.benchmarks", description=__doc__)
    parser.add_argument("--tags", type=int, default=100_000, help="default: 100000")
    parser.add_argument("--tests", type=int, default=2_000_000, help="default: 2000000")
    parser.add_argument("--share", type=float, default=0.1, help="percent of the tests with readings (default: 0.1)")
    parser.add_argument("--rounds", type=int, default=40, help="requests for each address (default: 40)")
    parser.add_argument("--only", choices=SECTIONS, nargs="+", default=SECTIONS, help="default: all")
    parser.add_argument("--database-url", default="", help="a PostgreSQL server; throw-away databases are made there")
    return parser.parse_args(given)


def _sections(chosen: argparse.Namespace, folder: Path) -> Iterator[Table]:
    """Run the sections one after another; the first two share the large database."""
    few_tags = min(FEW, chosen.tags)
    tags, tests, rows = chosen.tags, chosen.tests, chosen.tags // 10
    names = ("many", "few", "imported", "created", "demonstration")
    with processes.sites(folder, chosen.database_url, names) as told:
        if {"pages", "flags"} & set(chosen.only):
            yield _built(told["many"], tags, tests, chosen.share)
        if "pages" in chosen.only:
            yield _built(told["few"], few_tags, tests * few_tags // tags, chosen.share)
            yield from pages.measure(told["many"], told["few"], tags=tags, few_tags=few_tags, rounds=chosen.rounds)
        if "flags" in chosen.only:
            yield processes.section("flags", "--tags", str(rows), told=told["many"])
        if "import" in chosen.only:
            yield importing.compare(rows, told["imported"], told["created"], folder)
        if "evaluation" in chosen.only:
            yield evaluation.compare(tests, told["few"])
        if "demonstration" in chosen.only:
            yield processes.section("demonstration", told=told["demonstration"])
        if "start" in chosen.only:
            yield starting.measure(told["few"], min(chosen.rounds, 5))


def _built(told: Mapping[str, str], tags: int, tests: int, share: float) -> Table:
    options = ("--tags", str(tags), "--tests", str(tests), "--share", str(share))
    return processes.section("building", *options, told=told)


if __name__ == "__main__":
    sys.exit(main())
