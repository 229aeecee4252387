"""The steps of an import, whatever is brought in: the file, its columns, the check, all or nothing."""

from __future__ import annotations

import uuid
from collections.abc import Callable, Mapping, Sequence
from dataclasses import asdict, dataclass
from functools import wraps
from typing import Any, Final, TypeVar

from django.contrib import messages
from django.core.exceptions import ValidationError
from django.http import Http404, HttpRequest, HttpResponse
from django.http.response import HttpResponseBase
from django.shortcuts import redirect, render

from register import access
from register.auditing import Actor
from register.exporting import csv_response
from register.forms.fields import typed
from register.forms.importing import BringInForm, FileForm, MatchingForm
from register.importing import ChangedMeanwhileError
from register.imports import blank_sheets, uploads
from register.imports.columns import grouped, guessed
from register.imports.kinds import KINDS, Kind
from register.imports.tables import Table
from register.models import Plant

R = TypeVar("R", bound=HttpResponseBase)
PERMISSION: Final = "import"
SHOWN: Final = 100
#: So many columns of another import in the same file are no chance: it is offered next.
ENOUGH: Final = 3
GONE: Final = "This file is no longer here: it was brought in, or lay for more than a day."


@dataclass(frozen=True, slots=True)
class Part:
    """A stretch of a long table of the check, with what `parts/paging.html` shows."""

    rows: Sequence[Sequence[Any]]
    total: str
    what: str
    earlier: str
    later: str


def _may_be_gone(view: Callable[..., R]) -> Callable[..., R]:
    """A step of an import, whose file may have been brought in or thrown away from another window meanwhile."""

    @wraps(view)
    def step(*args: Any, **kwargs: Any) -> R:
        try:
            return view(*args, **kwargs)
        except uploads.GoneError as error:
            raise Http404(GONE) from error

    return step


def upload(kind: Kind, request: HttpRequest) -> HttpResponse:
    """Bring a file, or take an empty sheet first."""
    plant = access.chosen_plant(request)
    access.in_plant(request, plant.pk, PERMISSION)
    form = FileForm(typed(request), request.FILES or None, plant=plant, too_large=uploads.was_too_large(request))
    if form.is_valid():
        kept = uploads.keep(access.person(request), kind.name, plant, form.cleaned_data["file"], form.data_of_file)
        return redirect(f"import-{kind.name}-match", kept.token)
    others = [other for other in KINDS.values() if other is not kind]
    context = {"kind": kind, "plant": plant, "form": form, "groups": grouped(kind.columns), "others": others}
    return render(request, "register/import.html", context)


@_may_be_gone
def match(kind: Kind, request: HttpRequest, token: uuid.UUID) -> HttpResponse:
    """Show how the columns are matched, to be corrected; then the file is checked."""
    kept, plant = _kept(kind, request, token)
    table = kept.table(plant)
    held = kept.matching or guessed(table.head, kind.columns)
    form = MatchingForm(typed(request), table=table, columns=kind.columns, matching=held)
    if form.is_valid():
        if lacking := kind.lacking(form.matching):
            form.add_error(None, lacking)
        else:
            kept.matching = form.matching
            _check(kind, request, kept, plant, table)
            return redirect(f"import-{kind.name}-check", kept.token)
    context = {
        "kind": kind,
        "plant": plant,
        "kept": kept,
        "table": table,
        "form": form,
        "matched": len(held),
        "count": f"{len(table.rows):,}",
    }
    return render(request, "register/import_match.html", context)


def check(kind: Kind, request: HttpRequest, token: uuid.UUID) -> HttpResponse:
    """What bringing the file in would do: bad rows, changes, what is new."""
    kept, plant = _kept(kind, request, token)
    if not kept.check:
        return redirect(f"import-{kind.name}-match", kept.token)
    return _show_check(kind, request, kept, plant, BringInForm())


@_may_be_gone
def bring_in(kind: Kind, request: HttpRequest, token: uuid.UUID) -> HttpResponse:
    """Bring in all of the file, or nothing."""
    kept, plant = _kept(kind, request, token)
    if not kept.check:
        return redirect(f"import-{kind.name}-match", kept.token)
    form = BringInForm(request.POST)
    if not form.is_valid():
        return _show_check(kind, request, kept, plant, form)
    table = kept.table(plant)
    try:
        done = kind.act(
            by=Actor.of(request),
            reason=form.why,
            plant=plant,
            table=table,
            matching=kept.matching,
            seen=kept.check["digest"],
        )
    except ChangedMeanwhileError as error:
        _check(kind, request, kept, plant, table)
        form.refuse(error)
        return _show_check(kind, request, kept, plant, form, status=409)
    except ValidationError as error:
        form.refuse(error)
        return _show_check(kind, request, kept, plant, form, status=409)
    told = kind.tell(done)
    messages.success(request, f"“{kept.name}” is brought in: {_counted(told.counts)}.")
    return _afterwards(kind, request, kept, plant, table)


