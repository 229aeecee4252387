"""Ways a sheet ends without a result, exceptions, and the settling of clashes."""

from __future__ import annotations

import uuid

from django.contrib import messages
from django.core.exceptions import ValidationError
from django.http import HttpRequest, HttpResponse
from django.shortcuts import get_object_or_404, redirect, render
from django.urls import reverse
from django.utils import timezone
from django.views.decorators.http import require_POST

from calibration import sheets
from calibration.forms.sheets import ExceptionForm
from calibration.models import Standard
from calibration.passwords import named
from calibration.queries.choosing import candidates
from calibration.queries.drafts import Draft
from calibration.queries.entries import NewEntry
from calibration.sheet_fields import label
from calibration.storing_entries import add_entries, uuid_of
from calibration.views.sheet import SHEETS, keep_form, shown
from register import access
from register.auditing import Actor
from register.forms.fields import ReasonForm, typed


def sheet_could_not_test(request: HttpRequest, pk: object) -> HttpResponse:
    """Why it could not be tested."""
    held = access.get(request, SHEETS, "test", pk=pk)
    form = ReasonForm(typed(request), asks="Why it could not be tested")
    if form.submit(lambda: sheets.could_not_test(by=Actor.of(request), reason=form.why, sheet_id=held.pk)):
        return redirect("sheet", held.pk)
    context = {"sheet": held, "form": form, "draft": Draft(held)}
    return render(request, "calibration/sheet_could_not_test.html", context)


def sheet_abandon(request: HttpRequest, pk: object) -> HttpResponse:
    """Why the sheet is abandoned."""
    held = access.get(request, SHEETS, "test", pk=pk)
    form = ReasonForm(typed(request))
    if form.submit(lambda: sheets.abandon(by=Actor.of(request), reason=form.why, sheet_id=held.pk)):
        messages.success(request, "The sheet is abandoned; what was entered stays readable.")
        return redirect("sheet", held.pk)
    return render(request, "calibration/sheet_abandon.html", {"sheet": held, "form": form, "draft": Draft(held)})


def sheet_exception(request: HttpRequest, pk: object, standard: int) -> HttpResponse:
    """Who allows a lapsed certificate, and why; the person need not be the one signed in."""
    held = access.get(request, SHEETS, "read", pk=pk)
    excepted = get_object_or_404(Standard, pk=standard, plant=held.plant_id)
    person = access.person(request)
    known = person.get_username() if access.may(person, "allow exception", held.plant_id) else ""
    form = ExceptionForm(request.POST or None, initial={"username": known})
    if request.method == "POST" and form.is_valid():
        try:
            allowing = named(request, form.cleaned_data["username"], form.cleaned_data["password"])
            sheets.allow_exception(
                by=Actor(person=allowing, remote_address=Actor.of(request).remote_address),
                reason=form.cleaned_data["reason"],
                sheet_id=held.pk,
                standard=excepted,
            )
        except ValidationError as error:
            form.refuse(error)
        else:
            messages.success(request, f"{allowing} allows {excepted.name} on this sheet.")
            return redirect("sheet", held.pk)
    offered = {candidate.standard.pk: candidate for candidate in candidates(held.plant, held.plant.today())}
    context = {"sheet": held, "form": form, "standard": excepted, "candidate": offered.get(excepted.pk)}
    return render(request, "calibration/sheet_exception.html", context)


@require_POST
def sheet_settle(request: HttpRequest, pk: object) -> HttpResponse:
    """Decide between the versions of a field that the page showed."""
    held = access.get(request, SHEETS, "test", pk=pk)
    if refused := keep_form(request, held):
        return shown(request, access.get(request, SHEETS, "test", pk=pk), refused=refused)
    draft = Draft(held)
    name = request.POST.get("settle", "").partition(" ")[0]
    kept = draft.fields.get(name)
    chosen = request.POST.get("settle", "").partition(" ")[2]
    if kept is not None and kept.clashes:
        version = next((entry for entry in kept.versions if str(entry.id) == chosen), None)
        if version is not None:
            stored = add_entries(
                by=Actor.of(request),
                sheet_id=held.pk,
                entries=[
                    NewEntry(
                        id=uuid.uuid4(),
                        field=name,
                        text=version.text,
                        device=f"settling-{uuid.uuid4().hex[:12]}",
                        sequence=1,
                        base=version.id,
                        typed_at=timezone.now(),
                        settles=True,
                        seen=tuple(filter(None, map(uuid_of, request.POST.getlist(f"versions.{name}")))),
                    )
                ],
            )
            for _, why in stored.refused:
                messages.error(request, why)
    elif kept is not None:
        messages.info(request, f"{label(name)} is settled already.")
    return redirect(f"{reverse('sheet', args=[held.pk])}#f-{name.replace('.', '-')}")
