"""What the page of a transmitter shows: its life over all tags, read in a fixed number of queries."""

from __future__ import annotations

import datetime
from collections.abc import Sequence
from dataclasses import dataclass

from django.urls import reverse
from django.utils.safestring import SafeString

from calibration.contexts import happenings, rows
from calibration.contexts.happenings import Event
from calibration.contexts.tag import EVENTS, TESTS, Fact, Link, May
from calibration.models import Sheet, Standing, Test
from calibration.sheet_fields import ENDED
from register.figures import ago
from register.models import Fitting, Intervention, Transmitter
from register.models.typed import as_shown, in_words

Whereabouts = Transmitter.Whereabouts
_TONES = {Whereabouts.REPAIR: "near", Whereabouts.SCRAPPED: "quiet", Whereabouts.STORES: "ok", Whereabouts.FITTED: "ok"}


@dataclass(frozen=True)
class TransmitterPage:
    """Everything about one transmitter but its drift."""

    transmitter: Transmitter
    tone: str
    where: str
    facts: list[Fact]
    fitting: Fitting | None
    standing: Standing | None
    state: SafeString | None
    strip: SafeString | None
    fittings: list[Fitting]
    interventions: list[Intervention]
    sheets: list[Sheet]
    events: list[Event]
    earlier: int
    tests: list[tuple[Test, SafeString | None]]
    more_tests: bool


def page_of(transmitter: Transmitter, tests: Sequence[Test], today: datetime.date) -> TransmitterPage:
    """Read and word the page; `tests` are those of the transmitter in order of time."""
    fittings = list(transmitter.fittings.select_related("tag__area").order_by("fitted_on", "pk"))
    interventions = list(
        transmitter.interventions.select_related("tag", "head_before", "head_after", "person", "transmitter")
    )
    fitting = next((row for row in reversed(fittings) if row.removed_on is None), None)
    standing = Standing.objects.filter(pk=fitting.tag_id).first() if fitting else None
    sheets = list(
        Sheet.objects.filter(transmitter=transmitter).exclude(stage__in=ENDED).select_related("opened_by", "tag")
    )
    events = happenings.newest_first(
        happenings.of_tests(tests, at_tag=False),
        happenings.of_fittings_of_transmitter(fittings),
        happenings.of_interventions(interventions, with_serial=False),
    )
    return TransmitterPage(
        transmitter=transmitter,
        tone=_TONES[Whereabouts(transmitter.whereabouts)],
        where=_where(transmitter, fitting, today),
        facts=_facts(transmitter),
        fitting=fitting,
        standing=standing,
        state=rows.state_word(standing.state(today)) if standing else None,
        strip=rows.strip_cell(standing.strip, standing.range_text) if standing else None,
        fittings=fittings[::-1],
        interventions=interventions,
        sheets=sheets,
        events=events[:EVENTS],
        earlier=max(len(events) - EVENTS, 0),
        tests=[(test, happenings.test_mark(test)) for test in list(tests)[::-1][:TESTS]],
        more_tests=len(tests) > TESTS,
    )


def next_action(page: TransmitterPage, may: May) -> Link | None:
    """The one thing to do next: a test where it is fitted, or on the bench."""
    if not may("test") or page.transmitter.whereabouts == Whereabouts.SCRAPPED:
        return None
    if page.sheets:
        return Link("Go on with the sheet", reverse("sheet", args=[page.sheets[0].pk]))
    if page.fitting is not None:
        return Link(f"Start a test at {page.fitting.tag}", reverse("sheet-open", args=[page.fitting.tag_id]))
    return Link("Test it on the bench", reverse("sheet-bench", args=[page.transmitter.pk]))


def other_actions(page: TransmitterPage, may: May) -> list[Link]:
    transmitter, fitted = page.transmitter, page.fitting is not None
    alive = transmitter.whereabouts != Whereabouts.SCRAPPED
    offers = [
        (alive, "fit", "Note an intervention", "intervention-new"),
        (alive, "edit register", "Change the measuring head", "transmitter-head"),
        (not fitted, "fit", "Move it", "transmitter-move"),
        (True, "edit register", "Change what is written about it", "transmitter-edit"),
    ]
    links = [
        Link(label, reverse(name, args=[transmitter.pk]))
        for wanted, permission, label, name in offers
        if wanted and may(permission)
    ]
    if page.fitting is not None and may("fit"):
        links.insert(0, Link(f"Remove it from {page.fitting.tag}", reverse("tag-remove", args=[page.fitting.tag_id])))
    return links


def _where(transmitter: Transmitter, fitting: Fitting | None, today: datetime.date) -> str:
    if fitting is not None:
        return f"at {fitting.tag} since {fitting.fitted_on}, {ago(fitting.fitted_on, today)}"
    return ""


def _facts(transmitter: Transmitter) -> list[Fact]:
    head, kind = transmitter.head, transmitter.type
    facts = [
        Fact("Maker", str(transmitter.maker)),
        Fact("Serial number", transmitter.serial),
        Fact("Type", kind.designation, url=reverse("type", args=[kind.pk]), note=kind.get_measures_display()),
        Fact("Measuring head", head.code, url=reverse("head", args=[head.pk])),
        Fact("LRL to URL", f"{as_shown(head.lrl)} to {as_shown(head.url)}", in_words(head.unit)),
        Fact("Least span", as_shown(head.least_span), in_words(head.unit)),
        Fact("Fill fluid", transmitter.fill_fluid),
        Fact("Seals", transmitter.seals),
        Fact("Wetted material", transmitter.wetted_material),
        Fact("Made on", str(transmitter.made_on or "")),
        Fact("Remarks", transmitter.remarks),
    ]
    return [fact for fact in facts if fact.value]
