"""Runs acts beside one another, to see how they wait; on PostgreSQL, where several write at a time."""

from __future__ import annotations

import threading
from collections.abc import Callable
from typing import Any

from django.db import connections


class AtTheSameTime:
    """Runs acts in threads of their own, and keeps what they raise."""

    def __init__(self) -> None:
        self.failures: list[BaseException] = []
        self.threads: list[threading.Thread] = []

    def do(self, act: Callable[[], Any], name: str) -> None:
        def run() -> None:
            try:
                act()
            except BaseException as error:
                self.failures.append(error)
            finally:
                connections.close_all()

        self.threads.append(threading.Thread(target=run, name=name))
        self.threads[-1].start()

    def end(self) -> None:
        for thread in self.threads:
            thread.join(30)
            assert not thread.is_alive()
