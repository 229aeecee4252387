"""Turns a filled-in sheet into a signed record: test, record, summaries, signature and schedule in one transaction.

The password is checked before (`calibration.passwords`): a check takes longer than a lock may be held.
"""

from __future__ import annotations

import datetime
import uuid
from collections.abc import Collection, Mapping
from dataclasses import dataclass
from typing import Any

from django.core.exceptions import ValidationError
from django.db import transaction
from django.utils import timezone

from calibration.models import Record, Run, Sheet, Signature, Standard, Test
from calibration.opening import current_requirement
from calibration.queries.choosing import exception_field, number_of
from calibration.queries.drafts import Draft
from calibration.queries.entries import when
from calibration.recording import write_record
from calibration.records.content import RecordContent, SignatureContent, UseContent
from calibration.reopening import placed
from calibration.sheet_fields import ADJUSTED, CORRECTION_REASON, COULD_NOT_TEST, PARTS, PRESENT, REMARKS, label
from calibration.storing_entries import locked
from register.auditing import Act, Actor
from register.models import Fitting, Tag, Transmitter, User


@dataclass(frozen=True, slots=True)
class Change:
    """What became different in the register since the sheet was opened; `token` names exactly this change."""

    token: str
    words: str


@transaction.atomic
def sign(*, by: Actor, sheet_id: uuid.UUID, acknowledged: Collection[str] = ()) -> Record:
    """Sign a sheet; a second time gives the record already made.

    Parameters
    ----------
    by : Actor
        Who signs; his password was just checked.
    acknowledged : collection of str
        Tokens of the changes (`changes_since`) that he has read.

    Raises
    ------
    ValidationError
        The sheet is not ready, versions clash, or a change is not acknowledged.
    """
    if by.person is None:
        raise ValidationError("A record is signed by a person.")
    tag_id = Sheet.objects.values_list("tag_id", flat=True).get(pk=sheet_id)
    if tag_id is not None:
        Tag.objects.select_for_update().get(pk=tag_id)
    sheet = locked(sheet_id)
    if sheet.stage == Sheet.Stage.SIGNED:
        return _signed_record(sheet)
    draft = Draft(sheet)
    changes = _ready(draft, by.person, acknowledged)
    content = record_content(draft, signer=by.person, at=timezone.now(), changes=changes)
    act = Act(by=by, reason=content.correction_reason)
    record = write_record(content, act=act)
    before = {"stage": sheet.get_stage_display()}
    sheet.stage = Sheet.Stage.SIGNED
    sheet.ended_at = timezone.now()
    sheet.save(update_fields=["stage", "ended_at"])
    act.changed(sheet, plant=sheet.plant_id, before=before, after={"stage": sheet.get_stage_display()})
    act.write()
    return record


def changes_since(sheet: Sheet) -> list[Change]:
    """What the register says differently from the sheet's basis; a correction keeps its record's basis silently."""
    if sheet.corrects_id is not None:
        return []
    found = []
    transmitter = Transmitter.objects.select_related("head").get(pk=sheet.transmitter_id)
    if sheet.tag_id is None:
        at = Fitting.objects.filter(transmitter=transmitter, removed_on=None).select_related("tag").first()
        if at is not None:
            found.append(Change(f"fitting {at.pk}", f"The transmitter has been fitted at {at.tag} meanwhile."))
    else:
        tag = Tag.objects.select_related("plant", "current_range", "current_fitting__transmitter__maker").get(
            pk=sheet.tag_id
        )
        found += _changes_of_tag(sheet, tag)
    if transmitter.head_id != int(sheet.basis["head_id"]):
        found.append(
            Change(
                f"head {transmitter.head_id}", f"The transmitter has another measuring head now: {transmitter.head}."
            )
        )
    return found


def record_content(draft: Draft, *, signer: User, at: datetime.datetime, changes: Collection[Change]) -> RecordContent:
    """The content of the record that a sheet gives if it is signed now."""
    sheet = draft.sheet
    if sheet.corrects is not None:
        return _corrected(draft, sheet.corrects, signer=signer, at=at)
    not_tested = draft.text(COULD_NOT_TEST)
    runs = tuple(draft.run_content(kind, _uses(draft, kind)) for kind in _kinds(draft))
    return RecordContent(
        plant_id=sheet.plant_id,
        tag_id=sheet.tag_id,
        transmitter_id=sheet.transmitter_id,
        fitting_id=sheet.fitting_id,
        tested_on=_tested_on(draft),
        adjusted=draft.text("adjust.choice") == ADJUSTED,
        basis=draft.basis,
        runs=runs,
        made_at=at,
        made_by_id=signer.pk,
        outcome=Test.Outcome.NOT_TESTED if not_tested else Test.Outcome.DONE,
        answers=_answers(draft, changes),
        signatures=(_performed(signer, at, sheet),),
        sheet_id=sheet.pk,
    )


