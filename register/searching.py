"""How tags and serial numbers are looked up: in capital letters, by their beginning, on an index.

`SearchKey` is the same expression in a query and in the constraint that indexes it. On PostgreSQL it is compared
byte by byte (collation "C"), as SQLite does anyway, so that a beginning is a range of keys.
"""

from __future__ import annotations

from typing import Any, TypeVar

from django.db.backends.base.base import BaseDatabaseWrapper
from django.db.models import QuerySet
from django.db.models.functions import Upper
from django.db.models.sql.compiler import SQLCompiler

M = TypeVar("M", bound="QuerySet[Any]")
#: Above every key that begins like the one before it.
LAST = "\U0010ffff"


class SearchKey(Upper):
    """A number in capital letters, compared byte by byte."""

    def as_postgresql(
        self, compiler: SQLCompiler, connection: BaseDatabaseWrapper, **extra: Any
    ) -> tuple[str, list[str | int]]:
        return self.as_sql(compiler, connection, template='UPPER(%(expressions)s COLLATE "C")', **extra)  # type: ignore[return-value]


def key(text: str) -> str:
    """What a typed number is compared as; letters beyond ASCII stay as they are, as SQLite leaves them."""
    return "".join(letter.upper() if letter.isascii() else letter for letter in " ".join(text.split()))


def exactly(rows: M, field: str, text: str) -> M:
    """Rows whose number is the text, whatever its capital letters."""
    return rows.alias(_key=SearchKey(field)).filter(_key=key(text))


def beginning(rows: M, field: str, text: str) -> M:
    """Rows whose number begins with the text, whatever its capital letters."""
    start = key(text)
    return rows.alias(_key=SearchKey(field)).filter(_key__gte=start, _key__lt=start + LAST)
