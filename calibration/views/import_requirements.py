"""The import of requirements."""

from __future__ import annotations

from typing import Final

from calibration.importing_requirements import import_requirements
from calibration.imports.requirement_columns import COLUMNS
from calibration.imports.requirements import Proposal, Wanted, propose
from calibration.models import Requirement
from calibration.records.basis import StatedTolerance
from register.imports.kinds import Kind, Told


def tell(proposal: Proposal) -> Told:
    """What the check of requirements says."""
    first = [one for one in proposal.wanted if one.before is None]
    changed = len(proposal.wanted) - len(first)
    planned = sum(one.requirement.effective_from > proposal.plant.today() for one in proposal.wanted)
    said = [f"{planned:,} will be planned, since the day is still to come."] if planned else []
    return Told(
        counts=[(len(first), "new"), (changed, "changed"), (proposal.unchanged, "unchanged")],
        sentences=said,
        new_head=("Tag", "Tolerance", "As-left", "Interval", "Points", "From"),
        new=[_line(one) for one in first],
        changes=proposal.changes,
        complaints=proposal.complaints,
        bad_rows=proposal.bad_rows,
        touched=len(proposal.wanted),
        digest=proposal.digest(),
    )


def _line(one: Wanted) -> tuple[str, ...]:
    held = one.requirement
    return (
        str(one.line),
        str(held.tag),
        _words(held, held.mpe_percent, held.mpe_input),
        _words(held, held.as_left_percent, held.as_left_input),
        f"{held.interval_months} months",
        held.point_list.name,
        str(held.effective_from),
    )


def _words(held: Requirement, percent: str, amount: str) -> str:
    from register.engineering.units import label

    if not (percent or amount):
        return ""
    unit = held.input_unit or "bar"
    return StatedTolerance(held.mpe_form, percent, amount, held.input_unit).in_unit(unit).words(label(unit))


REQUIREMENTS: Final = Kind(
    name="requirements",
    title="Requirements",
    brings="requirements",
    columns=COLUMNS,
    needed=(("tag",),),
    propose=propose,
    act=import_requirements,
    tell=tell,
    done="register",
    says=(
        "One row is one tag, which must be registered already: its tolerance, points, and how often it is tested.",
        "A requirement that is there already stays where the file says the same; an empty cell leaves a value.",
        "Another requirement than the one in force needs a day and a reason; a day to come is planned.",
    ),
)