def _corrected(draft: Draft, test: Test, *, signer: User, at: datetime.datetime) -> RecordContent:
    sheet = draft.sheet
    before = test.current_record
    assert before is not None
    recorded = {run.kind: run for run in before.runs.prefetch_related("readings")}
    runs = []
    for kind in _kinds(draft):
        run = recorded.get(kind)
        entered = (
            {
                key: row.entered_at
                for key, row in placed(list(run.readings.all()), draft.basis)
                if _unchanged(draft, kind, key, row.applied, row.measured)
            }
            if run
            else {}
        )
        on = run.tested_on if run else test.tested_on
        runs.append(draft.run_content(kind, _uses(draft, kind), on=on, entered=entered))
    kept = {name: before.answers[name] for name in ("confirmed", "cautions", "acknowledged") if name in before.answers}
    return RecordContent(
        plant_id=sheet.plant_id,
        tag_id=sheet.tag_id,
        transmitter_id=sheet.transmitter_id,
        fitting_id=sheet.fitting_id,
        tested_on=test.tested_on,
        adjusted=draft.text("adjust.choice") == ADJUSTED,
        basis=draft.basis,
        runs=tuple(runs),
        made_at=at,
        made_by_id=signer.pk,
        outcome=test.outcome,
        answers=_answers(draft, ()) | kept,
        signatures=(_performed(signer, at, sheet),),
        sheet_id=sheet.pk,
        test_id=test.pk,
        correction_reason=draft.text(CORRECTION_REASON),
    )


def _unchanged(draft: Draft, kind: str, key: str, applied: str, measured: str) -> bool:
    row = next((row for row in draft.runs[kind].readings if row.key == key), None)
    return row is not None and (row.applied, row.measured) == (applied, measured)


def _ready(draft: Draft, signer: User, acknowledged: Collection[str]) -> list[Change]:
    sheet = draft.sheet
    if sheet.stage != Sheet.Stage.SIGN:
        raise ValidationError(f"The sheet stands at “{sheet.get_stage_display()}”; it is not ready to be signed.")
    if draft.clashes:
        found = "; ".join(label(kept.name) for kept in draft.clashes)
        raise ValidationError(f"Two versions differ and must be settled first: {found}.", code="clash")
    _sound(draft)
    for kind in _kinds(draft):
        for use in _uses(draft, kind):
            if use.exception_by_id == signer.pk:
                raise ValidationError("Who allowed a lapsed certificate cannot also sign the test made with it.")
    changes = changes_since(sheet)
    unread = [change.words for change in changes if change.token not in acknowledged]
    if unread:
        raise ValidationError(
            ["The register changed since the sheet was opened. Read this and tick it before you sign:", *unread],
            code="changed",
        )
    return changes


def _sound(draft: Draft) -> None:
    """Refuse what a record could not keep, or would keep as something that it is not."""
    asked = (*(f"{kind}." for kind in _kinds(draft)), CORRECTION_REASON)
    found = [f"{label(name)}: {words}" for name, words in draft.problems.items() if name.startswith(asked)]
    if draft.sheet.corrects_id is not None and not draft.text(CORRECTION_REASON):
        found.append("Say why the record is corrected: the reason stays with it.")
    if found:
        raise ValidationError(["Go back and mend this first:", *found])


def _kinds(draft: Draft) -> list[str]:
    """Runs that go into the record: the as-found run unless nothing was read, the as-left run where adjusted."""
    found, left = draft.runs[Run.Kind.AS_FOUND], draft.runs[Run.Kind.AS_LEFT]
    kinds = []
    if not draft.text(COULD_NOT_TEST) or found.judged is not None:
        kinds.append(found.kind)
    if draft.text("adjust.choice") == ADJUSTED and (not draft.text(COULD_NOT_TEST) or left.judged is not None):
        kinds.append(left.kind)
    return kinds


def _uses(draft: Draft, kind: str) -> tuple[UseContent, ...]:
    uses = []
    for part in PARTS:
        standard_id = draft.text(f"{kind}.{part}-with")
        number = number_of(standard_id)
        if number is None:
            continue
        certificate = draft.text(f"{kind}.{part}-certificate")
        allowed = draft.fields.get(exception_field(standard_id))
        uses.append(
            UseContent(
                part=part,
                standard_id=number,
                certificate_id=number_of(certificate),
                exception=allowed.text if allowed else "",
                exception_by_id=allowed.entry.person_id if allowed else None,
            )
        )
    return tuple(uses)


