"""What the page of a tag shows, read in a fixed number of queries."""

from __future__ import annotations

import datetime
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from zoneinfo import ZoneInfo

from django.urls import reverse
from django.utils.safestring import SafeString

from calibration.contexts import happenings, rows
from calibration.contexts.happenings import Event, range_words, tolerance_words
from calibration.drawing.marks import due_mark
from calibration.models import Deferral, Requirement, ScheduleState, Sheet, Standing, Test
from calibration.sheet_fields import ENDED
from register.checking import RELATED
from register.figures import ago
from register.models import Fitting, Flag, Intervention, Measurand, Range, RootExtraction, Tag
from register.models.typed import as_shown, in_words

#: Lines of the time line, and tests of the table; the lists of tests hold the rest.
EVENTS = 40
TESTS = 20
SEVERITIES = {
    Flag.Severity.VIOLATION: ("violation", "out"),
    Flag.Severity.CAUTION: ("caution", "near"),
    Flag.Severity.CANNOT_CHECK: ("unknown", "unknown"),
}
May = Callable[[str], bool]


@dataclass(frozen=True, slots=True)
class Fact:
    """A line of a list of facts; `url` where the value has a page."""

    what: str
    value: str
    unit: str = ""
    url: str = ""
    note: str = ""


@dataclass(frozen=True, slots=True)
class Link:
    label: str
    url: str


@dataclass(frozen=True, slots=True)
class FlagLine:
    """An open flag as the page shows it."""

    flag: Flag
    css: str
    tone: str
    word: str
    lapsed: bool


@dataclass(frozen=True, slots=True)
class RequirementLine:
    """A requirement in words."""

    row: Requirement
    tolerance: str
    as_left: str
    counted: str
    state: str


@dataclass(frozen=True, slots=True)
class Planned:
    """A range or requirement whose day has not come."""

    on: datetime.date
    words: str
    withdraw: str


@dataclass(frozen=True)
class TagPage:
    """Everything about one tag but its drift."""

    tag: Tag
    standing: Standing
    state: ScheduleState
    tone: str
    due_words: str
    due_mark: SafeString
    strip: SafeString
    place: list[Fact]
    process: list[Fact]
    device: list[Fact]
    signal: list[Fact]
    flags: list[FlagLine]
    unchecked: list[FlagLine]
    requirement: RequirementLine | None
    requirements: list[RequirementLine]
    ranges: list[tuple[Range, str, str]]
    fittings: list[Fitting]
    planned: list[Planned]
    deferral: Deferral | None
    waiting: Deferral | None
    sheets: list[Sheet]
    events: list[Event]
    earlier: int
    tests: list[tuple[Test, SafeString | None]]
    more_tests: bool


def tag_with_related(pk: int) -> Tag:
    return Tag.objects.select_related(*RELATED, "current_fitting__transmitter__maker").get(pk=pk)


