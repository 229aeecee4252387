"""Sets what tags ask of their tests, defers dates, and keeps the standings from which lists are read.

A requirement changes by adding a row from a date on: in force at once, or planned until `apply_planned` finds
that its day has come. Standings are worked out by `calibration.queries.standings` and stored in the transaction
of the act that changes them.
"""

from __future__ import annotations

import datetime
from collections.abc import Collection, Iterator, Mapping
from typing import Any, Final

from django.core.exceptions import ValidationError
from django.db import transaction

from calibration.models import Deferral, Requirement, SearchWord, Standing, ToleranceForm
from calibration.queries import standings
from register.auditing import Act, Actor, snapshot
from register.bulk import among, columns_of, insert, values_of
from register.changes import object_to_backdating
from register.models import Criticality, Plant, Tag

CHUNK: Final = 1000
#: A person other than the one who asks must approve a deferral of these.
SECOND_PERSON: Final = frozenset({Criticality.SAFETY, Criticality.ENVIRONMENT})
#: Figures that each form of tolerance needs.
FIGURES: Final[Mapping[str, tuple[str, ...]]] = {
    ToleranceForm.SPAN: ("percent",),
    ToleranceForm.READING: ("percent", "input"),
    ToleranceForm.ABSOLUTE: ("input",),
    ToleranceForm.LARGER: ("percent", "input"),
    ToleranceForm.SUM: ("percent", "input"),
}
_COLUMNS: Final = [field.name for field in Standing._meta.concrete_fields if not field.primary_key]
_WITHDRAWAL: Final = ("withdrawn_at", "withdrawn_reason")


# --- requirements -----------------------------------------------------------------------------------------


@transaction.atomic
def set_requirement(
    *, by: Actor, reason: str, tag: Tag, values: Mapping[str, Any], effective_from: datetime.date
) -> Requirement:
    """Give a tag another requirement from a day on; a day to come is planned.

    Parameters
    ----------
    values : mapping
        mpe_form, mpe_percent, mpe_input, as_left_percent, as_left_input (texts), input_unit, decision_rule,
        interval_months, anchor, anchor_on, grace_days, lead_days, point_list.

    Raises
    ------
    ValidationError
        By field: a figure that its form needs is missing or no number, or the day lies before what stands.
    """
    tag = _locked(tag.pk)
    act = Act(by, reason)
    new = Requirement(tag=tag, effective_from=effective_from, reason=reason, person=by.person, **values)
    check_requirement(new, tag)
    standing = _in_force(tag)
    if effective_from <= tag.plant.today():
        if standing is not None and effective_from < standing.effective_from:
            raise ValidationError(
                {
                    "effective_from": f"The requirement in force began on {standing.effective_from}: a new one cannot "
                    "begin before it. If that one was a mistake, withdraw it."
                }
            )
        if standing is not None:
            object_to_backdating(tag, effective_from, field="effective_from")
        new.applied_at = act.at
    if tag.requirements.filter(effective_from=effective_from, withdrawn_at__isnull=True).exists():
        raise ValidationError(
            {
                "effective_from": f"A requirement of {tag} already begins on {effective_from}: withdraw it first if it "
                "was a mistake."
            }
        )
    new.save()
    act.created(new, plant=tag.plant_id)
    act.write()
    refresh([tag.pk])
    return new


@transaction.atomic
def withdraw_requirement(*, by: Actor, reason: str, requirement: Requirement) -> Requirement:
    """Mark a requirement as a mistake; the one before it is in force again if it was the one in force."""
    tag = _locked(requirement.tag_id)
    held = Requirement.objects.get(pk=requirement.pk)
    if held.withdrawn_at is not None:
        raise ValidationError(f"This requirement was withdrawn already: {held.withdrawn_reason}")
    act = Act(by, reason)
    _withdraw(held, act, tag)
    act.write()
    refresh([tag.pk])
    return held


def apply_planned(*, by: Actor, today: datetime.date | None = None) -> int:
    """Put every planned requirement in force whose day has come at its plant; returns how many. For the daily timer."""
    return sum(_apply(by, plant, today or plant.today()) for plant in Plant.objects.all())


