"""Pages of reference standards and their certificates."""

from __future__ import annotations

from django.contrib import messages
from django.http import HttpRequest, HttpResponse
from django.shortcuts import get_object_or_404, redirect, render
from django.urls import reverse

from calibration import standards as acts
from calibration.contexts.standard import reliance
from calibration.forms.standards import CertificateForm, StandardForm
from calibration.models import Certificate, Standard
from calibration.queries.uses import recent_uses
from register import access
from register.auditing import Actor
from register.forms.fields import ReasonForm, typed

STANDARDS = Standard.objects.select_related("plant")


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
        {"plant": plant, "rows": rows, "may_edit": access.allowed(request, plant.pk, "edit standards")},
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
            "may_edit": access.allowed(request, held.plant_id, "edit standards"),
        },
    )


def standard_new(request: HttpRequest) -> HttpResponse:
    plant = access.chosen_plant(request)
    access.in_plant(request, plant.pk, "edit standards")
    form = StandardForm(typed(request), decimal_comma=plant.decimal_comma, initial={"state": Standard.State.IN_USE})
    new = form.submit(lambda: acts.create_standard(by=Actor.of(request), plant=plant, reason=form.why, **form.values()))
    if new is not None:
        messages.success(request, f"{new.name} is registered. Add its certificate before it is used.")
        return redirect("standard", new.pk)
    return render(request, "calibration/standard_form.html", {"form": form, "plant": plant, "standard": None})


def standard_edit(request: HttpRequest, pk: int) -> HttpResponse:
    held = access.get(request, STANDARDS, "edit standards", pk=pk)
    initial = {name: getattr(held, name) for name in acts.STANDARD_FIELDS}
    form = StandardForm(typed(request), decimal_comma=held.plant.decimal_comma, initial=initial)
    edited = form.submit(
        lambda: acts.edit_standard(by=Actor.of(request), standard=held, reason=form.why, **form.values())
    )
    if edited is not None:
        messages.success(request, f"{edited.name} is changed.")
        return redirect("standard", held.pk)
    return render(request, "calibration/standard_form.html", {"form": form, "standard": held})


def certificate_new(request: HttpRequest, pk: int) -> HttpResponse:
    held = access.get(request, STANDARDS, "edit standards", pk=pk)
    form = CertificateForm(typed(request), standard=held)
    new = form.submit(
        lambda: acts.add_certificate(by=Actor.of(request), standard=held, reason=form.why, **form.values())
    )
    if new is not None:
        messages.success(request, f"{held.name} may be used until {new.valid_until:%Y-%m-%d}.")
        return redirect("standard", held.pk)
    return render(request, "calibration/certificate_form.html", {"form": form, "standard": held})


def certificate_withdraw(request: HttpRequest, pk: int) -> HttpResponse:
    certificate = get_object_or_404(Certificate.objects.select_related("standard__plant"), pk=pk)
    access.in_plant(request, certificate.standard.plant_id, "edit standards")
    form = ReasonForm(typed(request), asks="Why it is withdrawn")
    if form.submit(lambda: acts.withdraw_certificate(by=Actor.of(request), certificate=certificate, reason=form.why)):
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
