"""The as-found run is evidence: it is closed before anything is adjusted, and stays closed."""

from __future__ import annotations

import pytest
from django.core.exceptions import ValidationError

from calibration import sheets
from calibration.models import Entry, Sheet
from tests.calibration.at_work import Device, run_texts, to_adjustment, to_as_found


def test_no_as_left_reading_is_taken_before_as_found_is_closed(tablet: Device) -> None:
    to_as_found(tablet)
    stored = tablet.send(tablet.entry("as-left.1.measured", "4.00"))
    assert stored.refused[0][1] == (
        "As-left, reading 1, measured: the as-left run opens after the as-found run is closed and the adjustment is "
        "recorded."
    )
    assert not Entry.objects.filter(field__startswith="as-left").exists()


def test_no_adjustment_is_recorded_before_as_found_is_closed(tablet: Device) -> None:
    to_as_found(tablet)
    assert tablet.send(tablet.entry("adjust.choice", "adjusted")).refused
    with pytest.raises(ValidationError, match="stands at “as-found”"):
        sheets.record_adjustment(by=tablet.by, sheet_id=tablet.sheet.pk)


def test_no_as_found_reading_is_taken_after_it_is_closed(tablet: Device) -> None:
    to_adjustment(tablet)
    stored = tablet.send(tablet.entry("as-found.3.measured", "12.00"))
    assert "the as-found run is closed and can no longer be changed" in stored.refused[0][1]


def test_no_as_left_reading_is_taken_where_nothing_was_adjusted(tablet: Device) -> None:
    to_adjustment(tablet)
    tablet.type({"adjust.choice": "not adjusted"})
    sheets.record_adjustment(by=tablet.by, sheet_id=tablet.sheet.pk)
    assert tablet.send(tablet.entry("as-left.1.measured", "4.00")).refused


def test_an_adjustment_says_what_was_adjusted(tablet: Device) -> None:
    to_adjustment(tablet)
    tablet.type({"adjust.choice": "adjusted"})
    with pytest.raises(ValidationError) as refused:
        sheets.record_adjustment(by=tablet.by, sheet_id=tablet.sheet.pk)
    assert set(refused.value.message_dict) == {"adjust.log"}


def test_missing_points_are_named_before_a_run_is_closed_without_them(tablet: Device) -> None:
    to_as_found(tablet)
    texts = run_texts("as-found")
    tablet.type({name: text for name, text in texts.items() if not name.startswith(("as-found.4", "as-found.9"))})
    with pytest.raises(ValidationError) as refused:
        sheets.close_as_found(by=tablet.by, sheet_id=tablet.sheet.pk)
    assert refused.value.messages == ["2 of 9 points have no reading: 75 % up, 0 % down."]
    assert Sheet.objects.get().as_found_closed_at is None
    assert sheets.close_as_found(by=tablet.by, sheet_id=tablet.sheet.pk, with_gaps=True).stage == "adjust"


def test_a_run_with_a_text_that_is_no_number_is_not_closed(tablet: Device) -> None:
    to_as_found(tablet)
    tablet.type(run_texts("as-found") | {"as-found.5.measured": "20,o1"})
    with pytest.raises(ValidationError) as refused:
        sheets.close_as_found(by=tablet.by, sheet_id=tablet.sheet.pk, with_gaps=True)
    assert "“20,o1” is not a number" in refused.value.message_dict["as-found.5.measured"][0]


def test_a_repeated_reading_counts_beside_the_first(tablet: Device) -> None:
    to_as_found(tablet)
    tablet.type(run_texts("as-found") | {"as-found.3-1.applied": "5", "as-found.3-1.measured": "12.2"})
    sheets.close_as_found(by=tablet.by, sheet_id=tablet.sheet.pk)
    from calibration.queries.drafts import Draft

    run = Draft(Sheet.objects.get()).runs["as-found"]
    assert [row.key for row in run.readings][2:4] == ["3", "3-1"]
    assert run.judged is not None
    assert run.judged.judgement.verdict == "fail"