@transaction.atomic
def _apply(by: Actor, plant: Plant, today: datetime.date) -> int:
    planned = Requirement.objects.filter(
        tag__plant=plant, applied_at__isnull=True, withdrawn_at__isnull=True, effective_from__lte=today
    )
    tags = list(
        Tag.objects.select_for_update()
        .filter(pk__in=planned.values("tag_id"))
        .order_by("pk")
        .values_list("pk", flat=True)
    )
    rows = list(planned.filter(tag_id__in=tags).select_related("tag").order_by("tag_id", "effective_from"))
    act = Act(by, "the day of the planned requirement has come")
    for row in rows:
        row.applied_at = act.at
        act.changed(row, plant=plant, before={"applied_at": None}, after={"applied_at": act.at})
    Requirement.objects.bulk_update(rows, ["applied_at"], batch_size=CHUNK)
    act.write()
    refresh(tags)
    return len(rows)


def check_requirement(new: Requirement, tag: Tag) -> None:
    """Refuse what cannot be judged or scheduled by, beside the field that is to blame."""
    refused: dict[str, str] = {}
    needed = FIGURES.get(new.mpe_form, ())
    for part in ("percent", "input"):
        if part not in needed:
            setattr(new, f"mpe_{part}", "")
            setattr(new, f"as_left_{part}", "")
    if "input" not in needed:
        new.input_unit = ""
    elif not new.input_unit:
        refused["input_unit"] = "Say in which unit the figure stands."
    mpe, left = _figures(new, "mpe", refused), _figures(new, "as_left", refused)
    for part in needed:
        floor = new.mpe_form == ToleranceForm.READING and part == "input"
        if f"mpe_{part}" not in refused and part not in mpe and not floor:
            refused[f"mpe_{part}"] = "This form of tolerance needs this figure."
        elif part in mpe and left.get(part, 0.0) > mpe[part]:
            refused[f"as_left_{part}"] = "The as-left tolerance is wider than the tolerance itself."
    if left and any(part in mpe and part not in left for part in needed):
        missing = next(part for part in needed if part in mpe and part not in left)
        refused.setdefault(f"as_left_{missing}", "State the as-left tolerance in both figures, or leave both empty.")
    if new.anchor == Requirement.Anchor.CALENDAR and new.anchor_on is None:
        refused["anchor_on"] = "A fixed calendar needs the day it begins on."
    if new.anchor != Requirement.Anchor.CALENDAR:
        new.anchor_on = None
    if not 1 <= new.interval_months <= 240:
        refused["interval_months"] = f"{new.interval_months} months is no interval from 1 to 240."
    if new.point_list.plant_id != tag.plant_id or new.point_list.withdrawn_at is not None:
        refused["point_list"] = "Choose a point list of this plant that is in use."
    if refused:
        raise ValidationError(refused)


def _figures(new: Requirement, kind: str, refused: dict[str, str]) -> dict[str, float]:
    """The figures given for a tolerance, by part; what is no number above zero is refused."""
    from register.engineering.typed import NumberError, parse_number

    found = {}
    for part in ("percent", "input"):
        name = f"{kind}_{part}"
        text = str(getattr(new, name)).strip()
        setattr(new, name, text)
        if not text:
            continue
        try:
            value = parse_number(text)
        except NumberError as error:
            refused[name] = str(error)
            continue
        if value <= 0:
            refused[name] = f"“{text}” is not above zero; nothing could be inside it."
        found[part] = value
    return found


def _in_force(tag: Tag) -> Requirement | None:
    rows = tag.requirements.filter(applied_at__isnull=False, withdrawn_at__isnull=True)
    return rows.order_by("-effective_from", "-id").first()


# --- deferrals --------------------------------------------------------------------------------------------


@transaction.atomic
def defer(*, by: Actor, tag: Tag, until: datetime.date, risk_statement: str, mitigation: str) -> Deferral:
    """Ask for a later date for a tag; it counts once another act has approved it.

    Raises
    ------
    ValidationError
        The tag has no due date that could be deferred, the day is not after it, or a request is waiting already.
    """
    tag = _locked(tag.pk)
    if by.person is None:
        raise ValidationError("A deferral is asked for by a person.")
    standing = Standing.objects.get(pk=tag.pk)
    today = tag.plant.today()
    state = standing.state(today)
    if standing.phase != Standing.Phase.SCHEDULED or standing.due_on is None:
        raise ValidationError(
            f"{tag} is “{state.value}”: only a date that follows from an accepted test can be deferred."
        )
    if until <= standing.due_on or until <= today:
        raise ValidationError(
            {
                "until": f"{until} is not after the due date {standing.due_on} and today {today}: nothing would be "
                "deferred."
            }
        )
    waiting = tag.deferrals.filter(approved_at__isnull=True, withdrawn_at__isnull=True).first()
    if waiting is not None:
        raise ValidationError(
            f"A deferral until {waiting.until} is waiting for approval: approve or withdraw it first."
        )
    made = Deferral(tag=tag, until=until, risk_statement=risk_statement, mitigation=mitigation, requested_by=by.person)
    made.save()
    act = Act(by, risk_statement)
    act.created(made, plant=tag.plant_id)
    act.write()
    return made


