"""Loads rows by the million: columns of values, no objects, indexes made after the rows."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Sequence
from contextlib import contextmanager
from itertools import repeat
from typing import Any

from django.core.management.color import no_style
from django.db import connection, models


def load(like: models.Model, count: int, **columns: Iterable[Any]) -> None:
    """Insert rows that are all like an unsaved one but for some columns.

    Parameters
    ----------
    like : Model
        Gives every column that is not named; its key, where it is not named either, is made by the database.
    count : int
        Number of rows.
    **columns : iterable
        Values by attribute name (`plant_id`, not `plant`), in the form of the database: dates and JSON as text.
    """
    if not count:
        return
    fields = {field.attname: field for field in like._meta.concrete_fields}
    names = [name for name, field in fields.items() if name in columns or not field.primary_key]
    values = [
        columns[name] if name in columns else repeat(_constant(fields[name], getattr(like, name)), count)
        for name in names
    ]
    _insert(type(like), [str(fields[name].column) for name in names], zip(*values, strict=True))


def _constant(field: models.Field[Any, Any], value: Any) -> Any:
    return field.get_db_prep_save(value, connection)


def _insert(model: type[models.Model], columns: Sequence[str], rows: Iterable[Sequence[Any]]) -> None:
    quoted = connection.ops.quote_name
    table, names = quoted(model._meta.db_table), ", ".join(map(quoted, columns))
    with connection.cursor() as cursor:
        if connection.vendor == "postgresql":
            with cursor.copy(f"COPY {table} ({names}) FROM STDIN") as copy:
                for row in rows:
                    copy.write_row(row)
        else:
            marks = ", ".join(["%s"] * len(columns))
            cursor.executemany(f"INSERT INTO {table} ({names}) VALUES ({marks})", rows)  # type: ignore[arg-type]


@contextmanager
def hurried(*loaded: type[models.Model]) -> Iterator[None]:
    """No care for power cuts, and no index on the tables of the models until the rows are there."""
    with connection.cursor() as cursor:
        if connection.vendor == "sqlite":
            for setting in ("journal_mode = MEMORY", "synchronous = OFF", "foreign_keys = OFF"):
                cursor.execute(f"PRAGMA {setting}")
        indexes = [index for model in loaded for index in _indexes(cursor, model._meta.db_table)]
        for name, _ in indexes:
            cursor.execute(f"DROP INDEX {connection.ops.quote_name(name)}")
    yield
    with connection.cursor() as cursor:
        for _, statement in indexes:
            cursor.execute(statement)
        if connection.vendor == "sqlite":
            for setting in ("foreign_keys = ON", "synchronous = FULL", "journal_mode = WAL"):
                cursor.execute(f"PRAGMA {setting}")
        for statement in connection.ops.sequence_reset_sql(no_style(), list(loaded)):
            cursor.execute(statement)


def _indexes(cursor: Any, table: str) -> list[tuple[str, str]]:
    """Indexes that no constraint of the table brings along, with the statements that make them."""
    if connection.vendor == "sqlite":
        text = "SELECT name, sql FROM sqlite_master WHERE type = 'index' AND tbl_name = %s AND sql IS NOT NULL"
    else:
        text = (
            "SELECT i.indexrelid::regclass::text, pg_get_indexdef(i.indexrelid) FROM pg_index i"
            " WHERE i.indrelid = %s::regclass"
            " AND NOT EXISTS (SELECT 1 FROM pg_constraint k WHERE k.conindid = i.indexrelid)"
        )
    cursor.execute(text, [table])
    found: list[tuple[str, str]] = cursor.fetchall()
    return found
