"""By what a past test is judged: the range and tolerance that a file gives, else those of the register on that day."""

from __future__ import annotations

import datetime
from collections.abc import Sequence
from typing import Any

from calibration.imports.history import History, last
from calibration.imports.test_columns import OF_RANGE, OF_TOLERANCE
from calibration.imports.visits import Visit
from calibration.models import Requirement, ToleranceForm
from calibration.records.basis import Basis, StatedTolerance
from register.imports.columns import Cells
from register.models import Fitting, MeasuringHead, Range, Transmitter

FROM_FILE = "from the file of the past test"


def terms_of(
    cells: Cells, visit: Visit, history: History, device: Transmitter, fitting: Fitting | None
) -> tuple[Basis, Requirement | None] | None:
    """The basis of a test, and the requirement of its day; None where something lacks, which is then said.

    Notes
    -----
    The point list of a requirement that held on the day is kept (`past_tests` adds it): a run that lacks points of it
    is incomplete. A list of later days is kept only where it was followed; else the runs must cover the range
    (`calibration.records.judging`). Where the day is before the first range or requirement of the tag, that first one
    is assumed, and the basis says so.
    """
    head = history.head_on(device, visit.day)
    used = _range(cells, visit, history, device, fitting)
    requirement = _requirement(visit, history, fitting)
    stated = _tolerance(cells, visit, requirement, fitting)
    if used is None or stated is None:
        return None
    mpe, left = stated
    basis = Basis(
        head_id=head.pk,
        lrv=used.lrv,
        urv=used.urv,
        unit=used.unit,
        reference=used.reference,
        transfer=used.transfer,
        low_cut_percent=used.low_cut_percent,
        below_cut=used.below_cut,
        mpe=mpe,
        as_left=left,
        rule=requirement.decision_rule if requirement else Requirement.Rule.SIMPLE,
        decimal_comma=cells.table.decimal_comma,
        notes=_notes(visit, head, used, requirement),
    )
    return basis, requirement


def _notes(visit: Visit, head: MeasuringHead, used: Range, requirement: Requirement | None) -> dict[str, Any]:
    """Where the terms come from, kept with the record."""
    notes: dict[str, Any] = {"head_id": head.pk}
    if used.pk:
        notes["range_id"] = used.pk
    else:
        notes["range"] = FROM_FILE
    if any(name in visit.values for name in OF_TOLERANCE):
        notes["tolerance"] = FROM_FILE
    elif requirement is not None:
        notes["requirement_id"] = requirement.pk
    if assumed := _assumed(visit, used, requirement):
        notes["assumed"] = assumed
    return notes


def _assumed(visit: Visit, used: Range, requirement: Requirement | None) -> list[str]:
    """What is known only from a later day than that of the test."""
    words = []
    if used.pk and used.effective_from > visit.day:
        words.append(f"the range, known from {used.effective_from} on")
    if requirement is not None and requirement.effective_from > visit.day:
        words.append(f"the requirement, known from {requirement.effective_from} on")
    return words


def _requirement(visit: Visit, history: History, fitting: Fitting | None) -> Requirement | None:
    if fitting is None:
        return None
    rows = history.requirements[fitting.tag_id]
    given = any(name in visit.values for name in OF_TOLERANCE)
    found: Requirement | None = last(rows, visit.day) if given else _in_force(rows, visit.day)
    return found


def _in_force(rows: Sequence[Any], day: datetime.date) -> Any:
    """The row in force on a day; before the first one that first one, or None where there is none at all."""
    return last(rows, day) or (rows[0] if rows else None)


def _range(cells: Cells, visit: Visit, history: History, device: Transmitter, fitting: Fitting | None) -> Range | None:
    given: dict[str, Any] = {name: visit.values[name] for name in OF_RANGE if name in visit.values}
    if given:
        return _given_range(cells, visit, device, given)
    used: Range | None = _in_force(history.ranges[fitting.tag_id], visit.day) if fitting else None
    if used is None:
        if fitting is None:
            words = f"{device} was fitted nowhere on {visit.day}: give LRV, URV and unit of the test in the file."
        else:
            words = f"No range of {fitting.tag} is known: give LRV, URV and unit in the file."
        cells.complain(visit.first, "lrv", words)
    return used


