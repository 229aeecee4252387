"""The page of a finished test: the record, its versions, its readings as a file, review and sending back."""

from __future__ import annotations

import datetime
import json
from zoneinfo import ZoneInfo

from django.contrib import messages
from django.core.exceptions import ValidationError
from django.db.models import F
from django.http import Http404, HttpRequest, HttpResponse
from django.http.response import HttpResponseBase
from django.shortcuts import redirect, render
from django.views.decorators.http import require_GET

from calibration import reviewing
from calibration.contexts import test as test_page
from calibration.forms.sheets import ReviewForm, SendBackForm
from calibration.models import Record, Sheet, Standing, Test
from calibration.passwords import confirmed
from calibration.queries.choosing import number_of
from register import access, exporting
from register.auditing import Actor

MOST_VERSIONS = 1000
TESTS = Test.objects.select_related("plant", "tag__area", "transmitter__maker", "transmitter__type")


@require_GET
def test(request: HttpRequest, pk: int) -> HttpResponse:
    """One version of a test, the newest unless another is asked for."""
    held = access.get(request, TESTS, "read", pk=pk)
    return _shown(request, held)


@require_GET
def test_readings(request: HttpRequest, pk: int) -> HttpResponseBase:
    """The readings of the version asked for, as CSV."""
    held = access.get(request, TESTS, "read", pk=pk)
    record = _record(held, request.GET.get("version", ""))
    exporting.note_export(
        by=Actor.of(request), thing=held, plant=held.plant, remark=f"readings of record {record.position} as CSV"
    )
    name = f"test-{held.pk}-record-{record.position}.csv"
    return exporting.csv_response(name, test_page.CSV_HEAD, test_page.csv_rows(record))


def test_review(request: HttpRequest, pk: int) -> HttpResponse:
    """Sign that the record was reviewed."""
    return _signed(request, pk, back=False)


def test_send_back(request: HttpRequest, pk: int) -> HttpResponse:
    """Send the record back to be corrected."""
    return _signed(request, pk, back=True)


def _signed(request: HttpRequest, pk: int, *, back: bool) -> HttpResponse:
    held = access.get(request, TESTS, "review", pk=pk)
    form = (SendBackForm if back else ReviewForm)(request.POST or None)
    if request.method == "POST" and form.is_valid():
        version = request.POST.get("record", "")
        try:
            confirmed(request, access.person(request), form.cleaned_data["password"])
            act = reviewing.send_back if back else reviewing.review
            act(
                by=Actor.of(request),
                test=held,
                record_id=number_of(version) or 0,
                remarks=form.cleaned_data["remarks"],
            )
        except ValidationError as error:
            form.refuse(error)
        else:
            messages.success(request, "The record is sent back." if back else "The record is reviewed.")
            return redirect("test", held.pk)
    return _shown(request, held, form=form, back=back)


def _shown(request: HttpRequest, held: Test, *, form: ReviewForm | None = None, back: bool = False) -> HttpResponse:
    record = _record(held, request.GET.get("version", ""))
    zone = ZoneInfo(held.plant.time_zone)
    person = access.person(request)
    newest = record.pk == held.current_record_id
    open_states = {Test.State.SIGNED, Test.State.REVIEWED}
    mine = access.may(person, "review", held.plant_id) and newest and held.state in open_states
    context = {
        "test": held,
        "view": test_page.view_of(record),
        "plot": test_page.plot_of(record),
        "versions": _versions(held, zone),
        "newest": newest,
        "acceptance": test_page.acceptance_of(held, Standing.objects.filter(tag=held.tag_id).first()),
        "changes": _changes(record),
        "made": record.made_at.astimezone(zone),
        "may_review": mine and held.state == Test.State.SIGNED,
        "may_send_back": mine,
        "took_part": mine and reviewing.took_part(person, held),
        "may_correct": newest and not record.transcribed and access.may(person, "test", held.plant_id),
        "correcting": Sheet.objects.filter(corrects=held, ended_at=None).select_related("opened_by").first(),
        "form": form,
        "back": back,
    }
    return render(request, "calibration/test.html", context)


def _record(held: Test, version: str) -> Record:
    """The version asked for, with everything the page shows at hand."""
    records = (
        Record.objects.filter(test=held)
        .select_related("plant", "head__type__maker", "made_by", "supersedes")
        .prefetch_related(
            "runs__readings",
            "runs__figures",
            "runs__standards__standard",
            "runs__standards__certificate",
            "runs__standards__exception_by",
            "signatures",
        )
    )
    if version:
        number = number_of(version)
        if number is None or number > MOST_VERSIONS:
            raise Http404
        record = records.filter(version=number).first()
    else:
        record = records.filter(test__current_record=F("pk")).first()
    if record is None:
        raise Http404
    record.test = held
    return record


def _versions(held: Test, zone: ZoneInfo) -> list[tuple[Record, datetime.datetime]]:
    """All versions, newest first, each with its time at the plant."""
    rows = Record.objects.filter(test=held).select_related("made_by").defer("content", "basis", "answers")
    return [(row, row.made_at.astimezone(zone)) for row in rows.order_by("-version")]


def _changes(record: Record) -> list[tuple[str, str, str]]:
    if record.supersedes is None:
        return []
    return test_page.changes_between(json.loads(record.supersedes.content), json.loads(record.content))
