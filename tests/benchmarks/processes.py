"""Processes of the benchmarks: each part runs in one of its own, so that its peak memory is its own."""

from __future__ import annotations

import os
import re
import shutil
import subprocess
import sys
from collections.abc import Iterator, Mapping, Sequence
from contextlib import contextmanager
from pathlib import Path
from typing import Final

from tests.benchmarks.report import Table

TOP: Final = Path(__file__).resolve().parents[2]
SETTINGS: Final = "tests.benchmarks.settings"


class FailedError(RuntimeError):
    """A process of the benchmarks ended with an error; its own words were printed before."""


def environment(data: Path, database: str = "") -> dict[str, str]:
    """What a process is told: the site's settings for one data folder and database, nothing from outside."""
    kept = {
        name: value
        for name, value in os.environ.items()
        if not name.startswith("FOUNDLEFT_")
        and name not in {"DATABASE_URL", "DJANGO_SETTINGS_MODULE", "PYTHONDONTWRITEBYTECODE"}
    }
    told = {"FOUNDLEFT_DATA": str(data), "DJANGO_SETTINGS_MODULE": SETTINGS, "PYTHONPATH": str(TOP)}
    return kept | told | ({"DATABASE_URL": database} if database else {})


def section(module: str, *options: str, told: Mapping[str, str]) -> Table:
    """Run a module of the benchmarks and read the table that it prints last."""
    lines = run("-m", f"tests.benchmarks.{module}", *options, told=told).splitlines()
    return Table.read(lines[-1])


def run(*command: str, told: Mapping[str, str]) -> str:
    """Run Python and give what it printed.

    Raises
    ------
    FailedError
        It ended with an error.
    """
    ended = subprocess.run(
        [sys.executable, *command], cwd=TOP, env=dict(told), stdout=subprocess.PIPE, text=True, check=False
    )
    if ended.returncode:
        raise FailedError(f"{' '.join(command)} ended with {ended.returncode}")
    return ended.stdout


def peak_memory(pid: int | str = "self") -> int | None:
    """The greatest resident memory of a process so far [bytes]; None where the machine does not tell."""
    try:
        status = Path(f"/proc/{pid}/status").read_text()
    except OSError:
        return _own_peak() if pid == "self" else None
    found = re.search(r"^VmHWM:\s+(\d+) kB", status, re.MULTILINE)
    return int(found[1]) * 1024 if found else None


def _own_peak() -> int | None:
    try:
        import resource
    except ImportError:
        return None
    most = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss
    return most if sys.platform == "darwin" else most * 1024


def children_of(pid: int) -> Iterator[int]:
    """Processes that a process started, and theirs; none where the machine does not tell."""
    try:
        listed = Path(f"/proc/{pid}/task/{pid}/children").read_text().split()
    except OSError:
        return
    for child in listed:
        yield int(child)
        yield from children_of(int(child))


@contextmanager
def sites(folder: Path, url: str, names: Sequence[str]) -> Iterator[dict[str, dict[str, str]]]:
    """What the processes of each named site are told; every site has an empty database of its own, gone afterwards.

    Parameters
    ----------
    folder : Path
        Where the data folders of the sites are made.
    url : str
        A PostgreSQL server, where databases are made beside the one named; SQLite files are used where it is empty.
    """
    if not url:
        pattern = environment(folder / "pattern")
        run("manage.py", "migrate", "--verbosity", "0", told=pattern)
        for name in names:
            shutil.copytree(folder / "pattern", folder / name)
        yield {name: environment(folder / name) for name in names}
        return
    from urllib.parse import urlsplit

    import psycopg
    from psycopg.sql import SQL, Identifier

    made = {name: f"foundleft_bench_{os.getpid()}_{name}" for name in ("pattern", *names)}
    told = {
        name: environment(folder / name, urlsplit(url)._replace(path=f"/{database}").geturl())
        for name, database in made.items()
    }
    with psycopg.connect(url, autocommit=True) as connection:
        try:
            for name, database in made.items():
                pattern_of = SQL("") if name == "pattern" else SQL("TEMPLATE {}").format(Identifier(made["pattern"]))
                connection.execute(SQL("CREATE DATABASE {} {}").format(Identifier(database), pattern_of))
                if name == "pattern":
                    run("manage.py", "migrate", "--verbosity", "0", told=told["pattern"])
            yield {name: told[name] for name in names}
        finally:
            for database in made.values():
                connection.execute(SQL("DROP DATABASE IF EXISTS {} WITH (FORCE)").format(Identifier(database)))


def load_average() -> str:
    """How busy the machine is with everything that runs on it."""
    try:
        one, five, fifteen = os.getloadavg()
    except (OSError, AttributeError):
        return "unknown"
    return f"{one:.2f} {five:.2f} {fifteen:.2f}"
