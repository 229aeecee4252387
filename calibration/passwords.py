"""Asks for the password again where somebody signs; failures count towards the lock-out like those of a sign-in."""

from __future__ import annotations

from django.contrib.auth import authenticate
from django.core.exceptions import ValidationError
from django.http import HttpRequest

from register.entering import has_temporary_password
from register.models import User


def confirmed(request: HttpRequest, person: User, password: str) -> User:
    """The person, if the password is his.

    Raises
    ------
    ValidationError
        It is not, or too many wrong ones were typed.
    """
    return named(request, person.get_username(), password, wrong="This is not your password. Nothing is signed.")


def named(request: HttpRequest, username: str, password: str, *, wrong: str = "") -> User:
    """The person with a user name and password, who need not be the one signed in.

    Raises
    ------
    ValidationError
        They do not belong together, the password is a temporary one, or too many wrong ones were typed.
    """
    if not password:
        raise ValidationError({"password": "Type the password."})
    found = authenticate(request, username=username.strip(), password=password)
    if not isinstance(found, User):
        if getattr(request, "axes_locked_out", False):
            raise ValidationError({"password": "Too many wrong passwords: wait a quarter of an hour."})
        raise ValidationError({"password": wrong or "This user name and this password do not belong together."})
    if has_temporary_password(found):
        # Somebody else knows it: it proves nothing about who typed it.
        raise ValidationError(
            {"password": f"Somebody else gave {found} this password: it signs nothing until {found} has changed it."}
        )
    return found
