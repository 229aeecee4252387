"""The lists of tests and of sheets of a plant."""

from __future__ import annotations

from dataclasses import dataclass
from zoneinfo import ZoneInfo

from django.db.models import Q, QuerySet
from django.http import HttpRequest, HttpResponse
from django.utils.safestring import SafeString
from django.views.decorators.http import require_GET

from calibration.contexts.test import CSS
from calibration.drawing.marks import error_mark
from calibration.forms.lists_of_tests import SheetsFilter, TestsFilter
from calibration.models import Sheet, Test
from calibration.sheet_fields import ENDED
from register import access
from register.figures import signed
from register.fragments import answer
from register.models import Plant, Tag, Transmitter
from register.paging import page_of

#: So many tags or transmitters may begin with what was typed; more is no search.
MOST = 500


@dataclass(frozen=True, slots=True)
class TestLine:
    """A test as its row shows it."""

    test: Test
    mark: SafeString
    verdict: str
    css: str
    left: str
    left_css: str
    worst: str


@require_GET
def tests(request: HttpRequest) -> HttpResponse:
    """Tests of the plant, newest first."""
    plant = access.chosen_plant(request)
    form = TestsFilter(request.GET)
    form.is_valid()
    rows = _tests(plant, form.cleaned_data).select_related("tag", "transmitter__maker")
    page = page_of(request, rows, order=("-tested_on", "-id"), what="tests")
    context = {
        "form": form,
        "lines": [_line(test) for test in page.rows],
        "paging": page,
        "may_import": access.allowed(request, plant.pk, "import"),
    }
    return answer(request, "calibration/tests.html", "rows", context)


@require_GET
def sheets(request: HttpRequest) -> HttpResponse:
    """Sheets of the plant, newest first; open ones unless others are asked for."""
    plant = access.chosen_plant(request)
    form = SheetsFilter(request.GET)
    form.is_valid()
    rows = _sheets(request, plant, form.cleaned_data).select_related("tag", "transmitter__maker", "opened_by")
    page = page_of(request, rows, order=("-opened_at", "-id"), what="sheets")
    zone = ZoneInfo(plant.time_zone)
    lines = [(sheet, sheet.opened_at.astimezone(zone)) for sheet in page.rows]
    context = {"form": form, "lines": lines, "paging": page, "today": plant.today()}
    return answer(request, "calibration/sheets.html", "rows", context)


def _tests(plant: Plant, asked: dict[str, object]) -> QuerySet[Test]:
    rows = Test.objects.filter(plant=plant)
    if asked.get("state"):
        rows = rows.filter(state=asked["state"])
    if asked.get("verdict") == "none":
        rows = rows.filter(outcome=Test.Outcome.NOT_TESTED)
    elif asked.get("verdict"):
        rows = rows.filter(as_found_verdict=asked["verdict"])
    if asked.get("since"):
        rows = rows.filter(tested_on__gte=asked["since"])
    if asked.get("until"):
        rows = rows.filter(tested_on__lte=asked["until"])
    return rows.filter(_named(plant, asked))


def _sheets(request: HttpRequest, plant: Plant, asked: dict[str, object]) -> QuerySet[Sheet]:
    rows = Sheet.objects.filter(plant=plant).filter(_named(plant, asked))
    show = asked.get("show")
    if show in {"abandoned", "signed"}:
        return rows.filter(stage=show)
    rows = rows.exclude(stage__in=ENDED)
    return rows.filter(opened_by=access.person(request)) if show == "mine" else rows


def _named(plant: Plant, asked: dict[str, object]) -> Q:
    """Tags or transmitters that begin with what was typed."""
    text = str(asked.get("text") or "").strip()
    if not text:
        return Q()
    tags = Tag.objects.filter(plant=plant, number__istartswith=text).values_list("pk", flat=True)[:MOST]
    fitted = Transmitter.objects.filter(plant=plant, serial__istartswith=text).values_list("pk", flat=True)[:MOST]
    return Q(tag__in=list(tags)) | Q(transmitter__in=list(fitted))


def _line(test: Test) -> TestLine:
    verdict = test.as_found_verdict or test.get_outcome_display()
    words = f"as-found {verdict}"
    if test.as_left_verdict:
        words += f", as-left {test.as_left_verdict}"
    return TestLine(
        test=test,
        mark=error_mark(test.as_found_ratio, test.as_left_ratio, words),
        verdict=verdict,
        css=CSS.get(test.as_found_verdict, "unknown"),
        left=test.as_left_verdict,
        left_css=CSS.get(test.as_left_verdict, "unknown"),
        worst="" if test.as_found_worst is None else signed(test.as_found_worst, 3),
    )
