"""Times `manage.py check`: what every command waits for before it begins."""

from __future__ import annotations

import os
import subprocess
import sys
import time
from collections.abc import Mapping
from statistics import median
from typing import Final

from tests.benchmarks import processes
from tests.benchmarks.report import Table, megabytes, seconds

COMMANDS: Final = {"Python and Django alone": ("-c", "import django"), "manage.py check": ("manage.py", "check")}


def measure(told: Mapping[str, str], rounds: int) -> Table:
    """Start each command so many times in turn, and once before, so that byte code is there."""
    table = Table("Start", ["what", "time", "peak memory"])
    site = {**told, "DJANGO_SETTINGS_MODULE": "register.settings"}
    spent: dict[str, list[float]] = {name: [] for name in COMMANDS}
    memory: dict[str, int | None] = {}
    for place in range(rounds + 1):
        for name, command in COMMANDS.items():
            took, memory[name] = _run(command, site)
            if place:
                spent[name].append(took)
    table.rows = [[name, seconds(median(spent[name])), megabytes(memory[name])] for name in COMMANDS]
    table.remarks.append(f"Medians of {rounds} starts.")
    return table


def _run(command: tuple[str, ...], told: Mapping[str, str]) -> tuple[float, int | None]:
    start = time.perf_counter()
    process = subprocess.Popen([sys.executable, *command], cwd=processes.TOP, env=dict(told), stdout=subprocess.DEVNULL)
    if not hasattr(os, "wait4"):
        code, memory = process.wait(), None
    else:
        _, status, used = os.wait4(process.pid, 0)
        code = process.returncode = os.waitstatus_to_exitcode(status)
        memory = used.ru_maxrss * (1 if sys.platform == "darwin" else 1024)
    spent = time.perf_counter() - start
    if code:
        raise processes.FailedError(f"{' '.join(command)} ended with {code}")
    return spent, memory


if __name__ == "__main__":
    raise SystemExit("Run python -m tests.benchmarks --only start")
