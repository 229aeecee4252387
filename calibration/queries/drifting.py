"""Drift of a transmitter: its tests as pairs, the rate, and when the prediction may leave the tolerance.

Reads the history in a fixed number of queries and hands it to `calibration.metrology.drift`; nothing here writes.
"""

from __future__ import annotations

import datetime
from collections import defaultdict
from collections.abc import Hashable, Iterable, Iterator, Mapping, Sequence
from dataclasses import dataclass, replace
from operator import attrgetter
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
INPUT_ZERO: Final = "input zero"
INPUT_SPAN: Final = "input span"
OF_SPAN: Final = "% of span"
OF_INPUT_SPAN: Final = "% of input span"
SENT_BACK: Final = "the record was sent back"
NOT_LEFT: Final = "adjusted without a complete as-left"
CONFIDENCE: Final = 0.95


@dataclass(frozen=True, slots=True)
class Channel:
    """A quantity followed from test to test: zero, span, the mean error at a check point, or a fitted shift.

    `held_at` is the input [% of range] whose tolerance the channel is held against; None where it is no error that a
    reading shows: a difference of two errors, or what a line through all of them says.
    """

    key: str
    label: str
    held_at: float | None = None
    unit: str = OF_SPAN


_ZERO, _SPAN = Channel(ZERO, "zero error", 0.0), Channel(SPAN, "span error")
_FITTED: Final = (Channel(FITTED_ZERO, "fitted zero shift"), Channel(FITTED_SPAN, "fitted span shift"))
_OF_INPUT: Final = (
    Channel(INPUT_ZERO, "fitted input zero shift", unit=OF_INPUT_SPAN),
    Channel(INPUT_SPAN, "fitted input span shift", unit=OF_INPUT_SPAN),
)


@dataclass(frozen=True, slots=True)
class Mark:
    """What stands above the curve: a swap, an adjustment, a re-range, another intervention."""

    on: datetime.date
    kind: str
    label: str


@dataclass(frozen=True)
class History:
    """The tests of one tag or one transmitter in order of time, as rows and as drift sees them.

    `fitting` is the one that is open now, if any.
    """

    tests: tuple[Test, ...]
    pairing: Pairing
    channels: tuple[Channel, ...]
    marks: tuple[Mark, ...]
    fitting: int | None


@dataclass(frozen=True)
class Drift:
    """One channel of a history.

    `counted` names the pairs the rate rests on; the others were made by another transmitter, with another measuring
    head or in another range. `limits` are signed, the lower one -inf where the output is held at zero; None for a
    channel that is no error. `start` is the as-left that stands, or None for the reason that `no_start` says.
    `band` holds (day, centre, low, high) from there on.
    """

    history: History
    channel: Channel
    rate: DriftRate
    counted: frozenset[int]
    limits: tuple[float, float] | None
    start: tuple[datetime.date, float] | None
    no_start: str
    meeting: Meeting | None
    band: tuple[tuple[datetime.date, float, float, float], ...]
    stretches: tuple[tuple[tuple[datetime.date, float], ...], ...]
    due: datetime.date | None


def of_tag(tag: Tag) -> History:
    """All tests at a tag, whatever transmitter was fitted; the swaps are marked."""
    fittings = list(tag.fittings.select_related("transmitter__maker").order_by("fitted_on", "pk"))
    done = _done(Q(tag=tag) | Q(transmitter__in=[fitting.transmitter_id for fitting in fittings]))
    marks = [Mark(fitting.fitted_on, "swap", f"{fitting.transmitter.serial} fitted") for fitting in fittings[1:]]
    marks += [_mark(one) for one in done if one.tag_id == tag.pk or _while_fitted(one, fittings)]
    return _history(Test.objects.filter(tag=tag), done, [*marks, *_reranges([tag.pk])], fittings)


