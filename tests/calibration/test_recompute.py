"""What lists read agrees with the full history, and `recompute --check` says where it does not."""

from __future__ import annotations

import datetime
from io import StringIO
from typing import Any

import pytest
from django.core.management import CommandError, call_command

from calibration import scheduling
from calibration.models import RunFigures, SearchWord, Standing
from register.models import Tag
from tests import cast as people
from tests.calibration.scheduled import a_test, day


@pytest.fixture
def stored(tag: Tag) -> Tag:
    a_test(tag, day("2025-03-09"))
    a_test(tag, day("2026-03-09"))
    return tag


def recompute(*options: str) -> str:
    out = StringIO()
    call_command("recompute", *options, stdout=out, stderr=out)
    return out.getvalue()


def complaints(*options: str) -> str:
    out = StringIO()
    with pytest.raises(CommandError) as refused:
        call_command("recompute", "--check", *options, stdout=out, stderr=out)
    return out.getvalue() + str(refused.value)


def test_what_acts_have_stored_agrees_with_the_history(stored: Tag) -> None:
    assert "agrees with the history" in recompute("--check", "--figures")


@pytest.mark.parametrize(
    ("column", "value"),
    [
        ("due_on", datetime.date(2099, 1, 1)),
        ("phase", Standing.Phase.NEVER_TESTED),
        ("last_verdict", "fail"),
        ("as_found_ratio", 0.123),
        ("strip", [0.1, 0.2]),
        ("flag_rank", 0),
        ("service", "something else"),
    ],
)
def test_a_standing_that_was_tampered_with_is_named_and_put_right(stored: Tag, column: str, value: Any) -> None:
    Standing.objects.filter(pk=stored.pk).update(**{column: value})
    said = complaints()
    assert f"north PT-100: {column} is" in said
    assert "1 differences" in said
    recompute()
    assert "agrees with the history" in recompute("--check")


def test_a_standing_that_is_missing_is_named(stored: Tag) -> None:
    Standing.objects.filter(pk=stored.pk).delete()
    assert "north PT-100: no standing is kept" in complaints()
    recompute()
    assert Standing.objects.filter(pk=stored.pk).exists()


def test_search_words_that_differ_are_named(stored: Tag) -> None:
    SearchWord.objects.filter(tag=stored, word="cooling").delete()
    assert "the search words differ (cooling)" in complaints()


def test_figures_of_an_older_method_are_judged_anew_and_others_only_when_asked(stored: Tag) -> None:
    newest = RunFigures.objects.order_by("-tested_on").first()
    assert newest is not None
    RunFigures.objects.filter(pk=newest.pk).update(worst=9.0)
    assert "agrees with the history" in recompute("--check")
    assert "worst is 9.0" in complaints("--figures")
    RunFigures.objects.filter(pk=newest.pk).update(method_version=0)
    assert "method_version is 0" in complaints()
    recompute()
    newest.refresh_from_db()
    assert newest.worst != 9.0
    assert "agrees with the history" in recompute("--check", "--figures")


def test_a_plant_that_does_not_exist_is_refused(cast: people.Cast) -> None:
    with pytest.raises(CommandError, match="no plant"):
        recompute("--plant", "nowhere")


def test_the_number_of_queries_does_not_grow_with_the_tags(tag: Tag, django_assert_max_num_queries: Any) -> None:
    tags = [people.make_ready_tag(tag.area) for _ in range(40)]
    scheduling.refresh([tag.pk])
    with django_assert_max_num_queries(24):
        scheduling.refresh([row.pk for row in tags])
