"""Chromium, the sites it looks at, and people with screens; a picture of each screen where a test fails.

FOUNDLEFT_SHOTS names a folder for those pictures, FOUNDLEFT_IMAGES one for the pictures of README.
"""

from __future__ import annotations

import importlib.util
import os
import re
from collections.abc import Iterator
from pathlib import Path
from typing import TYPE_CHECKING, Any, Final

import pytest
from django.db import connections

from tests.browser.site import Site, started

if TYPE_CHECKING:
    from playwright.sync_api import Browser

    from tests.browser.hands import Crew

CHROMIUM: Final = Path("/usr/bin/chromium")
SWITCHES: Final = [
    "--no-sandbox",
    "--disable-gpu",
    "--disable-quic",
    "--no-first-run",
    "--disable-background-networking",
    "--disable-component-update",
    "--disable-sync",
]
FAILED: Final = pytest.StashKey[bool]()


def pytest_ignore_collect(collection_path: Path, config: pytest.Config) -> bool | None:
    """README's test command installs no browser packages and leaves these tests out: it need not read them either."""
    if not collection_path.name.startswith("test_") or importlib.util.find_spec("playwright"):
        return None
    if "not browser" in config.option.markexpr:
        return True
    raise pytest.UsageError(
        "The browser tests need the packages of the extra “browser” (pip install '.[test,browser]'); "
        'leave them out with -m "not browser".'
    )


@pytest.hookimpl(wrapper=True)
def pytest_runtest_makereport(item: pytest.Item) -> Iterator[None]:
    report: Any = yield
    if report.failed:
        item.stash[FAILED] = True
    return report  # type: ignore[return-value]


@pytest.fixture(scope="session")
def django_db_modify_db_settings(tmp_path_factory: pytest.TempPathFactory) -> None:
    """A database in a file: several requests at once lock a shared one in memory against each other."""
    if connections["default"].vendor == "sqlite":
        path = tmp_path_factory.mktemp("browser") / "site.sqlite3"
        connections["default"].settings_dict["TEST"]["NAME"] = str(path)


@pytest.fixture(scope="module")
def chromium() -> Iterator[Browser]:
    from playwright.sync_api import expect, sync_playwright

    if not CHROMIUM.exists():
        pytest.fail(f"There is no {CHROMIUM}: install Debian's package “chromium”.", pytrace=False)
    # A busy machine makes a page slow, not wrong.
    expect.set_options(timeout=20_000)
    with pytest.MonkeyPatch.context() as patch, sync_playwright() as playwright:
        # The loop that Playwright runs in this thread would keep Django from its database.
        patch.setenv("DJANGO_ALLOW_ASYNC_UNSAFE", "1")
        browser = playwright.chromium.launch(executable_path=CHROMIUM, args=SWITCHES)
        yield browser
        browser.close()


@pytest.fixture(scope="session")
def demonstration(tmp_path_factory: pytest.TempPathFactory) -> Iterator[Site]:
    """The site with its demonstration plants; loading them takes so long that all modules look at the same."""
    with started(tmp_path_factory.mktemp("demonstration") / "data") as site:
        yield site


@pytest.fixture(scope="module")
def empty_site(tmp_path_factory: pytest.TempPathFactory) -> Iterator[Site]:
    """The site as a plant begins with it."""
    with started(tmp_path_factory.mktemp("empty") / "data", "--empty") as site:
        yield site


@pytest.fixture
def crew(request: pytest.FixtureRequest, chromium: Browser) -> Iterator[Crew]:
    """Screens for people of the site that the test module names in SITE."""
    from tests.browser.hands import Crew

    people = Crew(chromium, request.getfixturevalue(request.module.SITE))
    yield people
    folder = os.environ.get("FOUNDLEFT_SHOTS")
    if folder and request.node.stash.get(FAILED, False):
        people.save_what_is_seen(Path(folder), re.sub(r"\W+", "-", request.node.name).strip("-"))
    people.close()
