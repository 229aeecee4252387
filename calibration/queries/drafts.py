"""A sheet as it stands: its fields put together into runs, judged by the arithmetic that will judge the record."""

from __future__ import annotations

import datetime
import math
from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field
from functools import cached_property
from typing import Final
from zoneinfo import ZoneInfo

from calibration.models import Run, Sheet
from calibration.queries.entries import Field, standing, when
from calibration.records.basis import Basis
from calibration.records.content import ReadingContent, RunContent, UseContent
from calibration.records.judging import JudgedRun, Point, applied_in_range_unit, judge, measured_in_ma
from calibration.sheet_fields import CORRECTION_REASON, PARTS, reading, reading_of

#: As much as a record keeps of a figure as typed, and of the reason for a correction [characters].
LONGEST_FIGURE: Final = 40
LONGEST_REASON: Final = 300
#: Beyond this [% of range, % of output span] nothing was read: a slip of the decimal mark, or of the unit.
ABSURD_PERCENT: Final = 1000.0
#: Beyond this distance from its point [% of input range] an applied input is probably mistyped.
FAR_PERCENT: Final = 5.0


@dataclass(frozen=True, slots=True)
class DraftReading:
    """One reading asked for, or repeated; `problems` says by field what is wrong with what was typed."""

    key: str
    percent: float
    direction: int
    cycle: int
    label: str
    applied: str
    measured: str
    digital: str
    point: Point | None
    problems: Mapping[str, str] = field(default_factory=dict)
    caution: str = ""

    @property
    def repeated(self) -> bool:
        return "-" in self.key


@dataclass(frozen=True)
class DraftRun:
    """One run as entered so far."""

    kind: str
    basis: Basis
    unit: str
    readings: tuple[DraftReading, ...]

    @cached_property
    def judged(self) -> JudgedRun | None:
        """The arithmetic over the readings that are complete; None before the first."""
        points = [row.point for row in self.readings if row.point is not None]
        return judge(self.basis, self.kind, points) if points else None

    @property
    def missing(self) -> list[DraftReading]:
        """Points of the list without a usable reading."""
        return [row for row in self.readings if not row.repeated and row.point is None]

    def index_of(self, key: str) -> int | None:
        """Place of a reading in the judged arrays."""
        place = 0
        for row in self.readings:
            if row.point is not None:
                if row.key == key:
                    return place
                place += 1
        return None


