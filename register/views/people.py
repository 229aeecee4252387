"""People and their roles, for administrators; each sees the people of the plants he administers."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

from django.contrib import messages
from django.core.exceptions import PermissionDenied
from django.http import HttpRequest, HttpResponse
from django.shortcuts import redirect, render, resolve_url
from django.views.decorators.debug import sensitive_post_parameters
from django.views.decorators.http import require_GET, require_http_methods, require_POST

from register import access, entering, membership
from register.auditing import Actor
from register.forms.fields import ReasonForm, RegisterForm, typed
from register.forms.people import (
    GivenPasswordForm,
    JoiningForm,
    NewPersonForm,
    PersonForm,
    RolesForm,
)
from register.fragments import answer
from register.models import Plant, Role, User
from register.paging import page_of
from register.queries import people_of

PERMISSION = "manage people"
#: In the session of an administrator: the password he has just given, until the next page shows it.
JUST_GIVEN = "password_just_given"


@dataclass(frozen=True, slots=True)
class PersonRow:
    """One line of the list of people."""

    person: User
    roles: str


@dataclass(frozen=True, slots=True)
class PlantRoles:
    """The roles of a person in one plant, and whether the viewer may change them."""

    plant: Plant
    roles: str
    mine: bool


@require_GET
def people(request: HttpRequest) -> HttpResponse:
    """People of the shown plant."""
    plant = access.chosen_plant(request, PERMISSION)
    text = request.GET.get("text", "").strip()
    page = page_of(
        request,
        people_of(plant, text).prefetch_related("memberships"),
        order=("username",),
        what="people",
    )
    rows = [PersonRow(person, _in_words(person, plant)) for person in page.rows]
    context = {"plant": plant, "rows": rows, "paging": page, "text": text}
    return answer(request, "register/people.html", "rows", context)


@sensitive_post_parameters("password")
@require_http_methods(["GET", "POST"])
def new(request: HttpRequest) -> HttpResponse:
    """A new person with roles in the shown plant."""
    plant = access.chosen_plant(request, PERMISSION)
    form = NewPersonForm(typed(request))
    person = form.submit(
        lambda: membership.create_person(
            by=Actor.of(request),
            reason=form.why,
            plant=plant,
            values=form.values("roles", "password"),
            roles=form.cleaned_data["roles"],
            password=form.cleaned_data["password"],
        )
    )
    if person is not None:
        request.session[JUST_GIVEN] = [person.pk, form.cleaned_data["password"]]
        return redirect("person", person.pk)
    return _form(request, form, f"Add a person to {plant}", "Add the person", "people", plant=plant)


@require_http_methods(["GET", "POST"])
def join(request: HttpRequest) -> HttpResponse:
    """Roles in the shown plant for somebody of another plant."""
    plant = access.chosen_plant(request, PERMISSION)
    form = JoiningForm(typed(request))
    person = form.submit(
        lambda: membership.set_roles(
            by=Actor.of(request),
            reason=form.why,
            person=form.cleaned_data["username"],
            plant=plant,
            roles=form.cleaned_data["roles"],
        )
    )
    if person is not None:
        messages.success(request, f"{person} now has roles in {plant}.")
        return redirect("person", person.pk)
    return _form(request, form, f"Add somebody of another plant to {plant}", "Give the roles", "people", plant=plant)


@require_GET
def person(request: HttpRequest, pk: int) -> HttpResponse:
    """One person: names, roles in each plant, whether he may sign in."""
    shown = access.get_person(request, pk)
    given_to, password = request.session.pop(JUST_GIVEN, (None, ""))
    context = {
        "person": shown,
        "roles": _roles(request, shown),
        "plant": _administered(request),
        "given_password": password if given_to == shown.pk else "",
        "governs": access.governs(access.person(request), shown),
        "temporary": entering.has_temporary_password(shown),
        "locked_out": entering.is_locked_out(shown),
    }
    return render(request, "register/person.html", context)


@require_http_methods(["GET", "POST"])
def edit(request: HttpRequest, pk: int) -> HttpResponse:
    """Change names and address."""
    shown = _governed(request, pk)
    initial = {name: getattr(shown, name) for name in membership.FIELDS}
    form = PersonForm(typed(request), initial=initial)
    if form.submit(
        lambda: membership.edit_person(by=Actor.of(request), reason=form.why, person=shown, values=form.values())
    ):
        return redirect("person", pk)
    return _form(request, form, f"Edit {shown}", "Save", "person", pk)


@require_http_methods(["GET", "POST"])
def roles(request: HttpRequest, pk: int, code: str) -> HttpResponse:
    """Change the roles of a person in one plant."""
    shown = access.get_person(request, pk)
    plant = access.get_plant(request, code, PERMISSION)
    held = list(shown.memberships.filter(plant=plant).values_list("role", flat=True))
    form = RolesForm(typed(request), initial={"roles": held})
    if form.submit(
        lambda: membership.set_roles(
            by=Actor.of(request), reason=form.why, person=shown, plant=plant, roles=form.cleaned_data["roles"]
        )
    ):
        messages.success(request, f"The roles of {shown} in {plant} are changed.")
        return redirect(access.address_in(plant, "people"))
    return _form(request, form, f"Roles of {shown} in {plant}", "Change the roles", "person", pk, plant=plant)


@sensitive_post_parameters("password")
@require_http_methods(["GET", "POST"])
def password(request: HttpRequest, pk: int) -> HttpResponse:
    """Give a person a new password, which he must change."""
    shown = _governed(request, pk)
    if shown.pk == access.person(request).pk:
        return redirect("password")
    form = GivenPasswordForm(typed(request))
    if form.submit(
        lambda: membership.set_password(
            by=Actor.of(request), reason=form.why, person=shown, password=form.cleaned_data["password"]
        )
    ):
        entering.unlock(by=Actor.of(request), person=shown)
        request.session[JUST_GIVEN] = [shown.pk, form.cleaned_data["password"]]
        return redirect("person", pk)
    return _form(request, form, f"New password for {shown}", "Give the password", "person", pk)


@require_http_methods(["GET", "POST"])
def deactivate(request: HttpRequest, pk: int) -> HttpResponse:
    """Let a person sign in no more."""
    shown = _governed(request, pk)
    form = ReasonForm(typed(request))
    if form.submit(lambda: membership.deactivate(by=Actor.of(request), reason=form.why, person=shown)):
        messages.success(request, f"{shown} can sign in no more.")
        return redirect("person", pk)
    return _form(request, form, f"Deactivate {shown}", "Deactivate", "person", pk, danger=True)


@require_http_methods(["GET", "POST"])
def reactivate(request: HttpRequest, pk: int) -> HttpResponse:
    """Let a person sign in again."""
    shown = _governed(request, pk)
    form = ReasonForm(typed(request))
    if form.submit(lambda: membership.reactivate(by=Actor.of(request), reason=form.why, person=shown)):
        messages.success(request, f"{shown} can sign in again.")
        return redirect("person", pk)
    return _form(request, form, f"Let {shown} sign in again", "Reactivate", "person", pk)


@require_POST
def unlock(request: HttpRequest, pk: int) -> HttpResponse:
    """Open the door that wrong passwords have closed."""
    shown = access.get_person(request, pk)
    entering.unlock(by=Actor.of(request), person=shown)
    messages.success(request, f"{shown} can try to sign in again at once.")
    return redirect("person", pk)


def _administered(request: HttpRequest) -> Plant | None:
    """The plant whose people the page of a person leads back to: the shown one, if the viewer administers it."""
    mine = access.plants(access.person(request), PERMISSION)
    shown = access.shown_plant(request)
    return shown if shown in mine else mine.first()


def _governed(request: HttpRequest, pk: int) -> User:
    shown = access.get_person(request, pk)
    if not access.governs(access.person(request), shown):
        raise PermissionDenied(f"{shown} also has roles in a plant that you do not administer.")
    return shown


def _roles(request: HttpRequest, shown: User) -> list[PlantRoles]:
    mine = list(access.plants(access.person(request), PERMISSION))
    others = Plant.objects.filter(memberships__user=shown).exclude(pk__in=[plant.pk for plant in mine]).distinct()
    return [
        *(PlantRoles(plant, _in_words(shown, plant), True) for plant in mine),
        *(PlantRoles(plant, _in_words(shown, plant), False) for plant in others),
    ]


def _in_words(shown: User, plant: Plant) -> str:
    held = {membership.role for membership in shown.memberships.all() if membership.plant_id == plant.pk}
    return ", ".join(str(role.label) for role in Role if role in held)


def _form(
    request: HttpRequest,
    form: RegisterForm,
    title: str,
    button: str,
    *back: Any,
    plant: Plant | None = None,
    danger: bool = False,
) -> HttpResponse:
    context = {
        "form": form,
        "title": title,
        "button": button,
        "back": access.address_in(plant, *back) if plant else resolve_url(*back),
        "danger": danger,
        "plant": plant or _administered(request),
    }
    return render(request, "register/person_form.html", context)
