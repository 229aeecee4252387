"""How tags stand, worked out from their full history; nothing here writes.

`calibration.scheduling` stores what comes out of this module, and `manage.py recompute --check` compares it with
what is stored. The number of queries does not depend on the number of tags.
"""

from __future__ import annotations

import datetime
import re
from collections import defaultdict
from collections.abc import Collection, Iterable, Mapping, Sequence
from dataclasses import dataclass, field
from functools import lru_cache
from typing import TYPE_CHECKING, Any, NamedTuple
from zoneinfo import ZoneInfo

from calibration.models import Deferral, Requirement, Standing, Test
from calibration.models.standing import NO_ERROR
from register.bulk import among, another
from register.checking import with_inputs
from register.models import Fitting, Flag, Intervention, Range, Tag, TransmitterType

if TYPE_CHECKING:
    from register.engineering.limits import TypeLimits

#: Interventions after which the transmitter must prove itself again before it counts as tested.
RESTARTS = (Intervention.Kind.REPAIR, Intervention.Kind.NEW_HEAD)
Phase = Standing.Phase
_SETTING = ("lrv_si", "urv_si", "reference", "transfer", "low_cut_percent", "below_cut")
_OF_A_RANGE = ("effective_from", *_SETTING)
_PIECES = re.compile(r"[^\W\d_]+|\d+")
_EDGES = re.compile(r"^\W+|\W+$")
_DIGITS = re.compile(r"\d+")
#: Words are kept up to here.
WORD_LENGTH = 60


class _MadeAs(NamedTuple):
    """Range and head that a test was made in; fields as in `_SETTING`."""

    lrv_si: float
    urv_si: float
    reference: str
    transfer: str
    low_cut_percent: float
    below_cut: str
    head_id: int


@dataclass(slots=True)
class History:
    """What the database holds about some tags, read in a fixed number of queries."""

    tags: list[Tag]
    requirements: dict[int, Requirement] = field(default_factory=dict)
    ranges: dict[int, list[Any]] = field(default_factory=lambda: defaultdict(list))
    restarts: dict[int, list[datetime.date]] = field(default_factory=lambda: defaultdict(list))
    tests: dict[int, list[Mapping[str, Any]]] = field(default_factory=lambda: defaultdict(list))
    #: Heads that were taken out of a transmitter.
    taken_out: dict[int, set[int]] = field(default_factory=lambda: defaultdict(set))
    #: Newest test that shows that the transmitter is right as it is fitted, ranged and headed now, by tag.
    proofs: dict[int, Mapping[str, Any]] = field(default_factory=dict)
    deferrals: dict[int, list[Deferral]] = field(default_factory=lambda: defaultdict(list))
    flags: dict[int, list[tuple[int, bool]]] = field(default_factory=lambda: defaultdict(list))


def read(tag_ids: Collection[int]) -> History:
    """Read everything that decides how the tags stand."""
    history = History(list(with_inputs(tag_ids)))
    ids = sorted(set(tag_ids))
    in_force = {**among("tag_id", ids), "applied_at__isnull": False, "withdrawn_at__isnull": True}
    for requirement in Requirement.objects.filter(**in_force).order_by("tag_id", "effective_from", "id"):
        history.requirements[requirement.tag_id] = requirement
    ranges = Range.objects.filter(**in_force).order_by("tag_id", "effective_from", "id")
    for row in ranges.values_list("tag_id", *_OF_A_RANGE, named=True):
        history.ranges[row.tag_id].append(row)
    fitted = sorted({tag.current_fitting.transmitter_id for tag in history.tags if tag.current_fitting})
    for transmitter_id, done_on, taken_out in (
        Intervention.objects.filter(**among("transmitter_id", fitted), kind__in=RESTARTS, withdrawn_at__isnull=True)
        .order_by()
        .values_list("transmitter_id", "done_on", "head_before_id")
    ):
        history.restarts[transmitter_id].append(done_on)
        if taken_out is not None:
            history.taken_out[transmitter_id].add(taken_out)
    for test in _tests(ids):
        history.tests[test["tag_id"]].append(test)
    for deferral in Deferral.objects.filter(
        **among("tag_id", ids), approved_at__isnull=False, withdrawn_at__isnull=True
    ).order_by():
        history.deferrals[deferral.tag_id].append(deferral)
    for tag_id, severity, accepted_at in (
        Flag.objects.filter(**among("tag_id", ids), closed_at__isnull=True)
        .order_by()
        .values_list("tag_id", "severity", "accepted_at")
    ):
        history.flags[tag_id].append((severity, accepted_at is not None))
    _find_proofs(history)
    return history


