"""The page of a transmitter: its life over all tags, and how it drifts."""

from __future__ import annotations

from functools import partial
from typing import Any

from django.http import HttpRequest, HttpResponse
from django.http.response import HttpResponseBase
from django.urls import reverse
from django.views.decorators.http import require_GET, require_POST

from calibration.contexts import drift as drift_page
from calibration.contexts import transmitter as transmitter_page
from calibration.contexts.drift import DriftView
from calibration.models import Standing
from calibration.queries import drifting
from calibration.queries.drifting import History
from calibration.views.drift_file import drift_file
from register import access
from register.fragments import answer, wants_part
from register.models import Transmitter


@require_GET
def transmitter(request: HttpRequest, pk: int) -> HttpResponse:
    shown = access.get_transmitter(request, pk)
    history = drifting.of_transmitter(shown)
    context: dict[str, Any] = {
        "transmitter": shown,
        "drift": _drift(shown, history, request.GET.get("channel", "")),
        "export_url": reverse("transmitter-drift-export", args=[pk]),
    }
    if not wants_part(request):
        may = partial(access.allowed, request, shown.plant_id)
        page = transmitter_page.page_of(shown, history.tests, shown.plant.today())
        context |= {
            "page": page,
            "action": transmitter_page.next_action(page, may),
            "actions": transmitter_page.other_actions(page, may),
            "may_edit": may("edit register"),
        }
    return answer(request, "calibration/transmitter.html", "drift", context)


@require_POST
def transmitter_drift_export(request: HttpRequest, pk: int) -> HttpResponseBase:
    """The numbers behind the drift chart as a CSV file."""
    held = access.get_transmitter(request, pk)
    history = drifting.of_transmitter(held)
    view = _drift(held, history, request.POST.get("channel", ""))
    return drift_file(request, held, name=held.serial, history=history, view=view)


def _drift(held: Transmitter, history: History, channel: str) -> DriftView:
    due = Standing.objects.filter(transmitter_id=held.pk, plant=held.plant_id).values_list("due_on", flat=True).first()
    return drift_page.view_of(history, channel, whose=held.serial, transmitter_id=held.pk, terms=None, due=due)