class Draft:
    """A sheet with all of its entries."""

    def __init__(self, sheet: Sheet) -> None:
        self.sheet = sheet
        self.basis = Basis.read(sheet, int(sheet.basis["head_id"]))
        self.entries = list(sheet.entries.select_related("person"))
        self.fields = standing(self.entries)
        self.zone = ZoneInfo(sheet.plant.time_zone)

    def text(self, name: str) -> str:
        """What a field holds; empty while two versions of it clash."""
        kept = self.fields.get(name)
        return kept.text if kept else ""

    @property
    def clashes(self) -> list[Field]:
        return [kept for kept in self.fields.values() if kept.clashes]

    @cached_property
    def runs(self) -> dict[str, DraftRun]:
        return {kind: self._run(kind) for kind in Run.Kind.values}

    @cached_property
    def problems(self) -> dict[str, str]:
        """By field, what is wrong with what was typed there: it stays as typed, and no record is made with it."""
        found = {
            reading(kind, row.key, what): words
            for kind, run in self.runs.items()
            for row in run.readings
            for what, words in row.problems.items()
        }
        for kind in Run.Kind.values:
            for condition in _CONDITIONS:
                name = f"{kind}.{condition}"
                if (text := self.text(name)) and (
                    words := self._condition_problem(text, self.unit_of(kind, condition))
                ):
                    found[name] = words
        reason = self.text(CORRECTION_REASON)
        if len(reason) > LONGEST_REASON:
            found[CORRECTION_REASON] = (
                f"At most {LONGEST_REASON} characters stay with the record, here are {len(reason)}: shorten it."
            )
        return found

    def problems_of(self, kind: str) -> dict[str, str]:
        """Those of `problems` that belong to one run."""
        return {name: words for name, words in self.problems.items() if name.startswith(f"{kind}.")}

    @property
    def points(self) -> int:
        asked = self.basis.point_list()
        return len(asked) if asked else 0

    def run_content(
        self,
        kind: str,
        standards: tuple[UseContent, ...],
        *,
        on: datetime.date | None = None,
        entered: Mapping[str, datetime.datetime | None] | None = None,
    ) -> RunContent:
        """The run for the record, with its readings as typed.

        Parameters
        ----------
        on : date, optional
            Day of the run; else that of its last reading.
        entered : mapping, optional
            By key, when readings were first entered, for those that a correction leaves as they were.
        """
        run = self.runs[kind]
        contents = tuple(
            self._reading_content(run, row, entered or {}) for row in run.readings if row.point is not None
        )
        times = [content.entered_at for content in contents if content.entered_at is not None]
        last = max(times, default=self.sheet.opened_at)
        return RunContent(
            kind=kind,
            tested_on=on or last.astimezone(self.zone).date(),
            readings=contents,
            standards=standards,
            **self._conditions(kind),
        )

    def unit_of(self, kind: str, condition: str) -> str:
        """Unit of a condition ("ambient", "height", "static"): the one chosen, else the usual one of the tag."""
        usual = self.sheet.basis.get("units", {})
        return (
            self.text(f"{kind}.{condition}-unit")
            or {
                "ambient": usual.get("temperature", "degC"),
                "height": "mm",
                "static": usual.get("static", "bar"),
            }[condition]
        )

    def _condition_problem(self, text: str, unit: str) -> str:
        from register.engineering.typed import parse_number
        from register.engineering.units import to_si

        try:
            value = parse_number(_short(text), decimal_comma=self.basis.decimal_comma)
        except ValueError as error:
            return str(error)
        return "" if math.isfinite(to_si(value, unit)) else _absurd(text)

    def _conditions(self, kind: str) -> dict[str, str]:
        columns: dict[str, str] = {}
        for condition, (column, unit_column) in _CONDITIONS.items():
            if text := self.text(f"{kind}.{condition}"):
                columns |= {column: text, unit_column: self.unit_of(kind, condition)}
        return columns

    def _reading_content(
        self, run: DraftRun, row: DraftReading, entered: Mapping[str, datetime.datetime | None]
    ) -> ReadingContent:
        entry = self.fields[reading(run.kind, row.key, "measured")].entry
        return ReadingContent(
            applied=row.applied,
            measured=row.measured,
            direction="down" if row.direction < 0 else "up",
            nominal_percent=row.percent,
            cycle=row.cycle,
            applied_unit=run.unit,
            digital=row.digital,
            digital_unit=(self.text(f"{run.kind}.digital-unit") or self.basis.unit) if row.digital else "",
            entered_at=entered[row.key] if row.key in entered else when(entry, self.sheet.opened_at),
        )

    def last_reading(self) -> datetime.datetime | None:
        """When the last measured output was entered."""
        times = [
            when(kept.entry, self.sheet.opened_at)
            for name, kept in self.fields.items()
            if name.endswith(".measured") and reading_of(name) and kept.text
        ]
        return max(times, default=None)

    def _run(self, kind: str) -> DraftRun:
        unit = self.text(f"{kind}.unit") or self.basis.unit
        return DraftRun(kind=kind, basis=self.basis, unit=unit, readings=tuple(self._readings(kind, unit)))

    def _readings(self, kind: str, unit: str) -> Iterator[DraftReading]:
        asked = self.basis.point_list()
        if asked is None:
            return
        repeats: dict[str, list[str]] = {}
        for name in self.fields:
            found = reading_of(name)
            if found and found[0] == kind and "-" in found[1]:
                keys = repeats.setdefault(found[1].partition("-")[0], [])
                if found[1] not in keys:
                    keys.append(found[1])
        rows = zip(asked.points, asked.directions, asked.cycles, asked.labels, strict=True)
        for place, (percent, direction, cycle, label) in enumerate(rows, start=1):
            for key in [str(place), *sorted(repeats.get(str(place), ()))]:
                again = f", repeat {key.partition('-')[2]}" if "-" in key else ""
                yield self._reading(kind, unit, key, float(percent), int(direction), int(cycle), label + again)

    def _reading(
        self, kind: str, unit: str, key: str, percent: float, direction: int, cycle: int, label: str
    ) -> DraftReading:
        applied, measured, digital = (
            self.text(reading(kind, key, what)) for what in ("applied", "measured", "digital")
        )
        figures, problems = readable(self.basis, applied, unit, measured)
        if digital:
            problems |= _digital_problem(digital, self.text(f"{kind}.digital-unit"), self.basis)
        if measured and not applied:
            problems["applied"] = "Type the input that was applied: the error counts from it."
        point = None
        if figures is not None and not any(name in problems for name in PARTS):
            point = Point(*figures, direction=direction, nominal_percent=percent, cycle=cycle)
        caution = far_from(self.basis, percent, point.applied) if point is not None else ""
        return DraftReading(key, percent, direction, cycle, label, applied, measured, digital, point, problems, caution)


