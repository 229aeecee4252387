"""The site as it is started, and one person at one browser who keeps his connection open."""

from __future__ import annotations

import http.client
import re
import socket
import subprocess
import sys
import time
from collections.abc import Iterator, Mapping
from contextlib import contextmanager
from dataclasses import dataclass
from html import unescape
from typing import Final
from urllib.parse import urlencode

from tests.benchmarks import processes

#: Seconds within which the site answers after its start.
PATIENCE: Final = 120
TOKEN: Final = re.compile(r'name="csrfmiddlewaretoken" value="([^"]+)"')
LATER: Final = re.compile(r'href="([^"]+)"[^>]*rel="next"|rel="next"[^>]*href="([^"]+)"')


@dataclass(slots=True)
class Answer:
    """A page and how long it took from sending the request to having read the whole answer [s]."""

    status: int
    text: str
    seconds: float

    @property
    def rows(self) -> int:
        """Rows of the list on the page."""
        return self.text.count('<td class="key">')

    @property
    def later(self) -> str:
        """Query part of the address of the next page of the list; empty on the last."""
        found = LATER.search(self.text)
        return unescape(found[1] or found[2]) if found else ""


class Browser:
    """One connection that stays open, and the cookies of one person."""

    def __init__(self, port: int) -> None:
        self._connection = http.client.HTTPConnection("127.0.0.1", port, timeout=PATIENCE)
        self._cookies: dict[str, str] = {}

    def get(self, address: str) -> Answer:
        """Ask for a page, without waiting for anything that it refers to."""
        return self._ask("GET", address, {})

    def sign_in(self, username: str, password: str) -> None:
        """Sign in by the page that people use.

        Raises
        ------
        RuntimeError
            The site did not let the person in.
        """
        token = TOKEN.search(self.get("/sign-in/").text)
        given = {"username": username, "password": password, "csrfmiddlewaretoken": token[1] if token else ""}
        if self._ask("POST", "/sign-in/", given).status != 302:
            raise RuntimeError(f"{username} could not sign in")

    def _ask(self, method: str, address: str, given: Mapping[str, str]) -> Answer:
        headers = {"Cookie": "; ".join(f"{name}={value}" for name, value in self._cookies.items())}
        body = urlencode(given) if given else None
        if body:
            headers["Content-Type"] = "application/x-www-form-urlencoded"
        try:
            response, content, spent = self._exchange(method, address, body, headers)
        except http.client.RemoteDisconnected:
            # The site hangs up on who has been silent for long, as this browser is while the other site is asked.
            self._connection.close()
            response, content, spent = self._exchange(method, address, body, headers)
        for cookie in response.headers.get_all("Set-Cookie") or ():
            name, _, value = cookie.partition(";")[0].partition("=")
            self._cookies[name] = value
        return Answer(response.status, content.decode(), spent)

    def _exchange(
        self, method: str, address: str, body: str | None, headers: dict[str, str]
    ) -> tuple[http.client.HTTPResponse, bytes, float]:
        start = time.perf_counter()
        self._connection.request(method, address, body, headers)
        response = self._connection.getresponse()
        content = response.read()
        return response, content, time.perf_counter() - start

    def close(self) -> None:
        self._connection.close()


@contextmanager
def started(told: Mapping[str, str]) -> Iterator[tuple[int, int]]:
    """Run `manage.py start` on a free port, with one process that serves pages; gives the port and its process."""
    with socket.socket() as probe:
        probe.bind(("127.0.0.1", 0))
        port = int(probe.getsockname()[1])
    command = [sys.executable, "manage.py", "start", "--empty", "--port", str(port)]
    server = subprocess.Popen(
        command, cwd=processes.TOP, env={**told, "FOUNDLEFT_WORKERS": "1"}, stdout=subprocess.DEVNULL
    )
    try:
        _wait(server, port)
        yield port, server.pid
    finally:
        server.terminate()
        try:
            server.wait(20)
        except subprocess.TimeoutExpired:
            server.kill()
            server.wait()


def _wait(server: subprocess.Popen[bytes], port: int) -> None:
    deadline = time.monotonic() + PATIENCE
    while server.poll() is None and time.monotonic() < deadline:
        try:
            with socket.create_connection(("127.0.0.1", port), timeout=1):
                return
        except OSError:
            time.sleep(0.1)
    raise processes.FailedError("the site did not start")
