"""Flags recomputed for many tags at once are the findings of each tag."""

from __future__ import annotations

import random

from django.db import connection
from django.test.utils import CaptureQueriesContext

from register.checking import findings
from register.flagging import recompute
from register.models import AuditEntry, Flag, ReferenceKind, Tag
from tests.cast import (
    Cast,
    make_area,
    make_fitting,
    make_head,
    make_range,
    make_tag,
    make_transmitter,
    make_type,
)


def some_tags(cast: Cast, count: int) -> list[Tag]:
    """Tags of all sorts: sound, beyond a limit, without a transmitter, a range, a temperature or a pressure."""
    chance = random.Random("flags of many tags")
    areas = [make_area(cast.plant), make_area(cast.plant, ambient_min="", ambient_max="")]
    kinds = [
        make_type(measures=measures, body_rating=rating, capsule_max=capsule)
        for measures in (ReferenceKind.GAUGE, ReferenceKind.ABSOLUTE, ReferenceKind.DIFFERENTIAL)
        for rating in ([], [["-40", "160"], ["38", "160"], ["120", "110"]])
        for capsule in ("", "120")
    ]
    heads = [make_head(kind, greatest_span=greatest) for kind in kinds for greatest in ("", "12")]
    tags = []
    for _ in range(count):
        tag = make_tag(
            chance.choice(areas),
            operating_pressure=chance.choice(["", "6", "130"]),
            design_pressure=chance.choice(["", "10", "120", "152"]),
            lowest_pressure=chance.choice(["", "-0.99", "-1", "0"]),
            one_side_pressure=chance.choice(["", "", "152.5", "170"]),
            pressure_reference=chance.choice(["gauge", "absolute"]),
            process_min=chance.choice(["", "-50", "20"]),
            process_max=chance.choice(["", "60", "117", "130"]),
            ambient_min=chance.choice(["", "-38", "-60"]),
            ambient_max=chance.choice(["", "60", "90"]),
            tracing_temperature=chance.choice(["", "", "100", "118", "160"]),
            supply_v=chance.choice([None, 9.0, 24.0]),
            loop_ohm=chance.choice([None, 250.0, 580.0, 700.0]),
            root_extraction=chance.choice(["", "none", "transmitter", "control system"]),
            measurand=chance.choice(["flow", "pressure"]),
        )
        if chance.random() < 0.8:
            make_range(
                tag,
                chance.choice(["0", "-2", "12"]),
                chance.choice(["0.1", "10", "16", "20"]),
                reference=chance.choice(list(ReferenceKind)),
                transfer=chance.choice(["linear", "linear", "square root"]),
            )
        if chance.random() < 0.8:
            make_fitting(tag, make_transmitter(cast.plant, chance.choice(heads)))
        tags.append(tag)
    return tags


def told(tag: Tag) -> dict[str, tuple[int, str, float | None]]:
    """What the checks of one tag alone say, clear ones left out."""
    return {
        found.check: (found.severity.rank, found.sentence, found.margin)
        for found in findings(tag)
        if found.severity.rank
    }


def kept(tag: Tag) -> dict[str, tuple[int, str, float | None]]:
    return {
        flag.check_key: (flag.severity, flag.sentence, flag.margin)
        for flag in Flag.objects.filter(tag=tag, closed_at=None)
    }


def test_every_tag_gets_the_flags_of_its_own_findings(cast: Cast) -> None:
    tags = some_tags(cast, 120)
    recompute([tag.pk for tag in tags])
    assert {tag.pk: kept(tag) for tag in tags} == {tag.pk: told(Tag.objects.get(pk=tag.pk)) for tag in tags}
    severities = set(Flag.objects.values_list("severity", flat=True))
    assert severities == {Flag.Severity.VIOLATION, Flag.Severity.CAUTION, Flag.Severity.CANNOT_CHECK}


def test_a_flag_closes_when_its_finding_clears_among_many(cast: Cast) -> None:
    tags = some_tags(cast, 20)
    recompute([tag.pk for tag in tags])
    tag = make_tag(make_area(cast.plant))
    make_range(tag, "0", "17")
    make_fitting(tag)
    recompute([tag.pk, *(other.pk for other in tags)])
    assert kept(tag)["range_upper"][0] == Flag.Severity.VIOLATION
    make_range(tag, "0", "10", effective_from=tag.plant.today())
    recompute([tag.pk, *(other.pk for other in tags)])
    assert "range_upper" not in kept(tag)
    flag = Flag.objects.get(tag=tag, check_key="range_upper")
    assert flag.severity == Flag.Severity.CLEAR and flag.closed_at is not None


def test_recomputing_again_leaves_no_entry(cast: Cast) -> None:
    tags = some_tags(cast, 30)
    recompute([tag.pk for tag in tags])
    before = AuditEntry.objects.count()
    recompute([tag.pk for tag in tags])
    assert AuditEntry.objects.count() == before


def test_the_number_of_queries_does_not_grow_with_the_tags(cast: Cast) -> None:
    counts = []
    for count in (5, 60):
        tags = some_tags(cast, count)
        with CaptureQueriesContext(connection) as captured:
            recompute([tag.pk for tag in tags])
        counts.append(len(captured))
    assert counts[0] == counts[1]
