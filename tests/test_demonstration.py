"""The demonstration plants: made byte for byte, loaded whole, showing everything that they are there to show."""

from __future__ import annotations

import datetime
import json
import os
import statistics
import subprocess
import sys
from collections.abc import Iterable, Iterator
from io import StringIO
from typing import Any

import pytest
from django.core.management import call_command
from django.db import transaction
from django.db.models import Count, Q
from pytest_django import DjangoDbBlocker

from calibration.demonstrating import Loaded, NotEmptyError, load
from calibration.importing_requirements import import_requirements
from calibration.imports import requirement_columns, test_columns
from calibration.imports.past_tests import propose as propose_tests
from calibration.imports.requirements import propose as propose_requirements
from calibration.metrology.due import plan_next
from calibration.models import (
    Certificate,
    ChainHead,
    Record,
    Requirement,
    RunFigures,
    Sheet,
    Signature,
    Standard,
    StandardUse,
    Standing,
    Test,
)
from calibration.transcribing import import_tests
from fixtures.demonstration.equipment import FOUND_HIGH, KNOCKED
from fixtures.demonstration.generate import DATA, generate
from fixtures.demonstration.people import JETTY, PASSWORD, PEOPLE, WORKS
from fixtures.demonstration.plan import AS_OF
from register.auditing import Actor
from register.engineering.findings import CHECKS
from register.importing import import_register
from register.imports import sheet
from register.imports.columns import guessed
from register.imports.proposing import Proposal, propose
from register.imports.tables import read_table
from register.models import (
    AuditEntry,
    Fitting,
    Flag,
    Intervention,
    Maker,
    MeasuringHead,
    Range,
    Role,
    Tag,
    Transmitter,
    TransmitterType,
    User,
)

# Without the mark pytest-django makes no test database, whatever fixtures ask for.
pytestmark = pytest.mark.django_db
FOUND = "as-found"
EXAMPLES = DATA.parents[1] / "examples"


@pytest.fixture(scope="module")
def loaded(django_db_setup: None, django_db_blocker: DjangoDbBlocker) -> Iterator[Loaded]:
    """Both plants, loaded once for all tests here and taken back at the end."""
    with django_db_blocker.unblock(), transaction.atomic():
        yield load()
        transaction.set_rollback(True)


@pytest.fixture(scope="module")
def works(loaded: Loaded) -> Any:
    return loaded.plants[WORKS]


def moved(day: datetime.date, loaded: Loaded) -> datetime.date:
    """A day of the generated data as it was loaded."""
    return day + (loaded.plants[WORKS].today() - AS_OF)


def known(values: Iterable[float | None]) -> list[float]:
    """The figures, all of which can be said."""
    figures = list(values)
    assert all(figure is not None for figure in figures)
    return [figure for figure in figures if figure is not None]


def test_the_generator_makes_the_same_bytes_again() -> None:
    assert {name: text.encode() for name, text in generate().items()} == {
        path.name: path.read_bytes() for path in DATA.iterdir()
    }


def test_the_bytes_do_not_hang_on_the_order_of_sets_in_one_process() -> None:
    command = [sys.executable, "-m", "fixtures.demonstration.generate", "--check"]
    for seed in ("1", "2"):
        assert subprocess.run(command, env=os.environ | {"PYTHONHASHSEED": seed}, check=False).returncode == 0


def test_the_data_stay_small() -> None:
    assert sum(path.stat().st_size for path in DATA.iterdir()) < 3_000_000


def test_the_site_has_the_promised_size(works: Any) -> None:
    tags = Tag.objects.filter(plant=works)
    assert works.areas.count() == 5
    assert 115 <= tags.count() <= 125
    assert {number.partition("-")[0] for number in tags.values_list("number", flat=True)} == {"PT", "PDT", "FT", "LT"}
    assert 130 <= Transmitter.objects.filter(plant=works).count() <= 145
    assert (Maker.objects.count(), TransmitterType.objects.count()) == (5, 10)
    assert 28 <= MeasuringHead.objects.count() <= 32


def test_the_history_spans_eight_years_and_ends_today(works: Any) -> None:
    days = list(Test.objects.filter(plant=works).values_list("tested_on", flat=True))
    today = works.today()
    assert 850 <= len(days) <= 1200
    assert today - datetime.timedelta(days=30) < max(days) <= today
    assert min(days) < today - datetime.timedelta(days=7.8 * 365)


