"""What all tests share: the cast, clients that are signed in, and a flush that gets past the frozen tables."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from typing import Any

import pytest
from django.db import connections
from django.test import Client, TransactionTestCase
from hypothesis import HealthCheck, settings

from register import guards
from register.models import User
from tests import cast as people

# A busy machine makes an example slow, not wrong.
settings.register_profile("any machine", deadline=None, suppress_health_check=[HealthCheck.too_slow])
settings.load_profile("any machine")


def pytest_collection_modifyitems(config: pytest.Config, items: list[pytest.Item]) -> None:
    """Tests of what only PostgreSQL does run there only."""
    if connections["default"].vendor == "postgresql":
        return
    elsewhere = [item for item in items if item.get_closest_marker("postgresql")]
    if elsewhere:
        config.hook.pytest_deselected(items=elsewhere)
        items[:] = [item for item in items if item not in elsewhere]


@pytest.fixture(scope="session", autouse=True)
def flush_despite_guards() -> Iterator[None]:
    """Transactional tests end with a flush, which the triggers refuse: take them off for just that long."""
    original = TransactionTestCase._fixture_teardown  # type: ignore[attr-defined]

    def teardown(self: Any) -> None:
        for name in self._databases_names(include_mirrors=False):
            guards.remove(connections[name])
        try:
            original(self)
        finally:
            for name in self._databases_names(include_mirrors=False):
                guards.install(connections[name])

    TransactionTestCase._fixture_teardown = teardown  # type: ignore[attr-defined]
    yield
    TransactionTestCase._fixture_teardown = original  # type: ignore[attr-defined]


@pytest.fixture
def cast(db: None) -> people.Cast:
    """One person per role in “North works”, and a stranger who plans at “South works”."""
    return people.make_cast()


@pytest.fixture
def client_as() -> Callable[[User], Client]:
    """Give a test client in which a person is signed in."""

    def signed_in(person: User) -> Client:
        client = Client()
        client.force_login(person, backend="django.contrib.auth.backends.ModelBackend")
        return client

    return signed_in
