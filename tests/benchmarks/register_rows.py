"""Tags with their ranges, transmitters, fittings, requirements and deferrals, loaded in bulk."""

from __future__ import annotations

import datetime
from itertools import repeat
from typing import Final

import numpy as np
from django.db import transaction
from numpy.typing import NDArray

from calibration.models import Deferral, Requirement
from register.models import Area, Fitting, Plant, Range, Tag, Transmitter, User
from tests.benchmarks.invented import INTERVAL, KINDS, Built, Plan
from tests.benchmarks.loading import load

#: Everything of a tag has the key of the tag beyond that of the patterns.
KEY: Final = 1000
#: Days over which tags were commissioned.
YEARS: Final = 3 * 365


@transaction.atomic
def load_register(plant: Plant, areas: list[Area], kinds: list[Built], plan: Plan, tests_each: int) -> None:
    """Load all tags of a plan and what belongs to them; every row of a tag has the same key as the tag."""
    today = plant.today()
    # Before the first test of any tag; not on one day, as no plant was built on one.
    first = np.datetime64(today) - (INTERVAL * (tests_each + 1) + 1000) - np.arange(len(plan.kind)) % YEARS
    point_list = plant.point_lists.order_by("pk").first()
    assert point_list is not None
    for number, built in enumerate(kinds):
        prefix = KINDS[number][1]
        for chosen in np.array_split(np.flatnonzero(plan.kind == number), 1 + len(plan.kind) // 20000):
            _load_kind(plant, areas, built, plan, chosen, prefix, point_list.pk, first[chosen].astype(str).tolist())
    _defer(plant, plan, today)


def _load_kind(
    plant: Plant,
    areas: list[Area],
    built: Built,
    plan: Plan,
    chosen: NDArray[np.int64],
    prefix: str,
    point_list_id: int,
    days: list[str],
) -> None:
    keys = (chosen + KEY).tolist()
    fitted = plan.state[chosen] != "nothing fitted"
    at = [key if there else None for key, there in zip(keys, fitted.tolist(), strict=True)]
    out = np.where(plan.state[chosen] == "out of service", str(plant.today() - datetime.timedelta(90)), "")
    load(
        built.tag,
        len(keys),
        id=keys,
        plant_id=repeat(plant.pk, len(keys)),
        area_id=[areas[place].pk for place in plan.area[chosen].tolist()],
        number=[f"{prefix}-{key:06d}" for key in keys],
        service=[plan.services[place] for place in chosen.tolist()],
        criticality=plan.criticality[chosen].tolist(),
        out_of_service_on=[text or None for text in out.tolist()],
        current_range_id=keys,
        current_fitting_id=at,
    )
    load(built.range, len(keys), id=keys, tag_id=keys, effective_from=days)
    load(
        built.transmitter,
        len(keys),
        id=keys,
        plant_id=repeat(plant.pk, len(keys)),
        serial=[f"Q{key:07d}" for key in keys],
        whereabouts=np.where(fitted, Transmitter.Whereabouts.FITTED, Transmitter.Whereabouts.STORES).tolist(),
    )
    fittings = [key for key in at if key is not None]
    fitted_on = [day for day, there in zip(days, fitted.tolist(), strict=True) if there]
    like = Fitting(fitted_reason="commissioned")
    load(like, len(fittings), id=fittings, tag_id=fittings, transmitter_id=fittings, fitted_on=fitted_on)
    is_required = plan.state[chosen] != "no requirement"
    required = (chosen[is_required] + KEY).tolist()
    load(
        built.requirement,
        len(required),
        id=required,
        tag_id=required,
        point_list_id=repeat(point_list_id, len(required)),
        effective_from=[day for day, needed in zip(days, is_required.tolist(), strict=True) if needed],
    )


def _defer(plant: Plant, plan: Plan, today: datetime.date) -> None:
    """Approved deferrals that run on for one to three months."""
    keys = (np.flatnonzero(plan.state == "deferred") + KEY).tolist()
    at = datetime.datetime.combine(today, datetime.time(), tzinfo=datetime.UTC)
    person = User.objects.get(username="planner")
    like = Deferral(
        risk_statement="small",
        mitigation="watched by the operators",
        requested_by=person,
        requested_at=at,
        approved_by=User.objects.get(username="engineer"),
        approved_at=at,
    )
    until = [str(today + datetime.timedelta(1 + key % 90)) for key in keys]
    load(like, len(keys), id=keys, tag_id=keys, until=until)


LOADED: Final = (Tag, Range, Transmitter, Fitting, Requirement, Deferral)