def _given_range(cells: Cells, visit: Visit, device: Transmitter, given: dict[str, Any]) -> Range | None:
    missing = [
        label for name, label in (("lrv", "LRV"), ("urv", "URV"), ("range_unit", "the unit")) if name not in given
    ]
    if missing:
        blamed = {"LRV": "lrv", "URV": "urv", "the unit": "range_unit"}[missing[0]]
        cells.complain(
            visit.first, blamed, f"A range needs LRV, URV and their unit; {' and '.join(missing)} must stand here too."
        )
        return None
    lrv, urv, unit = given["lrv"], given["urv"], given["range_unit"]
    reference = given.get("range_reference") or unit.reference or device.type.measures
    transfer = given.get("transfer", Range.Transfer.LINEAR)
    if lrv.value == urv.value:
        cells.complain(
            visit.first, "urv", f"LRV and URV are both {lrv.text}: a range without a span cannot be measured."
        )
        return None
    if transfer == Range.Transfer.SQUARE_ROOT and reference != "differential":
        cells.complain(
            visit.first,
            "transfer",
            f"A square root is taken of a differential pressure only; this range is {reference}.",
        )
        return None
    return Range(lrv=lrv.text, urv=urv.text, unit=unit.unit, reference=reference, transfer=transfer)


def _tolerance(
    cells: Cells, visit: Visit, requirement: Requirement | None, fitting: Fitting | None
) -> tuple[StatedTolerance, StatedTolerance | None] | None:
    given: dict[str, Any] = {name: visit.values[name] for name in OF_TOLERANCE if name in visit.values}
    if given:
        return _given_tolerance(cells, visit, given)
    if requirement is None:
        where = f"{fitting.tag} has no requirement" if fitting else f"There is no requirement on {visit.day}"
        cells.complain(visit.first, "mpe_percent", f"{where}: give the tolerance in the file.")
        return None
    mpe = StatedTolerance(requirement.mpe_form, requirement.mpe_percent, requirement.mpe_input, requirement.input_unit)
    if not (requirement.as_left_percent or requirement.as_left_input):
        return mpe, None
    return mpe, StatedTolerance(
        requirement.mpe_form, requirement.as_left_percent, requirement.as_left_input, requirement.input_unit
    )


def _given_tolerance(
    cells: Cells, visit: Visit, given: dict[str, Any]
) -> tuple[StatedTolerance, StatedTolerance | None] | None:
    percent, amount = given.get("mpe_percent"), given.get("mpe_input")
    if percent is None and amount is None:
        cells.complain(visit.first, "mpe_percent", "A tolerance needs its figure, in percent or in input units.")
        return None
    form = given.get("mpe_form") or (ToleranceForm.ABSOLUTE if percent is None else ToleranceForm.SPAN)
    if percent is not None and amount is not None and "mpe_form" not in given:
        cells.complain(
            visit.first,
            "mpe_form",
            "A tolerance in percent and one in input units: say how they go together, larger or sum.",
        )
        return None
    unit = given.get("input_unit", "")
    if amount is not None and not unit:
        cells.complain(visit.first, "input_unit", "Say in which unit the tolerance in input units stands.")
        return None
    mpe = StatedTolerance(str(form), percent.text if percent else "", amount.text if amount else "", unit)
    left = given.get("as_left_percent")
    if left is None:
        return mpe, None
    if form != ToleranceForm.SPAN:
        cells.complain(
            visit.first,
            "as_left_percent",
            "An as-left tolerance in percent goes with a tolerance in percent of span only.",
        )
        return None
    return mpe, StatedTolerance(str(form), left.text)
