"""Leads a sheet from stage to stage. Each act locks the sheet, reads its entries, and refuses in the user's words."""

from __future__ import annotations

import datetime
import re
import uuid
from typing import Any

from django.core.exceptions import ValidationError
from django.db import transaction
from django.utils import timezone

from calibration.models import Run, Sheet, Standard
from calibration.queries.choosing import candidates, exception_field, number_of, part_words, unfit
from calibration.queries.drafts import LONGEST_REASON, Draft, output_in_ma
from calibration.sheet_fields import (
    ADJUSTED,
    CORRECTION_REASON,
    COULD_NOT_TEST,
    ENDED,
    KINDS,
    NOT_ADJUSTED,
    ORDER,
    PARTS,
    RUN_STAGE,
    label,
)
from calibration.storing_entries import locked, store
from register import access
from register.auditing import Act, Actor
from register.models import Fitting, Transmitter, User

Stage = Sheet.Stage
_DASHES = dict.fromkeys(map(ord, "‐‑‒–—−"), "-")


@transaction.atomic
def confirm(*, by: Actor, sheet_id: uuid.UUID) -> Sheet:
    """Compare the tag and the serial number read at the instrument with those of the sheet.

    Raises
    ------
    ValidationError
        One of them is empty or differs; the message says what was typed.
    """
    draft = _at(sheet_id, Stage.CONFIRM)
    sheet, errors = draft.sheet, {}
    if sheet.tag is not None:
        typed = draft.text("confirm-tag")
        if not typed:
            errors["confirm-tag"] = "Type the tag as it stands on the plate at the instrument."
        elif _alike(typed) != _alike(sheet.tag.number):
            errors["confirm-tag"] = (
                f"“{typed}” was typed; this sheet is for {sheet.tag.number}. Stop here unless you stand at "
                f"{sheet.tag.number}."
            )
    typed = draft.text("confirm-serial")
    if not typed:
        errors["confirm-serial"] = "Type the serial number as it stands on the nameplate."
    elif _alike(typed) != _alike(sheet.transmitter.serial):
        errors["confirm-serial"] = _other_serial(sheet, typed)
    if errors:
        raise ValidationError(errors)
    return _moved(by, sheet, Stage.CAUTIONS)


@transaction.atomic
def pass_cautions(*, by: Actor, sheet_id: uuid.UUID) -> Sheet:
    """Go on once every caution that asks for it is answered."""
    draft = _at(sheet_id, Stage.CAUTIONS)
    _answered(draft, "cautions", "caution")
    return _moved(by, draft.sheet, Stage.STANDARDS)


@transaction.atomic
def choose_standards(*, by: Actor, sheet_id: uuid.UUID, kind: str) -> Sheet:
    """Fix which standards, under which certificates, apply the input and measure the output of a run.

    Raises
    ------
    ValidationError
        One is not chosen, is of the wrong kind or not in use, or its certificate has lapsed without an exception.
    """
    draft = _live(sheet_id)
    sheet = draft.sheet
    stages = (
        {Stage.CORRECT}
        if sheet.corrects_id
        else ({Stage.STANDARDS, Stage.AS_FOUND} if kind == Run.Kind.AS_FOUND else {Stage.AS_LEFT})
    )
    if sheet.stage not in stages:
        raise ValidationError(f"The standards of the {kind} run can no longer be chosen in this stage.")
    fixed = _checked_standards(draft, kind)
    store(sheet, fixed, by=_person(by))
    return _moved(by, sheet, Stage.AS_FOUND) if sheet.stage == Stage.STANDARDS else sheet


