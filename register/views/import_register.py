"""The import of a register, and the register taken out in the same columns."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Final

from django.http import HttpRequest, HttpResponse
from django.views.decorators.http import require_POST

from register import access, exporting
from register.auditing import Actor
from register.importing import import_register
from register.imports import blank_sheets
from register.imports.kinds import Kind, Told
from register.imports.proposing import Proposal, propose
from register.imports.sheet import COLUMNS
from register.imports.sheet_rows import rows_of


def tell(proposal: Proposal) -> Told:
    """What the check of a register says."""
    return Told(
        counts=[(proposal.count(state), state) for state in ("new", "changed", "unchanged")],
        sentences=list(_sentences(proposal)),
        new_head=("Tag", "Service", "Area", "Range", "Transmitter"),
        new=[(str(one.line), one.tag, one.service, one.area, one.range, one.device) for one in proposal.new],
        changes=proposal.changes,
        complaints=proposal.complaints,
        bad_rows=proposal.bad_rows,
        touched=len(proposal.touched),
        digest=proposal.digest(),
    )


def _sentences(proposal: Proposal) -> Iterator[str]:
    if proposal.areas:
        named = ", ".join(str(area) if area.name != area.code else area.code for area in proposal.areas)
        yield f"{_many(len(proposal.areas), 'area')} will be added, because this plant has none of that code: {named}."
    rows = proposal.rows
    today = proposal.plant.today()
    added = (
        (sum(row.tag_is_new for row in rows), "tag"),
        (sum(row.device_is_new for row in rows), "transmitter"),
        (sum(row.fitting is not None for row in rows), "fitting"),
        (sum(row.range is not None for row in rows), "range"),
    )
    said = [_many(count, what) for count, what in added if count]
    if said:
        yield f"Added in all: {', '.join(said)}."
    planned = sum(row.range is not None and row.range.effective_from > today for row in rows)
    if planned:
        yield f"{_many(planned, 'range')} will be planned, since the day is still to come."
    if swapped := sum(row.ended is not None for row in rows):
        yield f"{_many(swapped, 'transmitter')} will be replaced and go to stores."


def _many(count: int, what: str) -> str:
    return f"{count:,} {what}{'' if count == 1 else 's'}"


REGISTER: Final = Kind(
    name="register",
    title="Register",
    brings="a register",
    columns=COLUMNS,
    needed=(("tag",), ("maker", "serial")),
    propose=propose,
    act=import_register,
    tell=tell,
    done="register",
    says=(
        "One row is one tag, with its process, its range and the transmitter fitted there. A row without a tag is a "
        "transmitter in stores.",
        "A tag is known by its number, a transmitter by maker and serial number. What is there already is changed "
        "where the file says something else; an empty cell leaves it as it is.",
        "Another range than the one in force needs a day and a reason. Another transmitter than the fitted one takes "
        "its place on the day given; the old one goes to stores.",
        "Makers, types and heads must be known already: their limits are what every range is checked against.",
    ),
    then="requirements",
    takes_out="import-register-export",
)


@require_POST
def take_out(request: HttpRequest) -> HttpResponse:
    """The register of a plant in the columns of its import, noted in the trail."""
    plant = access.chosen_plant(request)
    as_workbook = request.POST.get("form") == "xlsx"
    form = "xlsx" if as_workbook else "csv"
    exporting.note_export(by=Actor.of(request), thing=plant, plant=plant, remark=f"register as {form.upper()}")
    name = f"register-{plant.code}-{plant.today()}.{form}"
    if as_workbook:
        return blank_sheets.filled_workbook(name, "Register", COLUMNS, rows_of(plant))
    return blank_sheets.filled_csv(name, COLUMNS, rows_of(plant), decimal_comma=plant.decimal_comma)
