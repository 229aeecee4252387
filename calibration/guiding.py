"""Acts on the site's own cautions and return-to-service checklist. Sheets keep the words they were opened with."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

from django.core.exceptions import ValidationError
from django.db import transaction
from django.utils import timezone

from calibration.models import GuidanceLine
from register.auditing import Act, Actor, snapshot
from register.models import Plant
from register.storing import fill, store

FIELDS = ("part", "order", "key", "text", "applies", "condensing", "answer", "required", "withdrawn_at")


@transaction.atomic
def add_line(*, by: Actor, plant: Plant, reason: str, **values: Any) -> GuidanceLine:
    """Add a caution or checklist line; `values` are the model's columns but plant.

    Raises
    ------
    ValidationError
        By field: answers cannot be kept under this short name, another line has it, or the line would never be shown.
    """
    line = GuidanceLine(plant=plant)
    _stored(line, values)
    act = Act(by=by, reason=reason)
    act.created(line, plant=plant)
    act.write()
    return line


@transaction.atomic
def edit_line(*, by: Actor, line: GuidanceLine, reason: str, **values: Any) -> GuidanceLine:
    """Change a line, as `add_line`; one that was withdrawn is changed no more."""
    held = GuidanceLine.objects.select_for_update().get(pk=line.pk)
    if held.withdrawn_at is not None:
        raise ValidationError("This line was withdrawn already: its reason stands in the audit trail.")
    before = snapshot(held, FIELDS)
    _stored(held, values)
    act = Act(by=by, reason=reason)
    act.changed(held, plant=held.plant_id, before=before, after=snapshot(held, FIELDS))
    act.write()
    return held


def withdraw_line(*, by: Actor, line: GuidanceLine, reason: str) -> GuidanceLine:
    """Take a line off new sheets; sheets already open keep it."""
    return edit_line(by=by, line=line, reason=reason, withdrawn_at=timezone.now())


def _stored(line: GuidanceLine, values: Mapping[str, Any]) -> None:
    fill(line, values)
    if (line.applies, line.condensing) == (GuidanceLine.Applies.CONDENSING, GuidanceLine.Condensing.LEFT_OUT):
        said = "A line for hot condensing service that is not shown there never shows."
        raise ValidationError({"condensing": said})
    store(line)
