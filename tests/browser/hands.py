"""A person with a screen: signed in, watched for everything that a page does wrong behind his back."""

from __future__ import annotations

import re
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any, Final

from playwright.sync_api import Browser, BrowserContext, ConsoleMessage, Page, Request, Response

from tests.browser.site import Site

#: Viewports of the look: a desk, a tablet lying and upright. Touch comes with the tablets.
SIZES: Final = {"desk": (1440, 900), "lying": (1280, 800), "upright": (768, 1024)}
THEMES: Final = ("light", "dark", "outdoor")
#: Chromium says so when a page that is left still waits for something: nothing went wrong.
ABORTED: Final = "net::ERR_ABORTED"


@dataclass
class Hand:
    """One person at one screen."""

    name: str
    site: Site
    page: Page
    problems: list[str] = field(default_factory=list)

    def __post_init__(self) -> None:
        self.watch(self.page)

    @property
    def context(self) -> BrowserContext:
        return self.page.context

    def goes_to(self, path: str) -> Page:
        self.page.goto(f"{self.site.url}{path}")
        return self.page

    def signs_in(self, password: str) -> None:
        self.goes_to("/sign-in/")
        self.page.get_by_label("Sign-in name").fill(self.name)
        self.page.get_by_label("Password").fill(password)
        self.page.get_by_role("button", name="Sign in").click()
        self.page.wait_for_url(lambda url: "/sign-in/" not in url)

    def chooses_theme(self, theme: str) -> None:
        """As the menu of the masthead does, but for the pages to come."""
        self.context.add_cookies([{"name": "theme", "value": theme, "url": self.site.url}])

    def watch(self, page: Page) -> None:
        """Collect what goes wrong in a page: the console, the policy of the page, requests that fail."""
        page.on("console", self._console)
        page.on("pageerror", lambda error: self.problems.append(f"script: {error}"))
        page.on("requestfailed", self._failed)
        page.on("response", self._answered)

    @contextmanager
    def expecting(self, *statuses: int) -> Iterator[None]:
        """Answers with these statuses are what the test is about; anything else is still a problem."""
        before = list(self.problems)
        yield
        fresh = self.problems[len(before) :]
        allowed = re.compile("|".join(rf"^{status} |status of {status} " for status in statuses))
        self.problems[:] = before + [problem for problem in fresh if not allowed.search(problem)]

    def _console(self, message: ConsoleMessage) -> None:
        # Axe, which comes from no address, sets styles that the policy of the page refuses.
        where = message.location["url"]
        if message.type in {"error", "warning"} and where:
            self.problems.append(f"console of {where}: {message.text}")

    def _failed(self, request: Request) -> None:
        if request.failure != ABORTED:
            self.problems.append(f"no answer: {request.method} {request.url}: {request.failure}")

    def _answered(self, response: Response) -> None:
        if response.status >= 400:
            self.problems.append(f"{response.status} {response.request.method} {response.url}")


class Crew:
    """Opens screens for people and closes them in the end."""

    def __init__(self, browser: Browser, site: Site) -> None:
        self.browser = browser
        self.site = site
        self.hands: list[Hand] = []

    def __call__(self, name: str, password: str = "", *, size: str = "desk", theme: str = "") -> Hand:
        """A person at a screen of a size of `SIZES`; signed in if a password is given."""
        width, height = SIZES[size]
        settings: dict[str, Any] = {"viewport": {"width": width, "height": height}, "has_touch": size != "desk"}
        context = self.browser.new_context(locale="en-GB", **settings)
        hand = Hand(name, self.site, context.new_page())
        self.hands.append(hand)
        if theme:
            hand.chooses_theme(theme)
        if password:
            hand.signs_in(password)
        return hand

    def save_what_is_seen(self, folder: Path, test: str) -> None:
        """One picture for each screen, named for the test and the person."""
        folder.mkdir(parents=True, exist_ok=True)
        for place, hand in enumerate(self.hands, start=1):
            for number, page in enumerate(hand.context.pages, start=1):
                page.screenshot(path=folder / f"{test}-{place}-{hand.name}-{number}.png", full_page=True)

    def close(self) -> None:
        for hand in self.hands:
            hand.context.close()
        self.hands.clear()
