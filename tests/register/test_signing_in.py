"""Signing in, being locked out, signing out, and changing one's own password."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import pytest
from axes.models import AccessAttempt
from django.test import Client

from register import entering, membership
from register.auditing import Actor
from register.models import AuditEntry, User
from tests.cast import PASSWORD, Cast

Kind = AuditEntry.Kind
OWN = "another secret 8"


def sign_in(client: Client, name: str, password: str, **more: str) -> Any:
    return client.post("/sign-in/", {"username": name, "password": password, **more})


def entries(kind: AuditEntry.Kind) -> list[AuditEntry]:
    return list(AuditEntry.objects.filter(kind=kind).order_by("id"))


def test_the_right_password_leads_where_the_person_was_heading(cast: Cast) -> None:
    client = Client()
    sent_away = client.get("/audit/?field=lrv")
    assert sent_away.status_code == 302
    assert sent_away.url == "/sign-in/?next=/audit/%3Ffield%3Dlrv"
    answer = sign_in(client, "planner", PASSWORD, next="/audit/?field=lrv")
    assert answer.url == "/audit/?field=lrv"
    assert client.get("/audit/").status_code == 200


@pytest.mark.parametrize("elsewhere", ["https://elsewhere.example/", "//elsewhere.example/", "javascript:alert(1)"])
def test_it_never_leads_to_another_site(cast: Cast, elsewhere: str) -> None:
    assert sign_in(Client(), "planner", PASSWORD, next=elsewhere).url == "/"


@pytest.mark.parametrize("host", ["localhost", "localhost:8000", "127.0.0.1:8000", "[::1]:8000"])
def test_demonstration_people_sign_in_at_this_machine(cast: Cast, host: str) -> None:
    User.objects.filter(pk=cast.planner.pk).update(is_demonstration=True)
    client = Client(HTTP_HOST=host)
    assert "Demonstration people" in client.get("/sign-in/").content.decode()
    assert sign_in(client, "planner", PASSWORD).url == "/"


@pytest.mark.parametrize(
    "reached",
    [
        {"HTTP_HOST": "testserver"},
        {"HTTP_HOST": "localhost", "REMOTE_ADDR": "192.0.2.7"},
        {"HTTP_HOST": "127.0.0.1:8000", "HTTP_X_FORWARDED_FOR": "192.0.2.7"},
        {"HTTP_HOST": "127.0.0.1:8000", "HTTP_X_FORWARDED_HOST": "instruments.example"},
        {"HTTP_HOST": "127.0.0.1:8000", "HTTP_FORWARDED": "for=192.0.2.7"},
        {"HTTP_HOST": "127.0.0.1:8000", "HTTP_VIA": "1.1 gate"},
    ],
)
def test_demonstration_people_are_neither_shown_nor_let_in_from_elsewhere(cast: Cast, reached: dict[str, str]) -> None:
    """Whoever reaches the site by another name, or through a proxy on this machine that the site was not told of."""
    User.objects.filter(pk=cast.planner.pk).update(is_demonstration=True)
    client = Client(**reached)  # type: ignore[arg-type]
    assert "Demonstration people" not in client.get("/sign-in/").content.decode()
    refused = sign_in(client, "planner", PASSWORD)
    assert "at the machine that serves them only" in refused.content.decode()
    assert client.get("/password/").status_code == 302
    assert sign_in(client, "technician", PASSWORD).url == "/", "people of one's own come in from anywhere"


def test_signing_in_and_out_stand_in_the_trail_with_the_address(cast: Cast) -> None:
    client = Client(REMOTE_ADDR="192.0.2.7")
    sign_in(client, "technician", PASSWORD)
    client.post("/sign-out/")
    inward, outward = entries(Kind.SIGNED_IN)[0], entries(Kind.SIGNED_OUT)[0]
    assert (inward.person, inward.remote_address) == (cast.technician, "192.0.2.7")
    assert (outward.person, outward.thing_id) == (cast.technician, str(cast.technician.pk))
    assert client.get("/audit/").status_code == 302


def test_signing_out_takes_a_form_not_a_link(cast: Cast, client_as: Callable[[User], Client]) -> None:
    client = client_as(cast.planner)
    assert client.get("/sign-out/").status_code == 405
    assert client.get("/password/").status_code == 200


def test_a_wrong_password_stands_in_the_trail_without_the_password(cast: Cast) -> None:
    answer = sign_in(Client(), "planner", "guessed")
    assert answer.status_code == 200
    assert b"guessed" not in answer.content
    failed = entries(Kind.SIGN_IN_FAILED)[0]
    assert (failed.person, failed.thing_label) == (None, "Planner")
    assert "guessed" not in repr(vars(failed))


def test_a_name_longer_than_any_is_refused_before_it_is_counted(cast: Cast, settings: Any) -> None:
    settings.AXES_ENABLED = True
    answer = sign_in(Client(), "n" * 300, "guessed")
    assert answer.status_code == 200
    assert answer.context["form"].errors["username"] == ["No sign-in name is longer than 150 signs."]
    assert 'value="' + "n" * 300 in answer.content.decode()
    assert not AccessAttempt.objects.exists()
    sign_in(Client(), "n" * 150, "guessed")
    assert AccessAttempt.objects.count() == 1


def test_a_name_that_belongs_to_nobody_is_not_kept(cast: Cast) -> None:
    sign_in(Client(), "my-secret-typed-too-early", "x")
    failed = entries(Kind.SIGN_IN_FAILED)[0]
    assert failed.thing_label == entering.NOBODY
    assert failed.thing_id == ""
    assert "my-secret" not in repr(vars(failed))


def test_a_deactivated_person_is_refused_like_a_wrong_password(cast: Cast) -> None:
    wrong = sign_in(Client(), "planner", "guessed")
    membership.deactivate(by=Actor(cast.administrator), reason="left the company", person=cast.planner)
    client = Client()
    refused = sign_in(client, "planner", PASSWORD)
    assert refused.status_code == wrong.status_code == 200
    assert refused.context["form"].errors == wrong.context["form"].errors
    assert client.get("/password/").status_code == 302
    assert entries(Kind.SIGN_IN_FAILED)[-1].after == "this person is deactivated"


def test_deactivation_ends_an_open_session(cast: Cast, client_as: Callable[[User], Client]) -> None:
    client = client_as(cast.planner)
    assert client.get("/password/").status_code == 200
    membership.deactivate(by=Actor(cast.administrator), reason="left the company", person=cast.planner)
    assert client.get("/password/").status_code == 302


def test_many_wrong_passwords_close_the_door_for_that_name_only(cast: Cast, settings: Any) -> None:
    settings.AXES_ENABLED = True
    client = Client()
    for _ in range(settings.AXES_FAILURE_LIMIT - 1):
        assert sign_in(client, "planner", "guessed").status_code == 200
    closing = sign_in(client, "planner", "guessed")
    assert closing.status_code == 429
    assert b"for 15 minutes" in closing.content
    assert sign_in(client, "planner", PASSWORD).status_code == 429
    assert entering.is_locked_out(cast.planner)
    failed = entries(Kind.SIGN_IN_FAILED)
    assert len(failed) == settings.AXES_FAILURE_LIMIT, "attempts at a closed door do not fill the trail"
    assert failed[-1].after == "locked out for a while"
    assert sign_in(Client(), "technician", PASSWORD).status_code == 302


def test_an_administrator_opens_the_door_again(cast: Cast, settings: Any, client_as: Callable[[User], Client]) -> None:
    settings.AXES_ENABLED = True
    for _ in range(settings.AXES_FAILURE_LIMIT):
        sign_in(Client(), "planner", "guessed")
    administrator = client_as(cast.administrator)
    assert b"Open again now" in administrator.get(f"/people/{cast.planner.pk}/").content
    administrator.post(f"/people/{cast.planner.pk}/unlock/")
    assert sign_in(Client(), "planner", PASSWORD).status_code == 302
    opened = AuditEntry.objects.get(field="locked out")
    assert (opened.person, opened.before, opened.after) == (cast.administrator, "yes", "no")


def test_a_new_password_opens_the_door_too(cast: Cast, settings: Any, client_as: Callable[[User], Client]) -> None:
    settings.AXES_ENABLED = True
    for _ in range(settings.AXES_FAILURE_LIMIT):
        sign_in(Client(), "planner", "guessed")
    client_as(cast.administrator).post(f"/people/{cast.planner.pk}/password/", {"password": OWN, "reason": "forgotten"})
    assert sign_in(Client(), "planner", OWN).status_code == 302


def test_the_bookkeeping_of_failures_keeps_no_password(cast: Cast, settings: Any) -> None:
    from axes.models import AccessAttempt

    settings.AXES_ENABLED = True
    sign_in(Client(), "planner", "guessed-secret")
    assert "guessed-secret" not in repr(vars(AccessAttempt.objects.get()))


def test_a_changed_password_ends_other_sessions_and_keeps_this_one(
    cast: Cast, client_as: Callable[[User], Client]
) -> None:
    here, elsewhere = client_as(cast.planner), client_as(cast.planner)
    answer = here.post("/password/", {"old_password": PASSWORD, "new_password1": OWN, "new_password2": OWN})
    assert answer.status_code == 302
    assert here.get("/password/").status_code == 200
    assert elsewhere.get("/password/").status_code == 302
    changed = AuditEntry.objects.get(field="password")
    assert changed.person == cast.planner
    assert OWN not in repr(vars(changed))


@pytest.mark.parametrize(
    ("old", "new", "again"),
    [("wrong", OWN, OWN), (PASSWORD, OWN, "different 9!"), (PASSWORD, "planner1", "planner1"), (PASSWORD, "1", "1")],
)
def test_a_bad_change_of_password_is_refused_beside_the_field(
    cast: Cast, client_as: Callable[[User], Client], old: str, new: str, again: str
) -> None:
    answer = client_as(cast.planner).post(
        "/password/", {"old_password": old, "new_password1": new, "new_password2": again}
    )
    assert answer.status_code == 200
    assert b'class="errors"' in answer.content
    assert User.objects.get(pk=cast.planner.pk).check_password(PASSWORD)


def test_a_password_given_by_another_must_be_changed_before_anything_else(cast: Cast) -> None:
    membership.set_password(by=Actor(cast.administrator), reason="forgotten", person=cast.planner, password=OWN)
    client = Client()
    sign_in(client, "planner", OWN)
    assert client.get("/audit/").url == "/password/"
    assert b"must be yours alone" in client.get("/password/").content
    client.post("/password/", {"old_password": OWN, "new_password1": PASSWORD, "new_password2": PASSWORD})
    assert client.get("/audit/").status_code == 200
    again = Client()
    sign_in(again, "planner", PASSWORD)
    assert again.get("/audit/").status_code == 200


def test_what_was_typed_survives_an_ended_session(cast: Cast) -> None:
    """A form sent by htmx is not led away from the page; a script gets JSON; a fragment leads to the door."""
    htmx = {"HX-Request": "true", "HX-Current-URL": "http://testserver/audit/?field=lrv"}
    sent = Client().post("/audit/export/", headers=htmx)
    assert (sent.status_code, "HX-Redirect" in sent) == (401, False)
    read = Client().get("/audit/", headers=htmx)
    assert read["HX-Redirect"] == "/sign-in/?next=/audit/%3Ffield%3Dlrv"
    script = Client().get("/audit/", headers={"Accept": "application/json"})
    assert (script.status_code, script.json()["sign_in"]) == (401, "/sign-in/")