def bad_rows(kind: Kind, request: HttpRequest, token: uuid.UUID) -> HttpResponseBase:
    """The bad rows as a file, to be mended one by one."""
    kept, plant = _kept(kind, request, token)
    if not kept.check:
        return redirect(f"import-{kind.name}-match", kept.token)
    head = (kept.check["counted_in"], "column", "what stands there", "what is wrong")
    rows = [tuple(one.values()) for one in kept.check["complaints"]]
    return csv_response(f"bad-rows-{plant.code}.csv", head, rows)


def blank_csv(kind: Kind, request: HttpRequest) -> HttpResponseBase:
    """An empty sheet that explains each column, as CSV; in the marks of the plant."""
    plant = access.chosen_plant(request)
    return blank_sheets.csv_file(kind, decimal_comma=plant.decimal_comma)


def blank_xlsx(kind: Kind, request: HttpRequest) -> HttpResponseBase:
    """An empty sheet that explains each column, as a workbook."""
    return blank_sheets.workbook_file(kind)


def _kept(kind: Kind, request: HttpRequest, token: uuid.UUID) -> tuple[uploads.Kept, Plant]:
    kept = uploads.kept_by(access.person(request), kind.name, token)
    plant = Plant.objects.filter(pk=kept.plant_id).first() if kept else None
    if kept is None or plant is None:
        raise Http404(GONE)
    access.in_plant(request, plant.pk, PERMISSION)
    return kept, plant


def _check(kind: Kind, request: HttpRequest, kept: uploads.Kept, plant: Plant, table: Table) -> None:
    """Work out what the file would do now, and keep it with the file."""
    proposal = kind.propose(
        plant=plant, table=table, matching=kept.matching, today=plant.today(), by=access.person(request)
    )
    kept.check = {**asdict(kind.tell(proposal)), "counted_in": table.counted_in}
    kept.store()


def _show_check(
    kind: Kind, request: HttpRequest, kept: uploads.Kept, plant: Plant, form: BringInForm, status: int = 200
) -> HttpResponse:
    found = kept.check
    context = {
        "kind": kind,
        "plant": plant,
        "kept": kept,
        "form": form,
        "found": found,
        "counted": _counted([one for one in found["counts"] if one[0]]),
        "match_url": f"import-{kind.name}-match",
        "bad_url": f"import-{kind.name}-bad-rows",
        "bring_url": f"import-{kind.name}-bring-in",
        "bad": _part(request, "bad", [tuple(one.values()) for one in found["complaints"]], "remarks"),
        "changes": _part(request, "changes", [tuple(one.values()) for one in found["changes"]], "changes"),
        "new": _part(request, "new", found["new"], "new"),
    }
    return render(request, "register/import_check.html", context, status=status)


def _part(request: HttpRequest, name: str, rows: Sequence[Sequence[Any]], what: str) -> Part:
    """The stretch of a table that `?name=` asks for, 1 being the first."""
    asked = request.GET.get(name, "1")
    last = max(1, -(-len(rows) // SHOWN))
    page = min(max(1, int(asked)), last) if asked.isascii() and asked.isdigit() and len(asked) < 8 else 1
    first = (page - 1) * SHOWN

    def address(number: int) -> str:
        query = request.GET.copy()
        query[name] = str(number)
        return f"?{query.urlencode()}#{name}"

    return Part(
        rows=rows[first : first + SHOWN],
        total=f"{first + 1:,} to {min(first + SHOWN, len(rows)):,} of {len(rows):,}" if last > 1 else f"{len(rows):,}",
        what=what,
        earlier=address(page - 1) if page > 1 else "",
        later=address(page + 1) if page < last else "",
    )


def _counted(counts: Sequence[Sequence[Any]]) -> str:
    return ", ".join(f"{number:,} {what}" for number, what in counts)


def _afterwards(kind: Kind, request: HttpRequest, kept: uploads.Kept, plant: Plant, table: Table) -> HttpResponse:
    """Go on with the next import of the same file, where it holds columns of one; else to the list."""
    following = KINDS.get(kind.then)
    left: Mapping[str, int] = {}
    if following is not None:
        used = set(kept.matching.values())
        left = {key: place for key, place in guessed(table.head, following.columns).items() if place not in used}
    if following is None or len(left) < ENOUGH:
        kept.discard()
        return redirect(access.address_in(plant, kind.done))
    try:
        next_one = kept.hand_on(following.name)
    except uploads.GoneError:
        return redirect(access.address_in(plant, kind.done))
    messages.info(request, f"The file also holds {following.brings}: match and check them here, or leave this page.")
    return redirect(f"import-{following.name}-match", next_one.token)
