"""What the pages of a sheet show, worked out from its draft."""

from __future__ import annotations

import datetime
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from zoneinfo import ZoneInfo

from django.utils.safestring import SafeString

from calibration.contexts.results import Result, result_of
from calibration.drawing.marks import error_bar
from calibration.models import Entry, Run, Sheet
from calibration.queries.choosing import Candidate, candidates, covers, number_of
from calibration.queries.drafts import Draft, DraftReading
from calibration.queries.entered import Names
from calibration.queries.entries import Field
from calibration.sheet_fields import ADJUSTED, COULD_NOT_TEST, ORDER, PARTS, label, reading
from register.models import Flag, User

Stage = Sheet.Stage
#: How long after his last entry a person counts as being on the sheet.
NEARBY = datetime.timedelta(hours=8)


@dataclass(frozen=True, slots=True)
class Version:
    """One of several texts that clash."""

    id: str
    text: str
    who: str
    at: str
    mine: bool


@dataclass(frozen=True, slots=True)
class FieldView:
    """A field as a page shows it; `seen` is the entry it is shown with."""

    name: str
    id: str
    text: str
    seen: str
    error: str = ""
    note: str = ""
    versions: tuple[Version, ...] = ()

    @property
    def what(self) -> str:
        return label(self.name)

    @property
    def ticked(self) -> bool:
        return self.text == "yes"


@dataclass(frozen=True, slots=True)
class ReadingView:
    """A reading as the run page shows it."""

    kind: str
    key: str
    id: str
    point: str
    short: str
    way: str
    nominal: str
    expected: str
    applied: FieldView
    measured: FieldView
    digital: FieldView
    result: Result | None
    empty_bar: SafeString
    repeated: bool
    next_repeat: str
    state: str
    caution: str

    @property
    def fields(self) -> tuple[FieldView, ...]:
        return (self.applied, self.measured, self.digital)

    @property
    def clashing(self) -> tuple[FieldView, ...]:
        return tuple(view for view in self.fields if view.versions)

    @property
    def note(self) -> str:
        """Who entered it, where that was somebody else."""
        return "; ".join(dict.fromkeys(view.note for view in self.fields if view.note))


@dataclass(frozen=True, slots=True)
class LineView:
    """A caution or a line of the checklist."""

    text: str
    answer: str
    required: bool
    field: FieldView


@dataclass(frozen=True, slots=True)
class Other:
    """Somebody else who has the sheet open or has entered something."""

    name: str
    what: str
    at: str


@dataclass(frozen=True, slots=True)
class Step:
    label: str
    state: str = ""


@dataclass(frozen=True)
class Viewer:
    """Who looks at a sheet, and what happened when he last tried to go on.

    `typed` holds what was not taken, by field: it stays in its field. `met` gathers the fields that the page shows.
    """

    person: User
    errors: Mapping[str, Sequence[str]] = field(default_factory=dict)
    typed: Mapping[str, str] = field(default_factory=dict)
    met: dict[str, FieldView] = field(default_factory=dict)

    def meets(self, view: FieldView) -> FieldView:
        self.met[view.name] = view
        return view


def steps(draft: Draft) -> list[Step]:
    """The way through the sheet, as far as it is decided."""
    sheet = draft.sheet
    if sheet.corrects_id is not None:
        stages = [Stage.CORRECT, Stage.SIGN]
    elif draft.text(COULD_NOT_TEST):
        stages = [Stage.CONFIRM, Stage.CAUTIONS, Stage.STANDARDS, Stage.AS_FOUND, Stage.RETURN, Stage.SIGN]
    elif draft.text("adjust.choice") not in {"", ADJUSTED} and sheet.stage in {Stage.RETURN, Stage.SIGN}:
        stages = [stage for stage in ORDER if stage != Stage.AS_LEFT]
    else:
        stages = list(ORDER)
    words = {Stage.CONFIRM: "Confirm", Stage.STANDARDS: "Standards", Stage.RETURN: "Return"}
    here = next((place for place, stage in enumerate(stages) if stage == sheet.stage), len(stages))
    return [
        Step(words.get(stage, stage.label.capitalize()), "done" if place < here else "here" if place == here else "")
        for place, stage in enumerate(stages)
    ]


