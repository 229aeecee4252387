"""Another range of a tag, and a range withdrawn."""

from __future__ import annotations

from typing import Any

from django.contrib import messages
from django.core.exceptions import ValidationError
from django.http import HttpRequest, HttpResponse
from django.shortcuts import get_object_or_404, redirect, render

from register import access, reranging, verdicts
from register.auditing import Actor
from register.forms.fields import ReasonForm, typed
from register.forms.ranges import RangeForm
from register.fragments import answer
from register.models import Range, Tag
from register.storing import fill


def tag_range(request: HttpRequest, pk: int) -> HttpResponse:
    tag = verdicts.tag_with_inputs(access.get_tag(request, pk, "re-range"))
    form = RangeForm(typed(request), plant=tag.plant, initial=_initial(tag))
    new = form.submit(
        lambda: reranging.set_range(
            by=Actor.of(request),
            reason=form.why,
            tag=tag,
            values=form.values("effective_from"),
            effective_from=form.cleaned_data["effective_from"],
        )
    )
    if new is not None:
        when = "is in force" if new.applied_at else "is planned"
        messages.success(request, f"{new} {when} from {new.effective_from} on.")
        return redirect("tag", tag.pk)
    return answer(request, "register/tag_range.html", "verdict", {"form": form, "tag": tag} | _what_if(request, tag))


def range_withdraw(request: HttpRequest, pk: int) -> HttpResponse:
    range_ = get_object_or_404(Range.objects.select_related("tag__plant", "person"), pk=pk)
    access.in_plant(request, range_.tag.plant_id, "re-range")
    form = ReasonForm(typed(request), asks="Why it was a mistake")
    done = form.submit(lambda: reranging.withdraw_range(by=Actor.of(request), reason=form.why, range_=range_))
    if done is not None:
        messages.success(request, f"The range {done} from {done.effective_from} is withdrawn.")
        return redirect("tag", range_.tag_id)
    return render(request, "register/range_withdraw.html", {"form": form, "range": range_, "tag": range_.tag})


def _initial(tag: Tag) -> dict[str, Any]:
    """The range in force as a start, else what the fitted head suggests."""
    today = tag.plant.today()
    now = tag.current_range
    if now is not None:
        names = ("lrv", "urv", "unit", "reference", "transfer", "low_cut_percent", "below_cut")
        return {name: getattr(now, name) for name in names} | {"effective_from": today}
    if tag.current_fitting is not None:
        transmitter = tag.current_fitting.transmitter
        return {
            "unit": transmitter.head.unit,
            "reference": transmitter.type.measures,
            "effective_from": today,
        }
    return {"unit": tag.pressure_unit, "effective_from": today}


def _what_if(request: HttpRequest, tag: Tag) -> dict[str, Any]:
    """The checks with the range that stands in the form, and heads that could carry it; nothing while it is none."""
    setting = _in_form(request, tag)
    if setting is None:
        return {"verdict": None}
    verdict = verdicts.of_range(tag, setting)
    wanted = verdict.broken or tag.current_fitting is None
    return {"verdict": verdict, "carriers": verdicts.carriers(tag, setting=setting) if wanted else []}


def _in_form(request: HttpRequest, tag: Tag) -> Range | None:
    given = request.POST if request.method == "POST" else request.GET
    shown = {name: given.get(name, "") for name in RangeForm.base_fields} if "lrv" in given else _initial(tag)
    form = RangeForm({**shown, "reason": "asked only", "effective_from": tag.plant.today()}, plant=tag.plant)
    if not form.is_valid():
        return None
    setting = Range(tag=tag)
    try:
        fill(setting, form.values("effective_from"))
    except ValidationError:
        return None
    return setting if setting.lrv_si != setting.urv_si else None
