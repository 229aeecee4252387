"""The numbers behind a drift chart as a CSV file, for the pages of tags and of transmitters."""

from __future__ import annotations

from django.http import HttpRequest
from django.http.response import HttpResponseBase

from calibration.contexts import drift as drift_page
from calibration.contexts.drift import DriftView
from calibration.queries.drifting import History
from register import exporting
from register.auditing import Actor
from register.models import Tag, Transmitter


def drift_file(
    request: HttpRequest, held: Tag | Transmitter, *, name: str, history: History, view: DriftView
) -> HttpResponseBase:
    """The file; that it was taken is noted in the trail. `name` is what the thing is called in the name of the file."""
    channel = view.drift.channel.label if view.drift else "drift"
    exporting.note_export(
        by=Actor.of(request), thing=held, plant=held.plant, remark=f"drift of {held} as CSV ({channel})"
    )
    return exporting.csv_response(
        f"drift-{name}-{held.plant.today()}.csv",
        drift_page.file_head(view.drift),
        drift_page.file_lines(view.drift, history),
    )
