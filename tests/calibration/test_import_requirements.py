"""Requirements in a file: first ones, others from a day on, or what is there already."""

from __future__ import annotations

import datetime
from collections.abc import Callable

import pytest
from django.core.files.uploadedfile import SimpleUploadedFile
from django.test import Client

from calibration.importing_requirements import import_requirements
from calibration.imports import requirement_columns, requirements
from calibration.models import PointList, Requirement
from calibration.provision import provide_defaults
from register.auditing import Actor
from register.importing import ChangedMeanwhileError
from register.imports import sheet
from register.imports.columns import guessed
from register.models import AuditEntry, Plant, User
from tests.calibration.telling import BEGAN, make_history_tag, required, said, table, told_requirements
from tests.cast import Cast, make_requirement
from tests.register.bringing import make_catalogue, row, text_of

SOUND = {
    "Tag": "PT-2041",
    "Tolerance (% of span)": "0.5",
    "As-left tolerance (%)": "0.25",
    "Interval (months)": "12",
    "Point list": "Five points, up and down",
}


@pytest.fixture
def plant(cast: Cast) -> Plant:
    provide_defaults(by=Actor(None), plant=cast.plant)
    make_history_tag(cast)
    return cast.plant


@pytest.fixture
def engineer(cast: Cast) -> User:
    return cast.engineer


def held(number: str = "PT-2041") -> Requirement:
    rows = Requirement.objects.filter(tag__number=number, applied_at__isnull=False).order_by("-effective_from")
    return rows.select_related("point_list")[0]


def test_a_first_requirement_begins_when_the_transmitter_was_fitted(plant: Plant, engineer: User) -> None:
    proposal = required(plant, engineer, SOUND)
    assert (len(proposal.wanted), proposal.unchanged) == (1, 0)
    new = held()
    assert (new.mpe_form, new.mpe_percent, new.as_left_percent) == ("percent of span", "0.5", "0.25")
    assert (new.interval_months, new.lead_days, new.grace_days) == (12, 42, None)
    assert (new.point_list.points, new.effective_from, new.reason) == ("0 25 50 75 100 75 50 25 0", BEGAN, "new policy")
    assert new.tag.standing.interval_months == 12
    assert AuditEntry.objects.filter(thing_type="calibration.requirement", kind="created").count() == 1


def test_the_same_file_a_second_time_changes_nothing(plant: Plant, engineer: User) -> None:
    line = SOUND | {"Requirement from": "2024-01-01"}
    required(plant, engineer, line)
    entries = AuditEntry.objects.count()
    assert required(plant, engineer, line).unchanged == 1
    assert required(plant, engineer, SOUND | {"Tolerance (% of span)": "0.50"}).unchanged == 1
    assert (Requirement.objects.count(), AuditEntry.objects.count()) == (1, entries)


def test_a_blank_cell_leaves_a_value_and_another_requirement_needs_day_and_reason(plant: Plant, engineer: User) -> None:
    required(plant, engineer, SOUND)
    line = {"Tag": "PT-2041", "Interval (months)": "24", "Tolerance (%)": ""}
    assert said(told_requirements(plant, line)) == [
        (2, "Requirement from", "Say from which day PT-2041 has this requirement; it has another one now.")
    ]
    line["Requirement from"] = "2024-02-01"
    assert said(told_requirements(plant, line)) == [
        (2, "Reason for the requirement", "The requirement of PT-2041 would change: say why.")
    ]
    line["Reason for the requirement"] = "ten good as-founds"
    proposal = required(plant, engineer, line)
    assert [(one.field, one.before, one.after) for one in proposal.changes] == [
        ("Interval (months), from 2024-02-01", "12", "24")
    ]
    now = held()
    assert (now.interval_months, now.mpe_percent, now.reason) == (24, "0.5", "ten good as-founds")
    assert required(plant, engineer, line).unchanged == 1


def test_a_requirement_from_a_day_to_come_is_planned(plant: Plant, engineer: User) -> None:
    required(plant, engineer, SOUND)
    later = plant.today() + datetime.timedelta(days=9)
    line = {"Tag": "PT-2041", "Interval": "6", "Requirement from": str(later), "Reason for the requirement": "drifts"}
    required(plant, engineer, line)
    assert held().interval_months == 12
    assert Requirement.objects.get(applied_at=None).effective_from == later
    assert required(plant, engineer, line).unchanged == 1


def test_a_point_list_is_known_by_its_points_too(plant: Plant, engineer: User) -> None:
    required(plant, engineer, SOUND | {"Point list": "0, 25, 50, 75, 100"})
    assert held().point_list == PointList.objects.get(plant=plant, name="Five points, up only")


