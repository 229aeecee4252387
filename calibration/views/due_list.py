"""What is due: the same tags by their schedule states, with counts that no filter changes."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

from django.http import HttpRequest, HttpResponse
from django.http.response import HttpResponseBase
from django.views.decorators.http import require_GET, require_POST

from calibration.contexts import rows
from calibration.models import ScheduleState
from calibration.queries import listing
from calibration.queries.asking import Asked
from calibration.views import lists
from register import access
from register.fragments import answer

HEADS: Final = {"tag": "Tag", "area": "Area", "error": "Last test", "due": "Due"}
FILTERS: Final = ("area", "criticality", "verdict")
#: Most pressing first.
SHOWN: Final = (
    ScheduleState.OVERDUE,
    ScheduleState.IN_GRACE,
    ScheduleState.DUE,
    ScheduleState.NEVER_TESTED,
    ScheduleState.DEFERRED,
    ScheduleState.NOT_DUE,
    ScheduleState.NO_REQUIREMENT,
    ScheduleState.NOT_IN_SERVICE,
)


@dataclass(frozen=True, slots=True)
class Count:
    """How many tags are in a state, as a link to them."""

    words: str
    tone: str
    url: str
    current: bool


@require_GET
def due_list(request: HttpRequest) -> HttpResponse:
    plant = access.chosen_plant(request)
    today = plant.today()
    areas = lists.areas_of(plant)
    asked = lists.read_asked(request.GET, areas, sort="due")
    page = listing.page(plant, asked, today, rows.COLUMNS)
    tag_url = lists.tag_url()
    context = {
        "asked": asked,
        "counts": _counts(asked, listing.state_counts(plant, today)),
        "selects": lists.selects(asked, areas, *FILTERS),
        "rows": [rows.row_of(stored, today, tag_url) for stored in page.rows],
        "sorts": lists.sorts(asked, HEADS),
        "paging": lists.paging(page, asked),
        "filtered": lists.is_filtered(asked),
    }
    return answer(request, "calibration/due_list.html", "rows", context)


@require_POST
def due_export(request: HttpRequest) -> HttpResponseBase:
    plant = access.chosen_plant(request)
    asked = lists.read_asked(request.POST, lists.areas_of(plant), sort="due")
    return lists.export(request, plant, asked, name="due list")


def _counts(asked: Asked, counted: dict[ScheduleState, int]) -> list[Count]:
    """A link per state, which keeps sort but drops the other filters: the number is that of the whole plant."""
    plain = Asked(plant=asked.plant, sort=asked.sort)
    made = [
        Count(
            words=f"{listing.total_text(counted[state])} {state.value}",
            tone=rows.STATE_TONES[state] if counted[state] else "quiet",
            url=plain.address(state=state.value),
            current=asked.state == state,
        )
        for state in SHOWN
        if counted[state] or state is not ScheduleState.NO_REQUIREMENT
    ]
    everything = sum(counted.values())
    made.append(Count(f"{listing.total_text(everything)} in all", "quiet", plain.address(), not asked.state))
    return made
