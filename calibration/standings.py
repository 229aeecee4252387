"""How tags stand, worked out from their full history; nothing here writes.

`calibration.scheduling` stores what comes out of this module, and `manage.py recompute --check` compares it with
what is stored. The number of queries does not depend on the number of tags.
"""

from __future__ import annotations

import datetime
import re
from collections import defaultdict
from collections.abc import Collection, Iterable
from dataclasses import dataclass, field
from typing import Any

from calibration.models import Deferral, Requirement, Standing, Test
from register.models import Flag, Intervention, Range, Tag, TransmitterType

#: Interventions after which the transmitter must prove itself again before it counts as tested.
RESTARTS = (Intervention.Kind.REPAIR, Intervention.Kind.NEW_HEAD)
NO_DATE = datetime.date.max
_PIECES = re.compile(r"[^\W\d_]+|\d+")
_EDGES = re.compile(r"^\W+|\W+$")


@dataclass(slots=True)
class History:
    """What the database holds about some tags, read in a fixed number of queries."""

    tags: list[Tag]
    requirements: dict[int, Requirement] = field(default_factory=dict)
    ranges: dict[int, list[Range]] = field(default_factory=lambda: defaultdict(list))
    restarts: dict[int, list[datetime.date]] = field(default_factory=lambda: defaultdict(list))
    tests: dict[int, list[dict[str, Any]]] = field(default_factory=lambda: defaultdict(list))
    deferrals: dict[int, list[Deferral]] = field(default_factory=lambda: defaultdict(list))
    flags: dict[int, list[tuple[int, bool]]] = field(default_factory=lambda: defaultdict(list))


def read(tag_ids: Collection[int]) -> History:
    """Read everything that decides how the tags stand."""
    history = History(
        list(
            Tag.objects.filter(pk__in=tag_ids).select_related(
                "plant",
                "area",
                "current_range",
                "current_fitting__transmitter__maker",
                "current_fitting__transmitter__type",
                "current_fitting__transmitter__head",
            )
        )
    )
    applied = {"tag_id__in": tag_ids, "applied_at__isnull": False, "withdrawn_at__isnull": True}
    for requirement in Requirement.objects.filter(**applied).order_by("tag_id", "effective_from", "id"):
        history.requirements[requirement.tag_id] = requirement
    for row in Range.objects.filter(**applied).order_by("tag_id", "effective_from", "id"):
        history.ranges[row.tag_id].append(row)
    fitted = {tag.current_fitting.transmitter_id for tag in history.tags if tag.current_fitting}
    for transmitter_id, done_on in Intervention.objects.filter(
        transmitter_id__in=fitted, kind__in=RESTARTS, withdrawn_at__isnull=True
    ).values_list("transmitter_id", "done_on"):
        history.restarts[transmitter_id].append(done_on)
    for test in (
        Test.objects.filter(tag_id__in=tag_ids, outcome=Test.Outcome.DONE)
        .order_by("tag_id", "tested_on", "id")
        .values(
            "id",
            "tag_id",
            "transmitter_id",
            "fitting_id",
            "tested_on",
            "accepted",
            "state",
            "as_found_verdict",
            "as_left_verdict",
            "as_found_ratio",
            "as_left_ratio",
            "current_record__lrv_si",
            "current_record__urv_si",
            "current_record__transfer",
        )
    ):
        history.tests[test["tag_id"]].append(test)
    for deferral in Deferral.objects.filter(
        tag_id__in=tag_ids, approved_at__isnull=False, withdrawn_at__isnull=True
    ):
        history.deferrals[deferral.tag_id].append(deferral)
    for tag_id, severity, accepted_at in Flag.objects.filter(tag_id__in=tag_ids, closed_at__isnull=True).values_list(
        "tag_id", "severity", "accepted_at"
    ):
        history.flags[tag_id].append((severity, accepted_at is not None))
    return history


def work_out(history: History) -> list[Standing]:
    """Give one unsaved standing for each tag of the history."""
    strips = Strips()
    return [_standing(tag, history, strips) for tag in history.tags]


