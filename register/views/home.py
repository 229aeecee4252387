"""The first page, and the choice of the plant that lists show."""

from __future__ import annotations

from django.http import Http404, HttpRequest, HttpResponse, HttpResponseRedirect
from django.shortcuts import redirect, render

from register import access
from register.models import Role
from register.views.signing_in import onward


def home(request: HttpRequest) -> HttpResponse:
    """Lead each person to where his work begins."""
    held = set().union(*access.roles(access.person(request)).values())
    if not held:
        return render(request, "register/no_role.html")
    if Role.PLANNER in held:
        return redirect("due-list")
    return redirect("register")


def choose_plant(request: HttpRequest, code: str) -> HttpResponse:
    """Show lists of that plant from now on, and go on."""
    if code not in {plant.code for plant in access.readable_plants(access.person(request))}:
        raise Http404
    response = HttpResponseRedirect(onward(request))
    access.keep_plant(response, code)
    return response
