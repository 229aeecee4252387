"""Tag and serial number are both typed at the instrument; a slip is refused with what was typed."""

from __future__ import annotations

import pytest
from django.core.exceptions import ValidationError

from calibration import sheets
from calibration.models import Sheet
from tests import cast as people
from tests.calibration.at_work import Device


def refused(tablet: Device, tag: str, serial: str) -> dict[str, list[str]]:
    tablet.type({"confirm-tag": tag, "confirm-serial": serial})
    with pytest.raises(ValidationError) as error:
        sheets.confirm(by=tablet.by, sheet_id=tablet.sheet.pk)
    assert Sheet.objects.get().stage == "confirm"
    messages: dict[str, list[str]] = error.value.message_dict
    return messages


def test_a_wrong_serial_number_is_refused_with_what_was_typed(tablet: Device) -> None:
    messages = refused(tablet, "PT-100", "S-99999")
    assert set(messages) == {"confirm-serial"}
    assert messages["confirm-serial"][0].startswith("“S-99999” was typed; the register has another serial number here.")
    assert tablet.sheet.transmitter.serial not in messages["confirm-serial"][0]


def test_a_wrong_tag_is_refused_with_what_was_typed(tablet: Device) -> None:
    messages = refused(tablet, "PT-1OO", tablet.sheet.transmitter.serial)
    assert messages == {
        "confirm-tag": ["“PT-1OO” was typed; this sheet is for PT-100. Stop here unless you stand at PT-100."]
    }


def test_a_serial_number_known_elsewhere_is_said_to_be_there(tablet: Device, tag: people.Tag) -> None:
    people.make_ready_tag(tag.area, "PT-200")
    other = people.Tag.objects.get(number="PT-200").current_fitting.transmitter  # type: ignore[union-attr]
    assert "is fitted at PT-200 in the register" in refused(tablet, "PT-100", other.serial)["confirm-serial"][0]


@pytest.mark.parametrize("change", [str.lower, lambda text: f" {text} ", lambda text: text.replace("-", "–")])
def test_case_spaces_and_kinds_of_dash_are_no_slip(tablet: Device, change: object) -> None:
    assert callable(change)
    tablet.type({"confirm-tag": change("PT-100"), "confirm-serial": change(tablet.sheet.transmitter.serial)})
    assert sheets.confirm(by=tablet.by, sheet_id=tablet.sheet.pk).stage == "cautions"


def test_both_are_asked_for(tablet: Device) -> None:
    with pytest.raises(ValidationError) as error:
        sheets.confirm(by=tablet.by, sheet_id=tablet.sheet.pk)
    assert set(error.value.message_dict) == {"confirm-tag", "confirm-serial"}


def test_the_slip_stays_on_the_sheet(tablet: Device) -> None:
    refused(tablet, "PT-100", "S-99999")
    assert Sheet.objects.get().entries.filter(field="confirm-serial", text="S-99999").exists()
