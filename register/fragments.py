"""Answers with a whole page, or with the part of it that htmx asked for; both come from one template file."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

from django.http import HttpRequest, HttpResponse
from django.shortcuts import render
from django.utils.cache import patch_vary_headers


def wants_part(request: HttpRequest) -> bool:
    """Whether htmx asks for a part; going back in the browser's history it wants the whole page."""
    htmx = getattr(request, "htmx", None)
    return htmx is not None and bool(htmx) and not htmx.history_restore_request


def answer(request: HttpRequest, template: str, part: str, context: Mapping[str, Any]) -> HttpResponse:
    """The page, or its part for htmx; caches are told that they differ."""
    name = f"{template}#{part}" if wants_part(request) else template
    response = render(request, name, dict(context))
    patch_vary_headers(response, ["HX-Request"])
    return response