def _find_proofs(history: History) -> None:
    """Find the newest test of each tag that proves its transmitter as it is now.

    Only records of tests that could be it are looked at: the newest of each tag, and of the few tags where that was
    made in another range or with another head, those before it.
    """
    candidates = {}
    for tag in history.tags:
        if tag.current_fitting is not None:
            since = restarted_on(tag, tag.current_fitting, history)
            tests = [test for test in history.tests.get(tag.pk, []) if _belongs(test, tag.current_fitting)]
            candidates[tag.pk] = [test for test in reversed(tests) if _counts(test, since)]
    made_as = _made_as(tests[0]["id"] for tests in candidates.values() if tests)
    left = _proven(history, {pk: tests[:1] for pk, tests in candidates.items()}, made_as)
    made_as = _made_as(test["id"] for pk in left for test in candidates[pk][1:])
    _proven(history, {pk: candidates[pk][1:] for pk in left}, made_as)


def _proven(
    history: History, candidates: Mapping[int, Sequence[Mapping[str, Any]]], made_as: Mapping[int, _MadeAs]
) -> set[int]:
    """Note the first candidate of each tag that was made as the transmitter is now; the tags that have none."""
    left = set()
    for tag in history.tags:
        tests = candidates.get(tag.pk, ())
        proof = next((test for test in tests if _is_as_now(made_as.get(test["id"]), tag, history)), None)
        if proof is not None:
            history.proofs[tag.pk] = proof
        elif tests:
            left.add(tag.pk)
    return left


def _made_as(test_ids: Iterable[int]) -> dict[int, _MadeAs]:
    """Range and head that tests were made in, by test; a test without a record has none."""
    columns = [f"current_record__{name}" for name in _MadeAs._fields]
    rows = Test.objects.filter(**among("pk", sorted(test_ids)), current_record__isnull=False).order_by()
    return {test_id: _MadeAs(*made) for test_id, *made in rows.values_list("pk", *columns)}


def _tests(ids: Sequence[int]) -> Iterable[Mapping[str, Any]]:
    return (
        Test.objects.filter(**among("tag_id", ids), outcome=Test.Outcome.DONE)
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
        )
    )


def work_out(history: History) -> list[Standing]:
    """Give one unsaved standing for each tag of the history."""
    strips, blank = Strips(), Standing()
    return [_standing(tag, history, strips, blank) for tag in history.tags]