@transaction.atomic
def allow_exception(*, by: Actor, reason: str, sheet_id: uuid.UUID, standard: Standard) -> None:
    """Allow a standard with a lapsed certificate on one sheet; `by` is the person who answers for it.

    Raises
    ------
    ValidationError
        He may not allow it, works on this sheet himself, gives no reason, or there is nothing to except.
    """
    draft = _live(sheet_id)
    sheet, person = draft.sheet, _person(by)
    if not access.may(person, "allow exception", sheet.plant_id):
        raise ValidationError(f"{person} has no role in this plant that allows an exception.")
    if person.pk == sheet.opened_by_id or any(
        kept.entry.person_id == person.pk for name, kept in draft.fields.items() if name.startswith(KINDS)
    ):
        raise ValidationError(f"{person} works on this sheet: somebody else must allow the exception.")
    if not reason.strip():
        raise ValidationError({"reason": "Say why the lapsed certificate may be relied on: it stays with the record."})
    if len(reason.strip()) > LONGEST_REASON:
        raise ValidationError({"reason": f"At most {LONGEST_REASON} characters stay with the record: shorten it."})
    offered = {c.standard.pk: c for c in candidates(sheet.plant, sheet.plant.today())}
    candidate = offered.get(standard.pk)
    if candidate is None or not candidate.lapsed:
        raise ValidationError(f"{standard.name} needs no exception, or cannot be used at all.")
    store(sheet, {exception_field(standard.pk): reason.strip()}, by=person)
    act = Act(by=by, reason=reason)
    act.changed(
        sheet,
        plant=sheet.plant_id,
        before={"exception": ""},
        after={"exception": f"{standard.name}: {candidate.objection} Allowed by {person}."},
    )
    act.write()


@transaction.atomic
def close_as_found(*, by: Actor, sheet_id: uuid.UUID, with_gaps: bool = False) -> Sheet:
    """Close the as-found run; nothing can be added to it afterwards, and only then does the adjustment open.

    Raises
    ------
    ValidationError
        A reading is no number, versions clash, or points are missing and `with_gaps` is not said.
    """
    draft = _at(sheet_id, Stage.AS_FOUND)
    _closable(by, draft, Run.Kind.AS_FOUND, with_gaps)
    draft.sheet.as_found_closed_at = timezone.now()
    return _moved(by, draft.sheet, Stage.ADJUST, "as_found_closed_at")


@transaction.atomic
def record_adjustment(*, by: Actor, sheet_id: uuid.UUID) -> Sheet:
    """Go on to the as-left run, or past it where nothing was adjusted."""
    draft = _at(sheet_id, Stage.ADJUST)
    _no_clash(draft, "adjust.")
    choice = draft.text("adjust.choice")
    if choice not in {ADJUSTED, NOT_ADJUSTED}:
        raise ValidationError({"adjust.choice": "Say whether the transmitter was adjusted."})
    if choice == NOT_ADJUSTED:
        return _moved(by, draft.sheet, Stage.RETURN)
    if not draft.text("adjust.log"):
        raise ValidationError({"adjust.log": "Say what was adjusted, and how: zero, span, sensor trim, output trim …"})
    carried = {
        f"{Run.Kind.AS_LEFT}.{name}": draft.text(f"{Run.Kind.AS_FOUND}.{name}")
        for name in (*(f"{part}-{what}" for part in PARTS for what in ("with", "certificate")), *_CARRIED)
    }
    store(draft.sheet, {name: text for name, text in carried.items() if text}, by=_person(by))
    return _moved(by, draft.sheet, Stage.AS_LEFT)


@transaction.atomic
def close_as_left(*, by: Actor, sheet_id: uuid.UUID, with_gaps: bool = False) -> Sheet:
    """Close the as-left run, as `close_as_found`."""
    draft = _at(sheet_id, Stage.AS_LEFT)
    _no_clash(draft, "adjust.")
    _closable(by, draft, Run.Kind.AS_LEFT, with_gaps)
    draft.sheet.as_left_closed_at = timezone.now()
    return _moved(by, draft.sheet, Stage.RETURN, "as_left_closed_at")


@transaction.atomic
def return_to_service(*, by: Actor, sheet_id: uuid.UUID) -> Sheet:
    """Go on to the signature once the checklist is answered."""
    draft = _at(sheet_id, Stage.RETURN)
    _answered(draft, "checklist", "checklist")
    return _moved(by, draft.sheet, Stage.SIGN)


