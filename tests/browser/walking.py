"""Walking a site: every kind of page that a person can reach by links, and what must hold on each."""

from __future__ import annotations

import re
from collections.abc import Callable, Iterable, Iterator
from typing import Any, Final

from axe_playwright_python.base import AXE_SCRIPT
from playwright.sync_api import Page

from tests.browser.hands import Hand

_NUMBER = re.compile(r"/\d+(?=/)")
_UUID = re.compile(r"/[0-9a-f]{8}-[0-9a-f-]{27}(?=/)")
#: Links that lead out of the page into a file, or back to the same page for another plant.
NOT_PAGES: Final = re.compile(r"/choose/|\.csv|\.xlsx|/static/|blank")
#: Rows of long tables beyond these repeat what was looked at, and cost axe a second a page.
ALIKE: Final = "tbody tr:nth-child(n+9)"
SERIOUS: Final = {"serious", "critical"}


def kind_of(path: str) -> str:
    """The address without the numbers of things: two tags are one kind of page."""
    return _NUMBER.sub("/N", _UUID.sub("/U", path.partition("#")[0].partition("?")[0]))


def walk(hand: Hand, starts: Iterable[str], wanted: Callable[[str], bool]) -> Iterator[str]:
    """Go to one page of every kind that links lead to, beginning with all of the starts; yields where one stands.

    Parameters
    ----------
    hand : Hand
        Who walks, signed in.
    starts : iterable of str
        Addresses that are looked at in any case.
    wanted : callable
        Whether a kind of page that was met for the first time is to be looked at.
    """
    seen: set[str] = set()
    waiting = list(starts)
    begun = set(waiting)
    while waiting:
        address = waiting.pop(0)
        kind = kind_of(address)
        if address not in begun and (kind in seen or not wanted(kind)):
            continue
        seen.add(kind)
        hand.goes_to(address)
        links = hand.page.locator("a[href^='/']").evaluate_all("links => links.map(link => link.getAttribute('href'))")
        waiting += [link for link in links if kind_of(link) not in seen and not NOT_PAGES.search(link)]
        yield address


def untidy(page: Page) -> list[str]:
    """What is wrong with the frame of a page: its heading, its title, anything wider than the screen."""
    wrong = []
    headings = page.locator("h1").count()
    if headings != 1:
        wrong.append(f"{headings} headings of the first order")
    title = page.title()
    if not re.fullmatch(r"\S.* · Foundleft", title):
        wrong.append(f"title “{title}”")
    return wrong + too_wide(page)


def too_wide(page: Page) -> list[str]:
    """Whether the page would scroll sideways, and by which element."""
    size = page.viewport_size
    assert size is not None
    beyond: list[str] = page.evaluate(
        """() => {
            const root = document.documentElement;
            if (root.scrollWidth <= root.clientWidth) return [];
            return [...document.querySelectorAll("main *, header *")]
                .filter((one) => one.getBoundingClientRect().right > root.clientWidth + 0.5)
                .slice(0, 3)
                .map((one) => `${one.tagName.toLowerCase()}.${one.className.baseVal ?? one.className}`);
        }"""
    )
    scrolls: bool = page.evaluate("document.documentElement.scrollWidth > document.documentElement.clientWidth")
    return [f"wider than {size['width']} px: {', '.join(beyond)}"] if scrolls else []


def barriers(hand: Hand, *, only_contrast: bool = False) -> list[str]:
    """What axe finds serious or critical, one line for each rule with the first elements it names."""
    page = hand.page
    if not page.evaluate("'axe' in window"):
        page.evaluate(AXE_SCRIPT)
    options: dict[str, Any] = {"resultTypes": ["violations"], "preload": False}
    if only_contrast:
        options["runOnly"] = ["color-contrast"]
    found: list[dict[str, Any]] = page.evaluate(
        """async ([options, alike]) => {
            const results = await axe.run({ exclude: [alike] }, options);
            return results.violations.map((rule) => ({
                id: rule.id,
                impact: rule.impact,
                places: rule.nodes.slice(0, 3).map((node) => node.target.join(" ")),
            }));
        }""",
        [options, ALIKE],
    )
    return [f"{one['id']} ({one['impact']}): {'; '.join(one['places'])}" for one in found if one["impact"] in SERIOUS]


def shown_in(page: Page, theme: str) -> None:
    """Redraw the page in a theme, as its menu does."""
    page.evaluate("theme => { document.documentElement.dataset.theme = theme; }", theme)