@transaction.atomic
def approve_deferral(*, by: Actor, reason: str, deferral: Deferral) -> Deferral:
    """Approve a deferral; for safety and environmental tags by another person than the one who asked."""
    tag = _locked(deferral.tag_id)
    held = Deferral.objects.select_related("requested_by").get(pk=deferral.pk)
    if held.withdrawn_at is not None:
        raise ValidationError(f"This deferral was withdrawn: {held.withdrawn_reason}")
    if held.approved_at is not None:
        raise ValidationError("This deferral is approved already.")
    if by.person is None or (tag.criticality in SECOND_PERSON and by.person == held.requested_by):
        raise ValidationError(
            f"{tag} is “{tag.get_criticality_display()}”: {held.requested_by} asked for this deferral, so another "
            "person must approve it."
        )
    if held.until <= tag.plant.today():
        raise ValidationError(f"The deferral ended on {held.until}: ask for a later date.")
    act = Act(by, reason)
    before = snapshot(held, ("approved_by", "approved_at"))
    held.approved_by, held.approved_at = by.person, act.at
    held.save(update_fields=list(before))
    act.changed(held, plant=tag.plant_id, before=before, after=snapshot(held, before))
    act.write()
    refresh([tag.pk])
    return held


@transaction.atomic
def withdraw_deferral(*, by: Actor, reason: str, deferral: Deferral) -> Deferral:
    """Take a deferral back, asked for or approved; the old dates hold again."""
    tag = _locked(deferral.tag_id)
    held = Deferral.objects.get(pk=deferral.pk)
    if held.withdrawn_at is not None:
        raise ValidationError(f"This deferral was withdrawn already: {held.withdrawn_reason}")
    act = Act(by, reason)
    _withdraw(held, act, tag)
    act.write()
    refresh([tag.pk])
    return held


def _withdraw(held: Requirement | Deferral, act: Act, tag: Tag) -> None:
    before = snapshot(held, _WITHDRAWAL)
    held.withdrawn_at, held.withdrawn_reason = act.at, act.reason
    held.save(update_fields=list(_WITHDRAWAL))
    act.changed(held, plant=tag.plant_id, before=before, after=snapshot(held, _WITHDRAWAL))


def _locked(pk: int) -> Tag:
    rows = Tag.objects.select_for_update(of=("self",)).select_related("plant", "current_range")
    return rows.get(pk=pk)


# --- standings --------------------------------------------------------------------------------------------


@transaction.atomic
def refresh(tag_ids: Collection[int]) -> None:
    """Work out the standings and search words of some tags from their full history, and store them."""
    for chunk in chunks(tag_ids):
        history = standings.read(chunk)
        found = standings.work_out(history)
        known = set(Standing.objects.filter(**among("tag", chunk)).values_list("tag_id", flat=True))
        columns = columns_of(Standing, key=True)
        insert(Standing, columns, values_of((one for one in found if one.tag_id not in known), columns))
        Standing.objects.bulk_create(
            [one for one in found if one.tag_id in known],
            update_conflicts=True,
            unique_fields=["tag"],
            update_fields=_COLUMNS,
        )
        _store_words(standings.search_words(history), {tag.pk: tag.plant_id for tag in history.tags})


def _store_words(wanted: Mapping[int, set[str]], plants: Mapping[int, int]) -> None:
    missing = {tag_id: set(words) for tag_id, words in wanted.items()}
    stale = []
    there = SearchWord.objects.filter(**among("tag_id", sorted(wanted)))
    for pk, tag_id, word in there.values_list("pk", "tag_id", "word"):
        if word in missing[tag_id]:
            missing[tag_id].discard(word)
        else:
            stale.append(pk)
    for chunk in chunks(stale):
        SearchWord.objects.filter(pk__in=chunk).delete()
    insert(
        SearchWord,
        ("plant_id", "tag_id", "word"),
        ((plants[tag_id], tag_id, word) for tag_id, words in missing.items() for word in sorted(words)),
    )


def chunks(ids: Collection[int]) -> Iterator[list[int]]:
    """The ids in ascending order, a thousand at a time."""
    listed = sorted(set(ids))
    for start in range(0, len(listed), CHUNK):
        yield listed[start : start + CHUNK]
