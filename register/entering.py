"""Acts on signing in and out: each leaves an entry in the audit trail.

They follow the signals of `django.contrib.auth`, so that a password asked again before a signature is
noted like one asked at the door.
"""

from __future__ import annotations

import datetime
from typing import Any

from axes.models import AccessAttempt
from axes.utils import reset
from django.conf import settings
from django.contrib.auth.signals import user_logged_in, user_logged_out, user_login_failed
from django.db import transaction
from django.db.models import Sum
from django.http import HttpRequest
from django.utils import timezone

from register.auditing import Act, Actor
from register.models import AuditEntry, User

#: In the session of a person whose password was given to him by somebody else.
TEMPORARY = "password_is_temporary"
NOBODY = "a name that belongs to nobody"


@transaction.atomic
def note(*, by: Actor, kind: AuditEntry.Kind, person: User, remark: str = "") -> None:
    """Write one entry about a person at the door."""
    act = Act(by)
    act.noted(kind, person, remark=remark)
    act.write()


@transaction.atomic
def unlock(*, by: Actor, person: User) -> None:
    """Forget the wrong passwords of a person, so that he may try again at once."""
    if reset(username=person.username):
        act = Act(by)
        act.changed(person, plant=None, before={"locked out": True}, after={"locked out": False})
        act.write()


def is_locked_out(person: User) -> bool:
    """Whether so many wrong passwords were typed lately that the door is closed for this name."""
    since = timezone.now() - datetime.timedelta(hours=settings.AXES_COOLOFF_TIME)
    tried = AccessAttempt.objects.filter(username=person.username, attempt_time__gte=since)
    by_place = tried.order_by().values("ip_address").annotate(failures=Sum("failures_since_start"))
    found: bool = by_place.filter(failures__gte=settings.AXES_FAILURE_LIMIT).exists()
    return found


def watch() -> None:
    """Follow the signals; called once when the site is loaded."""
    user_logged_in.connect(_signed_in, dispatch_uid="register.entering.in")
    user_logged_out.connect(_signed_out, dispatch_uid="register.entering.out")
    user_login_failed.connect(_failed, dispatch_uid="register.entering.failed")


def has_temporary_password(person: User) -> bool:
    """Whether the password in use was given by somebody else, who therefore knows it."""
    last = (
        AuditEntry.objects.filter(thing_type=person._meta.label_lower, thing_id=str(person.pk), field="password")
        .order_by("-id")
        .values_list("person_id", flat=True)
        .first()
    )
    return last is not None and last != person.pk


def _signed_in(sender: object, request: HttpRequest, user: User, **kwargs: Any) -> None:
    if has_temporary_password(user):
        request.session[TEMPORARY] = True
    note(by=_actor(request, user), kind=AuditEntry.Kind.SIGNED_IN, person=user)


def _signed_out(sender: object, request: HttpRequest, user: User | None, **kwargs: Any) -> None:
    if user is not None:
        note(by=_actor(request, user), kind=AuditEntry.Kind.SIGNED_OUT, person=user)


def _failed(sender: object, credentials: dict[str, Any], request: HttpRequest | None = None, **kwargs: Any) -> None:
    """Note a wrong password. A name that belongs to nobody is not kept: it may be a password typed too early."""
    locked_out = bool(getattr(request, "axes_locked_out", False))
    if locked_out and getattr(request, "axes_failures_since_start", None) is None:
        return  # refused unseen because earlier attempts had locked the door: the trail would only grow
    person = User.objects.filter(username=credentials.get("username") or "").first()
    remarks = []
    if person is not None and not person.is_active:
        remarks.append("this person is deactivated")
    if locked_out:
        remarks.append("locked out for a while")
    note(
        by=_actor(request, None),
        kind=AuditEntry.Kind.SIGN_IN_FAILED,
        person=person or User(printed_name=NOBODY),
        remark="; ".join(remarks),
    )


def _actor(request: HttpRequest | None, person: User | None) -> Actor:
    return Actor(person=person, remote_address=request.META.get("REMOTE_ADDR", "") if request else "")
