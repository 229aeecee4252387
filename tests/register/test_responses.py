"""What every answer carries: content policy, cookies, the address a request came from, errors in words."""

from __future__ import annotations

import ipaddress
import json
import re
from collections.abc import Callable
from pathlib import Path
from typing import Any

import pytest
from django.conf import settings as site
from django.test import Client

from register.models import AuditEntry, User
from register.proxies import origin, trusted
from tests.cast import PASSWORD, Cast

SignIn = Callable[[User], Client]


def test_only_the_site_itself_may_give_scripts_styles_and_frames(cast: Cast, client_as: SignIn) -> None:
    policy = client_as(cast.planner).get("/password/")["Content-Security-Policy"]
    rules = dict(part.strip().split(" ", 1) for part in policy.split(";"))
    assert rules["default-src"] == "'self'"
    assert rules["object-src"] == "'none'"
    assert rules["frame-ancestors"] == "'none'"
    assert rules["base-uri"] == rules["form-action"] == "'self'"
    assert "unsafe" not in policy
    assert not {"script-src", "style-src", "connect-src", "img-src"} & set(rules), "these fall back to 'self'"


def test_no_template_holds_a_script_or_a_style_of_its_own() -> None:
    """The policy would stop them: src and href only, no style, no on… attribute."""
    inline = re.compile(r"<script(?![^>]*\bsrc=)[^>]*>|<style\b|\sstyle\s*=|\son[a-z]+\s*=\s*[\"']|javascript:", re.I)
    templates = list(Path(site.BASE_DIR / "templates").rglob("*.html"))
    assert len(templates) > 50
    assert [f"{path.name}: {hit[0]}" for path in templates for hit in inline.finditer(path.read_text())] == []


@pytest.mark.parametrize("page", ["/sign-in/", "/password/"])
def test_answers_are_not_sniffed_framed_or_told_elsewhere(cast: Cast, client_as: SignIn, page: str) -> None:
    answer = client_as(cast.planner).get(page) if page != "/sign-in/" else Client().get(page)
    assert answer["X-Content-Type-Options"] == "nosniff"
    assert answer["X-Frame-Options"] == "DENY"
    assert answer["Referrer-Policy"] == "same-origin"


def test_static_files_are_served_without_a_session(cast: Cast) -> None:
    answer = Client().get("/static/css/app.css")
    assert answer.status_code == 200
    assert b"@layer" in b"".join(answer.streaming_content)  # type: ignore[attr-defined]
    assert not answer.cookies
    assert "no-store" not in answer.get("Cache-Control", "")


@pytest.mark.parametrize("page", ["/", "/audit/", "/people/", "/password/", "/no-such-page/", "/plants/south/edit/"])
def test_what_a_signed_in_person_sees_is_kept_by_no_browser(cast: Cast, client_as: SignIn, page: str) -> None:
    """Whoever takes the tablet next must not get it by going back."""
    client = client_as(cast.administrator)
    assert "no-store" in client.get(page)["Cache-Control"]
    part = client.get(page, headers={"HX-Request": "true"})
    assert "no-store" in part["Cache-Control"]


def test_htmx_keeps_no_pages_in_the_browser(cast: Cast, client_as: SignIn) -> None:
    page = client_as(cast.planner).get("/audit/").content.decode()
    settings = json.loads(page.split('name="htmx-config" content=\'')[1].split("'")[0])
    assert settings["historyCacheSize"] == 0


def test_going_back_brings_the_whole_page_where_htmx_asks_for_it(cast: Cast, client_as: SignIn) -> None:
    """Both with and without the header that asks for a part, as the browser's history mixes the two."""
    client = client_as(cast.planner)
    for asked in ({"HX-History-Restore-Request": "true"}, {"HX-Request": "true", "HX-History-Restore-Request": "true"}):
        answer = client.get("/audit/", headers=asked)
        assert "<html" in answer.content.decode()
        assert "HX-Request" in answer["Vary"]
    assert "<html" not in client.get("/audit/", headers={"HX-Request": "true"}).content.decode()


def test_a_view_without_a_permission_is_refused_even_to_an_administrator(
    cast: Cast, client_as: SignIn, settings: Any
) -> None:
    settings.ROOT_URLCONF = "tests.register.urls_without_permission"
    assert client_as(cast.administrator).get("/open/").status_code == 403
    assert Client().get("/open/").status_code == 403


def test_an_address_that_is_none_is_said_in_words(cast: Cast, client_as: SignIn) -> None:
    answer = client_as(cast.planner).get("/no-such-page/")
    assert answer.status_code == 404
    assert b"<h1>" in answer.content