def others(draft: Draft, viewer: User, now: datetime.datetime) -> list[Other]:
    """Who else is on the sheet, with what he did last."""
    names = Names(draft.sheet.plant_id)
    last: dict[int, Entry] = {}
    for entry in sorted(draft.entries, key=lambda entry: entry.received_at):
        if entry.person_id != viewer.pk and entry.received_at > now - NEARBY:
            last[entry.person_id] = entry
    return [
        Other(
            name=str(entry.person),
            what=names.deed(entry),
            at=clock(entry.received_at, draft.zone),
        )
        for entry in last.values()
    ]


def field_view(draft: Draft, name: str, viewer: Viewer, error: str = "") -> FieldView:
    """A field as it stands, for one viewer."""
    kept = draft.fields.get(name)
    told = error or "; ".join(viewer.errors.get(name, ())) or draft.problems.get(name, "")
    ident = "f-" + name.replace(".", "-")
    if kept is None:
        return viewer.meets(FieldView(name, ident, viewer.typed.get(name, ""), "", told))
    entry = kept.entry
    note = (
        ""
        if entry.person_id == viewer.person.pk or not entry.text
        else (f"{entry.person}, {clock(entry.received_at, draft.zone)}")
    )
    text = viewer.typed.get(name, kept.text)
    versions = _versions(draft, kept, viewer.person)
    return viewer.meets(FieldView(name, ident, text, str(entry.id), told, note, versions))


def reading_views(draft: Draft, kind: str, viewer: Viewer, *, repeat: str = "") -> list[ReadingView]:
    """All readings of a run, with one empty repeat of the reading named by `repeat`."""
    run = draft.runs[kind]
    judged = run.judged
    views = []
    for row in run.readings:
        index = run.index_of(row.key)
        result = None
        if judged is not None and index is not None:
            result = result_of(judged.judgement.readings, index, up=row.direction > 0)
        views.append(_reading_view(draft, kind, row, viewer, result))
        place = row.key.partition("-")[0]
        following = _next_repeat(draft, kind, place)
        if repeat and repeat == following and row.key == _last_key(run.readings, place):
            label_again = f"{row.label.partition(', repeat')[0]}, repeat {repeat.partition('-')[2]}"
            blank = DraftReading(repeat, row.percent, row.direction, row.cycle, label_again, "", "", "", None)
            views.append(_reading_view(draft, kind, blank, viewer, None))
    return views


def one_reading(draft: Draft, kind: str, key: str, viewer: Viewer) -> ReadingView | None:
    """A single reading, for the answer to a saved field."""
    return next((view for view in reading_views(draft, kind, viewer, repeat=key) if view.key == key), None)


def open_violations(draft: Draft) -> list[str]:
    """What the limit checks hold against the instrument: whoever opens a valve there should know."""
    if draft.sheet.tag_id is None:
        return []
    flags = Flag.objects.filter(tag=draft.sheet.tag_id, closed_at=None, severity=Flag.Severity.VIOLATION)
    return [flag.sentence for flag in flags.order_by("check_key")]


def line_views(draft: Draft, part: str, viewer: Viewer) -> list[LineView]:
    """Cautions, or the checklist."""
    prefix = "caution" if part == "cautions" else "checklist"
    return [
        LineView(
            line["text"],
            line["answer"],
            line["required"] == "yes",
            field_view(draft, f"{prefix}.{line['key']}", viewer),
        )
        for line in draft.sheet.basis.get(part, ())
    ]


@dataclass(frozen=True, slots=True)
class ChoiceView:
    """The choice of one standard of a run."""

    part: str
    label: str
    field: FieldView
    offered: tuple[Candidate, ...]
    chosen: Candidate | None
    caution: str
    excepted: str