@pytest.mark.parametrize(
    ("changed", "column", "words"),
    [
        ({"Tag": "PT-2042"}, "Tag", "There is no tag “PT-2042” in North works. Known are: PT-2041."),
        ({"Tag": ""}, "Tag", "Which tag is meant? Its number is missing."),
        ({"Interval (months)": ""}, "Interval (months)", "PT-2041 has no requirement yet: the interval is missing."),
        ({"Interval (months)": "2.5"}, "Interval (months)", "2.5 is not a whole number: write 3 or 24."),
        ({"Interval (months)": "0"}, "Interval (months)", "0 is below 1, the least that makes sense here."),
        (
            {"Tolerance (% of span)": ""},
            "Tolerance (% of span)",
            "PT-2041 has no requirement yet: its tolerance is missing.",
        ),
        (
            {"Tolerance (% of span)": "0.005"},
            "Tolerance (% of span)",
            "is finer than any test shows. A spreadsheet cell",
        ),
        ({"Tolerance (% of span)": "-1"}, "Tolerance (% of span)", "is not above zero; nothing could be inside it."),
        (
            {"As-left tolerance (%)": "0.75"},
            "As-left tolerance (%)",
            "The as-left tolerance is wider than the tolerance itself.",
        ),
        (
            {"Point list": "Five points"},
            "Point list",
            "There is no point list “Five points” in this plant. Known are: ",
        ),
        ({"Tolerance (input units)": "1"}, "Tolerance stated as", "say how they go together, larger or sum."),
        ({"Counted from": "calendar"}, "Calendar begins", "A fixed calendar needs the day it begins on."),
    ],
)
def test_a_bad_row_is_named_by_line_column_and_reason(
    cast: Cast, plant: Plant, changed: dict[str, str], column: str, words: str
) -> None:
    make_history_tag(cast, "PT-9", "QG-9")
    tag = changed.get("Tag", "x")
    lines = [SOUND | {"Tag": "PT-9"}, SOUND | changed]
    if tag == "PT-2042":
        cast.plant.tags.filter(number="PT-9").update(number="PT-2041b")
        lines[0] = lines[0] | {"Tag": "PT-2041b"}
        words = "There is no tag “PT-2042” in North works. Known are: PT-2041, PT-2041b."
    ((line, named, sentence), *more) = said(told_requirements(plant, *lines))
    assert more == []
    assert (line, column in named) == (3, True)
    assert words in sentence


def test_a_tag_stands_in_a_file_once(plant: Plant) -> None:
    assert said(told_requirements(plant, SOUND, SOUND)) == [(3, "A “Tag”", "PT-2041 stands in line 2 already.")]


def test_a_check_that_has_gone_stale_is_refused(cast: Cast, plant: Plant, engineer: User) -> None:
    read = table(SOUND)
    matching = guessed(read.head, requirement_columns.COLUMNS)
    seen = requirements.propose(plant=plant, table=read, matching=matching, today=plant.today()).digest()
    make_requirement(plant.tags.get(number="PT-2041"))
    with pytest.raises(ChangedMeanwhileError):
        import_requirements(by=Actor(engineer), reason="x", plant=plant, table=read, matching=matching, seen=seen)
    assert Requirement.objects.count() == 1


def test_who_may_not_set_a_requirement_by_hand_changes_none_by_a_file(cast: Cast, plant: Plant) -> None:
    required(plant, cast.administrator, SOUND)
    read = table(
        SOUND | {"Interval (months)": "6", "Requirement from": "2026-01-01", "Reason for the requirement": "drifts"}
    )
    asked = {"plant": plant, "table": read, "matching": guessed(read.head, requirement_columns.COLUMNS)}
    [(_, _, words)] = said(requirements.propose(**asked, today=plant.today(), by=cast.administrator))
    assert words.startswith("PT-2041 has a requirement already: none of your roles here lets you set another.")
    seen = requirements.propose(**asked, today=plant.today(), by=cast.engineer)
    assert said(seen) == []
    with pytest.raises(ChangedMeanwhileError):
        import_requirements(by=Actor(cast.administrator), reason="x", **asked, seen=seen.digest())
    import_requirements(by=Actor(cast.engineer), reason="x", **asked, seen=seen.digest())
    assert Requirement.objects.count() == 2


def test_a_register_that_also_holds_requirements_leads_on_to_their_import(
    cast: Cast, client_as: Callable[[User], Client]
) -> None:
    provide_defaults(by=Actor(None), plant=cast.plant)
    make_catalogue(cast.plant)
    client = client_as(cast.engineer)
    text = text_of(row() | {name: value for name, value in SOUND.items() if name != "Tag"})
    match = client.post("/import/register/", {"file": SimpleUploadedFile("all.csv", text.encode())})["Location"]
    head = text.splitlines()[0].split(",")
    columns = {f"column-{place}": key for key, place in guessed(head, sheet.COLUMNS).items()}
    check = client.post(match, columns)["Location"]
    following = client.post(check.replace("check/", "bring-in/"), {"reason": "first list"})["Location"]
    assert following.startswith("/import/requirements/")
    page = client.get(following).content.decode()
    assert "The file also holds requirements" in page and "5 of them known by their headings" in page
    known = {f"column-{place}": key for key, place in guessed(head, requirement_columns.COLUMNS).items()}
    check = client.post(following, known)["Location"]
    client.post(check.replace("check/", "bring-in/"), {"reason": "first list"})
    assert held().interval_months == 12
