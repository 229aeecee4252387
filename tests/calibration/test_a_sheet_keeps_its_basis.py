"""What a sheet was opened with judges it, whatever is changed in the register meanwhile."""

from __future__ import annotations

import pytest
from django.core.exceptions import ValidationError

from calibration import signing
from calibration.models import Record, Test
from register.models import Tag
from tests import cast as people
from tests.calibration.at_work import Device, signed, to_signature


def tokens(tablet: Device) -> list[str]:
    return [change.token for change in signing.changes_since(tablet.sheet)]


def test_a_re_range_meanwhile_does_not_change_the_verdict(tablet: Device, tag: people.Tag) -> None:
    to_signature(tablet)
    people.make_range(Tag.objects.get(), "0", "12", effective_from=people.LONG_AGO.replace(year=2024))
    record = signing.sign(by=tablet.by, sheet_id=tablet.sheet.pk, acknowledged=tokens(tablet))
    assert (record.lrv, record.urv, record.test.as_found_verdict) == ("0", "10", "pass")


def test_a_change_is_acknowledged_before_signing_and_stays_with_the_record(tablet: Device, tag: people.Tag) -> None:
    to_signature(tablet)
    people.make_range(Tag.objects.get(), "0", "12", effective_from=people.LONG_AGO.replace(year=2024))
    with pytest.raises(ValidationError) as refused:
        signing.sign(by=tablet.by, sheet_id=tablet.sheet.pk)
    words = "PT-100 was re-ranged to 0 to 12 bar. The record keeps 0 to 10 bar, as the sheet was opened."
    assert words in refused.value.messages
    assert not Record.objects.exists()
    record = signing.sign(by=tablet.by, sheet_id=tablet.sheet.pk, acknowledged=tokens(tablet))
    assert record.answers["acknowledged"] == [words]


def test_a_swap_meanwhile_leaves_the_record_with_the_transmitter_that_was_tested(
    tablet: Device, tag: people.Tag
) -> None:
    to_signature(tablet)
    tested = tablet.sheet.transmitter
    fitting = tag.current_fitting
    assert fitting
    fitting.removed_on = fitting.fitted_on.replace(year=2025)
    fitting.save()
    people.make_fitting(Tag.objects.get(), fitted_on=fitting.removed_on)
    assert "is no longer the transmitter of PT-100" in signing.changes_since(tablet.sheet)[0].words
    signing.sign(by=tablet.by, sheet_id=tablet.sheet.pk, acknowledged=tokens(tablet))
    test = Test.objects.get()
    assert (test.transmitter, test.fitting) == (tested, fitting)


def test_a_tighter_requirement_meanwhile_does_not_judge_this_test(tablet: Device, tag: people.Tag) -> None:
    to_signature(tablet, (0.3,) * 9)
    people.make_requirement(tag, mpe_percent="0.1", effective_from=people.LONG_AGO.replace(year=2024))
    record = signing.sign(by=tablet.by, sheet_id=tablet.sheet.pk, acknowledged=tokens(tablet))
    assert record.test.as_found_verdict == "pass"
    assert record.basis["mpe"]["percent"] == "0.5"


def test_cautions_edited_meanwhile_keep_their_old_words_on_the_sheet(tablet: Device, tag: people.Tag) -> None:
    words = {line["key"]: line["text"] for line in tablet.sheet.basis["cautions"]}
    tag.plant.guidance.filter(key="permit").update(text="Something else")
    record = signed(tablet)
    assert {line["key"]: line["text"] for line in record.answers["cautions"]} == words


def test_without_any_change_nothing_is_asked(tablet: Device) -> None:
    assert tokens(tablet) == []