def _standing(tag: Tag, history: History, strips: Strips) -> Standing:
    fitting, span = tag.current_fitting, tag.current_range
    transmitter = fitting.transmitter if fitting else None
    requirement = history.requirements.get(tag.pk)
    standing = Standing(
        tag_id=tag.pk,
        plant_id=tag.plant_id,
        area_id=tag.area_id,
        number=tag.number,
        service=tag.service,
        area_code=tag.area.code,
        criticality=tag.criticality,
        craft=tag.craft,
        outage_only=tag.outage_only,
        transmitter_id=transmitter.pk if transmitter else None,
        serial=str(transmitter)[:200] if transmitter else "",
        fitted_on=fitting.fitted_on if fitting else None,
        strip=strips.of(tag),
        interval_months=requirement.interval_months if requirement else None,
    )
    if span is not None:
        from register.engineering.units import label

        standing.range_text = f"{span.lrv} to {span.urv}"[:80]
        standing.range_unit = label(span.unit)[:20]
        standing.square_root = span.transfer == Range.Transfer.SQUARE_ROOT
    flags = history.flags.get(tag.pk, [])
    standing.open_flags = sum(1 for severity, accepted in flags if severity and not accepted)
    standing.accepted_flags = sum(1 for severity, accepted in flags if severity and accepted)
    standing.flag_severity = max((severity for severity, accepted in flags if not accepted), default=0)
    if fitting is None:
        return standing
    since = restarted_on(tag, history)
    of_fitting = [test for test in history.tests.get(tag.pk, []) if _belongs(test, fitting)]
    if of_fitting:
        last = of_fitting[-1]
        standing.last_test_id = last["id"]
        standing.last_tested_on = last["tested_on"]
        standing.last_verdict = last["as_left_verdict"] or last["as_found_verdict"]
        standing.as_found_verdict = last["as_found_verdict"]
        standing.as_found_ratio = last["as_found_ratio"]
        standing.as_left_ratio = last["as_left_ratio"]
    accepted = [test for test in of_fitting if _proves(test, since, span)]
    standing.last_accepted_on = accepted[-1]["tested_on"] if accepted else None
    _schedule(standing, requirement, since)
    if tag.out_of_service_on is None:
        standing.phase = Standing.Phase.SCHEDULED if accepted else Standing.Phase.NEVER_TESTED
    standing.deferred_until = _deferred(standing, history.deferrals.get(tag.pk, []))
    return standing


def restarted_on(tag: Tag, history: History) -> datetime.date:
    """The day from which the fitted transmitter must have been tested at the tag: fitted, repaired or re-ranged."""
    fitting = tag.current_fitting
    assert fitting is not None
    days = [fitting.fitted_on, *history.restarts.get(fitting.transmitter_id, [])]
    earlier: Range | None = None
    for row in history.ranges.get(tag.pk, []):
        if earlier is not None and not _same_range(earlier, row):
            days.append(row.effective_from)
        earlier = row
    return max(days)


def _same_range(one: Range, other: Range) -> bool:
    if (one.reference, one.transfer) != (other.reference, other.transfer):
        return False
    if one.transfer == Range.Transfer.SQUARE_ROOT and (one.low_cut_percent, one.below_cut) != (
        other.low_cut_percent,
        other.below_cut,
    ):
        return False
    return _equal(one.lrv_si, one.urv_si, other.lrv_si, other.urv_si)


def _equal(lrv: float, urv: float, other_lrv: float, other_urv: float) -> bool:
    slack = 1e-9 * max(abs(lrv), abs(urv))
    return abs(lrv - other_lrv) <= slack and abs(urv - other_urv) <= slack


def _belongs(test: dict[str, Any], fitting: Any) -> bool:
    if test["fitting_id"] is not None:
        return bool(test["fitting_id"] == fitting.pk)
    return bool(test["transmitter_id"] == fitting.transmitter_id and test["tested_on"] >= fitting.fitted_on)


def _proves(test: dict[str, Any], since: datetime.date, span: Range | None) -> bool:
    """Whether a test shows that the transmitter is right as it is fitted and ranged now.

    A test of the very day on which the work was done counts where it was made in the present range.
    """
    if not test["accepted"] or test["state"] == Test.State.SENT_BACK or test["tested_on"] < since:
        return False
    if test["tested_on"] > since or span is None or test["current_record__lrv_si"] is None:
        return True
    return bool(
        test["current_record__transfer"] == span.transfer
        and _equal(span.lrv_si, span.urv_si, test["current_record__lrv_si"], test["current_record__urv_si"])
    )


