"""What happened at a tag or to a transmitter, as lines of a time line; nothing here writes."""

from __future__ import annotations

import datetime
from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from zoneinfo import ZoneInfo

from django.urls import reverse
from django.utils.safestring import SafeString

from calibration.drawing.marks import error_mark
from calibration.models import Deferral, Requirement, Test, Verdict
from register.models import Fitting, Intervention, Range
from register.models.typed import as_shown, in_words

#: Order of what happened on one day, the last on top.
_DEPTH = {"create": 0, "swap": 1, "rerange": 2, "note": 3, "mend": 4, "test": 5, "adjust": 5}
_BAD = frozenset({Verdict.FAIL, Verdict.CONDITIONAL_FAIL})


@dataclass(frozen=True, slots=True)
class Event:
    """One line; `kind` is the class that draws its sign, `what` leads to `url` where there is a page."""

    on: datetime.date
    kind: str
    what: str
    words: str = ""
    url: str = ""
    mark: SafeString | None = None
    note: str = ""
    bad: bool = False
    number: int = 0


def newest_first(*kinds: Iterable[Event]) -> list[Event]:
    """All events, newest first; what follows on one day stands above."""
    merged = [event for events in kinds for event in events]
    return sorted(merged, key=lambda event: (event.on, _DEPTH.get(event.kind, 0), event.number), reverse=True)


def of_tests(tests: Sequence[Test], *, at_tag: bool) -> Iterable[Event]:
    """Tests; on the page of a tag each names its transmitter, on that of a transmitter its tag."""
    for test in tests:
        where = test.transmitter.serial if at_tag else str(test.tag or "on the bench")
        yield Event(
            on=test.tested_on,
            kind="adjust" if test.adjusted else "test",
            what="Test",
            url=reverse("test", args=[test.pk]),
            words=test_words(test),
            mark=test_mark(test),
            note=" · ".join(part for part in (where, _state(test)) if part),
            bad=test.as_found_verdict in _BAD or test.as_left_verdict in _BAD,
            number=test.pk,
        )


def test_words(test: Test) -> str:
    """What a test came to, in one line."""
    if test.outcome == Test.Outcome.NOT_TESTED:
        return "could not be tested"
    said = [f"as-found {test.as_found_verdict}"] if test.as_found_verdict else []
    if test.adjusted:
        said.append("adjusted")
    if test.as_left_verdict:
        said.append(f"as-left {test.as_left_verdict}")
    return ", ".join(said)


def test_mark(test: Test) -> SafeString | None:
    if test.as_found_ratio is None and test.as_left_ratio is None:
        return None
    return error_mark(test.as_found_ratio, test.as_left_ratio, test_words(test))


def _state(test: Test) -> str:
    return test.get_state_display() if test.state in (Test.State.SENT_BACK, Test.State.TRANSCRIBED) else ""


def of_fittings_at_tag(fittings: Sequence[Fitting]) -> Iterable[Event]:
    """Transmitters that came and went at a tag; out and in on one day is one line."""
    gone = {(fitting.removed_on): fitting for fitting in fittings if fitting.removed_on}
    came = {fitting.fitted_on for fitting in fittings}
    for fitting in fittings:
        before = gone.get(fitting.fitted_on)
        swapped = before is not None and before.pk != fitting.pk
        yield Event(
            on=fitting.fitted_on,
            kind="swap",
            what=f"{before.transmitter.serial} out, {fitting.transmitter.serial} in"
            if swapped and before
            else f"{fitting.transmitter.serial} fitted",
            url=reverse("transmitter", args=[fitting.transmitter_id]),
            note=fitting.fitted_reason,
            number=fitting.pk,
        )
        if fitting.removed_on is not None and fitting.removed_on not in came:
            yield Event(
                on=fitting.removed_on,
                kind="swap",
                what=f"{fitting.transmitter.serial} removed",
                url=reverse("transmitter", args=[fitting.transmitter_id]),
                note=fitting.removed_reason,
                number=fitting.pk,
            )


