"""The register: every tag of a plant with its range in its head, its flags, its last verdict and its due date."""

from __future__ import annotations

from typing import Final

from django.http import HttpRequest, HttpResponse
from django.http.response import HttpResponseBase
from django.views.decorators.http import require_GET, require_POST

from calibration.contexts import rows
from calibration.queries import listing
from calibration.views import lists
from register import access
from register.fragments import answer

HEADS: Final = {"tag": "Tag", "area": "Area", "flag": "Flags", "error": "Last test", "due": "Due"}
FILTERS: Final = ("area", "service", "flag", "state", "verdict")


@require_GET
def register_list(request: HttpRequest) -> HttpResponse:
    plant = access.chosen_plant(request)
    today = plant.today()
    areas = lists.areas_of(plant)
    asked = lists.read_asked(request.GET, areas, sort="tag")
    page = listing.page(plant, asked, today, rows.COLUMNS)
    tag_url = lists.tag_url()
    context = {
        "asked": asked,
        "selects": lists.selects(asked, areas, *FILTERS),
        "rows": [rows.row_of(stored, today, tag_url) for stored in page.rows],
        "sorts": lists.sorts(asked, HEADS),
        "paging": lists.paging(page, asked),
        "filtered": lists.is_filtered(asked),
        "may_edit": access.allowed(request, plant.pk, "edit register"),
        "may_import": access.allowed(request, plant.pk, "import"),
    }
    return answer(request, "calibration/register_list.html", "rows", context)


@require_POST
def register_export(request: HttpRequest) -> HttpResponseBase:
    plant = access.chosen_plant(request)
    asked = lists.read_asked(request.POST, lists.areas_of(plant), sort="tag")
    return lists.export(request, plant, asked, name="register")
