"""Files for tests of the imports of requirements and past tests: a plant with a tag, sound rows, the short way."""

from __future__ import annotations

import csv
import datetime
import io
from collections.abc import Mapping, Sequence

from calibration.importing_requirements import import_requirements
from calibration.imports import past_tests, requirement_columns, requirements, test_columns
from calibration.transcribing import import_tests
from register.auditing import Actor
from register.imports.columns import guessed
from register.imports.tables import Table, read_table
from register.models import Plant, Tag, User
from tests.cast import Cast, make_area, make_fitting, make_meter, make_range, make_standard, make_tag, make_transmitter

Line = dict[str, str]
BEGAN = datetime.date(2021, 3, 1)


def make_history_tag(cast: Cast, number: str = "PT-2041", serial: str = "QG-100") -> Tag:
    """A gauge tag with 0 to 10 bar since March 2021, when its transmitter was fitted."""
    area = cast.plant.areas.first() or make_area(cast.plant, "20")
    tag = make_tag(area, number)
    make_range(tag, effective_from=BEGAN)
    make_fitting(tag, make_transmitter(cast.plant, serial=serial), fitted_on=BEGAN)
    return tag


def make_standards(plant: Plant) -> None:
    make_standard(plant, name="PS-01")
    make_meter(plant, name="MA-01")


def readings(*, day: str = "2023-05-06", shift: float = 0.0, **more: str) -> list[Line]:
    """Nine readings of one run, each off by `shift` mA; more columns are given with underscores for spaces."""
    points = (0, 25, 50, 75, 100, 75, 50, 25, 0)
    return [
        {
            "Tag": "PT-2041",
            "Test date": day,
            "Nominal (%)": str(point),
            "Applied": f"{point / 10:.3f}",
            "Measured": f"{4 + 0.16 * point + shift:.3f}",
        }
        | {name.replace("_", " "): text for name, text in more.items()}
        for point in points
    ]


def as_left(lines: Sequence[Line]) -> list[Line]:
    return [line | {"Run": "as-left"} for line in lines]


def table(*lines: Mapping[str, str], mark: str = ",") -> Table:
    head = list(dict.fromkeys(name for line in lines for name in line))
    held = io.StringIO()
    writer = csv.DictWriter(held, head, delimiter=mark, restval="")
    writer.writeheader()
    writer.writerows(lines)
    return read_table(held.getvalue().encode(), "tests.csv")


def told_tests(plant: Plant, *lines: Mapping[str, str], mark: str = ",") -> past_tests.Proposal:
    read = table(*lines, mark=mark)
    matching = guessed(read.head, test_columns.COLUMNS)
    assert len(matching) == len(read.head)
    return past_tests.propose(plant=plant, table=read, matching=matching, today=plant.today())


def transcribed(plant: Plant, by: User, *lines: Mapping[str, str], mark: str = ",") -> past_tests.Proposal:
    seen = told_tests(plant, *lines, mark=mark)
    assert list(seen.complaints) == []
    read = table(*lines, mark=mark)
    matching = guessed(read.head, test_columns.COLUMNS)
    return import_tests(
        by=Actor(by), reason="old binders", plant=plant, table=read, matching=matching, seen=seen.digest()
    )


def told_requirements(plant: Plant, *lines: Mapping[str, str]) -> requirements.Proposal:
    read = table(*lines)
    matching = guessed(read.head, requirement_columns.COLUMNS)
    return requirements.propose(plant=plant, table=read, matching=matching, today=plant.today())


def required(plant: Plant, by: User, *lines: Mapping[str, str]) -> requirements.Proposal:
    seen = told_requirements(plant, *lines)
    assert list(seen.complaints) == []
    read = table(*lines)
    matching = guessed(read.head, requirement_columns.COLUMNS)
    return import_requirements(
        by=Actor(by), reason="new policy", plant=plant, table=read, matching=matching, seen=seen.digest()
    )


def said(proposal: past_tests.Proposal | requirements.Proposal) -> list[tuple[int, str, str]]:
    return [(one.line, one.column, one.words) for one in proposal.complaints]