def of_transmitter(transmitter: Transmitter) -> History:
    """All tests of a transmitter, at every tag and on the bench."""
    fittings = list(transmitter.fittings.select_related("tag").order_by("fitted_on", "pk"))
    done = _done(Q(transmitter=transmitter))
    marks = [Mark(fitting.fitted_on, "swap", f"fitted at {fitting.tag}") for fitting in fittings[1:]]
    marks += [_mark(one) for one in done]
    return _history(
        Test.objects.filter(transmitter=transmitter),
        done,
        [*marks, *_reranges([fitting.tag_id for fitting in fittings], fittings)],
        fittings,
    )


def _done(where: Q) -> list[Intervention]:
    return list(Intervention.objects.filter(where, withdrawn_at__isnull=True).order_by("done_on", "pk"))


def _mark(one: Intervention) -> Mark:
    return Mark(one.done_on, "other", one.get_kind_display())


def _while_fitted(one: Intervention, fittings: Sequence[Fitting]) -> bool:
    """Whether a thing noted without a tag was done while its transmitter was fitted."""
    return one.tag_id is None and any(
        fitting.transmitter_id == one.transmitter_id
        and fitting.fitted_on <= one.done_on
        and (fitting.removed_on is None or one.done_on < fitting.removed_on)
        for fitting in fittings
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


def _history(tests: Any, done: Sequence[Intervention], marks: Sequence[Mark], fittings: Sequence[Fitting]) -> History:
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
    visits = [_visit(test, figures.get(test.pk, {}), typed.get(test.pk, ""), fittings) for test in rows]
    breaking = [
        Done(one.done_on, f"{one.get_kind_display()}: {one.reason}", one.transmitter_id)
        for one in done
        if one.breaks_history
    ]
    adjusted = [Mark(test.tested_on, "adjustment", "adjusted") for test in rows if test.adjusted]
    return History(
        tests=tuple(rows),
        pairing=pair_tests(visits, breaking),
        channels=_channels(_values(run, test) for test in rows for run in figures.get(test.pk, {}).values()),
        marks=tuple(sorted((*marks, *adjusted), key=attrgetter("on"))),
        fitting=next((fitting.pk for fitting in fittings if fitting.removed_on is None), None),
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
        "basis": _basis_key(vars(record)) if record else None,
        "points": (record.basis.get("points") or points) if record else None,
    }
    if test.state == Test.State.SENT_BACK:
        return Visit(
            when=test.tested_on, found=None, left={}, complete_found=False, complete_left=False, label=SENT_BACK, **keys
        )
    if test.outcome == Test.Outcome.NOT_TESTED:
        why = str(record.answers.get("could_not_test", "")) if record else ""
        if test.adjusted:
            # Touched and then broken off: how it was left is not known.
            label = f"{NOT_LEFT}: {why}" if why else NOT_LEFT
            return Visit(
                when=test.tested_on, found=None, left={}, complete_found=False, complete_left=False, label=label, **keys
            )
        return Visit(when=test.tested_on, found=None, could_not_test=why or "could not be tested", **keys)
    found, left = runs.get("as-found"), runs.get("as-left")
    return Visit(
        when=test.tested_on,
        found=_values(found, test) if found else None,
        left=(_values(left, test) if left else {}) if test.adjusted or left else None,
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


def _basis_key(columns: Mapping[str, Any]) -> Hashable:
    """What makes two ranges the same, rounded past the noise of unit conversion."""
    square_root = columns["transfer"] == Range.Transfer.SQUARE_ROOT
    cut = (columns["low_cut_percent"], columns["below_cut"]) if square_root else ()
    return (
        f"{columns['lrv_si']:.9g}",
        f"{columns['urv_si']:.9g}",
        columns["reference"],
        str(columns["transfer"]),
        cut,
    )


def _values(run: RunFigures, test: Test) -> dict[str, float]:
    """What a run says, by channel; the shifts fitted to a square-root run are those of its input."""
    record = test.current_record
    square_root = record is not None and record.transfer == Range.Transfer.SQUARE_ROOT
    zero, span = (INPUT_ZERO, INPUT_SPAN) if square_root else (FITTED_ZERO, FITTED_SPAN)
    values = {ZERO: run.zero_error, SPAN: run.span_error, zero: run.zero_shift, span: run.span_shift}
    points = {_point_key(point): error for point, error in run.point_errors}
    return {key: value for key, value in {**values, **points}.items() if value is not None}


def _point_key(percent: float) -> str:
    return f"{percent:g}"


def _channels(runs: Iterable[Mapping[str, float]]) -> tuple[Channel, ...]:
    """Channels that at least one run has: zero and span where they were read, check points, then fitted shifts.

    A line fitted to the output says nothing more where zero and span were read.
    """
    named = {one.key: one for one in (_ZERO, _SPAN, *_FITTED, *_OF_INPUT)}
    met: set[str] = set()
    for values in runs:
        met |= values.keys() - (set() if ZERO not in values else {one.key for one in _FITTED})
    points = sorted(float(key) for key in met if key not in named)
    made = (Channel(_point_key(point), f"error at {point:g} %", point) for point in points)
    return (
        *(one for one in (_ZERO, _SPAN) if one.key in met),
        *made,
        *(one for one in (*_FITTED, *_OF_INPUT) if one.key in met),
    )


def choose(history: History, asked: str) -> Channel | None:
    """The channel asked for, else the first one that the newest test shows."""
    for channel in history.channels:
        if channel.key == asked:
            return channel
    shown = next(_shown(history), {})
    return next((one for one in history.channels if one.key in shown), next(iter(history.channels), None))


def _shown(history: History) -> Iterator[Mapping[str, float]]:
    """What the tests say that say anything, the newest first."""
    for visit in reversed(history.pairing.visits):
        if visit.found or visit.left:
            yield visit.found or visit.left or {}


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
    last = pairing.last_of(transmitter_id)
    counted = _counted(pairing, last)
    kept = tuple(pair for index, pair in enumerate(pairing.pairs) if index in counted)
    rate = estimate_rate(replace(pairing, pairs=kept), channel.key, CONFIDENCE)
    same_range = terms is None or last is None or _basis_key(terms.columns()) == pairing.visits[last].basis
    limits = _limits(history, last, terms if same_range else None, channel)
    base, no_start = pairing.standing(transmitter_id)
    if base is not None:
        no_start = _changed_since(history, base, same_range)
    start = _start(pairing, base, channel) if not no_start else None
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
        no_start=no_start,
        meeting=meeting,
        band=_band(rate, start, due, meeting),
        stretches=tuple(_shifted(pairing, segment, channel) for segment in cumulative_curve(pairing, channel.key)),
        due=due,
    )


def _counted(pairing: Pairing, last: int | None) -> frozenset[int]:
    """Pairs of the same transmitter with the head and in the range of its last visit, whatever came of that."""
    if last is None:
        return frozenset()
    now = pairing.visits[last]
    return frozenset(
        index
        for index, pair in enumerate(pairing.pairs)
        if _same_device(pairing.visits[pair.end_index]) == _same_device(now)
    )


_same_device = attrgetter("transmitter", "head", "basis")


def _changed_since(history: History, base: int, same_range: bool) -> str:
    """What has happened to a transmitter since it was left, beside interventions; empty where nothing has."""
    fitting = history.pairing.visits[base].fitting
    if None not in (fitting, history.fitting) and fitting != history.fitting:
        return "it was taken out and fitted again since the last test"
    return "" if same_range else "the range or its transfer function was changed since the last test"


def _start(pairing: Pairing, base: int | None, channel: Channel) -> tuple[datetime.date, float] | None:
    if base is None:
        return None
    visit = pairing.visits[base]
    value = (visit.after or {}).get(channel.key)
    return None if value is None else (visit.when, value)


def _limits(history: History, last: int | None, terms: Basis | None, channel: Channel) -> tuple[float, float] | None:
    """Limits of the channel [% of output span] by the tolerance in force, else by that of the last test."""
    record = history.tests[last].current_record if last is not None else None
    if terms is None and record is not None:
        terms = Basis.read(record, record.head_id)
    if terms is None or channel.held_at is None:
        return None
    try:
        signal = terms.signal()
        found = terms.tolerance("as-found").limits(signal.input_of_percent(channel.held_at), signal)
    except ValueError:
        return None
    return float(found.least), float(found.upper)


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