@transaction.atomic
def finish_correction(*, by: Actor, sheet_id: uuid.UUID) -> Sheet:
    """Go on to the signature once everything corrected can be read."""
    draft = _at(sheet_id, Stage.CORRECT)
    if not draft.text(CORRECTION_REASON):
        raise ValidationError({CORRECTION_REASON: "Say why the record is corrected: the reason stays with it."})
    _no_clash(draft, "")
    if draft.problems:
        raise ValidationError(dict[str, Any](draft.problems))
    for kind in KINDS:
        if any(row.point is not None for row in draft.runs[kind].readings):
            store(draft.sheet, _checked_standards(draft, kind), by=_person(by))
    return _moved(by, draft.sheet, Stage.SIGN)


@transaction.atomic
def step_back(*, by: Actor, sheet_id: uuid.UUID) -> Sheet:
    """From the signature back to the checklist, or to the correction; closed runs stay closed."""
    draft = _at(sheet_id, Stage.SIGN)
    return _moved(by, draft.sheet, Stage.CORRECT if draft.sheet.corrects_id else Stage.RETURN)


@transaction.atomic
def could_not_test(*, by: Actor, reason: str, sheet_id: uuid.UUID) -> Sheet:
    """End the test without a result, with its reason; readings already taken stay on the sheet.

    Notes
    -----
    Once the cautions are passed the instrument may have been touched: the checklist then still stands before the
    signature.
    """
    draft = _live(sheet_id)
    sheet = draft.sheet
    if sheet.corrects_id is not None:
        raise ValidationError("A correction changes a test that was made; abandon it if it is not needed.")
    if not reason.strip():
        raise ValidationError({"reason": "Say why it could not be tested."})
    _no_clash(draft, "")
    # What the run holds so far goes into the record, and can be mended only while the run is open.
    unclear = [
        f"{label(name)}: {words}" for kind in _open_runs(sheet) for name, words in draft.problems_of(kind).items()
    ]
    if unclear:
        raise ValidationError(["Mend or empty this on the sheet first:", *unclear])
    store(sheet, {COULD_NOT_TEST: reason.strip()}, by=_person(by))
    touched = ORDER.index(Stage(sheet.stage)) >= ORDER.index(Stage.STANDARDS)
    return _moved(by, sheet, Stage.RETURN if touched else Stage.SIGN, reason=reason)


@transaction.atomic
def abandon(*, by: Actor, reason: str, sheet_id: uuid.UUID) -> Sheet:
    """End a sheet that becomes no record; what was entered stays readable.

    Raises
    ------
    ValidationError
        No reason is given, or the transmitter was adjusted: without a record that would be read as drift.
    """
    draft = _live(sheet_id)
    if not reason.strip():
        raise ValidationError({"reason": "Say why the sheet is abandoned."})
    if draft.sheet.corrects_id is None and draft.text("adjust.choice") == ADJUSTED:
        raise ValidationError(
            "The transmitter was adjusted, which a record must tell: go on to the as-left readings, or say why it "
            "could not be tested."
        )
    draft.sheet.ended_at = timezone.now()
    return _moved(by, draft.sheet, Stage.ABANDONED, "ended_at", reason=reason)


_CARRIED = (
    "unit", "ambient-unit", "height", "height-unit", "static-unit", "digital-unit",
)  # fmt: skip


def _open_runs(sheet: Sheet) -> list[str]:
    return [kind for kind, stage in RUN_STAGE.items() if sheet.stage == stage]


def _live(sheet_id: uuid.UUID) -> Draft:
    sheet = locked(sheet_id)
    if sheet.stage in ENDED:
        raise ValidationError(f"This sheet is {sheet.get_stage_display()}; nothing can be changed in it.")
    return Draft(sheet)


def _at(sheet_id: uuid.UUID, stage: Sheet.Stage) -> Draft:
    draft = _live(sheet_id)
    if draft.sheet.stage != stage:
        raise ValidationError(
            f"The sheet stands at “{draft.sheet.get_stage_display()}” now; somebody else may have gone on with it."
        )
    return draft


def _moved(by: Actor, sheet: Sheet, stage: Sheet.Stage, *columns: str, reason: str = "") -> Sheet:
    before = {"stage": sheet.get_stage_display()}
    sheet.stage = stage
    sheet.save(update_fields=["stage", *columns])
    act = Act(by=by, reason=reason)
    act.changed(sheet, plant=sheet.plant_id, before=before, after={"stage": sheet.get_stage_display()})
    act.write()
    return sheet