@pytest.mark.parametrize("check", CHECKS)
def test_every_check_of_limits_finds_a_violation_somewhere(loaded: Loaded, check: str) -> None:
    assert Flag.objects.filter(check_key=check, severity=Flag.Severity.VIOLATION, closed_at=None).exists()


def test_most_tags_are_free_of_findings(works: Any) -> None:
    flagged = Flag.objects.filter(tag__plant=works, closed_at=None).values("tag").distinct().count()
    assert 20 <= flagged <= 40


def test_there_are_cautions_missing_data_and_accepted_flags(works: Any) -> None:
    still_open = Flag.objects.filter(tag__plant=works, closed_at=None)
    assert still_open.filter(severity=Flag.Severity.CAUTION).count() >= 5
    assert still_open.filter(severity=Flag.Severity.CANNOT_CHECK, tag__number="LT-4108").count() >= 4
    accepted = still_open.filter(accepted_until__gt=works.today()).values_list("tag__number", "check_key")
    assert set(accepted) == {("PT-3104", "range_upper"), ("PT-5112", "ambient_high")}


def test_every_tag_is_in_the_state_it_was_made_for(loaded: Loaded) -> None:
    site = json.loads((DATA / "site.json").read_text(encoding="utf-8"))
    planned = {(row["plant"], row["number"]): row["state"].replace("out", "not in service") for row in site["tags"]}
    found = {
        (row.plant.code, row.number): row.state(row.plant.today()).value
        for row in Standing.objects.select_related("plant")
    }
    assert found == planned
    assert set(found.values()) == {
        "not in service",
        "never tested",
        "deferred",
        "overdue",
        "in grace",
        "due",
        "not due",
    }


def test_the_states_are_the_same_on_whatever_day_it_is_loaded(loaded: Loaded) -> None:
    # Months differ in length: moved by whole days, a due date comes out a little earlier or later.
    scheduled = Standing.objects.filter(phase=Standing.Phase.SCHEDULED).select_related("plant")
    assert len(scheduled) > 100
    for row in scheduled:
        today, last, deferred = row.plant.today(), row.last_accepted_on, row.deferred_until
        asked = Requirement.objects.filter(tag=row.tag_id).order_by("effective_from").last()
        assert last is not None
        assert asked is not None
        for days in range(0, 4 * 366, 5):
            later = datetime.timedelta(days)
            plan = plan_next(
                last + later,
                asked.interval_months,
                calendar_anchor=asked.anchor_on + later if asked.anchor_on else None,
                grace_days=asked.grace_days,
                lead_days=asked.lead_days,
            )
            state = plan.state(today + later, deferred_until=deferred + later if deferred else None)
            assert state.value == row.state(today).value, (row.number, days)


def test_a_swapped_transmitter_was_never_tested_where_it_is(works: Any) -> None:
    standing = Standing.objects.get(plant=works, number="PT-3108")
    fittings = list(Fitting.objects.filter(tag__number="PT-3108").order_by("fitted_on"))
    assert len(fittings) == 2
    assert fittings[0].removed_on == fittings[1].fitted_on == standing.due_on
    assert Test.objects.filter(fitting=fittings[0]).count() >= 6
    assert not Test.objects.filter(fitting=fittings[1]).exists()


def test_a_transmitter_moves_from_tag_to_tag_with_its_history(works: Any) -> None:
    moved_one = Transmitter.objects.annotate(tags=Count("fittings__tag", distinct=True)).get(plant=works, tags=2)
    numbers = moved_one.fittings.order_by("fitted_on").values_list("tag__number", flat=True)
    assert list(numbers) == ["FT-2105", "FT-1107"]
    assert moved_one.interventions.get().kind == Intervention.Kind.NEW_HEAD
    assert set(Test.objects.filter(transmitter=moved_one).values_list("tag__number", flat=True)) == set(numbers)


def test_transmitters_lie_in_every_place(works: Any) -> None:
    assert set(Transmitter.objects.filter(plant=works).values_list("whereabouts", flat=True)) == set(
        Transmitter.Whereabouts.values
    )


