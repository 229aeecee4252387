"""Keeps the flags of tags: one row per tag and check, recomputed whenever an input changes, accepted by an engineer.

An acceptance holds for the finding that was accepted. It ends when its end date has passed, when the finding
clears, or when it gets worse than it was on the day of the acceptance: a higher severity, or a smaller margin. It
survives every other recomputing, and an accepted flag stays visible.
"""

from __future__ import annotations

import datetime
from collections.abc import Collection, Iterable, Iterator
from contextlib import contextmanager
from contextvars import ContextVar
from typing import TYPE_CHECKING, Any

from django.core.exceptions import ValidationError
from django.db import transaction

from register.auditing import Act, Actor, snapshot
from register.bulk import among, columns_of, insert, values_of
from register.changes import announce
from register.checking import CHUNK, findings, fleet_of, with_inputs
from register.models import Flag, Plant, Tag

if TYPE_CHECKING:
    from register.engineering.findings import Finding

ACCEPTANCE = ("accepted_by", "accepted_at", "accepted_reason", "accepted_until")
#: What was accepted, kept beside an acceptance so that what comes later can be compared with it.
ACCEPTED = ("accepted_severity", "accepted_margin")
#: Columns that recomputing may write.
COMPUTED = (
    "severity",
    "opened_at",
    "closed_at",
    "sentence",
    "arithmetic",
    "demanded",
    "limit",
    "demanded_source",
    "limit_source",
    "margin",
    "margin_unit",
    "margin_percent",
    "percent_of",
)
#: A margin counts as smaller only beyond the noise of floating point.
NOISE = 1e-9


_waiting: ContextVar[set[int] | None] = ContextVar("tags that wait to be settled", default=None)


@contextmanager
def settled_together(act: Act) -> Iterator[None]:
    """Let many acts of one transaction share one settling at the end of the block, under the given act.

    For loading whole registers: the flags of a tag are then recomputed once, not after each of its acts.
    """
    touched: set[int] = set()
    token = _waiting.set(touched)
    try:
        yield
    finally:
        _waiting.reset(token)
    settle(act, touched)


def settle(act: Act, tag_ids: Collection[int]) -> None:
    """End an act of the register: flags recomputed, entries written, the schedule told."""
    waiting = _waiting.get()
    if waiting is not None:
        waiting.update(tag_ids)
        act.write()
        return
    recompute(tag_ids, act=act)
    act.write()
    announce(tag_ids)


@transaction.atomic
def recompute(tag_ids: Iterable[int], *, act: Act | None = None) -> None:
    """Bring the flags of the tags up to date with their inputs.

    Without `act` the program itself acts and writes its entries; else the caller writes them. The trail keeps one
    entry per tag whose flags changed, as the list of flags before and after.
    """
    own = act is None
    act = act or Act(Actor(None), "limit checks recomputed")
    ids = sorted(set(tag_ids))
    for start in range(0, len(ids), CHUNK):
        _recompute(ids[start : start + CHUNK], act)
    if own:
        act.write()


@transaction.atomic
def accept_flag(*, by: Actor, reason: str, flag: Flag, until: datetime.date) -> Flag:
    """Accept an open flag up to and including a date; it stays visible."""
    flag = _locked(flag)
    if flag.closed_at is not None:
        raise ValidationError("This flag is closed: there is nothing to accept any more.")
    today = flag.tag.plant.today()
    if until <= today:
        raise ValidationError({"until": f"{until} is not after today, {today}: an acceptance ends in the future."})
    act = Act(by, reason)
    before = snapshot(flag, ACCEPTANCE)
    flag.accepted_by, flag.accepted_at = by.person, act.at
    flag.accepted_reason, flag.accepted_until = reason, until
    flag.accepted_severity = flag.severity
    flag.accepted_margin = _margin_si(flag.demanded, flag.limit, flag.margin)
    flag.save(update_fields=(*ACCEPTANCE, *ACCEPTED))
    act.changed(flag, plant=flag.tag.plant_id, before=before, after=snapshot(flag, ACCEPTANCE))
    act.write()
    announce([flag.tag_id])
    return flag


@transaction.atomic
def withdraw_acceptance(*, by: Actor, reason: str, flag: Flag) -> Flag:
    """Take an acceptance back before its end date."""
    flag = _locked(flag)
    if flag.accepted_until is None:
        raise ValidationError("This flag is not accepted.")
    act = Act(by, reason)
    _end(flag, act)
    flag.save(update_fields=(*ACCEPTANCE, *ACCEPTED))
    announce([flag.tag_id])
    return flag


def end_lapsed_acceptances(*, by: Actor, today: datetime.date | None = None) -> int:
    """End every acceptance whose date has passed at its plant; returns how many. For the daily timer."""
    return sum(_end_lapsed(by, plant, today or plant.today()) for plant in Plant.objects.all())


@transaction.atomic
def _end_lapsed(by: Actor, plant: Plant, today: datetime.date) -> int:
    lapsed = Flag.objects.filter(tag__plant=plant, accepted_until__lt=today)
    ids = _lock(lapsed.values_list("tag_id", flat=True))
    flags = list(lapsed.filter(tag__in=ids).select_related("tag", "accepted_by"))
    act = Act(by, "the end date of the acceptance has passed")
    for flag in flags:
        _end(flag, act)
    Flag.objects.bulk_update(flags, (*ACCEPTANCE, *ACCEPTED), batch_size=CHUNK)
    announce(ids)
    return len(flags)


