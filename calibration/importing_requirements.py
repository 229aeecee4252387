"""Brings requirements of many tags in from a file: all of them, or none."""

from __future__ import annotations

from typing import Final

from django.db import IntegrityError, transaction

from calibration.imports.requirements import Proposal, propose
from calibration.models import Requirement
from calibration.scheduling import refresh
from register.auditing import Act, Actor
from register.bulk import many_objects_alive
from register.importing import ChangedMeanwhileError, lock_tags
from register.imports.columns import Matching
from register.imports.tables import Table
from register.models import Plant

AT_ONCE: Final = 1000


def import_requirements(
    *, by: Actor, reason: str, plant: Plant, table: Table, matching: Matching, seen: str
) -> Proposal:
    """Set the requirements that a table gives; it is read against the register once more, in the same transaction.

    Parameters
    ----------
    seen : str
        Digest of the proposal that the person looked at.

    Raises
    ------
    ChangedMeanwhileError
        The file has bad rows, or would now do something else than what was looked at.
    """
    try:
        with many_objects_alive():
            return _import(by, reason, plant, table, matching, seen)
    except IntegrityError as error:
        raise ChangedMeanwhileError from error


@transaction.atomic
def _import(by: Actor, reason: str, plant: Plant, table: Table, matching: Matching, seen: str) -> Proposal:
    lock_tags(plant, table.column(matching["tag"]))
    today = plant.today()
    proposal = propose(plant=plant, table=table, matching=matching, today=today, by=by.person)
    if proposal.complaints or proposal.digest() != seen:
        raise ChangedMeanwhileError
    act = Act(by, reason)
    new = [one.requirement for one in proposal.wanted]
    for requirement in new:
        requirement.person = by.person
        requirement.reason = requirement.reason or reason
        requirement.applied_at = act.at if requirement.effective_from <= today else None
    Requirement.objects.bulk_create(new, batch_size=AT_ONCE)
    for requirement in new:
        act.created(requirement, plant=plant)
    act.write()
    refresh([requirement.tag_id for requirement in new])
    return proposal