def sign_in_through(settings: Any, proxies: list[str], **headers: str) -> str:
    settings.TRUSTED_PROXIES = [ipaddress.ip_network(proxy) for proxy in proxies]
    Client(**headers).post("/sign-in/", {"username": "planner", "password": PASSWORD})  # type: ignore[arg-type]
    return AuditEntry.objects.filter(kind="signed in").order_by("-id")[0].remote_address


@pytest.mark.parametrize(
    ("proxies", "direct", "forwarded", "noted"),
    [
        ([], "192.0.2.7", "198.51.100.1", "192.0.2.7"),
        (["10.0.0.1"], "192.0.2.7", "198.51.100.1", "192.0.2.7"),
        (["10.0.0.1"], "10.0.0.1", "198.51.100.1", "198.51.100.1"),
        (["10.0.0.0/8"], "10.0.0.1", "203.0.113.5, 198.51.100.1, 10.0.0.2", "198.51.100.1"),
        (["10.0.0.1"], "10.0.0.1", "spoofed, 198.51.100.1", "198.51.100.1"),
        (["10.0.0.1"], "10.0.0.1", "spoofed", "10.0.0.1"),
        (["10.0.0.1"], "10.0.0.1", "", "10.0.0.1"),
        (["::1"], "::1", "2001:db8::7", "2001:db8::7"),
    ],
)
def test_the_trail_names_the_nearest_address_that_no_trusted_proxy_wrote(
    cast: Cast, settings: Any, proxies: list[str], direct: str, forwarded: str, noted: str
) -> None:
    assert sign_in_through(settings, proxies, REMOTE_ADDR=direct, HTTP_X_FORWARDED_FOR=forwarded) == noted


def test_a_stranger_cannot_claim_to_have_come_by_https(cast: Cast, settings: Any) -> None:
    settings.SECURE_SSL_REDIRECT = True
    settings.SECURE_PROXY_SSL_HEADER = ("HTTP_X_FORWARDED_PROTO", "https")
    settings.TRUSTED_PROXIES = [ipaddress.ip_network("10.0.0.1")]
    claim = {"HTTP_X_FORWARDED_PROTO": "https"}
    assert Client(REMOTE_ADDR="192.0.2.7", **claim).get("/sign-in/").status_code == 301  # type: ignore[arg-type]
    assert Client(REMOTE_ADDR="10.0.0.1", **claim).get("/sign-in/").status_code == 200  # type: ignore[arg-type]


def test_addresses_that_are_none_are_never_trusted(settings: Any, rf: Any) -> None:
    settings.TRUSTED_PROXIES = [ipaddress.ip_network("0.0.0.0/0")]
    assert not trusted("")
    assert not trusted("unix:")
    assert origin(rf.get("/", REMOTE_ADDR="", HTTP_X_FORWARDED_FOR="")) == ""


def test_the_chosen_plant_is_kept_and_shown_to_those_only_who_may_see_it(cast: Cast, client_as: SignIn) -> None:
    client = client_as(cast.stranger)
    assert client.get("/plants/north/choose/").status_code == 404
    answer = client.get("/plants/south/choose/?next=/audit/")
    assert answer.url == "/audit/"
    assert (answer.cookies["plant"].value, answer.cookies["plant"]["httponly"]) == ("south", True)
    client.cookies["plant"] = "north"
    assert client.get("/audit/").context["plant"] == cast.other_plant


def test_the_theme_of_the_cookie_is_drawn_from_the_first_paint(cast: Cast, client_as: SignIn) -> None:
    client = client_as(cast.planner)
    client.cookies["theme"] = "outdoor"
    assert 'data-theme="outdoor"' in client.get("/password/").content.decode()
    client.cookies["theme"] = '"><script>'
    assert "data-theme" not in client.get("/password/").content.decode()[:200]


@pytest.mark.parametrize(
    "address",
    [
        "/people/?text=%00",
        "/transmitters/?text=a%00b",
        "/transmitters/?whereabouts=%00",
        "/types/?maker=%00",
        "/register/?text=%00",
        "/audit/?%00=1",
        "/people/?after=%00",
        "/sign-in/?next=%00",
    ],
)
def test_an_address_with_a_sign_that_no_database_takes_is_refused_plainly(
    cast: Cast, client_as: SignIn, address: str
) -> None:
    answer = client_as(cast.administrator).get(address)
    assert answer.status_code == 400
    assert "This was not understood" in answer.content.decode()


@pytest.mark.parametrize("key", ['["\\ud800"]', '["\\u0000"]', "[" * 5000])
def test_a_key_of_people_that_no_database_takes_is_not_found(cast: Cast, client_as: SignIn, key: str) -> None:
    assert client_as(cast.administrator).get("/people/", {"after": key}).status_code == 404
