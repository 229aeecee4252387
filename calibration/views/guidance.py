"""Pages of the plant's own cautions and return-to-service checklist."""

from __future__ import annotations

from django.contrib import messages
from django.core.exceptions import ValidationError
from django.db import IntegrityError, transaction
from django.http import HttpRequest, HttpResponse
from django.shortcuts import redirect, render

from calibration import guiding as acts
from calibration.forms.plant_lists import GuidanceForm
from calibration.forms.standards import WithdrawForm
from calibration.models import GuidanceLine
from register import access
from register.auditing import Actor
from register.models import User

LINES = GuidanceLine.objects.select_related("plant")
COLUMNS = ("part", "order", "key", "text", "applies", "condensing", "answer", "required")
SAME_KEY = "Another line of this part has this short name already."


def guidance(request: HttpRequest) -> HttpResponse:
    plant = access.chosen_plant(request)
    assert isinstance(request.user, User)
    lines = list(GuidanceLine.objects.filter(plant=plant, withdrawn_at__isnull=True))
    return render(
        request,
        "calibration/guidance.html",
        {
            "plant": plant,
            "parts": [(part.label, [line for line in lines if line.part == part]) for part in GuidanceLine.Part],
            "may_edit": access.may(request.user, "edit guidance", plant.pk),
        },
    )


def guidance_new(request: HttpRequest) -> HttpResponse:
    plant = access.chosen_plant(request)
    access.in_plant(request, plant.pk, "edit guidance")
    form = GuidanceForm(request.POST or None, plant=plant, initial={"required": True, "order": 500})
    if request.method == "POST" and form.is_valid():
        try:
            with transaction.atomic():
                acts.add_line(by=Actor.of(request), plant=plant, reason=form.cleaned_data["reason"], **form.values())
        except ValidationError as error:
            form.refuse(error)
        except IntegrityError:
            form.add_error("key", SAME_KEY)
        else:
            messages.success(request, "The line stands on sheets opened from now on.")
            return redirect(access.address_in(plant, "guidance"))
    return render(request, "calibration/guidance_form.html", {"form": form, "plant": plant, "line": None})


def guidance_edit(request: HttpRequest, pk: int) -> HttpResponse:
    held = access.get(request, LINES, "edit guidance", pk=pk)
    form = GuidanceForm(
        request.POST or None, plant=held.plant, line=held, initial={name: getattr(held, name) for name in COLUMNS}
    )
    if request.method == "POST" and form.is_valid():
        try:
            with transaction.atomic():
                acts.edit_line(by=Actor.of(request), line=held, reason=form.cleaned_data["reason"], **form.values())
        except ValidationError as error:
            form.refuse(error)
        except IntegrityError:
            form.add_error("key", SAME_KEY)
        else:
            messages.success(request, "Sheets opened from now on show the new words.")
            return redirect(access.address_in(held.plant, "guidance"))
    return render(request, "calibration/guidance_form.html", {"form": form, "plant": held.plant, "line": held})


def guidance_withdraw(request: HttpRequest, pk: int) -> HttpResponse:
    held = access.get(request, LINES, "edit guidance", pk=pk)
    form = WithdrawForm(request.POST or None)
    if request.method == "POST" and form.is_valid():
        acts.withdraw_line(by=Actor.of(request), line=held, reason=form.cleaned_data["reason"])
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
