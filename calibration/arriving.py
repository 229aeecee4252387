"""Reads entries as devices send them."""

from __future__ import annotations

import datetime
import json
import uuid
from collections.abc import Mapping
from typing import Any, Final

from django.core.exceptions import ValidationError
from django.utils.dateparse import parse_datetime

from calibration.queries.entries import NewEntry

MOST_AT_ONCE: Final = 2000


def entries_from_json(body: bytes | str) -> list[NewEntry]:
    """Entries of a list under "entries".

    Raises
    ------
    ValidationError
        It is not readable, or one entry is incomplete.
    """
    try:
        sent = json.loads(body)
    except (ValueError, RecursionError) as error:
        raise ValidationError("The entries are not readable JSON.") from error
    rows = sent.get("entries") if isinstance(sent, dict) else None
    if not isinstance(rows, list) or not all(isinstance(row, dict) for row in rows):
        raise ValidationError("Entries come as a list under “entries”.")
    if len(rows) > MOST_AT_ONCE:
        raise ValidationError(f"At most {MOST_AT_ONCE} entries are taken at once.")
    return [_entry(row) for row in rows]


def entry_from_form(sent: Mapping[str, Any]) -> NewEntry:
    """One entry whose parts are fields of a form.

    Raises
    ------
    ValidationError
        It is incomplete.
    """
    row = {name: sent[name] for name in sent if name != "seen"}
    row["settles"] = sent.get("settles") == "yes"
    row["seen"] = [part for part in sent.get("seen", "").split(" ") if part]
    return _entry(row)


def readable(text: str) -> str:
    """The text without what no database keeps: zero characters and halves of surrogate pairs."""
    return text.replace("\0", "").encode("utf-8", "replace").decode()


def _entry(row: Mapping[str, Any]) -> NewEntry:
    try:
        typed_at = parse_datetime(str(row["typed_at"]))
        if typed_at is None or typed_at.tzinfo is None:
            raise ValueError("a time with its zone is wanted")
        sequence = int(row["sequence"])
        device = readable(str(row["device"]))
        if not 0 <= sequence < 2**53 or not 0 < len(device) <= 60:
            raise ValueError("device or sequence is out of bounds")
        return NewEntry(
            id=uuid.UUID(str(row["uuid"])),
            field=readable(str(row["field"]))[:80],
            text=str(row.get("text", "")),
            device=device,
            sequence=sequence,
            base=uuid.UUID(str(row["base"])) if row.get("base") else None,
            typed_at=typed_at.astimezone(datetime.UTC),
            schema_version=int(row.get("schema_version", 1)),
            settles=row.get("settles") is True,
            seen=tuple(uuid.UUID(str(number)) for number in row.get("seen", ())),
        )
    except (KeyError, ValueError, TypeError, OverflowError) as error:
        raise ValidationError(f"An entry is incomplete or unreadable: {error}.") from error