def _tested_on(draft: Draft) -> datetime.date:
    last = draft.last_reading()
    if last is None and (said := draft.fields.get(COULD_NOT_TEST)) is not None:
        last = when(said.entry, draft.sheet.opened_at)
    return (last or timezone.now()).astimezone(draft.zone).date()


def _answers(draft: Draft, changes: Collection[Change]) -> dict[str, Any]:
    sheet = draft.sheet
    answers: dict[str, Any] = {
        "confirmed": {"tag": draft.text("confirm-tag"), "serial": draft.text("confirm-serial")},
        "cautions": _lines(draft, "cautions", "caution"),
        "checklist": _lines(draft, "checklist", "checklist"),
        "adjustment": draft.text("adjust.log"),
        "remarks": draft.text(REMARKS),
        "could_not_test": draft.text(COULD_NOT_TEST),
        "acknowledged": [change.words for change in changes],
        "exceptions": _exceptions(draft),
        "opened": {"by": str(sheet.opened_by), "at": sheet.opened_at.astimezone(draft.zone).isoformat()},
        "entered_by": sorted(
            {str(e.person) for e in draft.entries if e.field != PRESENT and not e.field.startswith("exception.")}
        ),
    }
    return {name: value for name, value in answers.items() if value}


def _lines(draft: Draft, part: str, prefix: str) -> list[dict[str, str]]:
    lines = []
    for line in draft.sheet.basis.get(part, ()):
        kept = draft.fields.get(f"{prefix}.{line['key']}")
        lines.append(
            {
                "key": line["key"],
                "text": line["text"],
                "answer": kept.text if kept else "",
                "by": str(kept.entry.person) if kept and kept.text else "",
            }
        )
    return lines


def _exceptions(draft: Draft) -> list[dict[str, str]]:
    allowed = {name.partition(".")[2]: kept for name, kept in draft.fields.items() if name.startswith("exception.")}
    used = {str(use.standard_id) for kind in Run.Kind.values for use in _uses(draft, kind)} & set(allowed)
    names: Mapping[int, Standard] = Standard.objects.in_bulk([int(standard_id) for standard_id in used])
    return [
        {
            "standard": names[int(standard_id)].name,
            "reason": allowed[standard_id].text,
            "by": str(allowed[standard_id].entry.person),
        }
        for standard_id in sorted(used)
    ]


def _performed(signer: User, at: datetime.datetime, sheet: Sheet) -> SignatureContent:
    return SignatureContent(
        meaning=Signature.Meaning.PERFORMED,
        person_id=signer.pk,
        printed_name=str(signer),
        signed_at=at,
        time_zone=sheet.plant.time_zone,
    )


def _signed_record(sheet: Sheet) -> Record:
    test = sheet.corrects or Test.objects.get(sheet=sheet)
    record = test.current_record
    if record is None:
        raise ValidationError("The sheet is signed, but its record is missing; tell an administrator.")
    return record


def _changes_of_tag(sheet: Sheet, tag: Tag) -> list[Change]:
    from register.engineering.units import label as unit_label

    found = []
    fitting = tag.current_fitting
    if tag.current_fitting_id != sheet.fitting_id:
        now = f"{fitting.transmitter} is fitted there now" if fitting else "nothing is fitted there now"
        found.append(
            Change(
                f"fitting {tag.current_fitting_id}",
                f"{sheet.transmitter} is no longer the transmitter of {tag} in the register: {now}. "
                "The record stays with the transmitter that was tested.",
            )
        )
    used = tag.current_range
    if used is not None and used.pk != sheet.basis.get("range_id"):
        found.append(
            Change(
                f"range {used.pk}",
                f"{tag} was re-ranged to {used.lrv} to {used.urv} {unit_label(used.unit)}. The record keeps "
                f"{sheet.lrv} to {sheet.urv} {unit_label(sheet.unit)}, as the sheet was opened.",
            )
        )
    requirement = current_requirement(tag)
    if requirement is not None and requirement.pk != sheet.basis.get("requirement_id"):
        found.append(
            Change(
                f"requirement {requirement.pk}",
                f"{tag} has another requirement since {requirement.effective_from}. The record is judged by the "
                "tolerance with which the sheet was opened.",
            )
        )
    return found