def standard_views(draft: Draft, kind: str, viewer: Viewer) -> list[ChoiceView]:
    """The standards of a run with what is offered for each."""
    sheet = draft.sheet
    texts = {part: draft.text(f"{kind}.{part}-with") for part in PARTS}
    last = draft.last_reading()
    on = last.astimezone(draft.zone).date() if last else sheet.plant.today()
    if sheet.corrects is not None:
        on = sheet.corrects.tested_on
    offered = candidates(sheet.plant, on, also=map(number_of, texts.values()))
    views = []
    for part in PARTS:
        fitting = tuple(candidate for candidate in offered if candidate.fits(part))
        chosen = next((candidate for candidate in fitting if candidate.id == texts[part]), None)
        allowed = draft.fields.get(f"exception.{texts[part]}")
        views.append(
            ChoiceView(
                part=part,
                label="Applies the input" if part == "applied" else "Measures the output",
                field=field_view(draft, f"{kind}.{part}-with", viewer),
                offered=fitting,
                chosen=chosen,
                caution=covers(chosen, sheet) if chosen else "",
                excepted=f"{allowed.entry.person} allowed it: {allowed.text}" if allowed and chosen else "",
            )
        )
    return views


def clock(at: datetime.datetime, zone: ZoneInfo) -> str:
    """A time of today as 14:03, of another day with its date."""
    local = at.astimezone(zone)
    if local.date() == datetime.datetime.now(zone).date():
        return f"{local:%H:%M}"
    return f"{local:%Y-%m-%d %H:%M}"


def _versions(draft: Draft, kept: Field, person: User) -> tuple[Version, ...]:
    if not kept.clashes:
        return ()
    return tuple(
        Version(
            str(entry.id),
            entry.text,
            "you" if entry.person_id == person.pk else str(entry.person),
            clock(entry.received_at, draft.zone),
            entry.person_id == person.pk,
        )
        for entry in kept.versions
    )


def _reading_view(draft: Draft, kind: str, row: DraftReading, viewer: Viewer, result: Result | None) -> ReadingView:
    ident = f"r-{kind}-{row.key}"
    fields = {
        what: field_view(draft, reading(kind, row.key, what), viewer) for what in ("applied", "measured", "digital")
    }
    nominal, expected = nominal_of(draft, kind, row.percent)
    clashes = any(view.versions for view in fields.values())
    wrong = bool(row.problems)
    state = "clash" if clashes else "outside" if result and result.outside else "done" if result else ""
    return ReadingView(
        kind=kind,
        key=row.key,
        id=ident,
        point=row.label,
        short=f"{row.percent:g} %",
        way="up" if row.direction > 0 else "down",
        nominal=nominal,
        expected=expected,
        result=result,
        empty_bar=error_bar(None, "no error yet"),
        repeated=row.repeated,
        next_repeat="" if row.repeated or not result else _next_repeat(draft, kind, row.key),
        state="problem" if wrong and not clashes else state,
        caution=row.caution,
        **fields,
    )


def nominal_of(draft: Draft, kind: str, percent: float) -> tuple[str, str]:
    """Nominal input in the unit in which it is applied, and the ideal output for it [mA], as texts."""
    from register.engineering.typed import format_significant
    from register.engineering.units import convert

    basis = draft.basis
    signal = basis.signal()
    value = float(signal.input_of_percent(percent))
    unit = draft.runs[kind].unit
    shown = value if unit == basis.unit else float(convert(value, unit=basis.unit, to_unit=unit))
    return format_significant(shown, 6), f"{float(signal.ideal_current(value)):.3f}"


def _next_repeat(draft: Draft, kind: str, place: str) -> str:
    taken = [row.key for row in draft.runs[kind].readings if row.key.startswith(f"{place}-")]
    number = max((int(key.partition("-")[2]) for key in taken), default=0) + 1
    return f"{place}-{number}" if number <= 9 else ""


def _last_key(rows: Sequence[DraftReading], place: str) -> str:
    return [row.key for row in rows if row.key.partition("-")[0] == place][-1]


def verdict_words(draft: Draft, kind: str) -> tuple[str, str, str]:
    """Verdict of a run as entered so far, its colour class, and why; empty before the first reading."""
    judged = draft.runs[kind].judged
    if judged is None:
        return "", "unknown", ""
    judgement = judged.judgement
    css = {"fail": "out", "conditional fail": "out", "conditional pass": "near", "pass": "ok"}.get(
        str(judgement.verdict), "unknown"
    )
    words = str(judgement.verdict)
    if judgement.tolerance_words:
        words += f", {judgement.tolerance_words}"
    return words, css, judgement.why


def runs_shown(draft: Draft) -> list[str]:
    """Runs that have anything to show."""
    return [kind for kind in Run.Kind.values if draft.runs[kind].judged is not None]
