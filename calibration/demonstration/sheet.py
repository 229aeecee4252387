"""Opens a sheet of the demonstration and fills it in up to where somebody was called away."""

from __future__ import annotations

import itertools
import uuid
from collections.abc import Mapping
from typing import Any, Final

from django.db import transaction
from django.utils import timezone

from calibration import sheets
from calibration.models import Run, Standard
from calibration.opening import open_sheet
from calibration.queries.entries import NewEntry
from calibration.storing_entries import add_entries
from register.auditing import Actor
from register.models import Tag

DEVICE: Final = "demonstration"
FOUND: Final = Run.Kind.AS_FOUND.value


@transaction.atomic
def open_half_filled(*, by: Actor, tag: Tag, row: Mapping[str, Any]) -> None:
    """Open a sheet for a tag, confirm it, pass the cautions, choose the standards, type the first as-found readings."""
    sheet = open_sheet(by=by, reason=DEVICE, tag=tag, sheet_id=uuid.uuid4())
    numbers = itertools.count(1)

    def typed(texts: Mapping[str, str]) -> None:
        entries = [
            NewEntry(
                id=uuid.uuid4(),
                field=name,
                text=text,
                device=DEVICE,
                sequence=next(numbers),
                base=None,
                typed_at=timezone.now(),
            )
            for name, text in texts.items()
        ]
        add_entries(by=by, sheet_id=sheet.pk, entries=entries)

    typed({"confirm-tag": tag.number, "confirm-serial": sheet.transmitter.serial})
    sheets.confirm(by=by, sheet_id=sheet.pk)
    typed(
        {
            f"caution.{line['key']}": "yes" if line["answer"] == "tick" else "shift leader, at the start"
            for line in sheet.basis["cautions"]
        }
    )
    sheets.pass_cautions(by=by, sheet_id=sheet.pk)
    standards = {standard.name: standard.pk for standard in Standard.objects.filter(plant=tag.plant)}
    taken = zip(("applied", "measured"), row["standards"], strict=True)
    typed({f"{FOUND}.{part}-with": str(standards[name]) for part, name in taken})
    sheets.choose_standards(by=by, sheet_id=sheet.pk, kind=FOUND)
    typed({f"{FOUND}.ambient": row["ambient"], f"{FOUND}.ambient-unit": "degC"})
    for place, (applied, measured) in enumerate(zip(row["applied"], row["measured"], strict=True), start=1):
        typed({f"{FOUND}.{place}.applied": applied, f"{FOUND}.{place}.measured": measured})
