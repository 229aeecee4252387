"""After a swap, a refit, a repair, a new head or another range a tag is never tested until a test proves it."""

from __future__ import annotations

import pytest

from calibration import scheduling
from calibration.models import ScheduleState, Standing, Test
from calibration.queries import drifting
from calibration.recording import ReadingContent, RunContent
from register import fitting, intervening, reranging
from register.auditing import Actor
from register.models import Intervention, Tag, Transmitter
from tests import cast as people
from tests.calibration.described import NINE
from tests.calibration.scheduled import a_test, day, state_of

TODAY = day("2026-06-01")
RANGE = {"lrv": "0", "urv": "16", "unit": "bar", "reference": "gauge", "transfer": "linear", "below_cut": "linear"}


@pytest.fixture
def engineer(cast: people.Cast) -> Actor:
    return Actor(cast.engineer)


@pytest.fixture
def scheduled(tag: Tag) -> Tag:
    """PT-100 with a test in tolerance on 9 March 2026."""
    a_test(tag, day("2025-03-09"))
    a_test(tag, day("2026-03-09"))
    assert state_of(tag, TODAY) == ScheduleState.NOT_DUE
    return Tag.objects.get(pk=tag.pk)


def up_to(urv: float) -> tuple[ReadingContent, ...]:
    """Readings without error on a range from 0 bar."""
    return tuple(
        ReadingContent(
            applied=f"{urv * point / 100:g}",
            measured=f"{4 + 0.16 * point:.2f}",
            direction=way,
            nominal_percent=float(point),
        )
        for point, way in zip(NINE, ["up"] * 5 + ["down"] * 4, strict=True)
    )


def fitted(tag: Tag) -> Transmitter:
    held = Tag.objects.select_related("current_fitting__transmitter").get(pk=tag.pk).current_fitting
    assert held is not None
    return held.transmitter


def test_a_swap_is_never_tested_while_both_histories_stay_whole(
    scheduled: Tag, engineer: Actor, cast: people.Cast
) -> None:
    first, second = fitted(scheduled), people.make_transmitter(cast.plant)
    fitting.swap(by=engineer, reason="sticks", tag=scheduled, transmitter=second, on=day("2026-04-01"))
    standing = Standing.objects.get(pk=scheduled.pk)
    assert standing.state(TODAY) == ScheduleState.NEVER_TESTED
    assert (standing.due_on, standing.last_verdict, standing.transmitter_id) == (day("2026-04-01"), "", second.pk)
    assert Test.objects.filter(transmitter=first, tag=scheduled).count() == 2
    assert len(drifting.of_transmitter(first).pairing.pairs) == 1
    a_test(scheduled, day("2026-05-01"))
    assert state_of(scheduled, TODAY) == ScheduleState.NOT_DUE


def test_the_same_transmitter_back_from_stores_must_prove_itself(scheduled: Tag, engineer: Actor) -> None:
    same = fitted(scheduled)
    fitting.remove(by=engineer, reason="outage", tag=scheduled, on=day("2026-04-01"))
    assert state_of(scheduled, TODAY) == ScheduleState.NOT_IN_SERVICE
    fitting.fit(by=engineer, reason="back", tag=scheduled, transmitter=same, on=day("2026-04-20"))
    assert state_of(scheduled, TODAY) == ScheduleState.NEVER_TESTED


@pytest.mark.parametrize("kind", ["repair", "overheat"])
def test_a_repair_starts_the_clock_again_and_an_overheating_alone_does_not(
    scheduled: Tag, engineer: Actor, kind: str
) -> None:
    intervening.record_intervention(
        by=engineer, reason="noted", transmitter=fitted(scheduled), kind=kind, done_on=day("2026-04-01")
    )
    expected = ScheduleState.NEVER_TESTED if kind == "repair" else ScheduleState.NOT_DUE
    assert state_of(scheduled, TODAY) == expected


def test_a_repair_that_was_noted_by_mistake_and_withdrawn_gives_the_old_date_back(
    scheduled: Tag, engineer: Actor
) -> None:
    done = intervening.record_intervention(
        by=engineer, reason="?", transmitter=fitted(scheduled), kind="repair", done_on=day("2026-04-01")
    )
    intervening.withdraw_intervention(by=engineer, reason="another one", intervention=done)
    assert state_of(scheduled, TODAY) == ScheduleState.NOT_DUE


def test_a_new_head_starts_the_clock_again(scheduled: Tag, engineer: Actor) -> None:
    device = fitted(scheduled)
    head = people.make_head(device.type, url="40", code="bigger")
    intervening.change_head(by=engineer, reason="range grows", transmitter=device, head=head, on=day("2026-04-01"))
    assert Intervention.objects.get().kind == Intervention.Kind.NEW_HEAD
    assert state_of(scheduled, TODAY) == ScheduleState.NEVER_TESTED


def test_another_range_starts_the_clock_again_and_a_planned_one_does_not_yet(scheduled: Tag, engineer: Actor) -> None:
    reranging.set_range(
        by=engineer,
        reason="load",
        tag=scheduled,
        values=RANGE,
        effective_from=scheduled.plant.today().replace(year=2099),
    )
    assert state_of(scheduled, TODAY) == ScheduleState.NOT_DUE
    reranging.set_range(by=engineer, reason="load", tag=scheduled, values=RANGE, effective_from=day("2026-04-01"))
    assert state_of(scheduled, TODAY) == ScheduleState.NEVER_TESTED
    on = day("2026-04-01")
    a_test(scheduled, on, runs=(RunContent(kind="as-found", tested_on=on, readings=up_to(16)),))
    assert state_of(scheduled, TODAY) == ScheduleState.NOT_DUE, "tested in the new range on the day it began"


def test_the_same_range_in_another_unit_is_no_re_range(scheduled: Tag, engineer: Actor) -> None:
    reranging.set_range(
        by=engineer,
        reason="unit of the data sheet",
        tag=scheduled,
        values=RANGE | {"lrv": "0", "urv": "1000", "unit": "kPa"},
        effective_from=day("2026-04-01"),
    )
    assert state_of(scheduled, TODAY) == ScheduleState.NOT_DUE


def test_a_test_in_the_old_range_on_the_day_of_the_new_one_does_not_count(tag: Tag) -> None:
    a_test(tag, day("2025-03-09"))
    a_test(tag, day("2026-03-09"))
    people.make_range(tag, "0", "16", effective_from=day("2026-03-09"))
    scheduling.refresh([tag.pk])
    assert state_of(tag, TODAY) == ScheduleState.NEVER_TESTED
