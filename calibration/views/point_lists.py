"""Pages of point lists."""

from __future__ import annotations

from django.contrib import messages
from django.http import HttpRequest, HttpResponse
from django.shortcuts import redirect, render

from calibration import pointlists as acts
from calibration.forms.plant_lists import PointListForm
from calibration.models import PointList
from register import access
from register.auditing import Actor
from register.forms.fields import ReasonForm, typed

POINT_LISTS = PointList.objects.select_related("plant")


def point_lists(request: HttpRequest) -> HttpResponse:
    plant = access.chosen_plant(request)
    return render(
        request,
        "calibration/point_lists.html",
        {
            "plant": plant,
            "point_lists": PointList.objects.filter(plant=plant).order_by("withdrawn_at", "for_square_root", "name"),
            "may_edit": access.allowed(request, plant.pk, "set requirement"),
        },
    )


def point_list_new(request: HttpRequest) -> HttpResponse:
    plant = access.chosen_plant(request)
    access.in_plant(request, plant.pk, "set requirement")
    form = PointListForm(typed(request))
    new = form.submit(
        lambda: acts.create_point_list(by=Actor.of(request), plant=plant, reason=form.why, **form.values())
    )
    if new is not None:
        messages.success(request, f"“{new.name}” can be chosen now.")
        return redirect(access.address_in(plant, "point-lists"))
    return render(request, "calibration/point_list_form.html", {"form": form, "plant": plant, "point_list": None})


def point_list_edit(request: HttpRequest, pk: int) -> HttpResponse:
    held = access.get(request, POINT_LISTS, "set requirement", pk=pk)
    initial = {"name": held.name, "points": held.points, "for_square_root": held.for_square_root}
    form = PointListForm(typed(request), initial=initial)
    edited = form.submit(
        lambda: acts.edit_point_list(by=Actor.of(request), point_list=held, reason=form.why, **form.values())
    )
    if edited is not None:
        messages.success(request, f"“{edited.name}” is changed for sheets opened from now on.")
        return redirect(access.address_in(held.plant, "point-lists"))
    return render(request, "calibration/point_list_form.html", {"form": form, "plant": held.plant, "point_list": held})


def point_list_withdraw(request: HttpRequest, pk: int) -> HttpResponse:
    held = access.get(request, POINT_LISTS, "set requirement", pk=pk)
    form = ReasonForm(typed(request), asks="Why it is withdrawn")
    if form.submit(lambda: acts.withdraw_point_list(by=Actor.of(request), point_list=held, reason=form.why)):
        messages.success(request, f"“{held.name}” is no longer offered.")
        return redirect(access.address_in(held.plant, "point-lists"))
    return render(
        request,
        "calibration/withdraw.html",
        {
            "form": form,
            "what": f"Withdraw “{held.name}”",
            "say": "Tags that ask for it keep it; it is no longer offered for new requirements.",
            "back": "Point lists",
            "back_address": access.address_in(held.plant, "point-lists"),
        },
    )
