"""From any page to a tag or a transmitter, by typing its number."""

from __future__ import annotations

from django.http import HttpRequest, HttpResponse
from django.shortcuts import redirect, render

from register import access
from register.models import Tag
from register.queries import Found, find


def finding(request: HttpRequest) -> HttpResponse:
    text = " ".join(request.GET.get("q", "").replace("\0", "").split())[:60]
    plants = access.readable_ids(request)
    found = find(plants, text) if text else Found(exact=False, tags=[], transmitters=[])
    if only := found.only:
        return redirect("tag" if isinstance(only, Tag) else "transmitter", only.pk)
    return render(request, "register/find.html", {"q": text, "found": found, "several": len(plants) > 1})
