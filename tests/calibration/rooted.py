"""Square-root flow tags for tests: 0 to 100 kPa, tested from 10 % of input on, and readings of them."""

from __future__ import annotations

import math

from calibration.recording import ReadingContent, RunContent
from register.models import Area, ReferenceKind, Tag
from tests import cast as people
from tests.calibration.scheduled import day

POINTS = (10, 25, 50, 75, 100, 75, 50, 25, 10)


def flow_tag(area: Area, *, points: str = " ".join(map(str, POINTS)), **requirement: str) -> Tag:
    """A square-root tag with the tolerance given, else 0.5 % of span; `requirement` as `people.make_requirement`."""
    tag = people.make_tag(area)
    people.make_range(tag, "0", "100", "kPa", transfer="square root", reference=ReferenceKind.DIFFERENTIAL)
    people.make_fitting(tag)
    people.make_requirement(tag, point_list=people.make_point_list(tag.plant, points), **requirement)
    return tag


def shifted(kpa: float, points: tuple[int, ...] = POINTS, *, on: str) -> tuple[RunContent, ...]:
    """An as-found run of a transmitter that takes every input for `kpa` more than it is, and is otherwise right."""
    return read({place: 10.0 * math.sqrt(max(point + kpa, 0.0)) for place, point in enumerate(points)}, points, on=on)


def read(output: dict[int, float], points: tuple[int, ...] = POINTS, *, on: str) -> tuple[RunContent, ...]:
    """An as-found run with some readings [% of output span] by their place, the others as they should be."""
    top = points.index(max(points))
    rows = tuple(
        ReadingContent(
            applied=f"{point}",
            measured=f"{4 + 0.16 * output.get(place, 10.0 * math.sqrt(point)):.5f}",
            direction="up" if place <= top else "down",
            nominal_percent=float(point),
        )
        for place, point in enumerate(points)
    )
    return (RunContent(kind="as-found", tested_on=day(on), readings=rows),)
