"""The page of a tag: what it is, how it stands, what happened, how its transmitter drifts."""

from __future__ import annotations

from functools import partial
from typing import Any

from django.http import HttpRequest, HttpResponse
from django.http.response import HttpResponseBase
from django.urls import reverse
from django.views.decorators.http import require_GET, require_POST

from calibration.contexts import drift as drift_page
from calibration.contexts import tag as tag_page
from calibration.contexts.drift import DriftView
from calibration.models import Standing
from calibration.opening import current_requirement
from calibration.queries import drifting
from calibration.queries.drifting import History
from calibration.views.drift_file import drift_file
from register import access
from register.fragments import answer, wants_part
from register.models import Tag


@require_GET
def tag(request: HttpRequest, pk: int) -> HttpResponse:
    access.get_tag(request, pk)
    shown = tag_page.tag_with_related(pk)
    history = drifting.of_tag(shown)
    context: dict[str, Any] = {
        "tag": shown,
        "drift": _drift(shown, history, request.GET.get("channel", "")),
        "export_url": reverse("tag-drift-export", args=[pk]),
    }
    if not wants_part(request):
        may = partial(access.allowed, request, shown.plant_id)
        page = tag_page.page_of(shown, history.tests, shown.plant.today())
        action = tag_page.next_action(page, may)
        context |= {
            "page": page,
            "action": action,
            "actions": tag_page.other_actions(page, may, action),
            "may_accept": may("accept flag"),
            "may_require": may("set requirement"),
            "may_range": may("re-range"),
            "may_approve": may("approve deferral"),
            "may_withdraw_deferral": may("withdraw deferral"),
        }
    return answer(request, "calibration/tag.html", "drift", context)


@require_POST
def tag_drift_export(request: HttpRequest, pk: int) -> HttpResponseBase:
    """The numbers behind the drift chart as a CSV file."""
    held = access.get_tag(request, pk)
    history = drifting.of_tag(held)
    view = _drift(held, history, request.POST.get("channel", ""))
    return drift_file(request, held, name=held.number, history=history, view=view)


def _drift(held: Tag, history: History, channel: str) -> DriftView:
    fitting = held.current_fitting
    due = Standing.objects.filter(pk=held.pk).values_list("due_on", flat=True).first()
    return drift_page.view_of(
        history,
        channel,
        whose=held.number,
        transmitter_id=fitting.transmitter_id if fitting else None,
        terms=drifting.terms_now(held, current_requirement(held), fitting.transmitter.head if fitting else None),
        due=due,
    )