def _lock(tag_ids: Iterable[int]) -> list[int]:
    """Lock the rows of tags in the order of their ids, so that two acts never wait for each other."""
    chosen = among("pk", sorted(set(tag_ids)))
    return list(Tag.objects.select_for_update().filter(**chosen).order_by("pk").values_list("pk", flat=True))


def _locked(flag: Flag) -> Flag:
    Tag.objects.select_for_update().get(pk=flag.tag_id)
    return Flag.objects.select_related("tag__plant", "accepted_by").get(pk=flag.pk)


def _recompute(ids: list[int], act: Act) -> None:
    _lock(ids)
    rows: dict[int, dict[str, Flag]] = {}
    for flag in Flag.objects.filter(**among("tag", ids)).select_related("accepted_by"):
        rows.setdefault(flag.tag_id, {})[flag.check_key] = flag
    concerns = _concerns(ids)
    added: list[Flag] = []
    altered: list[Flag] = []
    for tag in with_inputs([*rows, *concerns]):
        known = rows.get(tag.pk, {})
        for flag in known.values():
            flag.tag = tag
        before = _listed(known.values())
        for finding in findings(tag, checks=[*known, *concerns.get(tag.pk, ())]):
            row = known.get(finding.check)
            if row is None:
                if finding.severity.name != Flag.Severity.CLEAR.name:
                    known[finding.check] = Flag(tag=tag, check_key=finding.check, opened_at=act.at, **_columns(finding))
                    added.append(known[finding.check])
            elif _brought_up_to(row, finding, act):
                altered.append(row)
        act.changed(tag, plant=tag.plant_id, before={"flags": before}, after={"flags": _listed(known.values())})
    columns = columns_of(Flag)
    insert(Flag, columns, values_of(added, columns))
    Flag.objects.bulk_update(altered, [*COMPUTED, *ACCEPTANCE, *ACCEPTED], batch_size=CHUNK)


def _concerns(ids: list[int]) -> dict[int, list[str]]:
    """The checks of each tag that are not clear, found over all tags at once; nothing where all are clear."""
    from register.engineering.findings import CHECKS
    from register.engineering.fleet import severities

    keys = list(CHECKS)
    ids, fleet = fleet_of(ids)
    concerns: dict[int, list[str]] = {}
    for row, column in zip(*severities(fleet).nonzero(), strict=True):
        concerns.setdefault(ids[row], []).append(keys[column])
    return concerns


def _listed(flags: Iterable[Flag]) -> str:
    """The open flags of a tag as the trail shows them."""
    from register.engineering.findings import CHECKS

    opened = {flag.check_key: Flag.Severity(flag.severity).label for flag in flags if flag.closed_at is None}
    return "; ".join(f"{title}: {opened[key]}" for key, title in CHECKS.items() if key in opened)


def _columns(finding: Finding) -> dict[str, Any]:
    return {
        "severity": Flag.Severity[finding.severity.name],
        "sentence": finding.sentence,
        "arithmetic": finding.arithmetic,
        "demanded": finding.demanded_si,
        "limit": finding.limit_si,
        "demanded_source": finding.demanded_source,
        "limit_source": finding.limit_source,
        "margin": finding.margin,
        "margin_unit": finding.unit,
        "margin_percent": finding.margin_percent,
        "percent_of": finding.percent_of,
    }


def _brought_up_to(flag: Flag, finding: Finding, act: Act) -> bool:
    """Bring one row up to a finding; says whether anything changed."""
    cleared = finding.severity.name == Flag.Severity.CLEAR.name
    if cleared and flag.closed_at is not None:
        return False
    columns = _columns(finding)
    changed = {name: value for name, value in columns.items() if getattr(flag, name) != value}
    if not changed and not cleared and flag.closed_at is None:
        return False
    if flag.accepted_until is not None and (why := _why_acceptance_ends(flag, finding)):
        _end(flag, act, why)
    for name, value in changed.items():
        setattr(flag, name, value)
    if cleared:
        flag.closed_at = act.at
    elif flag.closed_at is not None:
        flag.opened_at, flag.closed_at = act.at, None
    return True


def _why_acceptance_ends(flag: Flag, finding: Finding) -> str:
    severity = Flag.Severity[finding.severity.name]
    if flag.accepted_until is not None and flag.accepted_until < flag.tag.plant.today():
        return "the end date of the acceptance has passed"
    if severity == Flag.Severity.CLEAR:
        return "the finding that was accepted has cleared"
    accepted = flag.accepted_severity
    if accepted is not None and severity > accepted:
        return f"worse than when accepted: {Flag.Severity(accepted).label} became {severity.label}"
    was, now = flag.accepted_margin, finding.margin_si
    if was is not None and now is not None and now < was - NOISE * max(abs(was), abs(now)):
        return f"worse than when accepted: {finding.sentence}"
    return ""


def _margin_si(demanded: float | None, limit: float | None, margin: float | None) -> float | None:
    """The stored margin in SI: its size from the two numbers compared, its sign from the margin."""
    if demanded is None or limit is None or margin is None:
        return None
    size = abs(demanded - limit)
    return -size if margin < 0 else size


def _end(flag: Flag, act: Act, why: str = "") -> None:
    """End an acceptance; with `why` as the reason in the trail, else the reason of the act."""
    before = snapshot(flag, ACCEPTANCE)
    flag.accepted_by = flag.accepted_at = flag.accepted_until = None
    flag.accepted_reason = ""
    flag.accepted_severity = flag.accepted_margin = None
    note = Act(act.by, why or act.reason, id=act.id, at=act.at)
    note.changed(flag, plant=flag.tag.plant_id, before=before, after=snapshot(flag, ACCEPTANCE))
    note.write()
