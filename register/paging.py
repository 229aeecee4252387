"""Pages of a list by key: each page begins after the last row of the one before, whatever came in between.

An offset would read and throw away every row before the page; a key goes there by the index.
"""

from __future__ import annotations

import datetime
import json
from collections.abc import Sequence
from dataclasses import dataclass
from decimal import Decimal
from typing import Any, Final, Generic, TypeVar

from django.core.exceptions import FieldDoesNotExist, ValidationError
from django.db.models import Model, Q, QuerySet
from django.http import Http404, HttpRequest

from register.addresses import is_storable

ROWS = 50
COUNTED = 1000
M = TypeVar("M", bound=Model)


@dataclass(frozen=True, slots=True)
class Page(Generic[M]):
    """Rows of one page, and the addresses of its neighbours; what `parts/paging.html` shows."""

    rows: list[M]
    total: str
    what: str
    earlier: str
    later: str


def page_of(
    request: HttpRequest, *querysets: QuerySet[M], order: Sequence[str], what: str, rows: int = ROWS
) -> Page[M]:
    """Cut the page that the address asks for out of one or several disjoint sets of rows.

    Parameters
    ----------
    request : HttpRequest
        `?after=` or `?before=` hold the key of the neighbouring row.
    querysets : QuerySet
        Rows of one model, not ordered or cut; several ones are merged, so that each can use its own index.
    order : sequence of str
        Columns that are never null and together unique, as for `order_by`; the last is usually the id.
    what : str
        What the rows are, in the plural.
    rows : int
        Rows of a page.

    Raises
    ------
    Http404
        The key in the address is none.
    """
    backwards = "before" in request.GET
    asked = request.GET.get("before") or request.GET.get("after")
    ordering = [_turned(name) for name in order] if backwards else list(order)
    key = _read(asked, querysets[0], order) if asked else None
    found: list[M] = []
    for queryset in querysets:
        beyond = queryset.filter(_beyond(ordering, key)) if key else queryset
        found += beyond.order_by(*ordering)[: rows + 1]
    if len(querysets) > 1:
        for name in reversed(ordering):
            found.sort(key=lambda row, name=name: getattr(row, name.lstrip("-")), reverse=name.startswith("-"))  # type: ignore[misc]
    more, found = len(found) > rows, found[:rows]
    if backwards:
        found.reverse()
    has_earlier = more if backwards else key is not None
    has_later = bool(key) if backwards else more
    return Page(
        rows=found,
        total=total(*querysets),
        what=what,
        earlier=_address(request, "before", found[0], order) if has_earlier and found else "",
        later=_address(request, "after", found[-1], order) if has_later and found else "",
    )


def total(*querysets: QuerySet[Any]) -> str:
    """How many rows there are, "1,000+" beyond a thousand; counts no further than that."""
    count = sum(queryset.order_by()[: COUNTED + 1].count() for queryset in querysets)
    return f"{COUNTED:,}+" if count > COUNTED else f"{count:,}"


def _turned(name: str) -> str:
    return name.removeprefix("-") if name.startswith("-") else f"-{name}"


def _beyond(ordering: Sequence[str], key: Sequence[Any]) -> Q:
    """Rows after the key: a > x, or a = x and b > y, …; with a ≥ x in front, which an index can use."""
    beyond, same = Q(), Q()
    for name, value in zip(ordering, key, strict=True):
        column, lookup = name.lstrip("-"), "lt" if name.startswith("-") else "gt"
        beyond |= same & Q(**{f"{column}__{lookup}": value})
        same &= Q(**{column: value})
    first = ordering[0]
    return Q(**{f"{first.lstrip('-')}__{'lte' if first.startswith('-') else 'gte'}": key[0]}) & beyond


def _read(text: str, queryset: QuerySet[Any], order: Sequence[str]) -> list[Any]:
    try:
        columns = [_column(queryset, name.lstrip("-")) for name in order]
        return key_values(json.loads(text), columns)
    except (*NO_KEY, FieldDoesNotExist) as error:
        raise Http404 from error


def key_values(read: Any, columns: Sequence[Any]) -> list[Any]:
    """The values of a key that was read from an address, as any database can compare them with its columns.

    Raises
    ------
    ValueError, TypeError, OverflowError, RecursionError, ValidationError
        One of `NO_KEY`: not one value a column, or one that no column holds: text with NUL or half a character, a
        number without end or beyond 64 bits.
    """
    if not isinstance(read, list) or len(read) != len(columns):
        raise ValueError("not one value for each column")
    values = [column.to_python(value) for column, value in zip(columns, read, strict=True)]
    for given, value in zip(read, values, strict=True):
        if isinstance(given, (list, dict)) or value is None:
            raise ValueError("no value")
        if isinstance(value, str) and not is_storable(value):
            raise ValueError("no text that a database takes")
        if isinstance(value, (int, float, Decimal)) and not -(2**63) <= value < 2**63:
            raise ValueError("no number that a database takes")
        if isinstance(value, datetime.datetime):
            # A moment that no other time zone can tell overflows here rather than in the query.
            if value.utcoffset() is None:
                raise ValueError("no moment without a time zone")
            value.astimezone(datetime.UTC)
    return values


#: What reading a key may raise where it is none.
NO_KEY: Final = (ValueError, TypeError, OverflowError, RecursionError, ArithmeticError, ValidationError)


def _column(queryset: QuerySet[Any], name: str) -> Any:
    if name in queryset.query.annotations:
        return queryset.query.annotations[name].output_field
    return queryset.model._meta.pk if name == "pk" else queryset.model._meta.get_field(name)


def _address(request: HttpRequest, side: str, row: Model, order: Sequence[str]) -> str:
    query = request.GET.copy()
    for name in ("after", "before"):
        query.pop(name, None)
    query[side] = json.dumps([getattr(row, name.lstrip("-")) for name in order], default=str, separators=(",", ":"))
    return f"?{query.urlencode()}"