def page_of(tag: Tag, tests: Sequence[Test], today: datetime.date) -> TagPage:
    """Read and word the page; `tests` are those of the tag in order of time, already read for its drift."""
    standing = Standing.objects.get(pk=tag.pk)
    flags = list(
        tag.flags.filter(closed_at__isnull=True).select_related("accepted_by").order_by("-severity", "check_key")
    )
    requirements = list(tag.requirements.select_related("point_list", "person").order_by("-effective_from", "-pk"))
    ranges = list(tag.ranges.select_related("person").order_by("-effective_from", "-pk"))
    fittings = list(tag.fittings.select_related("transmitter__maker").order_by("fitted_on", "pk"))
    interventions = list(
        Intervention.objects.filter(tag=tag).select_related("transmitter", "head_before", "head_after")
    )
    deferrals = list(tag.deferrals.select_related("requested_by", "approved_by"))
    sheets = list(
        Sheet.objects.filter(tag=tag).exclude(stage__in=ENDED).select_related("opened_by").order_by("opened_at")
    )
    events = happenings.newest_first(
        happenings.of_tests(tests, at_tag=True),
        happenings.of_fittings_at_tag(fittings),
        happenings.of_ranges(ranges),
        happenings.of_requirements(requirements),
        happenings.of_interventions(interventions, with_serial=True),
        happenings.of_deferrals(deferrals, ZoneInfo(tag.plant.time_zone)),
    )
    state = standing.state(today)
    lines = [_flag_line(flag, today) for flag in flags]
    in_force = next((row.pk for row in requirements if row.applied_at and not row.withdrawn_at), None)
    worded = [_requirement(row, in_force) for row in requirements]
    return TagPage(
        tag=tag,
        standing=standing,
        state=state,
        tone=rows.STATE_TONES[state],
        due_words=due_words(standing, state, today),
        due_mark=due_mark(
            today,
            last=standing.last_accepted_on,
            due=standing.due_on,
            limit=standing.grace_until,
            deferred=standing.deferred_until,
            words=due_words(standing, state, today),
        ),
        strip=rows.strip_cell(standing.strip, standing.range_text),
        place=_place(tag),
        process=_process(tag),
        device=_device(tag, today),
        signal=_signal(tag),
        flags=[line for line in lines if line.flag.severity != Flag.Severity.CANNOT_CHECK],
        unchecked=[line for line in lines if line.flag.severity == Flag.Severity.CANNOT_CHECK],
        requirement=next((one for one in worded if one.state == "in force"), None),
        requirements=worded,
        ranges=[(row, range_words(row), _state_of(row, tag.current_range_id)) for row in ranges],
        fittings=fittings[::-1],
        planned=_planned(ranges, requirements),
        deferral=next(
            (
                row
                for row in deferrals
                if row.approved_at and not row.withdrawn_at and row.until == standing.deferred_until
            ),
            None,
        ),
        waiting=next((row for row in deferrals if not row.approved_at and not row.withdrawn_at), None),
        sheets=sheets,
        events=events[:EVENTS],
        earlier=max(len(events) - EVENTS, 0),
        tests=[(test, happenings.test_mark(test)) for test in list(tests)[::-1][:TESTS]],
        more_tests=len(tests) > TESTS,
    )


def due_words(standing: Standing, state: ScheduleState, today: datetime.date) -> str:
    """The due date in a sentence, with how far it lies from today."""
    due, limit = standing.due_on, standing.grace_until
    if state is ScheduleState.NOT_IN_SERVICE:
        return "so nothing is due"
    if state is ScheduleState.NO_REQUIREMENT or due is None:
        return "no interval is set, so no date follows"
    if state is ScheduleState.NEVER_TESTED:
        return f"as it is fitted and ranged since {due}, {ago(due, today)}"
    if state is ScheduleState.DEFERRED:
        return f"until {standing.deferred_until}; was due {due}"
    if state is ScheduleState.IN_GRACE:
        return f"until {limit}; was due {due}, {ago(due, today)}"
    if state is ScheduleState.OVERDUE and limit is not None:
        return f"since {limit + datetime.timedelta(days=1)}, {ago(limit, today)}; was due {due}"
    if state is ScheduleState.DUE:
        return f"on {due}, {ago(due, today)}"
    return f"until {due}, {ago(due, today)}"


def next_action(page: TagPage, may: May) -> Link | None:
    """The one thing to do next, in words, of those that the person may do."""
    tag = page.tag
    offers: list[tuple[bool, str, str, str, int]] = [
        (tag.out_of_service_on is not None, "edit register", "Put it back into service", "tag-out-of-service", tag.pk),
        (tag.current_fitting_id is None, "fit", "Fit a transmitter", "tag-fit", tag.pk),
        (tag.current_range_id is None, "re-range", "Set the range", "tag-range", tag.pk),
        (page.requirement is None, "set requirement", "Set the requirement", "tag-requirement", tag.pk),
        (
            page.waiting is not None,
            "approve deferral",
            "Approve the deferral",
            "deferral-approve",
            page.waiting.pk if page.waiting else 0,
        ),
    ]
    for wanted, permission, label, name, key in offers:
        if wanted and may(permission):
            return Link(label, reverse(name, args=[key]))
    complete = tag.out_of_service_on is None and tag.current_fitting_id and tag.current_range_id and page.requirement
    if complete and may("test"):
        if page.sheets:
            return Link("Go on with the sheet", reverse("sheet", args=[page.sheets[0].pk]))
        return Link("Start a test", reverse("sheet-open", args=[tag.pk]))
    late = page.state in (ScheduleState.OVERDUE, ScheduleState.IN_GRACE)
    if late and page.waiting is None and may("plan"):
        return Link("Ask for a deferral", reverse("tag-defer", args=[tag.pk]))
    return None


