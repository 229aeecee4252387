"""Fitting, removing and swapping the transmitter of a tag."""

from __future__ import annotations

from django.contrib import messages
from django.http import HttpRequest, HttpResponse
from django.shortcuts import redirect, render

from register import access, fitting, verdicts
from register.auditing import Actor
from register.forms.fields import typed
from register.forms.fittings import FitForm, RemoveForm, SwapForm
from register.fragments import answer
from register.models import Tag
from register.queries import transmitters_with_serial


def tag_fit(request: HttpRequest, pk: int) -> HttpResponse:
    tag = verdicts.tag_with_inputs(access.get_tag(request, pk, "fit"))
    if tag.current_fitting is not None:
        return redirect("tag-swap", tag.pk)
    form = FitForm(typed(request), plant=tag.plant, initial={"on": tag.plant.today()})
    done = form.submit(
        lambda: fitting.fit(
            by=Actor.of(request),
            reason=form.why,
            tag=tag,
            transmitter=form.cleaned_data["transmitter"],
            on=form.cleaned_data["on"],
        )
    )
    if done is not None:
        messages.success(request, f"{done.transmitter} is fitted at {tag} since {done.fitted_on}.")
        return redirect("tag", tag.pk)
    return answer(request, "register/tag_fit.html", "verdict", {"form": form, "tag": tag} | _what_if(request, tag))


def tag_swap(request: HttpRequest, pk: int) -> HttpResponse:
    tag = verdicts.tag_with_inputs(access.get_tag(request, pk, "fit"))
    if tag.current_fitting is None:
        return redirect("tag-fit", tag.pk)
    form = SwapForm(typed(request), plant=tag.plant, initial={"on": tag.plant.today()})
    done = form.submit(
        lambda: fitting.swap(
            by=Actor.of(request),
            reason=form.why,
            tag=tag,
            transmitter=form.cleaned_data["transmitter"],
            on=form.cleaned_data["on"],
            whereabouts=form.cleaned_data["whereabouts"],
        )
    )
    if done is not None:
        messages.success(
            request, f"{done.transmitter} is fitted at {tag} since {done.fitted_on}; it is not tested there yet."
        )
        return redirect("tag", tag.pk)
    return answer(request, "register/tag_fit.html", "verdict", {"form": form, "tag": tag} | _what_if(request, tag))


def tag_remove(request: HttpRequest, pk: int) -> HttpResponse:
    tag = verdicts.tag_with_inputs(access.get_tag(request, pk, "fit"))
    if tag.current_fitting is None:
        return redirect("tag", tag.pk)
    form = RemoveForm(typed(request), initial={"on": tag.plant.today()})
    done = form.submit(
        lambda: fitting.remove(
            by=Actor.of(request),
            reason=form.why,
            tag=tag,
            on=form.cleaned_data["on"],
            whereabouts=form.cleaned_data["whereabouts"],
        )
    )
    if done is not None:
        messages.success(request, f"{done.transmitter} is removed from {tag} since {done.removed_on}.")
        return redirect("tag", tag.pk)
    return render(request, "register/tag_remove.html", {"form": form, "tag": tag})


def _what_if(request: HttpRequest, tag: Tag) -> dict[str, object]:
    """The checks with the transmitter whose serial number stands in the form, if there is one."""
    serial = (request.POST if request.method == "POST" else request.GET).get("transmitter", "").strip()
    found = transmitters_with_serial(tag.plant, serial) if serial else []
    device = found[0] if len(found) == 1 else None
    verdict = verdicts.of_transmitter(tag, device) if device is not None else None
    return {
        "serial": serial,
        "device": device,
        "verdict": verdict,
        "carriers": verdicts.carriers(tag) if verdict is None or verdict.broken else [],
    }
