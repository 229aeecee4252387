"""Pages of reference standards and their certificates."""

from __future__ import annotations

import datetime
from dataclasses import dataclass, replace

from django.contrib import messages
from django.db import IntegrityError, transaction
from django.http import HttpRequest, HttpResponse
from django.shortcuts import get_object_or_404, redirect, render
from django.urls import reverse

from calibration import standards as acts
from calibration.forms.standards import CertificateForm, StandardForm, WithdrawForm
from calibration.models import Certificate, Standard, StandardUse
from register import access
from register.auditing import Actor
from register.models import User

STANDARDS = Standard.objects.select_related("plant")


@dataclass(frozen=True)
class Reliance:
    """Whether a standard may be used today, in words, and how loudly to say it."""

    words: str
    css: str
    until: datetime.date | None


def reliance(standard: Standard, until: datetime.date | None, today: datetime.date) -> Reliance:
    """How a standard with its longest-lasting certificate stands today."""
    if standard.state != Standard.State.IN_USE:
        return Reliance(standard.get_state_display(), "quiet", until)
    if until is None:
        return Reliance("no certificate", "unknown", None)
    if until < today:
        return Reliance("certificate lapsed", "out", until)
    if (until - today).days <= 42:
        return Reliance("certificate lapses soon", "near", until)
    return Reliance("in date", "ok", until)


@dataclass(frozen=True)
class Use:
    """One test made with a standard."""

    test_id: int
    tested_on: datetime.date
    instrument: str
    runs: str
    part: str
    certificate: str
    exception: str


def recent_uses(standard: Standard, most: int = 50) -> list[Use]:
    """The newest tests of the counting versions made with a standard, one line each, newest first."""
    rows = (
        standard.uses.filter(run__record__superseded_by__isnull=True)
        .order_by("-run__tested_on", "-run__record__test_id", "run__kind")
        .values_list(
            "run__record__test_id",
            "run__tested_on",
            "run__record__test__tag__number",
            "run__record__test__transmitter__serial",
            "run__kind",
            "part",
            "certificate__number",
            "exception",
        )[: 2 * most + 1]
    )
    found: dict[tuple[int, str, str | None], Use] = {}
    for test_id, day, number, serial, kind, part, certificate, exception in rows:
        key = (test_id, part, certificate)
        if held := found.get(key):
            found[key] = replace(held, runs=f"{held.runs}, {kind}", exception=held.exception or exception)
        else:
            words = StandardUse.Part(part).label
            found[key] = Use(test_id, day, number or serial, kind, words, certificate or "none", exception)
    return list(found.values())[:most]


def standards(request: HttpRequest) -> HttpResponse:
    plant = access.chosen_plant(request)
    today = plant.today()
    rows = [
        (standard, reliance(standard, until, today))
        for standard, until in Standard.objects.filter(plant=plant).with_until()
    ]
    return render(
        request,
        "calibration/standards.html",
        {"plant": plant, "rows": rows, "may_edit": _may_edit(request, plant.pk)},
    )


def standard(request: HttpRequest, pk: int) -> HttpResponse:
    held = access.get(request, STANDARDS, "read", pk=pk)
    today = held.plant.today()
    certificates = list(held.certificates.all())
    until = max((c.valid_until for c in certificates if not c.withdrawn_at), default=None)
    return render(
        request,
        "calibration/standard.html",
        {
            "standard": held,
            "certificates": certificates,
            "uses": recent_uses(held),
            "reliance": reliance(held, until, today),
            "may_edit": _may_edit(request, held.plant_id),
        },
    )


def standard_new(request: HttpRequest) -> HttpResponse:
    plant = access.chosen_plant(request)
    access.in_plant(request, plant.pk, "edit standards")
    form = StandardForm(
        request.POST or None, decimal_comma=plant.decimal_comma, initial={"state": Standard.State.IN_USE}
    )
    if request.method == "POST" and form.is_valid():
        try:
            with transaction.atomic():
                made = acts.create_standard(
                    by=Actor.of(request), plant=plant, reason=form.cleaned_data["reason"], **form.values()
                )
        except IntegrityError:
            form.add_error("name", f"{plant} has a standard {form.cleaned_data['name']} already.")
        else:
            messages.success(request, f"{made.name} is registered. Add its certificate before it is used.")
            return redirect("standard", made.pk)
    return render(request, "calibration/standard_form.html", {"form": form, "plant": plant, "standard": None})


def standard_edit(request: HttpRequest, pk: int) -> HttpResponse:
    held = access.get(request, STANDARDS, "edit standards", pk=pk)
    initial = {name: getattr(held, name) for name in acts.STANDARD_FIELDS}
    form = StandardForm(request.POST or None, decimal_comma=held.plant.decimal_comma, initial=initial)
    if request.method == "POST" and form.is_valid():
        try:
            with transaction.atomic():
                acts.edit_standard(
                    by=Actor.of(request), standard=held, reason=form.cleaned_data["reason"], **form.values()
                )
        except IntegrityError:
            form.add_error("name", f"{held.plant} has a standard {form.cleaned_data['name']} already.")
        else:
            messages.success(request, f"{form.cleaned_data['name']} is changed.")
            return redirect("standard", held.pk)
    return render(request, "calibration/standard_form.html", {"form": form, "standard": held})


def certificate_new(request: HttpRequest, pk: int) -> HttpResponse:
    held = access.get(request, STANDARDS, "edit standards", pk=pk)
    form = CertificateForm(request.POST or None, standard=held)
    if request.method == "POST" and form.is_valid():
        try:
            with transaction.atomic():
                made = acts.add_certificate(
                    by=Actor.of(request), standard=held, reason=form.cleaned_data["reason"], **form.values()
                )
        except IntegrityError:
            form.add_error("number", f"Certificate {form.cleaned_data['number']} of {held.name} is here already.")
        else:
            messages.success(request, f"{held.name} may be used until {made.valid_until:%Y-%m-%d}.")
            return redirect("standard", held.pk)
    return render(request, "calibration/certificate_form.html", {"form": form, "standard": held})


def certificate_withdraw(request: HttpRequest, pk: int) -> HttpResponse:
    certificate = get_object_or_404(Certificate.objects.select_related("standard__plant"), pk=pk)
    access.in_plant(request, certificate.standard.plant_id, "edit standards")
    form = WithdrawForm(request.POST or None)
    if request.method == "POST" and form.is_valid():
        acts.withdraw_certificate(by=Actor.of(request), certificate=certificate, reason=form.cleaned_data["reason"])
        messages.success(request, f"Certificate {certificate.number} no longer counts.")
        return redirect("standard", certificate.standard_id)
    return render(
        request,
        "calibration/withdraw.html",
        {
            "form": form,
            "what": f"Withdraw certificate {certificate.number}",
            "say": "Tests already made with it keep naming it; new tests will not be offered it.",
            "back": certificate.standard.name,
            "back_address": reverse("standard", args=[certificate.standard_id]),
        },
    )


def _may_edit(request: HttpRequest, plant_id: int) -> bool:
    return isinstance(request.user, User) and access.may(request.user, "edit standards", plant_id)