def test_interventions_of_every_kind_but_other_happened(works: Any) -> None:
    kinds = set(Intervention.objects.filter(transmitter__plant=works).values_list("kind", flat=True))
    assert kinds == set(Intervention.Kind.values) - {"other"}


def test_ranges_were_changed_mistaken_and_planned(works: Any) -> None:
    ranges = Range.objects.filter(tag__plant=works)
    assert ranges.filter(tag__number="FT-1105", applied_at__isnull=False).count() == 2
    assert ranges.get(withdrawn_at__isnull=False).tag.number == "FT-1108"
    planned = ranges.get(applied_at=None)
    assert str(planned.tag) == "LT-4107"
    assert planned.effective_from > works.today()


def test_requirements_come_in_every_form_and_anchor(works: Any) -> None:
    requirements = Requirement.objects.filter(tag__plant=works)
    assert len(set(requirements.values_list("mpe_form", flat=True))) == 5
    assert set(requirements.values_list("anchor", flat=True)) == {"last test", "calendar"}
    assert requirements.filter(tag__number="FT-4123").count() == 2


def test_tests_end_in_every_way(works: Any) -> None:
    tests = Test.objects.filter(plant=works)
    assert set(tests.values_list("state", flat=True)) == set(Test.State.values)
    assert str(tests.get(outcome=Test.Outcome.NOT_TESTED).tag) == "LT-4110"
    not_put_right = tests.filter(as_found_verdict="fail", accepted=False)
    assert set(not_put_right.values_list("tag__number", flat=True)) == {"FT-3117", "PT-4115"}
    share = tests.filter(as_found_verdict="fail").count() / tests.count()
    assert 0.01 < share < 0.10
    assert tests.filter(tag=None).count() == 2


def test_a_record_was_sent_back_and_corrected(works: Any) -> None:
    second = Record.objects.get(plant=works, version=2)
    assert second.correction_reason
    assert second.supersedes is not None
    assert set(second.supersedes.signatures.values_list("meaning", flat=True)) == {"performed", "sent back"}
    assert set(second.signatures.values_list("meaning", flat=True)) == {"performed", "reviewed"}
    assert second.test.accepted
    assert (second.test.as_found_verdict, second.test.state) == ("pass", "reviewed")


def test_one_sheet_is_still_open(works: Any) -> None:
    sheet = Sheet.objects.get(plant=works)
    assert (sheet.tag and sheet.tag.number, sheet.stage) == ("PT-3106", Sheet.Stage.AS_FOUND)
    assert sheet.entries.filter(field__endswith=".measured").count() == 5


def test_standards_are_certified_whenever_they_are_used(loaded: Loaded) -> None:
    uses = StandardUse.objects.select_related("run", "certificate", "exception_by").all()
    lapsed = []
    for use in uses:
        assert use.certificate is not None
        assert use.certificate.calibrated_on <= use.run.tested_on
        if use.certificate.valid_until < use.run.tested_on:
            lapsed.append(use)
    assert [use.run.record.test.tag and use.run.record.test.tag.number for use in lapsed] == ["PT-2114"]
    assert lapsed[0].exception
    assert lapsed[0].exception_by == loaded.people["engineer"]


def test_one_standard_in_use_has_lapsed_and_the_others_are_in_every_state(works: Any) -> None:
    lapsed = [
        standard.name
        for standard in Standard.objects.filter(plant=works, state=Standard.State.IN_USE)
        if not standard.certificates.filter(valid_until__gte=works.today()).exists()
    ]
    assert lapsed == ["PS-05"]
    assert set(Standard.objects.filter(plant=works).values_list("state", flat=True)) == set(Standard.State.values)
    assert Certificate.objects.filter(standard__plant=works).count() > 80


def test_the_standard_that_was_off_shifts_all_tests_made_with_it(loaded: Loaded) -> None:
    # A standard 0.3 % of reading too high makes a right transmitter read 1/1.003 − 1 = −0.299 % of reading.
    period = {"tested_on__gte": moved(KNOCKED, loaded), "tested_on__lt": moved(FOUND_HIGH, loaded)}

    def mean_shift(name: str) -> float:
        shifts = RunFigures.objects.filter(kind=FOUND, run__standards__standard__name=name, **period)
        return statistics.mean(known(shifts.values_list("span_shift", flat=True)))

    assert mean_shift("PS-02") == pytest.approx(-0.299, abs=0.1)
    assert mean_shift("PS-01") == pytest.approx(0.0, abs=0.1)
    found_out = Certificate.objects.get(standard__name="PS-02", calibrated_on=moved(FOUND_HIGH, loaded))
    assert "0.30 %" in found_out.remarks


