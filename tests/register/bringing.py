"""Files for tests of the register's import: a small catalogue, sound rows, and the short way through the act."""

from __future__ import annotations

import csv
import io
from collections.abc import Mapping, Sequence
from typing import Any

from register.auditing import Actor
from register.importing import import_register
from register.imports.columns import guessed
from register.imports.proposing import Proposal, propose
from register.imports.sheet import COLUMNS
from register.imports.tables import Table, read_table
from register.models import Area, MeasuringHead, Plant, ReferenceKind, Tag, User
from tests.cast import make_area, make_head, make_maker, make_type

#: A sound row: a new tag with its range and a new transmitter.
SOUND: dict[str, str] = {
    "Tag": "PT-2041",
    "Service": "Feed water to drum",
    "Area": "20",
    "Measures": "pressure",
    "Pressure unit": "bar(g)",
    "Operating pressure": "6.0",
    "Design pressure": "10",
    "Lowest pressure": "0",
    "Temperature unit": "°C",
    "Lowest process temperature": "20",
    "Highest process temperature": "60",
    "Loop supply (V)": "24",
    "Loop resistance (ohm)": "250",
    "LRV": "0",
    "URV": "12.50",
    "Range unit": "bar",
    "Range from": "2024-05-06",
    "Maker": "Quillhaven Gauge Works",
    "Type": "Q-gauge",
    "Head": "G16",
    "Serial number": "QG-100",
    "Fitted on": "2024-05-06",
}


def make_catalogue(plant: Plant) -> Area:
    """Area 20, and one maker with a gauge type of two heads and a differential one."""
    maker = make_maker()
    gauge = make_type(maker, designation="Q-gauge")
    differential = make_type(maker, designation="Q-differential", measures=ReferenceKind.DIFFERENTIAL)
    make_head(gauge, code="G16")
    make_head(gauge, code="G40", url="40", least_span="0.4")
    make_head(differential, code="D1", lrl="-1", url="1", least_span="0.01")
    return make_area(plant, "20", name="Boilers")


def row(**changed: str) -> dict[str, str]:
    """The sound row with some cells changed; underscores stand for spaces."""
    return SOUND | {name.replace("_", " "): text for name, text in changed.items()}


def rows(count: int) -> list[dict[str, str]]:
    """Sound rows of as many tags."""
    return [SOUND | {"Tag": f"PT-{3000 + n}", "Serial number": f"QG-{3000 + n}"} for n in range(count)]


def table(*lines: Mapping[str, str], mark: str = ",") -> Table:
    """The rows as a CSV file, read."""
    return read_table(text_of(*lines, mark=mark).encode(), "register.csv")


def text_of(*lines: Mapping[str, str], mark: str = ",") -> str:
    head = list(dict.fromkeys(name for line in lines for name in line))
    held = io.StringIO()
    writer = csv.DictWriter(held, head, delimiter=mark, restval="")
    writer.writeheader()
    writer.writerows(lines)
    return held.getvalue()


def proposed(plant: Plant, *lines: Mapping[str, str], mark: str = ",") -> Proposal:
    """What the rows would do, columns matched by their headings."""
    read = table(*lines, mark=mark)
    return propose(plant=plant, table=read, matching=guessed(read.head, COLUMNS), today=plant.today())


def brought_in(plant: Plant, by: User, *lines: Mapping[str, str], mark: str = ",") -> Proposal:
    """Bring the rows in, as they were checked."""
    return bring_in(plant, by, table(*lines, mark=mark))


def bring_in(plant: Plant, by: User, read: Table, reason: str = "first list") -> Proposal:
    matching = guessed(read.head, COLUMNS)
    seen = propose(plant=plant, table=read, matching=matching, today=plant.today())
    assert list(seen.complaints) == []
    return import_register(by=Actor(by), reason=reason, plant=plant, table=read, matching=matching, seen=seen.digest())


def told(proposal: Proposal) -> list[tuple[int, str, str]]:
    """Complaints as line, column and words."""
    return [(one.line, one.column, one.words) for one in proposal.complaints]


def tag(plant: Plant, number: str) -> Tag:
    related = ("current_range", "current_fitting__transmitter__head", "area")
    return Tag.objects.select_related(*related).get(plant=plant, number=number)


def values(thing: Any, names: Sequence[str]) -> dict[str, Any]:
    return {name: getattr(thing, name) for name in names}


def head(code: str) -> MeasuringHead:
    return MeasuringHead.objects.get(code=code)
