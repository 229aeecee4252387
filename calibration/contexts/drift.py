"""The drift part of the tag page and the transmitter page, and the same numbers as a file."""

from __future__ import annotations

import datetime
import math
from collections.abc import Iterator
from dataclasses import dataclass
from typing import Any, Final

from django.utils.safestring import SafeString

from calibration.queries import drifting
from calibration.queries.drifting import Drift, History
from register.figures import signed

METHOD: Final = (
    "Each as-found is compared with the as-left before it, only where nothing else changed in between. The rate is "
    "generalised least squares on these differences; its interval and the prediction band hold for 95 %, the wandering "
    "between tests included. The curve is joined, never fitted: a line through it would claim far too much."
)
DECIMALS: Final = 3
NO_MPE: Final = ("MPE here", "none: this is not the error of a reading; see the check points")


@dataclass(frozen=True, slots=True)
class PairLine:
    """A pair as its row shows it."""

    start: str
    end: str
    years: str
    difference: str
    counted: bool


@dataclass(frozen=True, slots=True)
class LeftOutLine:
    """A test that gives no difference, and why."""

    on: str
    words: str


@dataclass(frozen=True)
class DriftView:
    """What the part of the page shows; `drift` is None where nothing was tested."""

    drift: Drift | None
    chart: SafeString | None
    facts: list[tuple[str, str]]
    notes: list[str]
    pairs: list[PairLine]
    left_out: list[LeftOutLine]
    not_counted: int
    channels: list[tuple[str, str, bool]]
    method: str = METHOD


def view_of(
    history: History,
    asked: str,
    *,
    whose: str,
    transmitter_id: int | None,
    terms: Any,
    due: datetime.date | None,
) -> DriftView:
    """The drift of one channel, ready for the page; `whose` names tag or transmitter in the title of the chart."""
    channel = drifting.choose(history, asked)
    if channel is None:
        return DriftView(None, None, [], [], [], left_out_lines(history), 0, [])
    drift = drifting.drift(history, channel, transmitter_id=transmitter_id, terms=terms, due=due)
    return DriftView(
        drift=drift,
        chart=_chart(drift, whose) if history.pairing.pairs else None,
        facts=_facts(drift),
        notes=[note for note in drift.rate.notes if drift.rate.enough],
        pairs=pair_lines(drift),
        left_out=left_out_lines(history),
        not_counted=len([pair for pair in history.pairing.pairs if channel.key in pair.differences]) - drift.rate.n,
        channels=[(one.key, one.label, one.key == channel.key) for one in history.channels],
    )


def pair_lines(drift: Drift) -> list[PairLine]:
    lines = []
    for index, pair in enumerate(drift.history.pairing.pairs):
        step = pair.differences.get(drift.channel.key)
        lines.append(
            PairLine(
                start=pair.start.isoformat(),
                end=pair.end.isoformat(),
                years=f"{pair.years:.2f}",
                difference=signed(step, DECIMALS),
                counted=index in drift.counted and step is not None,
            )
        )
    return lines[::-1]


def left_out_lines(history: History) -> list[LeftOutLine]:
    visits = history.pairing.visits
    return [
        LeftOutLine(one.when.isoformat(), visits[one.index].label or one.words)
        for one in reversed(history.pairing.left_out)
    ]


def _facts(drift: Drift) -> list[tuple[str, str]]:
    rate, unit = drift.rate, drift.channel.unit
    no_mpe = [NO_MPE] if drift.channel.held_at is None else []
    if not rate.enough:
        return [("Rate", rate.notes[0]), *no_mpe]
    facts = [
        ("Rate", f"{signed(rate.rate, DECIMALS)} {unit} a year"),
        ("Standard error", f"{rate.se:.{DECIMALS}f} {unit} a year"),
        ("95 % interval", f"{signed(rate.lower, DECIMALS)} to {signed(rate.upper, DECIMALS)} {unit} a year"),
        ("Pairs", f"{rate.n}"),
    ]
    if drift.start is not None:
        facts.append(("Last as-left", f"{signed(drift.start[1], DECIMALS)} {unit} on {drift.start[0]}"))
        if drift.due is not None and drift.due > drift.start[0]:
            from calibration.metrology.pairing import DAYS_PER_YEAR

            years = (drift.due - drift.start[0]).days / DAYS_PER_YEAR
            then = rate.predict(years, start_value=drift.start[1])
            facts.append(
                (
                    f"Expected when due, {drift.due}",
                    f"{signed(float(then.centre), DECIMALS)} {unit}, "
                    f"95 % between {signed(float(then.lower), DECIMALS)} and {signed(float(then.upper), DECIMALS)}",
                )
            )
    else:
        facts.append(("Prediction", f"none: {drift.no_start or 'the last as-left says nothing of it'}"))
    if drift.limits is not None:
        low, high = (signed(side, DECIMALS) for side in drift.limits)
        held = not math.isfinite(drift.limits[0])
        words = f"up to {high} {unit}; below zero the output is held at 4 mA" if held else f"{low} to {high} {unit}"
        facts.append(("MPE here", words))
    facts += no_mpe
    if drift.meeting is not None:
        facts.append(("Band and MPE", drift.meeting.words))
    return facts


def _chart(drift: Drift, whose: str) -> SafeString:
    from calibration.drawing.charts import BandPoint, DriftEvent, DriftPoint, drift_plot
    from calibration.metrology.conformity import inside

    spread = [pair.start for pair in drift.history.pairing.pairs]
    if drift.meeting is not None:
        ahead = f"{drift.meeting.words[0].upper()}{drift.meeting.words[1:]}."
    else:
        ahead = "The prediction has no MPE to meet." if drift.band else "No prediction."
    return drift_plot(
        title=f"Drift of the {drift.channel.label} at {whose}",
        description=f"{len(drift.history.pairing.pairs)} differences between tests, added up. {ahead}",
        stretches=[
            [
                DriftPoint(on, value, outside=drift.limits is not None and not inside(value, *drift.limits))
                for on, value in stretch
            ]
            for stretch in drift.stretches
        ],
        limits=drift.limits,
        events=[
            DriftEvent(mark.on, mark.kind, mark.label)
            for mark in drift.history.marks
            if not spread or mark.on >= min(spread)
        ],
        band=[BandPoint(*point) for point in drift.band],
        due=drift.due if drift.band else None,
        meets=_met_within(drift),
        unit=drift.channel.unit,
    )


def _met_within(drift: Drift) -> datetime.date | None:
    """The day on which the band meets the MPE, where the band is drawn that far."""
    on = drift.meeting.on if drift.meeting else None
    return on if on is not None and drift.band and on <= drift.band[-1][0] else None


def file_head(drift: Drift | None) -> tuple[str, ...]:
    """The heads of the columns of `file_lines`."""
    unit = drift.channel.unit if drift is not None else drifting.OF_SPAN
    return ("what", "from", "to", "years", f"as-found less as-left ({unit})", "counts for the rate", "why not")


def file_lines(drift: Drift | None, history: History) -> Iterator[tuple[Any, ...]]:
    """Pairs, tests left out and the figures of the rate, one line each."""
    if drift is not None:
        for index, pair in enumerate(history.pairing.pairs):
            step = pair.differences.get(drift.channel.key)
            counted = index in drift.counted and step is not None
            yield ("pair", pair.start, pair.end, f"{pair.years:.4f}", step, "yes" if counted else "no", "")
    for one in history.pairing.left_out:
        yield ("test left out", "", one.when, "", "", "no", history.pairing.visits[one.index].label or one.words)
    if drift is not None:
        for name, value in _facts(drift):
            yield (name, "", "", "", value, "", "")