def figures(tag: str, name: str, kind: str = FOUND) -> list[float]:
    """One figure of the runs of a tag that count, oldest first."""
    runs = RunFigures.objects.filter(tag__number=tag, kind=kind, current=True).order_by("tested_on")
    return known(runs.values_list(name, flat=True))


def test_the_unit_that_sticks_opens_more_from_year_to_year(loaded: Loaded) -> None:
    opening = figures("FT-3114", "hysteresis")
    assert opening[-1] > 2 * opening[0]
    fitting = Fitting.objects.get(tag__number="FT-3114", removed_on=None)
    others = RunFigures.objects.filter(kind=FOUND, transmitter__type=fitting.transmitter.type)
    others = others.exclude(transmitter=fitting.transmitter)
    assert opening[-1] > max(known(others.values_list("hysteresis", flat=True)))
    assert figures("FT-3117", "hysteresis")[-1] > 0.5


def test_an_overrange_leaves_a_step_in_zero(loaded: Loaded) -> None:
    zeros = figures("PT-1116", "zero_shift")
    step = max(range(len(zeros)), key=lambda place: zeros[place])
    assert zeros[step] > 0.6
    assert max(abs(zero) for place, zero in enumerate(zeros) if place != step) < 0.5


def test_a_plugged_impulse_line_shows_as_an_opening_that_a_flush_closes(loaded: Loaded) -> None:
    found, left = figures("FT-2102", "hysteresis"), figures("FT-2102", "hysteresis", "as-left")
    assert max(found) > 1.0
    assert max(left) < 0.2
    flushed = Intervention.objects.get(kind=Intervention.Kind.FLUSH)
    assert flushed.tag is not None
    assert flushed.tag.number == "FT-2102"


def test_overheating_takes_span_away_for_good(loaded: Loaded) -> None:
    assert min(figures("FT-2104", "span_shift")) < -1.0
    first = Fitting.objects.filter(tag__number="FT-2104").order_by("fitted_on")[0]
    assert first.transmitter.whereabouts == Transmitter.Whereabouts.SCRAPPED


def test_a_loop_without_supply_stops_short_of_full_scale(loaded: Loaded) -> None:
    last = Test.objects.filter(tag__number="PT-4115").order_by("-tested_on")[0]
    assert last.current_record is not None
    readings = last.current_record.runs.get(kind=FOUND).readings
    highest = max(readings.values_list("measured_ma", flat=True))
    assert highest == pytest.approx((18.5 - 12.0) / 336 * 1000, abs=0.05)


def changes(tag: str, name: str) -> list[tuple[float, float]]:
    """Between each as-found and the run before it: how much warmer it was [K], and by how much the figure grew."""
    runs = RunFigures.objects.filter(tag__number=tag, current=True).order_by("tested_on", "kind")
    values = known(runs.values_list(name, flat=True))
    ambients = [float(text) for text in runs.values_list("run__ambient", flat=True)]
    return [
        (ambients[place] - ambients[place - 1], values[place] - values[place - 1])
        for place, kind in enumerate(runs.values_list("kind", flat=True))
        if place and kind == FOUND
    ]


def test_warmth_moves_the_zero_from_season_to_season(loaded: Loaded) -> None:
    warmer, higher = zip(*changes("PT-5102", "zero_shift"), strict=True)
    assert statistics.correlation(warmer, higher) > 0.8


def test_a_drift_adds_up_over_the_years(loaded: Loaded) -> None:
    # Between a run and the next as-found nothing but drift and chance moves the span: their sum is the drift.
    assert sum(grown for _, grown in changes("FT-5104", "span_shift")) < -0.3


def test_the_people_are_marked_and_everybody_can_do_his_part(loaded: Loaded) -> None:
    assert User.objects.filter(is_demonstration=True).count() == len(PEOPLE) == User.objects.count()
    held = set(loaded.people["auditor"].memberships.values_list("plant__code", flat=True))
    assert held == {WORKS, JETTY}
    roles = {role for person in PEOPLE for plant, role in person.roles if plant == WORKS}
    assert roles == set(Role.values)
    assert all(user.check_password(PASSWORD) for user in loaded.people.values())