def _standing(tag: Tag, history: History, strips: Strips, blank: Standing) -> Standing:
    fitting, span = tag.current_fitting, tag.current_range
    transmitter = fitting.transmitter if fitting else None
    requirement = history.requirements.get(tag.pk)
    standing = another(
        blank,
        tag_id=tag.pk,
        plant_id=tag.plant_id,
        area_id=tag.area_id,
        number=tag.number,
        sort_key=sort_key(tag.number),
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
    _flagged(standing, history.flags.get(tag.pk, []))
    if fitting is not None:
        _tested(standing, tag, fitting, history)
    return standing


def _flagged(standing: Standing, flags: list[tuple[int, bool]]) -> None:
    counted = [(severity, accepted) for severity, accepted in flags if severity != Flag.Severity.CLEAR]
    standing.open_flags = sum(1 for _, accepted in counted if not accepted)
    standing.accepted_flags = len(counted) - standing.open_flags
    worst = max((severity for severity, accepted in counted if not accepted), default=Flag.Severity.CLEAR)
    standing.flag_rank = Flag.Severity.VIOLATION - worst


def _tested(standing: Standing, tag: Tag, fitting: Fitting, history: History) -> None:
    """Fill in what the tests of the fitted transmitter at this tag say, and when the next is due."""
    since = restarted_on(tag, fitting, history)
    tests = [test for test in history.tests.get(tag.pk, []) if _belongs(test, fitting)]
    counted = [test for test in tests if test["state"] != Test.State.SENT_BACK]
    if counted:
        last = counted[-1]
        standing.last_test_id = last["id"]
        standing.last_tested_on = last["tested_on"]
        standing.last_verdict = last["as_left_verdict"] or last["as_found_verdict"]
        standing.as_found_verdict = last["as_found_verdict"]
        standing.as_found_ratio = last["as_found_ratio"]
        standing.as_left_ratio = last["as_left_ratio"]
        ratio = last["as_left_ratio"] if last["as_left_verdict"] else last["as_found_ratio"]
        standing.error_rank = NO_ERROR if ratio is None else -abs(ratio)
    proof = history.proofs.get(tag.pk)
    standing.last_accepted_on = proof["tested_on"] if proof else None
    requirement = history.requirements.get(tag.pk)
    if proof is None:
        standing.phase, standing.due_on = Phase.NEVER_TESTED, since
    elif requirement is None:
        standing.phase = Phase.NO_REQUIREMENT
    else:
        standing.phase = Phase.SCHEDULED
        _schedule(standing, requirement, proof["tested_on"])
        standing.deferred_until = _deferred(standing, tag, history.deferrals.get(tag.pk, []))
    if tag.out_of_service_on is not None:
        standing.phase = Phase.NOT_IN_SERVICE
        standing.grace_until = standing.window_opens_on = standing.deferred_until = None
        standing.grace_span = standing.lead_span = 0
    elif standing.due_on is not None:
        standing.due_key = standing.due_on


def restarted_on(tag: Tag, fitting: Fitting, history: History) -> datetime.date:
    """The day from which the fitted transmitter must have been tested at the tag: fitted, repaired or re-ranged."""
    days = [fitting.fitted_on, *history.restarts.get(fitting.transmitter_id, [])]
    earlier: Any = None
    for row in history.ranges.get(tag.pk, []):
        if earlier is not None and not _same_range(earlier, row):
            days.append(row.effective_from)
        earlier = row
    return max(days)


def _same_range(one: Any, other: Any) -> bool:
    """Whether two ranges, given as rows of `_OF_A_RANGE`, set the transmitter in the same way."""
    if (one.reference, one.transfer) != (other.reference, other.transfer):
        return False
    cuts = [(row.low_cut_percent, row.below_cut) for row in (one, other)]
    if one.transfer == Range.Transfer.SQUARE_ROOT and cuts[0] != cuts[1]:
        return False
    return _equal(one.lrv_si, one.urv_si, other.lrv_si, other.urv_si)


def _equal(lrv: float, urv: float, other_lrv: float, other_urv: float) -> bool:
    slack = 1e-9 * max(abs(lrv), abs(urv))
    return abs(lrv - other_lrv) <= slack and abs(urv - other_urv) <= slack


def _belongs(test: Mapping[str, Any], fitting: Fitting) -> bool:
    if test["fitting_id"] is not None:
        return bool(test["fitting_id"] == fitting.pk)
    return bool(test["transmitter_id"] == fitting.transmitter_id and test["tested_on"] >= fitting.fitted_on)


def _counts(test: Mapping[str, Any], since: datetime.date) -> bool:
    """Whether a test of the fitted transmitter is good and young enough to prove it."""
    return bool(test["accepted"] and test["state"] != Test.State.SENT_BACK and test["tested_on"] >= since)


def _is_as_now(made: _MadeAs | None, tag: Tag, history: History) -> bool:
    """Whether a test was made in the range that the tag has now, and not with a head that was taken out.

    A head that was written down wrongly and put right in the register was never taken out.
    """
    if made is None:
        return True
    assert tag.current_fitting is not None
    transmitter = tag.current_fitting.transmitter
    if made.head_id != transmitter.head_id and made.head_id in history.taken_out.get(transmitter.pk, ()):
        return False
    return tag.current_range is None or _same_range(tag.current_range, made)


def _schedule(standing: Standing, requirement: Requirement, last_accepted: datetime.date) -> None:
    from calibration.metrology.due import plan_next

    calendar = requirement.anchor == Requirement.Anchor.CALENDAR
    plan = plan_next(
        last_accepted,
        requirement.interval_months,
        calendar_anchor=requirement.anchor_on if calendar else None,
        grace_days=requirement.grace_days,
        lead_days=requirement.lead_days,
    )
    assert plan.due is not None and plan.limit is not None and plan.opens is not None
    standing.due_on, standing.grace_until, standing.window_opens_on = plan.due, plan.limit, plan.opens
    standing.grace_span = (plan.limit - plan.due).days
    standing.lead_span = (plan.due - plan.opens).days


def _deferred(standing: Standing, tag: Tag, deferrals: Iterable[Deferral]) -> datetime.date | None:
    """The latest approved limit date beyond due; the next accepted test uses a deferral up."""
    last, due = standing.last_accepted_on, standing.due_on
    zone = ZoneInfo(tag.plant.time_zone)
    standing_ones = [
        deferral.until
        for deferral in deferrals
        if (last is None or deferral.requested_at.astimezone(zone).date() > last)
        and (due is None or deferral.until > due)
    ]
    return max(standing_ones, default=None)


class Strips:
    """Works out what the range strips of many tags are drawn from; the limits of a type are read once."""

    def __init__(self) -> None:
        self._types: dict[int, TypeLimits] = {}
        self._ratings: dict[tuple[int, float | None, float | None], float | None] = {}

    def of(self, tag: Tag) -> list[float | None]:
        """LRV, URV, least span as fractions of the head, operating and design pressure of the body rating.

        Returns
        -------
        list
            Five fractions, None where unknown, and 1.0 where the rating is known; empty where nothing is fitted.
        """
        if tag.current_fitting is None:
            return []
        transmitter, span = tag.current_fitting.transmitter, tag.current_range
        head, kind = transmitter.head, transmitter.type
        width = head.url_si - head.lrl_si
        lrv = urv = None
        if span is not None:
            lrv, urv = (
                None if value is None else round((value - head.lrl_si) / width, 4)
                for value in (_restated(si, span.reference, kind.measures, tag) for si in (span.lrv_si, span.urv_si))
            )
        rating = self._rating(kind, tag)
        shares = [
            None if rating is None or value is None else round(value / rating, 4)
            for value in (
                _restated(pressure, tag.pressure_reference, "gauge", tag)
                for pressure in (tag.operating_pressure_pa, tag.design_pressure_pa)
            )
        ]
        return [lrv, urv, round(head.least_span_si / width, 4), *shares, None if rating is None else 1.0]

    def _rating(self, kind: TransmitterType, tag: Tag) -> float | None:
        from register.checking import process_of, type_limits
        from register.engineering.limits import body_rating_at

        key = (kind.pk, tag.process_min_k, tag.process_max_k)
        if key not in self._ratings:
            if kind.pk not in self._types:
                self._types[kind.pk] = type_limits(kind)
            self._ratings[key] = body_rating_at(self._types[kind.pk], process_of(tag))
        return self._ratings[key]


def _restated(value: float | None, reference: str, to_reference: str, tag: Tag) -> float | None:
    from register.engineering.pressure import PressureReferenceError, restate

    if value is None:
        return None
    try:
        return float(restate(value, reference, to_reference, tag.plant.barometric_pa))
    except PressureReferenceError:
        return None


def sort_key(number: str) -> str:
    """A tag number with its digits widened, so that FT-9 comes before FT-10."""
    return _DIGITS.sub(lambda digits: digits[0].zfill(6), number.casefold())[:120]


@lru_cache(maxsize=20_000)
def words_of(text: str) -> frozenset[str]:
    """Words by which a text is found: its parts between spaces, and the letters and digits inside each."""
    found: set[str] = set()
    for part in text.casefold().split():
        whole = _EDGES.sub("", part)[:WORD_LENGTH]
        if whole:
            found.add(whole)
            found.update(piece[:WORD_LENGTH] for piece in _PIECES.findall(whole))
    return frozenset(found)


def search_words(history: History) -> dict[int, set[str]]:
    """Words kept of each tag: number, service, area, maker and serial number of what is fitted."""
    words = {}
    for tag in history.tags:
        texts = [tag.service, tag.area.code, tag.area.name]
        if tag.current_fitting:
            texts += [tag.current_fitting.transmitter.maker.name, tag.current_fitting.transmitter.serial]
        words[tag.pk] = set(words_of_number(tag.number)).union(*map(words_of, texts))
    return words


def words_of_number(number: str) -> frozenset[str]:
    """Words of a tag number without those that it begins with: by these it is found itself, in the order of numbers.

    Beginnings with a digit, and of numbers with other letters than A to Z, are kept: `calibration.queries.wording`
    does not look them up among the numbers.
    """
    beginning = number.casefold()
    return frozenset(
        word for word in words_of(number) if not (number.isascii() and word[0].isalpha() and beginning.startswith(word))
    )
