"""After a swap, a refit, a repair, a new head or another range a tag is never tested until a test proves it."""

from __future__ import annotations

import datetime
from dataclasses import replace
from zoneinfo import ZoneInfo

import pytest
import time_machine

from calibration import scheduling, signing
from calibration.models import ScheduleState, Sheet, Standing, Test
from calibration.queries import drifting
from calibration.recording import ReadingContent, RunContent
from calibration.records.basis import Basis
from register import editing, fitting, intervening, reranging
from register.auditing import Actor
from register.models import Intervention, Range, Tag, Transmitter
from tests import cast as people
from tests.calibration import at_work
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


def at(text: str) -> time_machine.travel:
    """A moment of the plant's day."""
    return time_machine.travel(datetime.datetime.fromisoformat(text).replace(tzinfo=ZoneInfo("UTC")), tick=False)


def test_a_sheet_of_the_old_range_read_after_the_new_one_began_does_not_prove_the_new_one(
    scheduled: Tag, engineer: Actor, cast: people.Cast
) -> None:
    with at("2026-04-06T08:00"):
        device = at_work.opened(scheduled, cast.technician)
    with at("2026-04-07T08:00"):
        reranging.set_range(
            by=engineer, reason="load", tag=scheduled, values=RANGE, effective_from=scheduled.plant.today()
        )
    with at("2026-04-08T08:00"):
        at_work.to_signature(device)
        told = [change.token for change in signing.changes_since(Sheet.objects.get(pk=device.sheet.pk))]
        record = signing.sign(by=device.by, sheet_id=device.sheet.pk, acknowledged=told)
    assert record.test.accepted
    standing = Standing.objects.get(pk=scheduled.pk)
    assert standing.state(TODAY) == ScheduleState.NEVER_TESTED
    assert (standing.due_on, standing.last_accepted_on) == (day("2026-04-07"), None)


def test_a_test_in_another_range_does_not_hide_the_one_before_it(scheduled: Tag) -> None:
    """A past test brought in with LRV and URV of its own."""
    a_test(scheduled, day("2026-05-01"), basis=_basis(scheduled, urv="16"))
    standing = Standing.objects.get(pk=scheduled.pk)
    assert (standing.last_accepted_on, standing.last_tested_on) == (day("2026-03-09"), day("2026-05-01"))


@pytest.mark.parametrize("on", ["2026-04-01", "2026-04-02"])
def test_a_test_of_the_head_that_was_taken_out_does_not_prove_the_new_one(
    scheduled: Tag, engineer: Actor, on: str
) -> None:
    device, basis = fitted(scheduled), _basis(scheduled)
    head = people.make_head(device.type, url="40", code="bigger")
    intervening.change_head(by=engineer, reason="range grows", transmitter=device, head=head, on=day("2026-04-01"))
    a_test(scheduled, day(on), basis=basis)
    assert state_of(scheduled, TODAY) == ScheduleState.NEVER_TESTED
    a_test(scheduled, day(on))
    assert state_of(scheduled, TODAY) == ScheduleState.NOT_DUE, "tested with the new head"


def test_a_head_that_was_only_written_down_wrongly_takes_no_test_away(scheduled: Tag, engineer: Actor) -> None:
    device = fitted(scheduled)
    head = people.make_head(device.type, url="40", code="bigger")
    editing.correct_head(by=engineer, reason="read off again", transmitter=device, head=head)
    assert state_of(scheduled, TODAY) == ScheduleState.NOT_DUE


@pytest.mark.parametrize(
    "other", [{"reference": "absolute"}, {"transfer": "square root"}, {"low_cut_percent": 2.0}, {"below_cut": "zero"}]
)
def test_every_setting_of_the_range_is_compared(tag: Tag, other: dict[str, str | float]) -> None:
    root = "low_cut_percent" in other or "below_cut" in other
    transfer = "square root" if root else "linear"
    Range.objects.filter(tag=tag).update(reference="differential", transfer=transfer)
    tag = Tag.objects.get(pk=tag.pk)
    first, second = day("2026-03-09"), day("2026-03-10")
    a_test(tag, first, runs=_without_error(first, transfer))
    assert state_of(tag, TODAY) == ScheduleState.NOT_DUE
    runs = _without_error(second, str(other.get("transfer", transfer)))
    assert a_test(tag, second, basis=_basis(tag, **other), runs=runs).test.accepted
    assert Standing.objects.get(pk=tag.pk).last_accepted_on == first


def _without_error(on: datetime.date, transfer: str) -> tuple[RunContent, ...]:
    taken = up_to(10)
    if transfer == "square root":
        taken = tuple(replace(one, measured=f"{4 + 16 * (float(one.applied) / 10) ** 0.5:.6f}") for one in taken)
    return (RunContent(kind="as-found", tested_on=on, readings=taken),)


def _basis(tag: Tag, **other: str | float) -> Basis:
    """The basis of a test of a tag as it is now, save for what is named."""
    held = Tag.objects.select_related("current_range", "current_fitting__transmitter__head").get(pk=tag.pk)
    assert held.current_range is not None and held.current_fitting is not None
    requirement = held.requirements.select_related("point_list").get()
    basis = Basis.of(used=held.current_range, requirement=requirement, head=held.current_fitting.transmitter.head)
    return replace(basis, **other)  # type: ignore[arg-type]
