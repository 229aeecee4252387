"""The audit trail of a plant: who changed what, when, from where, before, after and why."""

from __future__ import annotations

import datetime
import heapq
import re
import uuid
from collections.abc import Iterator
from dataclasses import dataclass
from typing import Any, Final
from urllib.parse import urlencode
from zoneinfo import ZoneInfo

from django.http import Http404, HttpRequest, HttpResponse
from django.http.response import HttpResponseBase
from django.shortcuts import redirect, render
from django.urls import NoReverseMatch, reverse
from django.views.decorators.http import require_GET, require_POST

from register import access, exporting
from register.auditing import Actor
from register.forms.audit import TrailForm
from register.fragments import answer
from register.models import AuditEntry, Plant
from register.paging import page_of
from register.queries import Trail, field_in_words, type_in_words

#: Pages of the things that have one of their own.
PAGES: Final = {
    "register.tag": "tag",
    "register.transmitter": "transmitter",
    "register.transmittertype": "type",
    "calibration.standard": "standard",
    "calibration.test": "test",
    "calibration.sheet": "sheet",
}
#: A value that is a moment, as the trail keeps it.
MOMENT: Final = re.compile(r"^\d{4}-\d\d-\d\d \d\d:\d\d:\d\d(\.\d{6})?\+00:00$")
HEAD: Final = (
    "act",
    "at (UTC)",
    "person",
    "from address",
    "kind",
    "thing",
    "of which",
    "field",
    "before",
    "after",
    "reason",
)


@dataclass(frozen=True, slots=True)
class Line:
    """An entry as the page shows it: times at the plant, words instead of column names."""

    entry: AuditEntry
    at: str
    before: str
    after: str
    kind_of_thing: str
    field: str
    url: str


@require_GET
def audit(request: HttpRequest) -> HttpResponse:
    """The entries that the filter asks for, newest first."""
    plant = access.chosen_plant(request)
    form = TrailForm(request.GET)
    page = page_of(request, *_asked(form, plant).entries(), order=("-id",), what="entries")
    context = {
        "plant": plant,
        "form": form,
        "lines": [_line(entry, plant) for entry in page.rows],
        "paging": page,
        "asked": [(name, value) for name, value in request.GET.items() if name in form.fields and value],
    }
    return answer(request, "register/audit.html", "rows", context)


@require_GET
def act(request: HttpRequest, pk: uuid.UUID) -> HttpResponse:
    """All entries of one act, in full."""
    for plant in access.readable_plants(access.person(request)):
        found = [entry for entries in Trail(plant).entries() for entry in entries.filter(act=pk).order_by("id")]
        if found:
            access.in_plant(request, plant.pk, "read")
            context = {"plant": plant, "lines": [_line(entry, plant) for entry in found], "first": found[0]}
            return render(request, "register/audit_act.html", context)
    raise Http404


@require_POST
def export(request: HttpRequest) -> HttpResponseBase:
    """The same entries as a CSV file; that it was taken is noted in the trail itself."""
    plant = access.chosen_plant(request)
    form = TrailForm(request.POST)
    if not form.is_valid():
        asked = {name: value for name, value in request.POST.items() if name in form.fields}
        return redirect(f"{access.address_in(plant, 'audit')}&{urlencode(asked)}")
    remark = "; ".join(f"{name}: {value}" for name, value in form.cleaned_data.items() if value)
    exporting.note_export(
        by=Actor.of(request), thing=plant, plant=plant, remark=f"audit trail as CSV ({remark or 'all of it'})"
    )
    return exporting.csv_response(f"audit-{plant.code}-{plant.today()}.csv", HEAD, _rows(_asked(form, plant)))


def _asked(form: TrailForm, plant: Plant) -> Trail:
    """The trail that the form asks for, without what could not be read."""
    form.is_valid()
    return Trail(plant, **{name: value for name, value in form.cleaned_data.items() if value})


def _rows(asked: Trail) -> Iterator[tuple[Any, ...]]:
    sets = [entries.order_by("-id").iterator(chunk_size=2000) for entries in asked.entries()]
    for entry in heapq.merge(*sets, key=lambda entry: -entry.pk):
        yield _row(entry)


def _row(entry: AuditEntry) -> tuple[Any, ...]:
    return (
        entry.act,
        entry.at.astimezone(datetime.UTC).strftime("%Y-%m-%d %H:%M:%S"),
        entry.person_name,
        entry.remote_address,
        entry.get_kind_display(),
        type_in_words(entry.thing_type),
        entry.thing_label,
        field_in_words(entry.thing_type, entry.field) if entry.field else "",
        entry.before,
        entry.after,
        entry.reason,
    )


def _line(entry: AuditEntry, plant: Plant) -> Line:
    url = ""
    if entry.thing_type in PAGES and entry.thing_id:
        try:
            url = reverse(PAGES[entry.thing_type], args=[entry.thing_id])
        except NoReverseMatch:
            url = ""
    kind = type_in_words(entry.thing_type)
    zone = ZoneInfo(plant.time_zone)
    return Line(
        entry=entry,
        at=_at_plant(entry.at, zone),
        before=MOMENT.sub(lambda found: _at_plant(datetime.datetime.fromisoformat(found[0]), zone), entry.before),
        after=MOMENT.sub(lambda found: _at_plant(datetime.datetime.fromisoformat(found[0]), zone), entry.after),
        kind_of_thing="" if entry.thing_label.startswith(f"{kind} ") else kind,
        field=field_in_words(entry.thing_type, entry.field) if entry.field else "",
        url=url,
    )


def _at_plant(moment: datetime.datetime, zone: ZoneInfo) -> str:
    return moment.astimezone(zone).strftime("%Y-%m-%d %H:%M:%S")
