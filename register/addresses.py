"""What no database takes as text, wherever it comes from: a NUL, and half of a character (a lone surrogate)."""

from __future__ import annotations

import re
from collections.abc import Callable
from typing import Final

from django.core.exceptions import BadRequest
from django.http import HttpRequest, HttpResponse

_ODD: Final = re.compile("[\0\ud800-\udfff]")


def is_storable(text: str) -> bool:
    """Whether PostgreSQL and SQLite both take a text; SQLite alone would keep a NUL."""
    return _ODD.search(text) is None


def storable(text: str) -> str:
    """A text without what no database takes."""
    return _ODD.sub("", text)


class AddressMiddleware:
    """Refuses an address that holds such text, before any page looks something up with it."""

    def __init__(self, get_response: Callable[[HttpRequest], HttpResponse]) -> None:
        self.get_response = get_response

    def __call__(self, request: HttpRequest) -> HttpResponse:
        values = (value for name, given in request.GET.lists() for value in (name, *given))
        if not all(map(is_storable, (request.path, *values))):
            raise BadRequest("The address holds a sign that is no text.")
        return self.get_response(request)
