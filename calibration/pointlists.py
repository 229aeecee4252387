"""Acts on point lists; open sheets and records keep their own copy of the points they began with."""

from __future__ import annotations

from django.core.exceptions import ValidationError
from django.db import transaction
from django.utils import timezone

from calibration.models import PointList
from register.auditing import Act, Actor, snapshot
from register.models import Plant
from register.storing import store

FIELDS = ("name", "points", "for_square_root", "withdrawn_at")


@transaction.atomic
def create_point_list(
    *, by: Actor, plant: Plant, name: str, points: str, for_square_root: bool, reason: str
) -> PointList:
    made = PointList(plant=plant, name=name, points=_tidy(points), for_square_root=for_square_root)
    store(made)
    act = Act(by=by, reason=reason)
    act.created(made, plant=plant)
    act.write()
    return made


@transaction.atomic
def edit_point_list(
    *, by: Actor, point_list: PointList, name: str, points: str, for_square_root: bool, reason: str
) -> PointList:
    held = _offered(point_list)
    before = snapshot(held, FIELDS)
    held.name, held.points, held.for_square_root = name, _tidy(points), for_square_root
    store(held)
    _trail(by, held, before, reason)
    return held


@transaction.atomic
def withdraw_point_list(*, by: Actor, point_list: PointList, reason: str) -> PointList:
    """Take a list out of the choices; requirements that name it keep it.

    Raises
    ------
    ValidationError
        It was withdrawn already; such a list is not edited either.
    """
    held = _offered(point_list)
    before = snapshot(held, FIELDS)
    held.withdrawn_at = timezone.now()
    held.save()
    _trail(by, held, before, reason)
    return held


def _offered(point_list: PointList) -> PointList:
    """The list with its row locked; refuses one that was withdrawn."""
    held = PointList.objects.select_for_update().get(pk=point_list.pk)
    if held.withdrawn_at is not None:
        raise ValidationError(f"“{held.name}” was withdrawn already: its reason stands in the audit trail.")
    return held


def _tidy(points: str) -> str:
    """The text form that `metrology.pointlist` writes, so that equal lists are equal text."""
    from calibration.metrology.pointlist import PointList as Points

    return Points.parse(points).text


def _trail(by: Actor, held: PointList, before: dict[str, object], reason: str) -> None:
    act = Act(by=by, reason=reason)
    act.changed(held, plant=held.plant_id, before=before, after=snapshot(held, FIELDS))
    act.write()