def other_actions(page: TagPage, may: May, taken: Link | None) -> list[Link]:
    """Everything else the person may do here; never twice what is offered as the next thing."""
    tag, fitted = page.tag, page.tag.current_fitting
    offers: list[tuple[bool, str, str, str]] = [
        (fitted is not None, "fit", "Swap the transmitter", "tag-swap"),
        (fitted is not None, "fit", "Remove the transmitter", "tag-remove"),
        (fitted is None, "fit", "Fit a transmitter", "tag-fit"),
        (True, "re-range", "Change the range" if tag.current_range_id else "Set the range", "tag-range"),
        (
            True,
            "set requirement",
            "Change the requirement" if page.requirement else "Set the requirement",
            "tag-requirement",
        ),
        (
            page.standing.phase == Standing.Phase.SCHEDULED and page.waiting is None,
            "plan",
            "Ask for a deferral",
            "tag-defer",
        ),
        (bool(page.sheets), "test", "Start another sheet", "sheet-open"),
        (True, "edit register", "Change the tag", "tag-edit"),
        (
            True,
            "edit register",
            "Put it back into service" if tag.out_of_service_on else "Take it out of service",
            "tag-out-of-service",
        ),
    ]
    links = [
        Link(label, reverse(name, args=[tag.pk]))
        for wanted, permission, label, name in offers
        if wanted and may(permission)
    ]
    return [link for link in links if taken is None or link.url != taken.url]


def _place(tag: Tag) -> list[Fact]:
    facts = [
        Fact("Measures", tag.get_measurand_display()),
        Fact("Area", str(tag.area)),
        Fact("Location", tag.location),
        Fact("Criticality", tag.get_criticality_display()),
        Fact("Trips", tag.trip_function),
        Fact("Craft", tag.craft, note="only in an outage" if tag.outage_only else ""),
        Fact("Hazardous area", tag.hazardous_area),
        Fact("Out of service since", str(tag.out_of_service_on or "")),
    ]
    return [fact for fact in facts if fact.value]


def _process(tag: Tag) -> list[Fact]:
    pressure, temperature = in_words(tag.pressure_unit), in_words(tag.temperature_unit)
    kind = tag.get_pressure_reference_display()
    services = [
        words
        for words, yes in (
            ("oxygen service", tag.oxygen_service),
            ("toxic service", tag.toxic_service),
            ("hot condensing service", tag.condensing_service),
        )
        if yes
    ]
    area = tag.area
    own = bool(tag.ambient_min or tag.ambient_max)
    facts = [
        Fact("Medium", tag.medium, note=", ".join(services)),
        Fact("Operating pressure", as_shown(tag.operating_pressure), f"{pressure} {kind}"),
        Fact("Design pressure", as_shown(tag.design_pressure), f"{pressure} {kind}"),
        Fact("Lowest pressure", as_shown(tag.lowest_pressure), f"{pressure} {kind}"),
        Fact("On one side alone", as_shown(tag.one_side_pressure), f"{pressure} {kind}"),
        Fact("Process temperature", _span_words(tag.process_min, tag.process_max), temperature),
        Fact(
            "Ambient",
            _span_words(tag.ambient_min or area.ambient_min, tag.ambient_max or area.ambient_max),
            temperature if own else in_words(area.temperature_unit),
            note="" if own else "as its area",
        ),
        Fact("Heat tracing up to", as_shown(tag.tracing_temperature), temperature),
    ]
    return [fact for fact in facts if fact.value]


