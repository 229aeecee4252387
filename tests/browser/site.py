"""The site as people start it: `manage.py start` in a process of its own, with data of its own."""

from __future__ import annotations

import os
import re
import socket
import subprocess
import sys
import time
from collections.abc import Iterator, Mapping
from contextlib import contextmanager
from dataclasses import dataclass
from pathlib import Path
from typing import Final

TOP: Final = Path(__file__).resolve().parents[2]
#: Loading the demonstration takes half a minute on two idle processors.
PATIENCE_S: Final = 420
#: What the tests of this process set for themselves is no business of the site.
NOT_HANDED_ON: Final = {"DJANGO_SETTINGS_MODULE", "DATABASE_URL", "DJANGO_ALLOW_ASYNC_UNSAFE"}


@dataclass(frozen=True, slots=True)
class Site:
    """A site that answers: its address without the last slash, and what it printed when it was ready."""

    url: str
    words: str
    environ: Mapping[str, str]

    @property
    def code(self) -> str:
        """The one-time code with which the first administrator is made."""
        found = re.search(r"one-time code: (\S+)", self.words)
        assert found, self.words
        return found[1]

    def manage(self, *arguments: str) -> str:
        """Run another command of `manage.py` on the same data; what it printed."""
        done = subprocess.run(
            [sys.executable, "manage.py", *arguments],
            cwd=TOP,
            env=dict(self.environ),
            capture_output=True,
            text=True,
            check=False,
        )
        assert done.returncode == 0, done.stdout + done.stderr
        return done.stdout


@contextmanager
def started(data: Path, *arguments: str) -> Iterator[Site]:
    """Start the site on a free port of this machine, and stop it in the end.

    Parameters
    ----------
    data : Path
        Folder for its database, key and files.
    arguments : str
        Further arguments of `manage.py start`, such as "--empty".
    """
    port = _free_port()
    kept = {name: value for name, value in os.environ.items() if name not in NOT_HANDED_ON}
    environ = {name: value for name, value in kept.items() if not name.startswith("FOUNDLEFT_")}
    environ |= {"FOUNDLEFT_DATA": str(data), "PYTHONUNBUFFERED": "1"}
    log = data.with_suffix(".log")
    with log.open("w") as written:
        process = subprocess.Popen(
            [sys.executable, "manage.py", "start", "--port", str(port), *arguments],
            cwd=TOP,
            env=environ,
            stdout=written,
            stderr=subprocess.STDOUT,
        )
    try:
        url = f"http://127.0.0.1:{port}"
        yield Site(url, _said(process, log, url), environ)
    finally:
        process.terminate()
        try:
            process.wait(30)
        except subprocess.TimeoutExpired:
            process.kill()
            process.wait()


def _said(process: subprocess.Popen[bytes], log: Path, url: str) -> str:
    """What the site printed, once it answers."""
    until = time.monotonic() + PATIENCE_S
    while time.monotonic() < until:
        words = log.read_text()
        if f"Foundleft is at {url}/" in words:
            # The words are printed at one go, but the file may be read in the middle of it.
            time.sleep(0.2)
            return log.read_text()
        if process.poll() is not None:
            raise AssertionError(f"manage.py start ended with {process.returncode}:\n{words}")
        time.sleep(0.1)
    raise AssertionError(f"manage.py start was not ready after {PATIENCE_S} s:\n{log.read_text()}")


def _free_port() -> int:
    with socket.socket() as probe:
        probe.bind(("127.0.0.1", 0))
        port: int = probe.getsockname()[1]
        return port