def readable(basis: Basis, applied: str, unit: str, measured: str) -> tuple[tuple[float, float] | None, dict[str, str]]:
    """Input [unit of the range] and output [mA] where both texts are numbers, and what is wrong with which."""
    problems: dict[str, str] = {}
    figures = [math.nan, math.nan]
    for place, (name, text) in enumerate(zip(PARTS, (applied, measured), strict=True)):
        if not text:
            continue
        try:
            if name == "applied":
                figures[place] = input_in_range_unit(text, unit, basis)
            else:
                figures[place] = output_in_ma(text, basis)
        except ValueError as error:
            problems[name] = str(error)
    if any(math.isnan(figure) for figure in figures):
        return None, problems
    return (figures[0], figures[1]), problems


def input_in_range_unit(text: str, unit: str, basis: Basis) -> float:
    """An input typed on a sheet, in the unit of the range.

    Raises
    ------
    ValueError
        No number, too long for a record, or so far outside the range that it cannot have been read.
    """
    value = applied_in_range_unit(_short(text), unit, basis)
    signal = basis.signal()
    return _sane(value, (value - signal.lrv) / (signal.urv - signal.lrv) * 100.0, text)


def output_in_ma(text: str, basis: Basis) -> float:
    """An output typed on a sheet [mA].

    Raises
    ------
    ValueError
        No number, too long for a record, or so far outside 4 to 20 mA that it cannot have been read.
    """
    value = measured_in_ma(_short(text), "mA", basis)
    return _sane(value, (value - 4.0) / 0.16, text)


def _sane(value: float, percent: float, text: str) -> float:
    if not abs(percent) <= ABSURD_PERCENT:
        raise ValueError(_absurd(text))
    return value


def _absurd(text: str) -> str:
    return f"“{text}” is far beyond anything that can be read here: look at the decimal mark and at the unit."


def _short(text: str) -> str:
    if len(text) > LONGEST_FIGURE:
        raise ValueError(
            f"“{text[:LONGEST_FIGURE]}…” is longer than {LONGEST_FIGURE} characters: type the number alone; "
            "words belong into the remarks."
        )
    return text


def far_from(basis: Basis, percent: float, applied: float) -> str:
    """A caution where the input applied is not the one that the point asks for; a slip of the thumb, most likely."""
    at = float(basis.signal().percent_of_input(applied))
    if abs(at - percent) <= FAR_PERCENT:
        return ""
    return f"{at:.4g} % of range was applied where the list asks for {percent:g} %."


def _digital_problem(text: str, unit: str, basis: Basis) -> dict[str, str]:
    try:
        input_in_range_unit(text, unit, basis)
    except ValueError as error:
        return {"digital": str(error)}
    return {}


_CONDITIONS = {
    "ambient": ("ambient", "ambient_unit"),
    "height": ("height_difference", "height_unit"),
    "static": ("static_pressure", "static_unit"),
}
