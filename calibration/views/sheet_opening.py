"""Pages that open sheets."""

from __future__ import annotations

import uuid

from django.core.exceptions import ValidationError
from django.http import HttpRequest, HttpResponse
from django.shortcuts import redirect, render

from calibration import opening
from calibration.forms.sheets import BenchForm
from calibration.models import Test
from register import access
from register.auditing import Actor
from register.forms.fields import ReasonForm, typed

TESTS = Test.objects.select_related("plant", "tag", "transmitter__maker", "current_record")


def sheet_open(request: HttpRequest, pk: int) -> HttpResponse:
    """What will be opened for a tag, sheets already open for it, and the button."""
    tag = access.get_tag(request, pk, "test")
    problems: list[str] = []
    if request.method == "POST":
        try:
            sheet = opening.open_sheet(
                by=Actor.of(request), reason="", tag=tag, sheet_id=_number(request.POST.get("sheet", ""))
            )
        except ValidationError as error:
            problems = error.messages
        else:
            return redirect("sheet", sheet.pk)
    lacking = opening.what_is_lacking(tag)
    fitting = tag.current_fitting
    return render(
        request,
        "calibration/sheet_open.html",
        {
            "tag": tag,
            "number": uuid.uuid4(),
            "problems": problems or lacking,
            "lacking": lacking,
            "fitting": fitting,
            "range": tag.current_range,
            "requirement": opening.current_requirement(tag),
            "going": opening.open_sheets(tag),
        },
    )


def sheet_bench(request: HttpRequest, pk: int) -> HttpResponse:
    """Range and tolerance for a spare on the bench."""
    transmitter = access.get_transmitter(request, pk, "test")
    head = transmitter.head
    initial = {
        "lrv": head.lrl,
        "urv": head.url,
        "unit": head.unit,
        "reference": transmitter.type.measures,
        "transfer": "linear",
        "mpe_form": "percent of span",
    }
    form = BenchForm(typed(request), plant=transmitter.plant, initial=initial)
    sheet = form.submit(
        lambda: opening.open_bench_sheet(
            by=Actor.of(request),
            reason="",
            transmitter=transmitter,
            sheet_id=_number(request.POST.get("sheet", "")),
            point_list=form.cleaned_data["point_list"],
            values=form.values("point_list"),
        )
    )
    if sheet is not None:
        return redirect("sheet", sheet.pk)
    return render(
        request,
        "calibration/sheet_bench.html",
        {"transmitter": transmitter, "form": form, "number": request.POST.get("sheet") or uuid.uuid4()},
    )


def sheet_correct(request: HttpRequest, pk: int) -> HttpResponse:
    """Why a signed test is to be corrected."""
    test = access.get(request, TESTS, "test", pk=pk)
    form = ReasonForm(typed(request))
    sheet = form.submit(
        lambda: opening.open_correction(
            by=Actor.of(request), reason=form.why, test=test, sheet_id=_number(request.POST.get("sheet", ""))
        )
    )
    if sheet is not None:
        return redirect("sheet", sheet.pk)
    return render(
        request,
        "calibration/sheet_correct_open.html",
        {"test": test, "form": form, "number": request.POST.get("sheet") or uuid.uuid4()},
    )


def _number(text: str) -> uuid.UUID:
    """The sheet's number as made by the device."""
    try:
        return uuid.UUID(text)
    except ValueError as error:
        raise ValidationError("The page sent no sheet number; load it again.") from error
