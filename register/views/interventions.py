"""What was done to a transmitter between tests, a new head among it."""

from __future__ import annotations

from django.contrib import messages
from django.http import HttpRequest, HttpResponse
from django.shortcuts import get_object_or_404, redirect, render

from register import access, editing, intervening
from register.auditing import Actor
from register.forms.fields import ReasonForm, typed
from register.forms.transmitters import HeadForm, InterventionForm
from register.models import Intervention, Transmitter


def transmitter_head(request: HttpRequest, pk: int) -> HttpResponse:
    """Another head: put in, or only written down wrongly."""
    transmitter = access.get_transmitter(request, pk, "edit register")
    form = HeadForm(typed(request), initial={"on": transmitter.plant.today(), "head": transmitter.head_id})
    done = form.submit(lambda: _another_head(request, transmitter, form))
    if done is not None:
        messages.success(request, f"{transmitter} has the head {done} now; its limits are checked again.")
        return redirect("transmitter", transmitter.pk)
    return render(request, "register/transmitter_head.html", {"form": form, "transmitter": transmitter})


def intervention_new(request: HttpRequest, pk: int) -> HttpResponse:
    transmitter = access.get_transmitter(request, pk, "fit")
    form = InterventionForm(typed(request), initial={"done_on": transmitter.plant.today()})
    done = form.submit(
        lambda: intervening.record_intervention(
            by=Actor.of(request),
            reason=form.why,
            transmitter=transmitter,
            kind=form.cleaned_data["kind"],
            done_on=form.cleaned_data["done_on"],
            breaks_history=form.cleaned_data["breaks_history"],
        )
    )
    if done is not None:
        messages.success(request, f"Noted: {done}.")
        return redirect("transmitter", transmitter.pk)
    context = {
        "form": form,
        "transmitter": transmitter,
        "may_change_head": access.allowed(request, transmitter.plant_id, "edit register"),
    }
    return render(request, "register/intervention_new.html", context)


def intervention_withdraw(request: HttpRequest, pk: int) -> HttpResponse:
    rows = Intervention.objects.select_related("transmitter__maker", "transmitter__plant", "tag", "head_before")
    intervention = get_object_or_404(rows, pk=pk)
    access.in_plant(request, intervention.transmitter.plant_id, "edit register")
    form = ReasonForm(typed(request), asks="Why it was a mistake")
    done = form.submit(
        lambda: intervening.withdraw_intervention(by=Actor.of(request), reason=form.why, intervention=intervention)
    )
    if done is not None:
        messages.success(request, f"Withdrawn: {intervention}.")
        return redirect("transmitter", intervention.transmitter_id)
    context = {"form": form, "intervention": intervention, "transmitter": intervention.transmitter}
    return render(request, "register/intervention_withdraw.html", context)


def _another_head(request: HttpRequest, transmitter: Transmitter, form: HeadForm) -> str:
    by, head = Actor.of(request), form.cleaned_data["head"]
    if form.cleaned_data["how"] == HeadForm.WRONG:
        editing.correct_head(by=by, reason=form.why, transmitter=transmitter, head=head)
    else:
        intervening.change_head(by=by, reason=form.why, transmitter=transmitter, head=head, on=form.cleaned_data["on"])
    return str(head.code)
