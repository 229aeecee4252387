"""Acts on people: signing in and out, passwords, new people, roles, leaving."""

from __future__ import annotations

from django.db import transaction

from register.auditing import Act, Actor
from register.models import User


@transaction.atomic
def set_password(*, by: Actor, person: User, password: str, reason: str = "own password changed") -> None:
    """Give a person a password; the trail says that, never the password."""
    person.set_password(password)
    person.save(update_fields=["password"])
    act = Act(by, reason)
    act.changed(person, plant=None, before={"password": "earlier one"}, after={"password": "new one"})
    act.write()
