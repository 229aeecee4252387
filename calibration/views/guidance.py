"""Pages of the plant's own cautions and return-to-service checklist."""

from __future__ import annotations

from django.contrib import messages
from django.http import HttpRequest, HttpResponse
from django.shortcuts import redirect, render

from calibration import guiding as acts
from calibration.forms.plant_lists import GuidanceForm
from calibration.models import GuidanceLine
from register import access
from register.auditing import Actor
from register.forms.fields import ReasonForm, typed

LINES = GuidanceLine.objects.select_related("plant")
COLUMNS = ("part", "order", "key", "text", "applies", "condensing", "answer", "required")


def guidance(request: HttpRequest) -> HttpResponse:
    plant = access.chosen_plant(request)
    lines = list(GuidanceLine.objects.filter(plant=plant, withdrawn_at__isnull=True))
    return render(
        request,
        "calibration/guidance.html",
        {
            "plant": plant,
            "parts": [(part.label, [line for line in lines if line.part == part]) for part in GuidanceLine.Part],
            "may_edit": access.allowed(request, plant.pk, "edit guidance"),
        },
    )


def guidance_new(request: HttpRequest) -> HttpResponse:
    plant = access.chosen_plant(request)
    access.in_plant(request, plant.pk, "edit guidance")
    form = GuidanceForm(typed(request), initial={"required": True, "order": 500})
    new = form.submit(lambda: acts.add_line(by=Actor.of(request), plant=plant, reason=form.why, **form.values()))
    if new is not None:
        messages.success(request, "The line stands on sheets opened from now on.")
        return redirect(access.address_in(plant, "guidance"))
    return render(request, "calibration/guidance_form.html", {"form": form, "plant": plant, "line": None})


def guidance_edit(request: HttpRequest, pk: int) -> HttpResponse:
    held = access.get(request, LINES, "edit guidance", pk=pk)
    form = GuidanceForm(typed(request), initial={name: getattr(held, name) for name in COLUMNS})
    edited = form.submit(lambda: acts.edit_line(by=Actor.of(request), line=held, reason=form.why, **form.values()))
    if edited is not None:
        messages.success(request, "Sheets opened from now on show the new words.")
        return redirect(access.address_in(held.plant, "guidance"))
    return render(request, "calibration/guidance_form.html", {"form": form, "plant": held.plant, "line": held})


def guidance_withdraw(request: HttpRequest, pk: int) -> HttpResponse:
    held = access.get(request, LINES, "edit guidance", pk=pk)
    form = ReasonForm(typed(request), asks="Why it is withdrawn")
    if form.submit(lambda: acts.withdraw_line(by=Actor.of(request), line=held, reason=form.why)):
        messages.success(request, "The line no longer stands on new sheets.")
        return redirect(access.address_in(held.plant, "guidance"))
    return render(
        request,
        "calibration/withdraw.html",
        {
            "form": form,
            "what": "Withdraw a line",
            "say": held.text,
            "back": "Guidance",
            "back_address": access.address_in(held.plant, "guidance"),
        },
    )
