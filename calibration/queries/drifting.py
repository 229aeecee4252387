"""Drift of a transmitter: its tests as pairs, the rate, and when the prediction may leave the tolerance.

Reads the history in a fixed number of queries and hands it to `calibration.metrology.drift`; nothing here writes.
"""

from __future__ import annotations

import datetime
from collections import defaultdict
from collections.abc import Hashable, Iterable, Sequence
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Any, Final

from django.db.models import Q

from calibration.models import Reading, RunFigures, Test
from calibration.records.basis import Basis
from register.models import Fitting, Intervention, MeasuringHead, Range, Tag, Transmitter

if TYPE_CHECKING:
    from calibration.metrology.drift import DriftRate, Meeting
    from calibration.metrology.pairing import Pairing, Visit

ZERO: Final = "zero"
SPAN: Final = "span"
FITTED_ZERO: Final = "fitted zero"
FITTED_SPAN: Final = "fitted span"
_NAMES: Final = {
    ZERO: "zero error",
    SPAN: "span error",
    FITTED_ZERO: "fitted zero shift",
    FITTED_SPAN: "fitted span shift",
}
#: Percent of input at which the tolerance that a channel is held against is taken.
_HELD_AT: Final = {ZERO: 0.0, FITTED_ZERO: 0.0, SPAN: 100.0, FITTED_SPAN: 100.0}
SENT_BACK: Final = "the record was sent back"
CONFIDENCE: Final = 0.95


@dataclass(frozen=True, slots=True)
class Channel:
    """A quantity followed from test to test: zero, span or the mean error at a check point, in % of output span."""

    key: str
    label: str
    held_at: float


@dataclass(frozen=True, slots=True)
class Mark:
    """What stands above the curve: a swap, an adjustment, a re-range, another intervention."""

    on: datetime.date
    kind: str
    label: str


@dataclass(frozen=True)
class History:
    """The tests of one tag or one transmitter in order of time, as rows and as drift sees them."""

    tests: tuple[Test, ...]
    pairing: Pairing
    channels: tuple[Channel, ...]
    marks: tuple[Mark, ...]


@dataclass(frozen=True)
class Drift:
    """One channel of a history.

    `counted` names the pairs the rate rests on; the others were made by another transmitter or in another range.
    `band` holds (day, centre, low, high) from the last as-left on.
    """

    history: History
    channel: Channel
    rate: DriftRate
    counted: frozenset[int]
    limits: tuple[float, float] | None
    start: tuple[datetime.date, float] | None
    meeting: Meeting | None
    band: tuple[tuple[datetime.date, float, float, float], ...]
    stretches: tuple[tuple[tuple[datetime.date, float], ...], ...]
    due: datetime.date | None


def of_tag(tag: Tag) -> History:
    """All tests at a tag, whatever transmitter was fitted; the swaps are marked."""
    fittings = list(tag.fittings.select_related("transmitter__maker").order_by("fitted_on", "pk"))
    interventions = Intervention.objects.filter(
        Q(tag=tag) | Q(transmitter__in=[fitting.transmitter_id for fitting in fittings])
    )
    marks = [Mark(fitting.fitted_on, "swap", f"{fitting.transmitter.serial} fitted") for fitting in fittings[1:]]
    return _history(Test.objects.filter(tag=tag), interventions, [*marks, *_reranges([tag.pk])], fittings)


def of_transmitter(transmitter: Transmitter) -> History:
    """All tests of a transmitter, at every tag and on the bench."""
    fittings = list(transmitter.fittings.select_related("tag").order_by("fitted_on", "pk"))
    marks = [Mark(fitting.fitted_on, "swap", f"fitted at {fitting.tag}") for fitting in fittings[1:]]
    return _history(
        Test.objects.filter(transmitter=transmitter),
        transmitter.interventions.all(),
        [*marks, *_reranges([fitting.tag_id for fitting in fittings], fittings)],
        fittings,
    )


def _reranges(tag_ids: Iterable[int], fittings: Sequence[Fitting] | None = None) -> list[Mark]:
    """Days on which a range followed another one; with fittings, only those within them."""
    rows = Range.objects.filter(tag_id__in=set(tag_ids), applied_at__isnull=False, withdrawn_at__isnull=True)
    marks, before = [], None
    for row in rows.order_by("tag_id", "effective_from", "pk"):
        if before is not None and before.tag_id == row.tag_id and (fittings is None or _within(row, fittings)):
            marks.append(Mark(row.effective_from, "re-range", f"{row.lrv} to {row.urv}"))
        before = row
    return marks


def _within(row: Range, fittings: Sequence[Fitting]) -> bool:
    return any(
        fitting.tag_id == row.tag_id
        and fitting.fitted_on < row.effective_from
        and (fitting.removed_on is None or row.effective_from <= fitting.removed_on)
        for fitting in fittings
    )