def of_fittings_of_transmitter(fittings: Sequence[Fitting]) -> Iterable[Event]:
    for fitting in fittings:
        url = reverse("tag", args=[fitting.tag_id])
        yield Event(
            on=fitting.fitted_on,
            kind="swap",
            what=f"Fitted at {fitting.tag}",
            url=url,
            note=fitting.fitted_reason,
            number=fitting.pk,
        )
        if fitting.removed_on is not None:
            yield Event(
                on=fitting.removed_on,
                kind="swap",
                what=f"Removed from {fitting.tag}",
                url=url,
                note=fitting.removed_reason,
                number=fitting.pk,
            )


def of_ranges(ranges: Sequence[Range]) -> Iterable[Event]:
    """Ranges that were in force, the first one as set, the others as changed."""
    rows = sorted(
        (row for row in ranges if row.applied_at and not row.withdrawn_at), key=lambda row: (row.effective_from, row.pk)
    )
    for place, row in enumerate(rows):
        yield Event(
            on=row.effective_from,
            kind="rerange" if place else "create",
            what="Range changed" if place else "Range set",
            words=range_words(row),
            note=row.reason,
            number=row.pk,
        )


def range_words(row: Range) -> str:
    """LRV to URV with unit, what it is measured against, and the square root."""
    root = ", square root" if row.transfer == Range.Transfer.SQUARE_ROOT else ""
    return f"{as_shown(row.lrv)} to {as_shown(row.urv)} {in_words(row.unit)} {row.reference}{root}"


def of_requirements(requirements: Sequence[Requirement]) -> Iterable[Event]:
    for row in requirements:
        if row.applied_at and not row.withdrawn_at:
            yield Event(
                on=row.effective_from,
                kind="note",
                what="Requirement",
                words=f"every {row.interval_months} months, {tolerance_words(row)}",
                note=row.reason,
                number=row.pk,
            )


def tolerance_words(row: Requirement, *, as_left: bool = False) -> str:
    """A tolerance of a requirement as it is stated."""
    from calibration.records.basis import StatedTolerance

    percent, amount = (row.as_left_percent, row.as_left_input) if as_left else (row.mpe_percent, row.mpe_input)
    try:
        stated = StatedTolerance(row.mpe_form, percent, amount, row.input_unit)
        return stated.in_unit(row.input_unit).words(in_words(row.input_unit))
    except ValueError:
        return " ".join(part for part in (percent and f"{percent} %", amount, in_words(row.input_unit)) if part)


def of_interventions(interventions: Sequence[Intervention], *, with_serial: bool) -> Iterable[Event]:
    for done in interventions:
        if done.withdrawn_at:
            continue
        heads = f" {done.head_before} → {done.head_after}" if done.head_before and done.head_after else ""
        yield Event(
            on=done.done_on,
            kind="mend",
            what=done.get_kind_display().capitalize() + heads,
            words=f"on {done.transmitter.serial}" if with_serial else "",
            note=done.reason,
            number=done.pk,
        )


def of_deferrals(deferrals: Sequence[Deferral], zone: ZoneInfo) -> Iterable[Event]:
    for row in deferrals:
        said = f"until {row.until}"
        yield Event(
            on=row.requested_at.astimezone(zone).date(),
            kind="note",
            what="Deferral asked for",
            words=said,
            note=f"{row.requested_by}: {row.risk_statement}",
            number=row.pk,
        )
        if row.approved_at:
            yield Event(
                on=row.approved_at.astimezone(zone).date(),
                kind="note",
                what="Deferral approved",
                words=said,
                note=str(row.approved_by),
                number=row.pk,
            )
        if row.withdrawn_at:
            yield Event(
                on=row.withdrawn_at.astimezone(zone).date(),
                kind="note",
                what="Deferral withdrawn",
                words=said,
                note=row.withdrawn_reason,
                number=row.pk,
            )
