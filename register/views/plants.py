"""Plants and their areas."""

from __future__ import annotations

from functools import cache, partial
from zoneinfo import available_timezones

from django.contrib import messages
from django.http import HttpRequest, HttpResponse
from django.shortcuts import redirect, render

from register import access, editing, membership
from register.auditing import Actor
from register.forms.fields import typed
from register.forms.plants import AREA_FIELDS, PLANT_FIELDS, EditAreaForm, EditPlantForm, NewAreaForm, NewPlantForm
from register.fragments import answer
from register.paging import page_of
from register.queries import areas_with_counts, changes_since, latest_change


def plants(request: HttpRequest) -> HttpResponse:
    plant = access.chosen_plant(request)
    context = {
        "plant": plant,
        "paging": page_of(request, areas_with_counts(plant), order=("code", "pk"), what="areas"),
        "may_edit": access.allowed(request, plant.pk, "edit register"),
        "may_manage": access.allowed(request, plant.pk, "manage plant"),
    }
    return answer(request, "register/plants.html", "rows", context)


def plant_new(request: HttpRequest) -> HttpResponse:
    form = NewPlantForm(typed(request))
    new = form.submit(lambda: membership.open_plant(by=Actor.of(request), values=form.values()))
    if new is not None:
        messages.success(request, f"{new} is open, and you are its administrator. Next: add its areas and people.")
        return redirect("plant-choose", new.code)
    return render(request, "register/plant_form.html", {"form": form, "zones": _zones()})


def plant_edit(request: HttpRequest, code: str) -> HttpResponse:
    plant = access.get_plant(request, code, "manage plant")
    form = EditPlantForm(
        typed(request),
        initial={name: getattr(plant, name) for name in PLANT_FIELDS},
        latest=latest_change(plant),
        changes=partial(changes_since, plant, fields=PLANT_FIELDS),
    )
    edited = form.submit(
        lambda: editing.edit_plant(by=Actor.of(request), reason=form.why, plant=plant, values=form.values())
    )
    if edited is not None:
        messages.success(request, f"{edited} is changed.")
        return redirect(access.address_in(edited, "plants"))
    return render(request, "register/plant_form.html", {"form": form, "edited": plant, "zones": _zones()})


def area_new(request: HttpRequest) -> HttpResponse:
    plant = access.chosen_plant(request)
    access.in_plant(request, plant.pk, "edit register")
    form = NewAreaForm(typed(request), plant=plant)
    new = form.submit(lambda: editing.create_area(by=Actor.of(request), plant=plant, values=form.values()))
    if new is not None:
        messages.success(request, f"The area {new} is in the register.")
        return redirect(access.address_in(plant, "plants"))
    return render(request, "register/area_form.html", {"form": form, "plant": plant})


def area_edit(request: HttpRequest, pk: int) -> HttpResponse:
    area = access.get_area(request, pk, "edit register")
    form = EditAreaForm(
        typed(request),
        plant=area.plant,
        initial={name: getattr(area, name) for name in AREA_FIELDS},
        latest=latest_change(area),
        changes=partial(changes_since, area, fields=AREA_FIELDS),
    )
    edited = form.submit(
        lambda: editing.edit_area(by=Actor.of(request), reason=form.why, area=area, values=form.values())
    )
    if edited is not None:
        messages.success(request, f"The area {edited} is changed; its tags are checked again.")
        return redirect(access.address_in(area.plant, "plants"))
    return render(request, "register/area_form.html", {"form": form, "area": area, "plant": area.plant})


@cache
def _zones() -> list[str]:
    return sorted(
        zone for zone in available_timezones() if "/" in zone and not zone.startswith(("Etc/", "posix/", "right/"))
    )