def _history(tests: Any, interventions: Any, marks: Sequence[Mark], fittings: Sequence[Fitting]) -> History:
    from calibration.metrology.pairing import Intervention as Done
    from calibration.metrology.pairing import pair_tests

    rows = list(
        tests.select_related("tag", "transmitter__maker", "current_record")
        .defer("current_record__content")
        .order_by("tested_on", "pk")
    )
    figures: dict[int, dict[str, RunFigures]] = defaultdict(dict)
    for run in RunFigures.objects.filter(test__in=[test.pk for test in rows], current=True):
        figures[run.test_id][run.kind] = run
    typed = _points_as_read(rows, figures)
    done = list(interventions.filter(withdrawn_at__isnull=True).order_by("done_on", "pk"))
    visits = [_visit(test, figures.get(test.pk, {}), typed.get(test.pk, ""), fittings) for test in rows]
    breaking = [Done(one.done_on, f"{one.get_kind_display()}: {one.reason}") for one in done if one.breaks_history]
    adjusted = [Mark(test.tested_on, "adjustment", "adjusted") for test in rows if test.adjusted]
    others = [Mark(one.done_on, "other", one.get_kind_display()) for one in done]
    return History(
        tests=tuple(rows),
        pairing=pair_tests(visits, breaking),
        channels=_channels(figures),
        marks=tuple(sorted((*marks, *adjusted, *others), key=lambda mark: mark.on)),
    )


def _points_as_read(rows: Sequence[Test], figures: dict[int, dict[str, RunFigures]]) -> dict[int, str]:
    """The points of tests whose basis names no list, as their as-found run was read."""
    runs = {
        figures[test.pk]["as-found"].run_id: test.pk
        for test in rows
        if test.current_record
        and not test.current_record.basis.get("points")
        and "as-found" in figures.get(test.pk, {})
    }
    read: dict[int, list[str]] = defaultdict(list)
    readings = Reading.objects.filter(run__in=runs, nominal_percent__isnull=False).order_by("run_id", "order")
    for run_id, nominal in readings.values_list("run_id", "nominal_percent"):
        read[runs[run_id]].append(_point_key(round(nominal or 0.0, 1)))
    return {test_id: " ".join(points) for test_id, points in read.items()}


def _visit(test: Test, runs: dict[str, RunFigures], points: str, fittings: Sequence[Fitting]) -> Visit:
    from calibration.metrology.pairing import Visit

    record = test.current_record
    keys: dict[str, Any] = {
        "transmitter": test.transmitter_id,
        "tag": test.tag_id,
        "fitting": test.fitting_id or _fitting_on(test, fittings),
        "head": record.head_id if record else None,
        "basis": _basis_key(record) if record else None,
        "points": (record.basis.get("points") or points) if record else None,
    }
    if test.state == Test.State.SENT_BACK:
        return Visit(
            when=test.tested_on, found=None, left={}, complete_found=False, complete_left=False, label=SENT_BACK, **keys
        )
    if test.outcome == Test.Outcome.NOT_TESTED:
        why = str(record.answers.get("could_not_test", "")) if record else ""
        return Visit(when=test.tested_on, found=None, could_not_test=why or "could not be tested", **keys)
    found, left = runs.get("as-found"), runs.get("as-left")
    return Visit(
        when=test.tested_on,
        found=_values(found) if found else None,
        left=(_values(left) if left else {}) if test.adjusted or left else None,
        complete_found=found is not None and found.complete,
        complete_left=left is not None and left.complete,
        **keys,
    )


def _fitting_on(test: Test, fittings: Sequence[Fitting]) -> int | None:
    """The fitting in which a test told after the fact was made."""
    for fitting in reversed(fittings):
        if (
            fitting.tag_id == test.tag_id
            and fitting.transmitter_id == test.transmitter_id
            and fitting.fitted_on <= test.tested_on
            and (fitting.removed_on is None or test.tested_on <= fitting.removed_on)
        ):
            return fitting.pk
    return None


def _basis_key(row: Any) -> Hashable:
    """What makes two ranges the same, rounded past the noise of unit conversion."""
    cut = (row.low_cut_percent, row.below_cut) if row.transfer == Range.Transfer.SQUARE_ROOT else ()
    return (f"{row.lrv_si:.9g}", f"{row.urv_si:.9g}", row.reference, row.transfer, cut)


def _values(run: RunFigures) -> dict[str, float]:
    values = {
        ZERO: run.zero_error,
        SPAN: run.span_error,
        FITTED_ZERO: run.zero_shift,
        FITTED_SPAN: run.span_shift,
    }
    points = {_point_key(point): error for point, error in run.point_errors}
    return {key: value for key, value in {**values, **points}.items() if value is not None}


def _point_key(percent: float) -> str:
    return f"{percent:g}"


def _channels(figures: dict[int, dict[str, RunFigures]]) -> tuple[Channel, ...]:
    """Channels that at least one run has: zero and span by reading where they were read, else as fitted."""
    runs = [run for kinds in figures.values() for run in kinds.values()]
    keys = []
    if any(run.zero_error is not None for run in runs):
        keys += [ZERO, SPAN]
    if any(run.zero_shift is not None and run.zero_error is None for run in runs):
        keys += [FITTED_ZERO, FITTED_SPAN]
    points = sorted({float(point) for run in runs for point, _ in run.point_errors})
    made = [Channel(key, _NAMES[key], _HELD_AT[key]) for key in keys]
    return tuple(made + [Channel(_point_key(point), f"error at {point:g} %", point) for point in points])


