"""The addresses of the lists that are measured: orders, filters, words, all of these together; first pages and deep."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final
from urllib.parse import urlencode


@dataclass(frozen=True, slots=True)
class Listed:
    """A page of a list: its path and query; `deep` where a page far down the list is meant, not the first."""

    path: str
    query: tuple[tuple[str, str], ...]
    deep: bool = False

    @property
    def address(self) -> str:
        return f"{self.path}?{urlencode(self.query)}" if self.query else self.path

    def __str__(self) -> str:
        asked = ", ".join(f"{name} {value}" for name, value in self.query) or "all"
        return f"{self.path} {asked}{', a deep page' if self.deep else ''}"


def _each(path: str, *queries: dict[str, str]) -> list[Listed]:
    return [Listed(path, tuple(query.items())) for query in queries]


def _deep(path: str, **query: str) -> Listed:
    return Listed(path, tuple(query.items()), deep=True)


REGISTER: Final = [
    *_each(
        "/register/",
        {},
        {"sort": "-tag"},
        {"sort": "area"},
        {"sort": "flag"},
        {"sort": "error"},
        {"sort": "due"},
        {"area": "300"},
        {"service": "in"},
        {"service": "out"},
        {"flag": "violation"},
        {"flag": "caution"},
        {"flag": "cannot check"},
        {"flag": "accepted"},
        {"flag": "none"},
        {"state": "overdue"},
        {"state": "never tested"},
        {"state": "deferred"},
        {"state": "not due"},
        {"verdict": "fail"},
        {"verdict": "pass"},
        {"verdict": "none"},
        {"text": "pump"},
        {"text": "p"},
        {"text": "PT-00"},
        {"text": "north cooling"},
        {"text": "PT north"},
        {"text": "PT FT"},
        {"text": "PT-001003"},
        {"text": "nothingofthekind"},
        {"area": "300", "state": "not due"},
        {"area": "300", "flag": "violation", "state": "overdue"},
        {"verdict": "fail", "state": "not due", "sort": "-due"},
        {"verdict": "pass", "state": "never tested"},
        {"text": "pump", "flag": "violation", "sort": "error"},
        {"text": "steam compressor", "area": "500", "state": "not due"},
        {"service": "unfitted", "flag": "caution"},
    ),
    _deep("/register/"),
    _deep("/register/", state="not due", sort="error"),
]
DUE: Final = [
    *_each(
        "/due/",
        {},
        {"sort": "-due"},
        {"sort": "tag"},
        {"state": "overdue"},
        {"state": "in grace"},
        {"state": "due"},
        {"state": "never tested"},
        {"state": "deferred"},
        {"state": "not due"},
        {"state": "not in service"},
        {"state": "overdue", "sort": "error"},
        {"state": "overdue", "area": "300"},
        {"state": "in grace", "verdict": "fail"},
        {"criticality": "general"},
        {"criticality": "safety", "state": "due"},
        {"text": "pump", "state": "overdue"},
        {"text": "FT"},
    ),
    _deep("/due/"),
]
#: Lists for which nobody set an aim.
OTHERS: Final = [
    *_each("/tests/", {}, {"verdict": "fail"}),
    *_each("/transmitters/", {}, {"text": "Q00"}),
    *_each("/audit/", {}),
]