def test_nobody_reviewed_what_he_tested(loaded: Loaded) -> None:
    both = Record.objects.filter(
        Q(signatures__meaning=Signature.Meaning.REVIEWED, signatures__person__in=[loaded.people["technician"]])
        | Q(signatures__meaning=Signature.Meaning.REVIEWED, signatures__person__in=[loaded.people["technician2"]])
    )
    assert not both.exists()


def test_the_plants_are_apart(loaded: Loaded) -> None:
    jetty = loaded.plants[JETTY]
    assert Tag.objects.filter(plant=jetty).count() == 5
    assert jetty.records.count() == jetty.tests.count() > 20
    assert not loaded.people["planner"].memberships.filter(plant=jetty).exists()
    assert (
        ChainHead.objects.get(plant=jetty).position
        == jetty.records.count() + Signature.objects.filter(plant=jetty).count()
    )


def test_every_thing_loaded_has_its_entry_in_the_trail(loaded: Loaded) -> None:
    for model in (Tag, Transmitter, Fitting, Range, Requirement, Record, Standard, Certificate, User):
        created = AuditEntry.objects.filter(kind="created", thing_type=model._meta.label_lower)
        assert created.values("thing_id").distinct().count() == model._default_manager.count(), model


def test_the_chain_and_every_verdict_agree(loaded: Loaded) -> None:
    said = StringIO()
    call_command("verify_records", stdout=said)
    assert "Every hash and every verdict agrees." in said.getvalue()


def test_what_is_kept_agrees_with_the_full_history(loaded: Loaded) -> None:
    call_command("recompute", "--check", stdout=StringIO())


def proposal(name: str, plant: Any) -> tuple[Proposal, dict[str, Any]]:
    """What an example file would do to the register of a plant, and its columns matched by their headings alone."""
    table = read_table((EXAMPLES / name).read_bytes(), name)
    terms = {"plant": plant, "table": table, "matching": guessed(table.head, sheet.COLUMNS)}
    return propose(**terms, today=plant.today()), terms


def test_the_example_register_can_be_brought_in_and_changes_nothing_a_second_time(works: Any) -> None:
    with transaction.atomic():
        found, terms = proposal("register.csv", works)
        assert not found.complaints
        assert found.count("new") >= 5
        import_register(by=Actor(None), reason="example", seen=found.digest(), **terms)
        assert not proposal("register.csv", works)[0].touched
        transaction.set_rollback(True)


def test_the_example_with_mistakes_is_refused_row_by_row(works: Any) -> None:
    found, _ = proposal("register_with_mistakes.csv", works)
    assert {complaint.line for complaint in found.complaints} == set(range(3, 11))
    assert found.bad_rows == 8


def test_requirements_and_past_tests_follow_the_example_register(works: Any) -> None:
    by = Actor(None)
    with transaction.atomic():
        found, terms = proposal("register.csv", works)
        import_register(by=by, reason="example", seen=found.digest(), **terms)
        for name, propose_kind, act, columns, count in (
            ("requirements.csv", propose_requirements, import_requirements, requirement_columns.COLUMNS, 10),
            ("past_tests.csv", propose_tests, import_tests, test_columns.COLUMNS, 7),
            ("past_tests_semicolons.csv", propose_tests, import_tests, test_columns.COLUMNS, 0),
        ):
            table = read_table((EXAMPLES / name).read_bytes(), name)
            matching = guessed(table.head, columns)
            assert len(matching) == len(table.head), name
            seen = propose_kind(plant=works, table=table, matching=matching, today=works.today())
            assert list(seen.complaints) == [], name
            act(by=by, reason="example", plant=works, table=table, matching=matching, seen=seen.digest())
            again = propose_kind(plant=works, table=table, matching=matching, today=works.today())
            assert again.unchanged == (count or 7), name
        assert Test.objects.filter(tag__number="PT-6012", state=Test.State.TRANSCRIBED).count() == 2
        assert Tag.objects.get(plant=works, number="PT-6012").standing.interval_months == 12
        transaction.set_rollback(True)


def test_a_second_loading_is_refused(loaded: Loaded) -> None:
    with pytest.raises(NotEmptyError, match="in the database already"):
        load()
