"""Transmitters of a plant: listed, registered, edited, moved."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from functools import partial
from html import escape
from typing import Final

from django.contrib import messages
from django.http import HttpRequest, HttpResponse
from django.shortcuts import redirect, render
from django.urls import reverse

from register import access, editing
from register.auditing import Actor
from register.forms.fields import typed
from register.forms.transmitters import FIELDS, EditTransmitterForm, MoveForm, NewTransmitterForm
from register.fragments import answer
from register.models import MeasuringHead, Transmitter, TransmitterType
from register.paging import page_of
from register.queries import TransmitterFilter, changes_since, fitted, latest_change

#: How loudly it is said where a transmitter is.
TONES: Final[Mapping[str, str]] = {Transmitter.Whereabouts.SCRAPPED: "quiet", Transmitter.Whereabouts.REPAIR: "near"}


@dataclass(frozen=True, slots=True)
class Line:
    """One line of the list, each part of it HTML already."""

    url: str
    serial: str
    type: str
    head: str
    where: str
    tag: str
    since: str


def transmitters(request: HttpRequest) -> HttpResponse:
    plant = access.chosen_plant(request)
    asked = TransmitterFilter(
        plant,
        text=request.GET.get("text", "").strip(),
        whereabouts=request.GET.get("whereabouts", ""),
        type_id=_number(request.GET.get("type", "")),
        head_id=_number(request.GET.get("head", "")),
    )
    types = {type_.pk: str(type_) for type_ in TransmitterType.objects.select_related("maker")}
    rows = asked.rows().only("serial", "whereabouts", "type_id", "head_id")
    paging = page_of(request, rows, order=("search_key", "pk"), what="transmitters")
    context = {
        "plant": plant,
        "asked": asked,
        "paging": paging,
        "lines": _lines(paging.rows, types),
        "whereabouts": Transmitter.Whereabouts.choices,
        "types": types,
        "head": MeasuringHead.objects.filter(pk=asked.head_id).first() if asked.head_id else None,
        "filtered": any((asked.text, asked.whereabouts, asked.type_id, asked.head_id)),
        "may_edit": access.allowed(request, plant.pk, "edit register"),
    }
    return answer(request, "register/transmitters.html", "rows", context)


def transmitter_new(request: HttpRequest) -> HttpResponse:
    plant = access.chosen_plant(request)
    access.in_plant(request, plant.pk, "edit register")
    form = NewTransmitterForm(typed(request), initial={"head": request.GET.get("head")})
    new = form.submit(lambda: editing.create_transmitter(by=Actor.of(request), plant=plant, values=form.device()))
    if new is not None:
        messages.success(request, f"{new} is registered and lies in stores. Fit it from the page of its tag.")
        return redirect("transmitter", new.pk)
    return render(request, "register/transmitter_form.html", {"form": form, "plant": plant})


def transmitter_edit(request: HttpRequest, pk: int) -> HttpResponse:
    transmitter = access.get_transmitter(request, pk, "edit register")
    form = EditTransmitterForm(
        typed(request),
        initial={name: getattr(transmitter, name) for name in FIELDS},
        latest=latest_change(transmitter),
        changes=partial(changes_since, transmitter, fields=FIELDS),
    )
    edited = form.submit(
        lambda: editing.edit_transmitter(
            by=Actor.of(request), reason=form.why, transmitter=transmitter, values=form.values()
        )
    )
    if edited is not None:
        messages.success(request, f"{edited} is changed.")
        return redirect("transmitter", transmitter.pk)
    context = {"form": form, "transmitter": transmitter, "plant": transmitter.plant}
    return render(request, "register/transmitter_form.html", context)


def transmitter_move(request: HttpRequest, pk: int) -> HttpResponse:
    """To stores, away for repair, scrapped; from a tag it is removed on the page of the tag."""
    transmitter = access.get_transmitter(request, pk, "fit")
    form = MoveForm(typed(request), initial={"whereabouts": transmitter.whereabouts})
    moved = form.submit(
        lambda: editing.move_transmitter(
            by=Actor.of(request),
            reason=form.why,
            transmitter=transmitter,
            whereabouts=form.cleaned_data["whereabouts"],
        )
    )
    if moved is not None:
        messages.success(request, f"{moved} is {moved.get_whereabouts_display()}.")
        return redirect("transmitter", transmitter.pk)
    return render(request, "register/transmitter_move.html", {"form": form, "transmitter": transmitter})


def _lines(rows: Sequence[Transmitter], types: Mapping[int, str]) -> list[Line]:
    """The rows in words; types and heads, which many rows share, are read once."""
    heads = {head.pk: escape(str(head)) for head in MeasuringHead.objects.filter(pk__in={row.head_id for row in rows})}
    places = fitted(rows)
    device_url, tag_url = (reverse(name, args=[0]).removesuffix("0/") for name in ("transmitter", "tag"))
    made = []
    for row in rows:
        where = escape(row.get_whereabouts_display())
        if tone := TONES.get(row.whereabouts):
            where = f'<span class="state {tone}">{where}</span>'
        place = places.get(row.pk)
        made.append(
            Line(
                url=f"{device_url}{row.pk}/",
                serial=escape(row.serial),
                type=escape(types[row.type_id]),
                head=heads[row.head_id],
                where=where,
                tag=f'<a class="mono" href="{tag_url}{place.tag_id}/">{escape(place.number)}</a>' if place else "–",
                since=str(place.since) if place else "",
            )
        )
    return made


def _number(text: str) -> int | None:
    return int(text) if text.isascii() and text.isdigit() and len(text) < 18 else None
