"""What every page shows around its content.

The entries are functions, so that a fragment that shows none of them costs no query; a full page costs the
same number of queries whatever it shows.
"""

from __future__ import annotations

import datetime
from collections.abc import Callable
from dataclasses import dataclass
from functools import cache
from typing import Any, Final, TypeVar
from urllib.parse import urlencode

from django.http import HttpRequest
from django.urls import reverse

from register import access
from register.models import Plant, User

T = TypeVar("T")
THEMES: Final = frozenset({"light", "dark", "outdoor"})


@dataclass(frozen=True, slots=True)
class Link:
    """A link in the masthead."""

    label: str
    url: str
    current: bool = False


@dataclass(frozen=True, slots=True)
class Section:
    """A part of the site: its list page, who sees it, and how the names of its other pages begin."""

    label: str
    url_name: str
    permission: str
    beginnings: tuple[str, ...] = ()

    def holds(self, url_name: str) -> bool:
        return url_name == self.url_name or any(
            url_name == start or url_name.startswith(f"{start}-") for start in self.beginnings
        )


SECTIONS: Final = (
    Section("Register", "register", "read", ("tag", "range", "flag", "import-register", "import-requirements")),
    Section("Due", "due-list", "read", ("requirement", "deferral")),
    Section("Sheets", "sheets", "read", ("sheet",)),
    Section("Tests", "tests", "read", ("test", "import-tests")),
    Section("Transmitters", "transmitters", "read", ("transmitter", "intervention")),
    Section("Types and heads", "types", "read", ("type", "head", "maker", "makers")),
    Section("Standards", "standards", "read", ("standard", "certificate")),
    Section("Point lists", "point-lists", "read", ("point-list",)),
    Section("Guidance", "guidance", "read", ("guidance",)),
    Section("Plants", "plants", "read", ("plant", "area")),
    Section("People", "people", "manage people", ("person",)),
    Section("Audit trail", "audit", "read", ("audit",)),
)


def page(request: HttpRequest) -> dict[str, Any]:
    """Names that `base.html` uses; for people who are not signed in only the theme."""
    theme = request.COOKIES.get("theme", "")
    common: dict[str, Any] = {"theme": theme if theme in THEMES else ""}
    person = getattr(request, "user", None)
    if not isinstance(person, User):
        return common
    return common | {
        "nav": _once(lambda: _sections(request, person)),
        "plants": _once(lambda: _plants(request, person)),
        "plant": _once(lambda: access.shown_plant(request)),
        "today": _once(lambda: _today(request)),
        "search_url": reverse("find"),
        "sign_out_url": reverse("sign-out"),
        "account_url": reverse("password"),
    }


def _once(make: Callable[[], T]) -> Callable[[], T]:
    return cache(make)


def _sections(request: HttpRequest, person: User) -> list[Link]:
    match = request.resolver_match
    here = (match.url_name if match else "") or ""
    shown = access.shown_plant(request) if len(access.readable_plants(person)) > 1 else None

    def address(section: Section) -> str:
        """In the plant of this page, where the person has a choice, whatever another window shows."""
        if shown is not None and access.may(person, section.permission, shown.pk):
            return access.address_in(shown, section.url_name)
        return reverse(section.url_name)

    return [
        Link(section.label, address(section), section.holds(here))
        for section in SECTIONS
        if access.may_anywhere(person, section.permission)
    ]


def _plants(request: HttpRequest, person: User) -> list[Link]:
    shown = access.shown_plant(request)
    match = request.resolver_match
    # A list stays where it is and shows the other plant; a single thing has no counterpart there.
    is_list = match is not None and not match.kwargs and request.method == "GET"

    def address(plant: Plant) -> str:
        back = f"{request.path}?{urlencode({'plant': plant.code})}" if is_list else reverse("home")
        return f"{reverse('plant-choose', args=[plant.code])}?{urlencode({'next': back})}"

    return [Link(plant.name, address(plant), plant == shown) for plant in access.readable_plants(person)]


def _today(request: HttpRequest) -> datetime.date:
    shown: Plant | None = access.shown_plant(request)
    return shown.today() if shown else datetime.datetime.now(datetime.UTC).date()