def _device(tag: Tag, today: datetime.date) -> list[Fact]:
    if tag.current_fitting is None:
        return []
    fitting, transmitter = tag.current_fitting, tag.current_fitting.transmitter
    head = transmitter.head
    return [
        Fact("Transmitter", str(transmitter), url=reverse("transmitter", args=[transmitter.pk])),
        Fact("Type", transmitter.type.designation, url=reverse("type", args=[transmitter.type_id])),
        Fact(
            "Measuring head",
            head.code,
            url=reverse("head", args=[head.pk]),
            note=f"{as_shown(head.lrl)} to {as_shown(head.url)} {in_words(head.unit)}, least span {head.least_span}",
        ),
        Fact("Fitted since", fitting.fitted_on.isoformat(), note=ago(fitting.fitted_on, today)),
    ]


def _signal(tag: Tag) -> list[Fact]:
    used = tag.current_range
    facts = [Fact("Range", range_words(used) if used else "")]
    if used is not None and used.transfer == Range.Transfer.SQUARE_ROOT and used.low_cut_percent:
        facts.append(Fact("Low cut", f"{used.low_cut_percent:g}", "% of input", note=used.get_below_cut_display()))
    scale = _span_words(tag.scale_low, tag.scale_high)
    facts += [
        Fact("Square root taken", RootExtraction(tag.root_extraction).label if _may_take_root(tag) else ""),
        Fact("Control-system scale", scale, tag.scale_unit),
        Fact("Loop supply", "" if tag.supply_v is None else f"{tag.supply_v:g}", "V"),
        Fact("Loop resistance", "" if tag.loop_ohm is None else f"{tag.loop_ohm:g}", "Ω"),
    ]
    return [fact for fact in facts if fact.value]


def _may_take_root(tag: Tag) -> bool:
    """Where a square root is out of the question, saying that none is taken is noise."""
    said = tag.root_extraction not in (RootExtraction.NONE, RootExtraction.NOT_RECORDED)
    return said or tag.measurand in (Measurand.FLOW, Measurand.DIFFERENTIAL)


def _span_words(low: str, high: str) -> str:
    if low and high:
        return f"{as_shown(low)} to {as_shown(high)}"
    if high:
        return f"up to {as_shown(high)}"
    return f"from {as_shown(low)}" if low else ""


def _flag_line(flag: Flag, today: datetime.date) -> FlagLine:
    css, tone = SEVERITIES.get(Flag.Severity(flag.severity), ("unknown", "unknown"))
    accepted = flag.accepted_until is not None
    lapsed = flag.accepted_until is not None and flag.accepted_until < today
    return FlagLine(flag, f"{css} accepted" if accepted else css, tone, Flag.Severity(flag.severity).label, lapsed)


def _requirement(row: Requirement, current: int | None) -> RequirementLine:
    counted = (
        f"on a fixed calendar from {row.anchor_on}"
        if row.anchor == Requirement.Anchor.CALENDAR
        else "from the last accepted test"
    )
    return RequirementLine(
        row=row,
        tolerance=tolerance_words(row),
        as_left=tolerance_words(row, as_left=True) if row.as_left_percent or row.as_left_input else "",
        counted=counted,
        state=_state_of(row, current),
    )


def _state_of(row: Range | Requirement, current: int | None) -> str:
    if row.withdrawn_at:
        return "withdrawn"
    if not row.applied_at:
        return "planned"
    return "in force" if current == row.pk else ""


def _planned(ranges: Sequence[Range], requirements: Sequence[Requirement]) -> list[Planned]:
    waiting: list[Planned] = [
        Planned(row.effective_from, f"range {range_words(row)}", reverse("range-withdraw", args=[row.pk]))
        for row in ranges
        if not row.applied_at and not row.withdrawn_at
    ]
    waiting += [
        Planned(
            row.effective_from,
            f"requirement: {tolerance_words(row)}, every {row.interval_months} months",
            reverse("requirement-withdraw", args=[row.pk]),
        )
        for row in requirements
        if not row.applied_at and not row.withdrawn_at
    ]
    return sorted(waiting, key=lambda planned: planned.on)
