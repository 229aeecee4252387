"""Inserts many rows of plain values at once; for acts only, where `bulk_create` would take several times as long.

The rows are not made into objects: nothing is defaulted and nothing is validated, so that an act hands over every
column but the key, in the form in which the model would hold it.
"""

from __future__ import annotations

import gc
from collections.abc import Callable, Iterable, Iterator, Sequence
from contextlib import contextmanager
from typing import Any, Final, TypeVar

from django.db import connection, models
from django.db.models.base import ModelState

M = TypeVar("M", bound=models.Model)
Adapter = Callable[[Any], Any]
#: Kinds of columns whose values go to the database as they are.
PLAIN: Final = (models.CharField, models.TextField, models.IntegerField, models.FloatField, models.ForeignKey)


def insert(model: type[models.Model], columns: Sequence[str], rows: Iterable[Sequence[Any]]) -> None:
    """Insert rows inside the transaction of an act.

    Parameters
    ----------
    model : Model class
        Its key, where the database makes it, is left out.
    columns : sequence of str
        Attribute names (`plant_id`, not `plant`) in the order of the values of a row.
    rows : iterable of sequences
        Values as the attributes would hold them.

    Raises
    ------
    IntegrityError
        A row breaks a rule of the data; nothing of the transaction then counts.
    """
    quoted = connection.ops.quote_name
    fields = [_field(model, name) for name in columns]
    table, names = quoted(model._meta.db_table), ", ".join(quoted(str(field.column)) for field in fields)
    adapted = _adapted(rows, [_adapter(field) for field in fields])
    with connection.cursor() as cursor:
        if connection.vendor == "postgresql":
            # What the driver raises at COPY does not pass through Django, which would name it alike for both databases.
            with connection.wrap_database_errors, cursor.copy(f"COPY {table} ({names}) FROM STDIN") as copy:
                for row in adapted:
                    copy.write_row(row)
        else:
            marks = ", ".join(["%s"] * len(fields))
            cursor.executemany(f"INSERT INTO {table} ({names}) VALUES ({marks})", adapted)  # type: ignore[arg-type]


def values_of(things: Iterable[models.Model], columns: Sequence[str]) -> Iterator[tuple[Any, ...]]:
    """The rows that unsaved objects stand for, for `insert`."""
    for thing in things:
        held = thing.__dict__
        yield tuple([held[name] for name in columns])


def another(blank: M, **values: Any) -> M:
    """One more unsaved object like a blank one, with some attributes set; ten times as quick as making it anew.

    The values are attributes as the object holds them: `plant_id` for an id, figures and texts as they are. Related
    objects are set on it afterwards, as on any object.
    """
    made = blank.__class__.__new__(blank.__class__)
    made.__dict__.update(blank.__dict__)
    made.__dict__.update(values)
    made._state = ModelState()
    made._state.fields_cache.update(blank._state.fields_cache)
    return made


def columns_of(model: type[models.Model], *, key: bool = False) -> list[str]:
    """Attribute names of the columns of a model, with or without its key."""
    return [field.attname for field in model._meta.concrete_fields if key or not field.primary_key]


def among(name: str, ids: Sequence[int]) -> dict[str, Any]:
    """A lookup for rows whose `name` is one of the ids, which ascend; a stretch without gaps is asked for by its ends.

    A thousand ids in one query take longer to hand over than their rows take to read.
    """
    if ids and ids[-1] - ids[0] == len(ids) - 1:
        return {f"{name}__gte": ids[0], f"{name}__lte": ids[-1]}
    return {f"{name}__in": ids}


@contextmanager
def many_objects_alive() -> Iterator[None]:
    """Keep the collector of unreachable objects from looking again and again through rows that are all in use.

    With ten thousand rows in hand it takes a fifth of the time and finds nothing.
    """
    paused = gc.isenabled()
    gc.disable()
    try:
        yield
    finally:
        if paused:
            gc.enable()


def _field(model: type[models.Model], name: str) -> models.Field[Any, Any]:
    return next(field for field in model._meta.concrete_fields if field.attname == name)


def _adapter(field: models.Field[Any, Any]) -> Adapter | None:
    if isinstance(field, PLAIN):
        return None
    known: dict[Any, Any] = {}

    def adapted(value: Any) -> Any:
        try:
            return known[value]
        except KeyError:
            known[value] = field.get_db_prep_save(value, connection)
            return known[value]
        except TypeError:  # a list or an object, which is no key
            return field.get_db_prep_save(value, connection)

    return adapted


def _adapted(rows: Iterable[Sequence[Any]], adapters: list[Adapter | None]) -> Iterator[Sequence[Any]]:
    changed = [(place, adapter) for place, adapter in enumerate(adapters) if adapter is not None]
    if not changed:
        yield from rows
        return
    for row in rows:
        values = list(row)
        for place, adapter in changed:
            values[place] = adapter(values[place])
        yield values
