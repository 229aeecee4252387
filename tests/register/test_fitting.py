"""Fitting, removing and swapping: one transmitter at one tag, in the order of the days."""

from __future__ import annotations

import datetime

import pytest
from django.core.exceptions import ValidationError

from register import fitting
from register.auditing import Actor
from register.models import Fitting, Tag, Transmitter
from tests import cast as people

MAY, JUNE = datetime.date(2025, 5, 12), datetime.date(2025, 6, 16)


@pytest.fixture
def by(cast: people.Cast) -> Actor:
    return Actor(cast.technician)


@pytest.fixture
def tag(cast: people.Cast) -> Tag:
    return people.make_tag(people.make_area(cast.plant), "PT-100")


def refusal(error: pytest.ExceptionInfo[ValidationError], field: str) -> str:
    return str(error.value.message_dict[field][0])


def test_a_fitted_transmitter_is_the_tags_current_one(cast: people.Cast, by: Actor, tag: Tag) -> None:
    transmitter = people.make_transmitter(cast.plant)
    row = fitting.fit(by=by, reason="commissioned", tag=tag, transmitter=transmitter, on=MAY)
    tag.refresh_from_db()
    transmitter.refresh_from_db()
    assert (tag.current_fitting, row.fitted_on, row.fitted_by) == (row, MAY, cast.technician)
    assert transmitter.whereabouts == Transmitter.Whereabouts.FITTED


def test_a_tag_that_has_one_refuses_a_second_and_says_swap(cast: people.Cast, by: Actor, tag: Tag) -> None:
    people.make_fitting(tag)
    spare = people.make_transmitter(cast.plant)
    with pytest.raises(ValidationError) as refused:
        fitting.fit(by=by, reason="?", tag=tag, transmitter=spare, on=MAY)
    assert "swap it instead" in refusal(refused, "transmitter")


def test_a_transmitter_fitted_elsewhere_is_refused_and_the_place_is_named(
    cast: people.Cast, by: Actor, tag: Tag
) -> None:
    elsewhere = people.make_tag(tag.area, "PT-200")
    transmitter = people.make_fitting(elsewhere).transmitter
    with pytest.raises(ValidationError) as refused:
        fitting.fit(by=by, reason="?", tag=tag, transmitter=transmitter, on=MAY)
    assert "is fitted at PT-200" in refusal(refused, "transmitter")


def test_a_scrapped_transmitter_is_refused(cast: people.Cast, by: Actor, tag: Tag) -> None:
    transmitter = people.make_transmitter(cast.plant, whereabouts="scrapped")
    with pytest.raises(ValidationError) as refused:
        fitting.fit(by=by, reason="?", tag=tag, transmitter=transmitter, on=MAY)
    assert "scrapped" in refusal(refused, "transmitter")


def test_a_transmitter_of_another_plant_is_refused(cast: people.Cast, by: Actor, tag: Tag) -> None:
    transmitter = people.make_transmitter(cast.other_plant)
    with pytest.raises(ValidationError) as refused:
        fitting.fit(by=by, reason="?", tag=tag, transmitter=transmitter, on=MAY)
    assert "another plant" in refusal(refused, "transmitter")


def test_a_day_to_come_is_refused(cast: people.Cast, by: Actor, tag: Tag) -> None:
    tomorrow = cast.plant.today() + datetime.timedelta(days=1)
    with pytest.raises(ValidationError) as refused:
        fitting.fit(by=by, reason="?", tag=tag, transmitter=people.make_transmitter(cast.plant), on=tomorrow)
    assert f"{tomorrow} is still to come" in refusal(refused, "on")


def test_a_fitting_cannot_begin_inside_an_earlier_one_at_the_tag(cast: people.Cast, by: Actor, tag: Tag) -> None:
    people.make_fitting(tag, removed_on=JUNE)
    with pytest.raises(ValidationError) as refused:
        fitting.fit(by=by, reason="?", tag=tag, transmitter=people.make_transmitter(cast.plant), on=MAY)
    assert str(JUNE) in refusal(refused, "on")


def test_a_fitting_cannot_begin_inside_an_earlier_one_of_the_transmitter(
    cast: people.Cast, by: Actor, tag: Tag
) -> None:
    transmitter = people.make_fitting(people.make_tag(tag.area, "PT-200"), removed_on=JUNE).transmitter
    with pytest.raises(ValidationError) as refused:
        fitting.fit(by=by, reason="?", tag=tag, transmitter=transmitter, on=MAY)
    assert "at PT-200" in refusal(refused, "on")


def test_it_may_be_removed_and_fitted_again_on_one_day(cast: people.Cast, by: Actor, tag: Tag) -> None:
    transmitter = people.make_fitting(tag, fitted_on=MAY).transmitter
    fitting.remove(by=by, reason="cleaned", tag=tag, on=JUNE)
    fitting.fit(by=by, reason="cleaned", tag=tag, transmitter=transmitter, on=JUNE)
    assert tag.fittings.count() == 2
    assert tag.fittings.get(removed_on=None).fitted_on == JUNE


def test_it_cannot_be_removed_before_it_was_fitted(cast: people.Cast, by: Actor, tag: Tag) -> None:
    people.make_fitting(tag, fitted_on=JUNE)
    with pytest.raises(ValidationError) as refused:
        fitting.remove(by=by, reason="?", tag=tag, on=MAY)
    assert f"fitted on {JUNE}" in refusal(refused, "on")


def test_a_removed_transmitter_goes_where_it_is_said_to_go(cast: people.Cast, by: Actor, tag: Tag) -> None:
    transmitter = people.make_fitting(tag).transmitter
    fitting.remove(by=by, reason="leaks", tag=tag, on=JUNE, whereabouts="repair")
    transmitter.refresh_from_db()
    tag.refresh_from_db()
    assert transmitter.whereabouts == Transmitter.Whereabouts.REPAIR
    assert tag.current_fitting is None


def test_a_swap_keeps_both_histories_whole(cast: people.Cast, by: Actor, tag: Tag) -> None:
    old = people.make_fitting(tag, fitted_on=MAY).transmitter
    new = people.make_transmitter(cast.plant, old.head)
    fitting.swap(by=by, reason="drifts", tag=tag, transmitter=new, on=JUNE)
    periods = (
        Fitting.objects.filter(tag=tag).order_by("fitted_on").values_list("transmitter", "fitted_on", "removed_on")
    )
    assert list(periods) == [(old.pk, MAY, JUNE), (new.pk, JUNE, None)]


def test_a_refused_swap_leaves_the_old_one_fitted(cast: people.Cast, by: Actor, tag: Tag) -> None:
    people.make_fitting(tag, fitted_on=MAY)
    scrapped = people.make_transmitter(cast.plant, whereabouts="scrapped")
    with pytest.raises(ValidationError):
        fitting.swap(by=by, reason="drifts", tag=tag, transmitter=scrapped, on=JUNE)
    assert tag.fittings.get().removed_on is None


def test_a_transmitter_is_not_swapped_for_itself(cast: people.Cast, by: Actor, tag: Tag) -> None:
    transmitter = people.make_fitting(tag).transmitter
    with pytest.raises(ValidationError) as refused:
        fitting.swap(by=by, reason="?", tag=tag, transmitter=transmitter, on=JUNE)
    assert "the one fitted now" in refusal(refused, "transmitter")
