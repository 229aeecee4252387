"""Acts on people: new people, names and passwords, roles, leaving and coming back.

People are deactivated, never deleted: signatures and the audit trail point at them.
"""

from __future__ import annotations

from collections.abc import Collection, Mapping
from typing import Final, TypeVar

from django.contrib.auth.password_validation import validate_password
from django.core.exceptions import ValidationError
from django.db import connection, models, transaction

from register.auditing import Act, Actor, snapshot
from register.editing import create_plant
from register.models import Membership, Plant, Role, User
from register.storing import fill, store

M = TypeVar("M", bound=models.Model)
FIELDS: Final = ("username", "printed_name", "email")
FIRST: Final = "The site begins with its first administrator."


@transaction.atomic
def create_person(
    *, by: Actor, reason: str, plant: Plant, values: Mapping[str, str], roles: Collection[str], password: str
) -> User:
    """Create a person with roles in one plant and a password that he changes when he first signs in.

    Parameters
    ----------
    values : mapping
        `username`, `printed_name`, `email`.

    Raises
    ------
    ValidationError
        By field: the name is taken, the password is weak, no role is given.
    """
    person = User()
    fill(person, values)
    _check_name(person)
    _check_password(password, person)
    person.set_password(password)
    store(person)
    act = Act(by, reason)
    act.created(person, plant=plant)
    act.changed(person, plant=plant, before={}, after={"password": "given"})
    _give(act, person, plant, roles)
    act.write()
    return person


@transaction.atomic
def edit_person(*, by: Actor, reason: str, person: User, values: Mapping[str, str]) -> User:
    """Change the name or address of a person; records signed earlier keep the name they were signed with."""
    person = _locked(person)
    before = snapshot(person, FIELDS)
    fill(person, values)
    _check_name(person)
    store(person)
    act = Act(by, reason)
    act.changed(person, plant=None, before=before, after=snapshot(person, FIELDS))
    act.write()
    return person


@transaction.atomic
def set_roles(*, by: Actor, reason: str, person: User, plant: Plant, roles: Collection[str]) -> User:
    """Give a person exactly these roles in a plant, none of them to take him off the plant.

    Raises
    ------
    ValidationError
        The plant would be left without an active administrator.
    """
    person = _locked(person)
    act = Act(by, reason)
    _give(act, person, plant, roles)
    _keep_an_administrator(plant)
    act.write()
    return person


@transaction.atomic
def set_password(*, by: Actor, reason: str = "", person: User, password: str) -> User:
    """Give a person a password; the trail tells of it, never the password. All his sessions end.

    Raises
    ------
    ValidationError
        The password is weak.
    """
    person = _locked(person)
    _check_password(password, person)
    person.set_password(password)
    person.save(update_fields=["password"])
    act = Act(by, reason)
    act.changed(person, plant=None, before={"password": "earlier"}, after={"password": "given"})
    act.write()
    return person


@transaction.atomic
def deactivate(*, by: Actor, reason: str, person: User) -> User:
    """Let a person sign in no more; what he signed stays his.

    Raises
    ------
    ValidationError
        It is the acting person himself, or a plant would be left without an active administrator.
    """
    if by.person is not None and by.person.pk == person.pk:
        raise ValidationError("You cannot deactivate yourself: another administrator can.")
    person = _locked(person)
    governed = list(_locking(Plant).filter(memberships__user=person, memberships__role=Role.ADMINISTRATOR))
    _set_active(by, reason, person, active=False)
    for plant in governed:
        _keep_an_administrator(plant)
    return person


@transaction.atomic
def reactivate(*, by: Actor, reason: str, person: User) -> User:
    """Let a person sign in again, with the roles he had."""
    person = _locked(person)
    _set_active(by, reason, person, active=True)
    return person


@transaction.atomic
def begin(*, remote_address: str, plant: Mapping[str, str], person: Mapping[str, str], password: str) -> User:
    """Make the first plant and its administrator.

    Raises
    ------
    ValidationError
        Somebody is there already; or by field, as the other acts.
    """
    _wait_for_others()
    if User.objects.exists():
        raise ValidationError("There are people already: an administrator makes new ones.")
    first = User()
    fill(first, person)
    _check_name(first)
    _check_password(password, first)
    first.set_password(password)
    store(first)
    by = Actor(person=first, remote_address=remote_address)
    place = create_plant(by=by, reason=FIRST, values=plant)
    act = Act(by, FIRST)
    act.created(first, plant=place)
    _give(act, first, place, [Role.ADMINISTRATOR])
    act.write()
    return first


@transaction.atomic
def open_plant(*, by: Actor, values: Mapping[str, str]) -> Plant:
    """Make a further plant; whoever makes it is its first administrator.

    Raises
    ------
    ValidationError
        By field, as `editing.create_plant`.
    """
    plant = create_plant(by=by, values=values)
    if by.person is not None:
        act = Act(by)
        _give(act, by.person, plant, [Role.ADMINISTRATOR])
        act.write()
    return plant


def _set_active(by: Actor, reason: str, person: User, *, active: bool) -> None:
    before = {"may sign in": person.is_active}
    person.is_active = active
    person.save(update_fields=["is_active"])
    act = Act(by, reason)
    act.changed(person, plant=None, before=before, after={"may sign in": active})
    act.write()


def _locking(model: type[M]) -> models.QuerySet[M]:
    """Rows that are locked in the order of their ids, but without their keys: an entry of the trail that refers to
    one of them never waits."""
    return model._default_manager.select_for_update(of=("self",), no_key=True).order_by("pk")


def _locked(person: User) -> User:
    """The person with his row locked; always before a plant, so that two acts never wait for one another."""
    return _locking(User).get(pk=person.pk)


def _wait_for_others() -> None:
    """Let nobody else make a person before this act has ended; SQLite has one writer at a time anyway."""
    if connection.vendor == "postgresql":
        with connection.cursor() as cursor:
            cursor.execute(f"LOCK TABLE {User._meta.db_table} IN SHARE ROW EXCLUSIVE MODE")


def _give(act: Act, person: User, plant: Plant, roles: Collection[str]) -> None:
    unknown = set(roles) - set(Role.values)
    if unknown:
        raise ValidationError({"roles": f"There is no role {', '.join(sorted(unknown))}."})
    _locking(Plant).get(pk=plant.pk)
    held = {membership.role: membership for membership in person.memberships.filter(plant=plant)}
    for role in set(held) - set(roles):
        held[role].delete()
    Membership.objects.bulk_create(
        Membership(user=person, plant=plant, role=role) for role in Role.values if role in set(roles) - set(held)
    )
    act.changed(person, plant=plant, before={"roles": _in_words(held)}, after={"roles": _in_words(roles)})


def _in_words(roles: Collection[str]) -> str:
    return ", ".join(str(Role(role).label) for role in Role.values if role in roles)


def _keep_an_administrator(plant: Plant) -> None:
    if not Membership.objects.filter(plant=plant, role=Role.ADMINISTRATOR, user__is_active=True).exists():
        raise ValidationError(
            f"{plant} would be left without an administrator who can sign in: give another person that role first."
        )


def _check_name(person: User) -> None:
    """Two names that differ in capital letters only would be taken for one person."""
    if User.objects.filter(username__iexact=person.username).exclude(pk=person.pk).exists():
        raise ValidationError({"username": f"The sign-in name {person.username} is taken."})


def _check_password(password: str, person: User) -> None:
    try:
        validate_password(password, person)
    except ValidationError as error:
        raise ValidationError({"password": error.messages}) from error
