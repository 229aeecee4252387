"""A database in a file: several requests at once lock a shared one in memory against each other."""

from __future__ import annotations

import pytest
from django.db import connections


@pytest.fixture(scope="session")
def django_db_modify_db_settings(tmp_path_factory: pytest.TempPathFactory) -> None:
    if connections["default"].vendor == "sqlite":
        path = tmp_path_factory.mktemp("browser") / "site.sqlite3"
        connections["default"].settings_dict["TEST"]["NAME"] = str(path)
