"""A tag: new, edited, out of service and back."""

from __future__ import annotations

from functools import partial

from django.contrib import messages
from django.http import HttpRequest, HttpResponse
from django.shortcuts import redirect, render

from register import access, editing
from register.auditing import Actor
from register.forms.fields import typed
from register.forms.tags import BackInServiceForm, EditTagForm, NewTagForm, OutOfServiceForm, initial_of_tag
from register.queries import changes_since, latest_change


def tag_new(request: HttpRequest) -> HttpResponse:
    plant = access.chosen_plant(request)
    access.in_plant(request, plant.pk, "edit register")
    form = NewTagForm(typed(request), plant=plant, initial={"area": request.GET.get("area")})
    tag = form.submit(lambda: editing.create_tag(by=Actor.of(request), plant=plant, values=form.values()))
    if tag is not None:
        messages.success(request, f"{tag} is in the register. Next: fit a transmitter and give it a range.")
        return redirect("tag", tag.pk)
    return render(request, "register/tag_form.html", {"form": form, "plant": plant, "areas": plant.areas.exists()})


def tag_edit(request: HttpRequest, pk: int) -> HttpResponse:
    tag = access.get_tag(request, pk, "edit register")
    form = EditTagForm(
        typed(request),
        plant=tag.plant,
        initial=initial_of_tag(tag),
        latest=latest_change(tag),
        changes=partial(changes_since, tag, fields=NewTagForm.base_fields),
    )
    edited = form.submit(lambda: editing.edit_tag(by=Actor.of(request), reason=form.why, tag=tag, values=form.values()))
    if edited is not None:
        messages.success(request, f"{edited} is changed.")
        return redirect("tag", tag.pk)
    return render(request, "register/tag_form.html", {"form": form, "plant": tag.plant, "tag": tag, "areas": True})


def tag_out_of_service(request: HttpRequest, pk: int) -> HttpResponse:
    """Takes a tag out of service, or puts it back."""
    tag = access.get_tag(request, pk, "edit register")
    by = Actor.of(request)
    if tag.out_of_service_on is None:
        leaving = OutOfServiceForm(typed(request), initial={"on": tag.plant.today()})
        done = leaving.submit(
            lambda: editing.take_out_of_service(by=by, reason=leaving.why, tag=tag, on=leaving.cleaned_data["on"])
        )
        if done is not None:
            messages.success(request, f"{tag} is out of service since {done.out_of_service_on}.")
            return redirect("tag", tag.pk)
        return render(request, "register/tag_out_of_service.html", {"form": leaving, "tag": tag})
    returning = BackInServiceForm(typed(request))
    done = returning.submit(lambda: editing.return_to_service(by=by, reason=returning.why, tag=tag))
    if done is not None:
        messages.success(request, f"{tag} is in service again.")
        return redirect("tag", tag.pk)
    return render(request, "register/tag_out_of_service.html", {"form": returning, "tag": tag})