def _schedule(standing: Standing, requirement: Requirement | None, since: datetime.date) -> None:
    if standing.last_accepted_on is None:
        standing.due_on = standing.grace_until = standing.window_opens_on = since
        return
    if requirement is None:
        return
    from calibration.metrology.due import plan_next

    calendar = requirement.anchor == Requirement.Anchor.CALENDAR
    plan = plan_next(
        standing.last_accepted_on,
        requirement.interval_months,
        calendar_anchor=requirement.anchor_on if calendar else None,
        grace_days=requirement.grace_days,
        lead_days=requirement.lead_days,
    )
    standing.due_on, standing.grace_until, standing.window_opens_on = plan.due, plan.limit, plan.opens


def _deferred(standing: Standing, deferrals: Iterable[Deferral]) -> datetime.date | None:
    """The latest approved limit date; a deferral is used up by the next accepted test."""
    last = standing.last_accepted_on
    until = [d.until for d in deferrals if last is None or d.requested_at.date() > last]
    return max(until, default=None)


class Strips:
    """Works out what the range strips of many tags are drawn from; ratings are read once per type."""

    def __init__(self) -> None:
        self._tables: dict[int, Any] = {}
        self._ratings: dict[tuple[int, float | None, float | None], float | None] = {}

    def of(self, tag: Tag) -> list[float | None]:
        """Fractions LRV, URV, least span of the head, operating and design pressure of the rating; None = unknown."""
        fitting, span = tag.current_fitting, tag.current_range
        if fitting is None:
            return []
        transmitter = fitting.transmitter
        head, kind = transmitter.head, transmitter.type
        width = head.url_si - head.lrl_si
        lrv = urv = None
        if span is not None:
            lrv = self._fraction(self._restated(span.lrv_si, span, kind, tag), head.lrl_si, width)
            urv = self._fraction(self._restated(span.urv_si, span, kind, tag), head.lrl_si, width)
        rating = self._rating(kind, tag)
        pressures = [_gauge(value, tag) for value in (tag.operating_pressure_pa, tag.design_pressure_pa)]
        shares = [None if rating is None or value is None else round(value / rating, 4) for value in pressures]
        return [lrv, urv, round(head.least_span_si / width, 4), *shares, None if rating is None else 1.0]

    @staticmethod
    def _fraction(value: float | None, low: float, width: float) -> float | None:
        return None if value is None else round((value - low) / width, 4)

    @staticmethod
    def _restated(value: float, span: Range, kind: TransmitterType, tag: Tag) -> float | None:
        from register.engineering.pressure import PressureReferenceError, restate

        try:
            return restate(value, span.reference, kind.measures, tag.plant.barometric_pa)
        except PressureReferenceError:
            return None

    def _rating(self, kind: TransmitterType, tag: Tag) -> float | None:
        key = (kind.pk, tag.process_min_k, tag.process_max_k)
        if key not in self._ratings:
            self._ratings[key] = self._worked_rating(kind, tag)
        return self._ratings[key]

    def _worked_rating(self, kind: TransmitterType, tag: Tag) -> float | None:
        from register.engineering.rating import least_rating, rating_table

        if kind.pk not in self._tables:
            self._tables[kind.pk] = rating_table(kind.body_rating, kind.temperature_unit, kind.pressure_unit)
        highest = tag.process_max_k
        if highest is None or not self._tables[kind.pk]:
            return None
        lowest = tag.process_min_k if tag.process_min_k is not None else highest
        rating = float(least_rating(lowest, highest, self._tables[kind.pk]))
        return None if rating != rating else rating


def _gauge(value: float | None, tag: Tag) -> float | None:
    from register.engineering.pressure import BarometricMissingError, restate

    if value is None:
        return None
    try:
        return float(restate(value, tag.pressure_reference, "gauge", tag.plant.barometric_pa))
    except BarometricMissingError:
        return None


def words_of(text: str) -> set[str]:
    """Words by which a text is found: its parts between spaces, and the letters and digits inside each."""
    found: set[str] = set()
    for part in text.casefold().split():
        whole = _EDGES.sub("", part)[:60]
        if whole:
            found.add(whole)
            found.update(piece[:60] for piece in _PIECES.findall(whole))
    return found


def search_words(history: History) -> dict[int, set[str]]:
    """Words of each tag: number, service, area, maker and serial number of what is fitted."""
    words = {}
    for tag in history.tags:
        texts = [tag.number, tag.service, tag.area.code, tag.area.name]
        if tag.current_fitting:
            texts += [tag.current_fitting.transmitter.maker.name, tag.current_fitting.transmitter.serial]
        words[tag.pk] = words_of(" ".join(texts))
    return words