def _person(by: Actor) -> User:
    if by.person is None:
        raise ValidationError("A sheet is filled in by a person.")
    return by.person


def _alike(text: str) -> str:
    """A typed identification without what a plate and a thumb may differ in: case, spaces, kinds of dash."""
    return re.sub(r"\s+", "", text.translate(_DASHES)).casefold()


def _other_serial(sheet: Sheet, typed: str) -> str:
    words = f"“{typed}” was typed; the register has another serial number here. Read the nameplate again."
    wanted = _alike(typed)
    for other in Transmitter.objects.filter(plant=sheet.plant_id, serial__iexact=typed.strip()).exclude(
        pk=sheet.transmitter_id
    ):
        if _alike(other.serial) == wanted:
            at = Fitting.objects.filter(transmitter=other, removed_on=None).select_related("tag").first()
            where = f"fitted at {at.tag}" if at else other.get_whereabouts_display()
            words += f" {other} is {where} in the register."
    return words + " If it is really another transmitter, record the swap before testing."


def _answered(draft: Draft, part: str, prefix: str) -> None:
    _no_clash(draft, f"{prefix}.")
    errors: dict[str, Any] = {}
    for line in draft.sheet.basis.get(part, ()):
        name = f"{prefix}.{line['key']}"
        text = draft.text(name)
        if line["answer"] == "reading" and text:
            errors |= _reading_problem(draft, name, text)
        elif line["required"] == "yes" and not text:
            errors[name] = "Tick this when it is done." if line["answer"] == "tick" else "This is needed."
    if errors:
        raise ValidationError(errors)


def _reading_problem(draft: Draft, name: str, text: str) -> dict[str, str]:
    try:
        output_in_ma(text, draft.basis)
    except ValueError as error:
        return {name: str(error)}
    return {}


def _checked_standards(draft: Draft, kind: str) -> dict[str, str]:
    """Fields that fix the certificates of the chosen standards."""
    _no_clash(draft, f"{kind}.applied-with", f"{kind}.measured-with")
    sheet = draft.sheet
    chosen = {part: draft.text(f"{kind}.{part}-with") for part in PARTS}
    on = _day_of_use(draft)
    offered = {c.id: c for c in candidates(sheet.plant, on, also=map(number_of, chosen.values()))}
    fixed, errors = {}, {}
    for part, standard_id in chosen.items():
        name = f"{kind}.{part}-with"
        candidate = offered.get(standard_id)
        if candidate is None:
            errors[name] = f"Choose {part_words(kind, part)}."
            continue
        objection = unfit(candidate, part) or candidate.objection
        excepted = candidate.lapsed and bool(draft.text(exception_field(standard_id)))
        if objection and not excepted:
            errors[name] = objection + (
                " It cannot be used: choose another, or have an exception allowed." if candidate.lapsed else ""
            )
            continue
        fixed[f"{kind}.{part}-certificate"] = str(candidate.certificate.pk) if candidate.certificate else ""
    if errors:
        raise ValidationError(errors)
    return fixed


def _day_of_use(draft: Draft) -> datetime.date:
    """The day that certificates must cover: that of the last reading, else today."""
    sheet = draft.sheet
    if sheet.corrects is not None:
        return sheet.corrects.tested_on
    last = draft.last_reading()
    return last.astimezone(draft.zone).date() if last else sheet.plant.today()


def _closable(by: Actor, draft: Draft, kind: str, with_gaps: bool) -> None:
    _no_clash(draft, f"{kind}.")
    run = draft.runs[kind]
    if errors := draft.problems_of(kind):
        raise ValidationError(dict[str, Any](errors))
    fixed = _checked_standards(draft, kind)
    if run.missing and not with_gaps:
        raise ValidationError(
            f"{len(run.missing)} of {draft.points} points have no reading: "
            f"{', '.join(row.label for row in run.missing)}.",
            code="gaps",
        )
    store(draft.sheet, fixed, by=_person(by))


def _no_clash(draft: Draft, *prefixes: str) -> None:
    found = [label(kept.name) for kept in draft.clashes if kept.name.startswith(prefixes)]
    if found:
        raise ValidationError(f"Two versions differ and must be settled first: {'; '.join(found)}.", code="clash")
