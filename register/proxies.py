"""Where a request came from, when it passed through reverse proxies.

Headers that say so are believed from the addresses in `TRUSTED_PROXIES` only: anyone else could write
whatever he likes into the audit trail with them.
"""

from __future__ import annotations

import ipaddress
from collections.abc import Callable

from django.conf import settings
from django.http import HttpRequest, HttpResponse
from django.http.request import split_domain_port

from register.serving import is_loopback

FORWARDED = ("HTTP_X_FORWARDED_FOR", "HTTP_X_FORWARDED_PROTO", "HTTP_X_FORWARDED_HOST", "HTTP_FORWARDED")
#: What proxies say of themselves besides.
PASSED_ON = (*FORWARDED, "HTTP_VIA", "HTTP_X_REAL_IP")


class ProxyMiddleware:
    """Puts the person's own address into REMOTE_ADDR; drops forwarding headers of strangers."""

    def __init__(self, get_response: Callable[[HttpRequest], HttpResponse]) -> None:
        self.get_response = get_response

    def __call__(self, request: HttpRequest) -> HttpResponse:
        request.was_passed_on = any(name in request.META for name in PASSED_ON)  # type: ignore[attr-defined]
        if trusted(request.META.get("REMOTE_ADDR", "")):
            request.META["REMOTE_ADDR"] = origin(request)
        else:
            for name in FORWARDED:
                request.META.pop(name, None)
        return self.get_response(request)


def trusted(address: str) -> bool:
    """Whether an address belongs to a proxy that is believed."""
    try:
        found = ipaddress.ip_address(address)
    except ValueError:
        return False
    return any(found in network for network in settings.TRUSTED_PROXIES)


def origin(request: HttpRequest) -> str:
    """The nearest address, counted from here, that is no proxy of ours."""
    address: str = request.META.get("REMOTE_ADDR", "")
    for hop in reversed(request.META.get("HTTP_X_FORWARDED_FOR", "").split(",")):
        hop = hop.strip()
        try:
            ipaddress.ip_address(hop)
        except ValueError:
            break
        address = hop
        if not trusted(hop):
            break
    return address


def is_from_this_machine(request: HttpRequest) -> bool:
    """Whether somebody asks at the machine that serves: from a loopback address, by a loopback name, through no proxy.

    The address alone says little: every request through a proxy on the machine comes from there.
    """
    name, _port = split_domain_port(request.get_host())
    return (
        is_loopback(request.META.get("REMOTE_ADDR", ""))
        and is_loopback(name.strip("[]"))
        and not getattr(request, "was_passed_on", False)
    )
