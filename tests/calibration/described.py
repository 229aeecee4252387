"""Descriptions of tests, for tests that need records without entering a sheet."""

from __future__ import annotations

import datetime
from typing import Any

from calibration.recording import ReadingContent, RecordContent, RunContent, SignatureContent
from calibration.records.basis import Basis
from register.models import Tag, User

NINE = (0, 25, 50, 75, 100, 75, 50, 25, 0)
NOON = datetime.datetime(2026, 3, 9, 12, tzinfo=datetime.UTC)


def readings(errors: tuple[float, ...] = (0.0,) * 9, points: tuple[int, ...] = NINE) -> tuple[ReadingContent, ...]:
    """Readings of a 0 to 10 bar range with the given errors in % of span."""
    top = points.index(max(points))
    return tuple(
        ReadingContent(
            applied=f"{point / 10:g}",
            measured=f"{4 + 0.16 * (point + error):.4f}",
            direction="up" if place <= top else "down",
            nominal_percent=float(point),
        )
        for place, (point, error) in enumerate(zip(points, errors, strict=True))
    )


def described(
    tag: Tag,
    *,
    found: tuple[float, ...] = (0.0,) * 9,
    left: tuple[float, ...] | None = None,
    on: datetime.date = datetime.date(2026, 3, 9),
    signer: User | None = None,
    **values: Any,
) -> RecordContent:
    """A test of a ready tag; with `left` it was adjusted; signed where a signer is given, else transcribed."""
    assert tag.current_fitting and tag.current_range
    requirement = tag.requirements.select_related("point_list").get()
    runs = [RunContent(kind="as-found", tested_on=on, readings=readings(found))]
    if left is not None:
        runs.append(RunContent(kind="as-left", tested_on=on, readings=readings(left)))
    signatures = (
        (SignatureContent("performed", signer.pk, signer.printed_name, NOON, tag.plant.time_zone),) if signer else ()
    )
    transmitter = tag.current_fitting.transmitter
    settings: dict[str, Any] = {
        "plant_id": tag.plant_id,
        "tag_id": tag.pk,
        "transmitter_id": transmitter.pk,
        "fitting_id": tag.current_fitting.pk,
        "tested_on": on,
        "adjusted": left is not None,
        "basis": Basis.of(used=tag.current_range, requirement=requirement, head=transmitter.head),
        "runs": tuple(runs),
        "made_at": NOON,
        "made_by_id": signer.pk if signer else None,
        "transcribed": signer is None,
        "signatures": signatures,
    } | values
    return RecordContent(**settings)