def choose(history: History, asked: str) -> Channel | None:
    """The channel asked for, else the first there is."""
    for channel in history.channels:
        if channel.key == asked:
            return channel
    return history.channels[0] if history.channels else None


def terms_now(tag: Tag, requirement: Any, head: MeasuringHead | None) -> Basis | None:
    """The range and tolerance in force at a tag, which the prediction is held against."""
    if tag.current_range is None or requirement is None or head is None:
        return None
    return Basis.of(used=tag.current_range, requirement=requirement, head=head)


def drift(
    history: History,
    channel: Channel,
    *,
    transmitter_id: int | None,
    terms: Basis | None,
    due: datetime.date | None,
) -> Drift:
    """Work out one channel.

    Parameters
    ----------
    transmitter_id : int or None
        The transmitter whose rate is wanted; None where nothing is fitted.
    terms : Basis or None
        Range and tolerance in force; None takes those of the last test.
    due : date or None
        The band is drawn at least that far.

    Returns
    -------
    Drift
    """
    from calibration.metrology.drift import estimate_rate
    from calibration.metrology.pairing import cumulative_curve

    pairing = history.pairing
    last = _last_standing(history, transmitter_id)
    basis = pairing.visits[last].basis if last is not None else None
    counted = frozenset(
        index
        for index, pair in enumerate(pairing.pairs)
        if pairing.visits[pair.end_index].transmitter == transmitter_id
        and pairing.visits[pair.end_index].basis == basis
    )
    kept = tuple(pair for index, pair in enumerate(pairing.pairs) if index in counted)
    rate = estimate_rate(replace(pairing, pairs=kept), channel.key, CONFIDENCE)
    limits = _limits(history, last, terms, channel)
    start = _start(history, last, channel)
    meeting = None
    if rate.enough and start is not None and limits is not None:
        meeting = rate.meets(start[0], start[1], *limits)
    return Drift(
        history=history,
        channel=channel,
        rate=rate,
        counted=counted,
        limits=limits,
        start=start,
        meeting=meeting,
        band=_band(rate, start, due, meeting),
        stretches=tuple(_shifted(pairing, segment, channel) for segment in cumulative_curve(pairing, channel.key)),
        due=due,
    )


def _last_standing(history: History, transmitter_id: int | None) -> int | None:
    """The last visit of the transmitter whose values a prediction can start from."""
    for index in range(len(history.tests) - 1, -1, -1):
        visit = history.pairing.visits[index]
        if visit.transmitter != transmitter_id or visit.could_not_test:
            continue
        whole = visit.complete_left if visit.adjusted else visit.complete_found
        return index if whole else None
    return None


def _start(history: History, last: int | None, channel: Channel) -> tuple[datetime.date, float] | None:
    if last is None:
        return None
    visit = history.pairing.visits[last]
    value = (visit.after or {}).get(channel.key)
    return None if value is None else (visit.when, value)


def _limits(history: History, last: int | None, terms: Basis | None, channel: Channel) -> tuple[float, float] | None:
    """Limits of the channel [% of output span] by the tolerance in force, else by that of the last test."""
    record = history.tests[last].current_record if last is not None else None
    if terms is None and record is not None:
        terms = Basis.read(record, record.head_id)
    if terms is None:
        return None
    try:
        signal = terms.signal()
        found = terms.tolerance("as-found").limits(signal.input_of_percent(channel.held_at), signal)
    except ValueError:
        return None
    return float(found.lower), float(found.upper)


def _band(
    rate: DriftRate, start: tuple[datetime.date, float] | None, due: datetime.date | None, meeting: Meeting | None
) -> tuple[tuple[datetime.date, float, float, float], ...]:
    """The prediction from the last as-left to the due date, or a little beyond the day it meets the limit."""
    from calibration.metrology.pairing import DAYS_PER_YEAR

    if not rate.enough or start is None:
        return ()
    begin, value = start
    ends = [begin + datetime.timedelta(days=365)]
    if due is not None:
        ends.append(due)
    if meeting is not None and meeting.on is not None and (meeting.on - begin).days < 6 * 365:
        ends.append(meeting.on + (meeting.on - begin) / 10)
    days = (max(ends) - begin).days
    offsets = [round(days * step / 24) for step in range(25)]
    prediction = rate.predict([offset / DAYS_PER_YEAR for offset in offsets], start_value=value)
    return tuple(
        (begin + datetime.timedelta(days=offset), float(centre), float(low), float(high))
        for offset, centre, low, high in zip(
            offsets, prediction.centre, prediction.lower, prediction.upper, strict=True
        )
    )


def _shifted(pairing: Pairing, segment: Any, channel: Channel) -> tuple[tuple[datetime.date, float], ...]:
    """A stretch of the curve that begins at the as-left error of its first test."""
    first = (pairing.visits[segment.indices[0]].after or {}).get(channel.key, 0.0)
    return tuple((day, first + value) for day, value in zip(segment.dates, segment.values, strict=True))
