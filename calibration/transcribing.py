"""Brings past tests in from a file: all of them, or nothing; marked transcribed and unsigned."""

from __future__ import annotations

from dataclasses import replace

from django.core.exceptions import ValidationError
from django.db import transaction

from calibration.imports.past_tests import Proposal, propose
from calibration.recording import lock_chain, write_records
from register.auditing import Act, Actor
from register.bulk import many_objects_alive
from register.importing import ChangedMeanwhileError, lock_tags
from register.imports.columns import Matching
from register.imports.tables import Table
from register.models import Plant


def import_tests(*, by: Actor, reason: str, plant: Plant, table: Table, matching: Matching, seen: str) -> Proposal:
    """Record the tests that a table tells of; it is read against the register once more, in the same transaction.

    Parameters
    ----------
    seen : str
        Digest of the proposal that the person looked at.

    Returns
    -------
    Proposal
        What was recorded, in the order of the chain: by day.

    Raises
    ------
    ChangedMeanwhileError
        The file has bad rows, or would now do something else than what was looked at.
    """
    with many_objects_alive():
        return _import(by, reason, plant, table, matching, seen)


@transaction.atomic
def _import(by: Actor, reason: str, plant: Plant, table: Table, matching: Matching, seen: str) -> Proposal:
    numbers, serials = (table.column(matching[name]) if name in matching else () for name in ("tag", "serial"))
    locked = lock_tags(plant, numbers, serials)
    # A file need not name a tag, and a test on the bench has none: the chain keeps two imports apart.
    lock_chain(plant)
    proposal = propose(plant=plant, table=table, matching=matching, today=plant.today())
    touched = {one.content.tag_id for one in proposal.planned} - {None}
    if proposal.complaints or proposal.digest() != seen or not touched <= locked:
        raise ChangedMeanwhileError
    act = Act(by, reason)
    made_by = by.person.pk if by.person else None
    contents = [replace(one.content, made_at=act.at, made_by_id=made_by) for one in proposal.planned]
    try:
        write_records(contents, act=act)
    except ValueError as error:
        raise ValidationError(str(error)) from error
    act.write()
    return proposal
