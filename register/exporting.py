"""Exports: each is noted in the audit trail, and no cell can act as a formula where it is opened."""

from __future__ import annotations

import csv
import re
from collections.abc import Iterable, Iterator, Sequence
from typing import Any, Final

from django.db import models, transaction
from django.http import StreamingHttpResponse
from django.utils.http import content_disposition_header

from register.auditing import Act, Actor
from register.models import AuditEntry, Plant

#: Control signs, what parts folders, and what Windows keeps for itself.
NO_FILE_NAME: Final = re.compile(r'[\x00-\x1f\x7f/\\:*?"<>|]')
NUMBER: Final = re.compile(r"[+-]?(\d+([.,]\d*)?|[.,]\d+)([eE][+-]?\d+)?")
#: What spreadsheets take for the beginning of a formula, also behind blanks.
ACTIVE: Final = ("=", "+", "-", "@", "\t", "\r", "\n")


@transaction.atomic
def note_export(*, by: Actor, thing: models.Model, plant: Plant, remark: str) -> None:
    """Say in the trail who took out what."""
    act = Act(by)
    act.noted(AuditEntry.Kind.EXPORTED, thing, plant=plant, remark=remark)
    act.write()


def cell(value: Any) -> str:
    """A value as text that no spreadsheet runs; numbers, negative ones too, stay numbers."""
    text = "" if value is None else str(value)
    if text.lstrip(" '").startswith(ACTIVE) and not NUMBER.fullmatch(text.strip(" ")):
        return f"'{text}"
    return text


def unguarded(text: str) -> str:
    """A cell as it was before `cell` guarded it."""
    return text[1:] if text.startswith("'") and text.lstrip(" '").startswith(ACTIVE) else text


def csv_response(name: str, head: Sequence[str], rows: Iterable[Sequence[Any]]) -> StreamingHttpResponse:
    """A CSV file (RFC 4180, UTF-8 with byte order mark, which spreadsheets need) sent row by row."""
    response = StreamingHttpResponse(_lines(head, rows), content_type="text/csv; charset=utf-8")
    response["Content-Disposition"] = as_file(name)
    return response


def as_file(name: str) -> str:
    """The header by which a browser keeps an answer under a name, whatever a tag or a serial number puts into it."""
    return str(content_disposition_header(True, NO_FILE_NAME.sub("-", name)))


class _Line:
    """A file that hands each line back instead of keeping it."""

    def write(self, line: str) -> str:
        return line


def _lines(head: Sequence[str], rows: Iterable[Sequence[Any]]) -> Iterator[str]:
    writer = csv.writer(_Line())
    yield "\ufeff" + str(writer.writerow(head))
    for row in rows:
        yield str(writer.writerow([cell(value) for value in row]))
