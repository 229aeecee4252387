"""The one address that takes entries, field by field from htmx or as a JSON list; live judging; news of others."""

from __future__ import annotations

import datetime
import json
from collections.abc import Sequence
from typing import Any

from django.core.exceptions import ValidationError
from django.http import HttpRequest, HttpResponse, HttpResponseBadRequest, JsonResponse
from django.shortcuts import render
from django.utils import timezone
from django.utils.dateparse import parse_datetime
from django.views.decorators.http import require_GET

from calibration.arriving import entries_from_json, entry_from_form
from calibration.contexts import sheet as sheet_page
from calibration.contexts.results import result_now
from calibration.models import Sheet
from calibration.queries.drafts import Draft, far_from, readable
from calibration.queries.entered import Names
from calibration.queries.entries import NewEntry
from calibration.sheet_fields import KINDS, PRESENT, label, reading, reading_of
from calibration.storing_entries import Stored, add_entries
from calibration.views.sheet import SHEETS
from calibration.views.sheet_contexts import run_state
from register import access
from register.auditing import Actor


def sheet_entries(request: HttpRequest, pk: object) -> HttpResponse:
    """Take entries (POST), or show all that were ever made (GET)."""
    if request.method != "POST":
        return _history(request, access.get(request, SHEETS, "read", pk=pk))
    held = access.get(request, SHEETS, "test", pk=pk)
    as_json = request.content_type == "application/json"
    try:
        entries = entries_from_json(request.body) if as_json else [entry_from_form(request.POST)]
    except ValidationError as error:
        return JsonResponse({"error": error.messages[0]}, status=400)
    stored = add_entries(by=Actor.of(request), sheet_id=held.pk, entries=entries)
    if as_json:
        return JsonResponse(_told(stored, entries))
    return _fragment(request, stored, entries[0])


@require_GET
def sheet_judge(request: HttpRequest, pk: object) -> HttpResponse:
    """The result of a reading while it is being typed; nothing is stored."""
    held = access.get(request, SHEETS, "read", pk=pk)
    kind, key = request.GET.get("kind", ""), request.GET.get("key", "")
    if kind not in KINDS or reading_of(reading(kind, key, "measured")) is None:
        return HttpResponseBadRequest("No such reading.")
    draft = Draft(held)
    view = sheet_page.one_reading(draft, kind, key, sheet_page.Viewer(access.person(request)))
    if view is None:
        return HttpResponseBadRequest("No such reading.")
    applied, measured = (request.GET.get(reading(kind, key, what), "").strip() for what in ("applied", "measured"))
    figures, problems = readable(draft.basis, applied, draft.runs[kind].unit, measured)
    row = next((row for row in draft.runs[kind].readings if row.key.partition("-")[0] == key.partition("-")[0]), None)
    result = result_now(draft.basis, kind, *figures, up=row is None or row.direction > 0) if figures else None
    context = {
        "reading": view,
        "result": result,
        "problems": list(problems.values()),
        "caution": far_from(draft.basis, row.percent, figures[0]) if figures and row else "",
        "live": True,
        "sheet": held,
        "may_test": True,
    }
    return render(request, "calibration/sheet_run.html#result", context)


@require_GET
def sheet_news(request: HttpRequest, pk: object) -> HttpResponse:
    """What others did since the page was loaded."""
    held = access.get(request, SHEETS, "read", pk=pk)
    since = _moment(request.GET.get("since", ""))
    device = request.GET.get("device", "")
    draft = Draft(held)
    fresh = [
        entry
        for entry in sorted(draft.entries, key=lambda entry: entry.received_at, reverse=True)
        if entry.received_at > since
        and entry.field != PRESENT
        and not (device and entry.device.startswith(device))
        and entry.device != "site"
    ]
    mine = access.person(request).pk
    names = Names(held.plant_id)
    lines = [
        {
            "who": "You, on another device," if entry.person_id == mine else str(entry.person),
            "what": names.deed(entry),
            "at": sheet_page.clock(entry.received_at, draft.zone),
        }
        for entry in fresh[:3]
    ]
    context = {
        "sheet": held,
        "others": sheet_page.others(draft, access.person(request), timezone.now()),
        "fresh": lines,
        "more": max(0, len(fresh) - 3),
        "moved": held.get_stage_display() if request.GET.get("stage") not in ("", held.stage) else "",
    }
    return render(request, "calibration/sheet.html#news", context)


def _moment(text: str) -> datetime.datetime:
    """The time in an address, or now where it holds none."""
    try:
        at = parse_datetime(text)
    except ValueError:
        at = None
    return at if at is not None and at.tzinfo is not None else timezone.now()


def _history(request: HttpRequest, held: Sheet) -> HttpResponse:
    draft = Draft(held)
    entries = held.entries.select_related("person").exclude(field=PRESENT).order_by("received_at", "device", "sequence")
    names = Names(held.plant_id)
    rows = [
        {
            "at": sheet_page.clock(entry.received_at, draft.zone),
            "who": str(entry.person),
            "field": label(entry.field),
            "text": names.text(entry),
            "device": entry.device,
            "settles": entry.settles,
        }
        for entry in entries
    ]
    return render(request, "calibration/sheet_entries.html", {"sheet": held, "rows": rows})


def _fragment(request: HttpRequest, stored: Stored, new: NewEntry) -> HttpResponse:
    """What htmx puts beside the field: its result where it is a reading, else a note; and the state of the run."""
    draft = stored.draft
    viewer = sheet_page.Viewer(access.person(request))
    refused = [why for _, why in stored.refused]
    context: dict[str, Any] = {"sheet": draft.sheet, "draft": draft, "refused": refused, "saved": not refused}
    belongs = reading_of(new.field)
    if belongs is not None and (view := sheet_page.one_reading(draft, *belongs, viewer)) is not None:
        context |= {"reading": view, "result": view.result, "oob": True}
        context |= {"run": run_state(draft, belongs[0], viewer)}
        response = render(request, "calibration/sheet_run.html#saved", context)
    elif new.field.endswith("-with") and not refused:
        views = sheet_page.standard_views(draft, new.field.partition(".")[0], viewer)
        context["choice"] = next(view for view in views if view.field.name == new.field)
        response = render(request, "calibration/sheet.html#choice", context)
    else:
        context["field"] = sheet_page.field_view(draft, new.field, viewer, "; ".join(refused))
        response = render(request, "calibration/sheet.html#note", context)
    response["HX-Trigger"] = json.dumps({"entries-told": _told(stored, [new])})
    return response


def _told(stored: Stored, entries: Sequence[NewEntry]) -> dict[str, Any]:
    called = {entry.id: label(entry.field) for entry in entries}
    return {
        "saved": [str(number) for number in stored.saved],
        "refused": [{"id": str(number), "what": called[number], "why": why} for number, why in stored.refused],
        "clashes": [kept.name for kept in stored.draft.clashes],
        "stage": stored.draft.sheet.stage,
        "at": sheet_page.clock(timezone.now(), stored.draft.zone),
    }
