"""What a tag asks of its tests, set from a day on; deferrals asked for, approved, withdrawn."""

from __future__ import annotations

from typing import Any

from django.contrib import messages
from django.http import HttpRequest, HttpResponse
from django.shortcuts import get_object_or_404, redirect, render

from calibration import scheduling
from calibration.forms.requirement import DeferralForm, RequirementForm
from calibration.models import Deferral, Requirement, Standing, ToleranceForm
from calibration.opening import current_requirement
from register import access
from register.auditing import Actor
from register.forms.fields import ReasonForm, typed
from register.models import Tag

_KEPT = (
    "mpe_form",
    "mpe_percent",
    "mpe_input",
    "input_unit",
    "as_left_percent",
    "as_left_input",
    "decision_rule",
    "interval_months",
    "anchor",
    "anchor_on",
    "grace_days",
    "lead_days",
    "point_list",
)


def tag_requirement(request: HttpRequest, pk: int) -> HttpResponse:
    tag = access.get_tag(request, pk, "set requirement")
    now = current_requirement(tag)
    form = RequirementForm(typed(request), tag=tag, initial=_initial(tag, now))
    new = form.submit(
        lambda: scheduling.set_requirement(
            by=Actor.of(request),
            reason=form.why,
            tag=tag,
            values=form.values("effective_from"),
            effective_from=form.cleaned_data["effective_from"],
        )
    )
    if new is not None:
        when = "is in force" if new.applied_at else "is planned"
        messages.success(request, f"The requirement {when} from {new.effective_from} on.")
        return redirect("tag", tag.pk)
    return render(request, "calibration/requirement_form.html", {"form": form, "tag": tag, "now": now})


def requirement_withdraw(request: HttpRequest, pk: int) -> HttpResponse:
    held = get_object_or_404(Requirement.objects.select_related("tag__plant", "point_list", "person"), pk=pk)
    access.in_plant(request, held.tag.plant_id, "set requirement")
    form = ReasonForm(typed(request), asks="Why it was a mistake")
    done = form.submit(lambda: scheduling.withdraw_requirement(by=Actor.of(request), reason=form.why, requirement=held))
    if done is not None:
        messages.success(request, f"The requirement from {held.effective_from} is withdrawn.")
        return redirect("tag", held.tag_id)
    context = {"form": form, "requirement": held, "tag": held.tag, "now": current_requirement(held.tag)}
    return render(request, "calibration/requirement_withdraw.html", context)


def tag_defer(request: HttpRequest, pk: int) -> HttpResponse:
    tag = access.get_tag(request, pk, "plan")
    form = DeferralForm(typed(request))
    made = form.submit(lambda: scheduling.defer(by=Actor.of(request), tag=tag, **form.cleaned_data))
    if made is not None:
        messages.success(request, f"Deferral until {made.until} is asked for. It counts once it is approved.")
        return redirect("tag", tag.pk)
    standing = Standing.objects.filter(pk=tag.pk).first()
    context = {"form": form, "tag": tag, "standing": standing, "second_person": _needs_second(tag)}
    return render(request, "calibration/deferral_form.html", context)


def deferral_approve(request: HttpRequest, pk: int) -> HttpResponse:
    held = _deferral(request, pk, "approve deferral")
    form = ReasonForm(typed(request), asks="Why it can be approved")
    done = form.submit(lambda: scheduling.approve_deferral(by=Actor.of(request), reason=form.why, deferral=held))
    if done is not None:
        messages.success(request, f"{held.tag} is deferred until {held.until}.")
        return redirect("tag", held.tag_id)
    context = _deferral_context(held) | {"form": form, "second_person": _needs_second(held.tag)}
    return render(request, "calibration/deferral_approve.html", context)


def deferral_withdraw(request: HttpRequest, pk: int) -> HttpResponse:
    held = _deferral(request, pk, "withdraw deferral")
    form = ReasonForm(typed(request), asks="Why it is withdrawn")
    done = form.submit(lambda: scheduling.withdraw_deferral(by=Actor.of(request), reason=form.why, deferral=held))
    if done is not None:
        messages.success(request, f"The deferral of {held.tag} until {held.until} is withdrawn.")
        return redirect("tag", held.tag_id)
    return render(request, "calibration/deferral_withdraw.html", _deferral_context(held) | {"form": form})


def _initial(tag: Tag, now: Requirement | None) -> dict[str, Any]:
    """The requirement in force as a start, else what most tags begin with."""
    today = tag.plant.today()
    if now is not None:
        return {name: getattr(now, name) for name in _KEPT} | {"effective_from": today}
    used = tag.current_range
    root = used is not None and used.transfer == "square root"
    lists = tag.plant.point_lists.filter(withdrawn_at__isnull=True)
    return {
        "mpe_form": ToleranceForm.SPAN,
        "anchor": Requirement.Anchor.LAST_TEST,
        "lead_days": 42,
        "input_unit": used.unit if used else "",
        "point_list": lists.filter(for_square_root=root).first() or lists.first(),
        "effective_from": today,
    }


def _needs_second(tag: Tag) -> bool:
    return tag.criticality in scheduling.SECOND_PERSON


def _deferral(request: HttpRequest, pk: int, permission: str) -> Deferral:
    held = get_object_or_404(Deferral.objects.select_related("tag__plant", "requested_by", "approved_by"), pk=pk)
    access.in_plant(request, held.tag.plant_id, permission)
    return held


def _deferral_context(held: Deferral) -> dict[str, Any]:
    return {"deferral": held, "tag": held.tag, "standing": Standing.objects.filter(pk=held.tag_id).first()}
