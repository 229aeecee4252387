"""The catalogue that all plants share: makers, transmitter types, measuring heads."""

from __future__ import annotations

from functools import partial

from django.contrib import messages
from django.http import HttpRequest, HttpResponse
from django.shortcuts import get_object_or_404, redirect, render

from register import access, editing
from register.auditing import Actor
from register.forms.catalogue import (
    EditHeadForm,
    EditMakerForm,
    EditTypeForm,
    HeadFields,
    MakerForm,
    NewHeadForm,
    NewTypeForm,
    TypeFields,
    initial_of_head,
    initial_of_type,
)
from register.forms.fields import typed
from register.fragments import answer
from register.models import Maker, MeasuringHead, TransmitterType
from register.paging import page_of
from register.queries import (
    TransmitterFilter,
    changes_since,
    fitted,
    heads_of,
    latest_change,
    makers_with_counts,
    types_with_counts,
)
from register.searching import SearchKey

#: Rows of the transmitters shown on the page of a head; the list of transmitters has them all.
SHOWN = 50


def types(request: HttpRequest) -> HttpResponse:
    plant = access.chosen_plant(request)
    maker = Maker.objects.filter(name=request.GET.get("maker", "")).first()
    rows = types_with_counts(plant, maker.pk if maker else None)
    context = {
        "plant": plant,
        "maker": maker,
        "makers": Maker.objects.all(),
        "paging": page_of(request, rows, order=("designation", "pk"), what="types"),
        "may_edit": access.allowed(request, plant.pk, "edit catalogue"),
    }
    return answer(request, "register/types.html", "rows", context)


def type_(request: HttpRequest, pk: int) -> HttpResponse:
    plant = access.chosen_plant(request)
    shown = get_object_or_404(TransmitterType.objects.select_related("maker"), pk=pk)
    context = {
        "plant": plant,
        "type": shown,
        "heads": heads_of(shown, plant),
        "may_edit": access.allowed(request, plant.pk, "edit catalogue"),
    }
    return render(request, "register/type.html", context)


def type_new(request: HttpRequest) -> HttpResponse:
    form = NewTypeForm(typed(request), initial={"maker": request.GET.get("maker")})
    new = form.submit(
        lambda: editing.create_type(by=Actor.of(request), maker=form.cleaned_data["maker"], values=form.values("maker"))
    )
    if new is not None:
        messages.success(request, f"{new} is in the catalogue. Next: add its measuring heads.")
        return redirect("type", new.pk)
    return render(request, "register/type_form.html", {"form": form, "makers": Maker.objects.exists()})


def type_edit(request: HttpRequest, pk: int) -> HttpResponse:
    shown = get_object_or_404(TransmitterType.objects.select_related("maker"), pk=pk)
    form = EditTypeForm(
        typed(request),
        rating=shown.body_rating,
        initial=initial_of_type(shown),
        latest=latest_change(shown),
        changes=partial(changes_since, shown, fields=[*TypeFields.base_fields, "body_rating"]),
    )
    edited = form.submit(
        lambda: editing.edit_type(by=Actor.of(request), reason=form.why, type_=shown, values=form.values())
    )
    if edited is not None:
        messages.success(request, f"{edited} is changed; tags where one is fitted are checked again.")
        return redirect("type", shown.pk)
    return render(request, "register/type_form.html", {"form": form, "type": shown, "makers": True})


def head(request: HttpRequest, pk: int) -> HttpResponse:
    plant = access.chosen_plant(request)
    shown = get_object_or_404(MeasuringHead.objects.select_related("type__maker"), pk=pk)
    rows = TransmitterFilter(plant, head_id=shown.pk).rows()
    transmitters = list(rows.order_by(SearchKey("serial"), "pk")[: SHOWN + 1])
    places = fitted(transmitters[:SHOWN])
    context = {
        "plant": plant,
        "head": shown,
        "transmitters": [(one, places.get(one.pk)) for one in transmitters[:SHOWN]],
        "more": len(transmitters) > SHOWN,
        "may_edit": access.allowed(request, plant.pk, "edit catalogue"),
    }
    return render(request, "register/head.html", context)


def head_new(request: HttpRequest, pk: int) -> HttpResponse:
    of = get_object_or_404(TransmitterType.objects.select_related("maker"), pk=pk)
    form = NewHeadForm(typed(request), initial={"unit": of.pressure_unit})
    new = form.submit(lambda: editing.create_head(by=Actor.of(request), type_=of, values=form.values()))
    if new is not None:
        messages.success(request, f"The head {new} is in the catalogue.")
        return redirect("type", of.pk)
    return render(request, "register/head_form.html", {"form": form, "type": of})


def head_edit(request: HttpRequest, pk: int) -> HttpResponse:
    shown = get_object_or_404(MeasuringHead.objects.select_related("type__maker"), pk=pk)
    form = EditHeadForm(
        typed(request),
        initial=initial_of_head(shown),
        latest=latest_change(shown),
        changes=partial(changes_since, shown, fields=HeadFields.base_fields),
    )
    edited = form.submit(
        lambda: editing.edit_head(by=Actor.of(request), reason=form.why, head=shown, values=form.values())
    )
    if edited is not None:
        messages.success(request, f"The head {edited} is changed; tags where one is fitted are checked again.")
        return redirect("head", shown.pk)
    return render(request, "register/head_form.html", {"form": form, "type": shown.type, "head": shown})


def makers(request: HttpRequest) -> HttpResponse:
    plant = access.chosen_plant(request)
    context = {
        "paging": page_of(request, makers_with_counts(), order=("name", "pk"), what="makers"),
        "may_edit": access.allowed(request, plant.pk, "edit catalogue"),
    }
    return answer(request, "register/makers.html", "rows", context)


def maker_new(request: HttpRequest) -> HttpResponse:
    form = MakerForm(typed(request))
    new = form.submit(lambda: editing.create_maker(by=Actor.of(request), values=form.values()))
    if new is not None:
        messages.success(request, f"{new} is in the catalogue.")
        return redirect("makers")
    return render(request, "register/maker_form.html", {"form": form})


def maker_edit(request: HttpRequest, pk: int) -> HttpResponse:
    shown = get_object_or_404(Maker, pk=pk)
    form = EditMakerForm(
        typed(request),
        initial={"name": shown.name},
        latest=latest_change(shown),
        changes=partial(changes_since, shown, fields=["name"]),
    )
    edited = form.submit(
        lambda: editing.edit_maker(by=Actor.of(request), reason=form.why, maker=shown, values=form.values())
    )
    if edited is not None:
        messages.success(request, f"The maker is called {edited} now.")
        return redirect("makers")
    return render(request, "register/maker_form.html", {"form": form, "maker": shown})
