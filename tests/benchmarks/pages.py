"""Times the lists against a bare page, with many tags and with few, asked for in turn by one browser."""

from __future__ import annotations

import random
from collections.abc import Mapping, Sequence
from statistics import median
from typing import Final

from tests.benchmarks import processes
from tests.benchmarks.addresses import DUE, OTHERS, REGISTER, Listed
from tests.benchmarks.client import Answer, Browser, started
from tests.benchmarks.report import Aim, Table, megabytes, milliseconds, times

BARE: Final = "/bare/"
PAGE: Final = 50
#: So many pages of lists lie between two requests for the bare page.
BETWEEN: Final = 3
#: A deep page is so many pages down the list, or halfway down a shorter one.
DEEP: Final = 200
AGAINST_BARE, AGAINST_FEW = 4.0, 1.3


def measure(many: Mapping[str, str], few: Mapping[str, str], *, tags: int, few_tags: int, rounds: int) -> list[Table]:
    """Serve both databases at once and time every address on both.

    Parameters
    ----------
    many, few : mapping
        Environments of the two sites.
    tags, few_tags : int
        How many tags these hold.
    rounds : int
        How often each address is asked for.
    """
    with started(many) as (many_port, many_pid), started(few) as (few_port, few_pid):
        browsers = Browser(many_port), Browser(few_port)
        for browser in browsers:
            browser.sign_in("engineer", "well-kept secret 7")
        sites = [
            _Site(browser, min(DEEP, held // (2 * PAGE)))
            for browser, held in zip(browsers, (tags, few_tags), strict=True)
        ]
        for _ in range(rounds):
            _round(sites)
        tables = [
            _table(title, listed, sites, tags, few_tags, rounds)
            for title, listed in (("Register list", REGISTER), ("Due list", DUE), ("Other lists", OTHERS))
        ]
        tables[-1].remarks.append(
            f"Peak memory of the largest process that serves: {megabytes(_largest(many_pid))} with {tags:,} tags, "
            f"{megabytes(_largest(few_pid))} with {few_tags:,}."
        )
        for browser in browsers:
            browser.close()
    return tables


class _Site:
    """One server with the addresses that are asked of it, and the times that it took."""

    def __init__(self, browser: Browser, deep: int) -> None:
        self.browser = browser
        self.addresses = {listed: self._found(listed, deep) for listed in (*REGISTER, *DUE, *OTHERS)}
        self.rows = {listed: self._get(address).rows for listed, address in self.addresses.items()}
        self.bare: list[float] = []
        self.times: dict[Listed, list[float]] = {listed: [] for listed in self.addresses}
        self._get(BARE)

    def _found(self, listed: Listed, deep: int) -> str:
        """The address itself, or that of a deep page, walked to page by page."""
        address = listed.address
        for _ in range(deep if listed.deep else 0):
            later = self._get(address).later
            if not later:
                break
            address = listed.path + later
        return address

    def _get(self, address: str) -> Answer:
        answer = self.browser.get(address)
        if answer.status != 200:
            raise processes.FailedError(f"{address} answers {answer.status}")
        return answer

    def time_bare(self) -> None:
        self.bare.append(self._get(BARE).seconds)

    def time(self, listed: Listed) -> None:
        self.times[listed].append(self._get(self.addresses[listed]).seconds)


def _round(sites: Sequence[_Site]) -> None:
    """Ask both sites for every address once, one after the other, in random order; for the bare page in between."""
    steps = list(sites[0].addresses)
    random.shuffle(steps)
    for place, listed in enumerate(steps):
        in_turn = random.sample(sites, len(sites))
        if place % BETWEEN == 0:
            for site in in_turn:
                site.time_bare()
        for site in in_turn:
            site.time(listed)


def _table(
    title: str, listed: Sequence[Listed], sites: Sequence[_Site], tags: int, few_tags: int, rounds: int
) -> Table:
    many, few = sites
    bare = median(many.bare)
    table = Table(
        f"{title}: {tags:,} tags against a bare page ({milliseconds(bare)}) and against {few_tags:,} tags",
        ["address", "rows", "time", "× bare", f"rows of {few_tags:,}", "time", "× few"],
    )
    against_bare, against_few = [], []
    for page in listed:
        here, there = median(many.times[page]), median(few.times[page])
        alike = many.rows[page] == few.rows[page]
        # Both were asked within the same few milliseconds, so that what else the machine did falls out of their ratio.
        ratio = median(one / other for one, other in zip(many.times[page], few.times[page], strict=True))
        against_bare.append(here / bare)
        if alike:
            against_few.append(ratio)
        table.rows.append(
            [
                str(page),
                str(many.rows[page]),
                milliseconds(here),
                times(here / bare),
                str(few.rows[page]),
                milliseconds(there),
                times(ratio) if alike else f"({times(ratio)})",
            ]
        )
    table.remarks.append(
        f"Medians of {rounds} requests an address over one open connection to one process of `manage.py start`, in "
        "turn on both sites; medians of the ratios of two that followed one another, in brackets where the pages have "
        "different numbers of rows, which do not count."
    )
    if listed is OTHERS:
        return table
    table.aims = [
        Aim(f"{title}, slowest of {len(listed)} addresses, against a bare page", max(against_bare), AGAINST_BARE),
        Aim(f"{title}, median of the addresses, against a bare page", median(against_bare), AGAINST_BARE),
        Aim(
            f"{title}, worst of {len(against_few)} addresses, {tags:,} tags against {few_tags:,}",
            max(against_few),
            AGAINST_FEW,
        ),
    ]
    return table


def _largest(pid: int) -> int | None:
    found = [processes.peak_memory(child) for child in processes.children_of(pid)]
    return max((peak for peak in found if peak is not None), default=None)
