"""Acts on standards, certificates, point lists and guidance name the field and the rule that a row breaks."""

from __future__ import annotations

import datetime
from collections.abc import Callable
from typing import Any

import pytest
from django.core.exceptions import ValidationError
from django.test import Client

from calibration import guiding, pointlists, standards
from calibration.models import Certificate, GuidanceLine, PointList, Standard
from register.auditing import Actor
from register.models import AuditEntry, User
from tests.cast import LONG_AGO, Cast, make_guidance, make_point_list, make_standard

ClientAs = Callable[[User], Client]
STANDARD = {
    "name": "PS-01", "kind": "pressure", "maker": "", "designation": "", "serial": "771", "unit": "kPa",
    "reference": "gauge", "low": "0", "high": "700.0", "spec_reading_percent": None, "spec_scale_percent": None,
    "spec_absolute": None, "resolution": None, "state": "in use", "location": "shop",
}  # fmt: skip


@pytest.fixture
def why(cast: Cast) -> dict[str, Any]:
    return {"by": Actor(person=cast.engineer), "reason": "bought"}


@pytest.mark.parametrize(
    ("values", "field", "said"),
    [
        ({"name": "PS-00"}, "name", "North works has a standard PS-00 already."),
        ({"low": "700", "high": "700"}, "high", "The upper end 700 is not above the lower end 700."),
        ({"low": "some"}, "low", "“some” is not a number"),
        ({"name": "x" * 41}, "name", "at most 40 characters"),
    ],
)
def test_a_standard_is_refused_by_the_rule_it_breaks(
    cast: Cast, why: dict[str, Any], values: dict[str, str], field: str, said: str
) -> None:
    make_standard(cast.plant, name="PS-00")
    other = standards.create_standard(plant=cast.plant, **why, **STANDARD)
    entries = AuditEntry.objects.count()
    with pytest.raises(ValidationError) as made:
        standards.create_standard(plant=cast.plant, **why, **(STANDARD | {"name": "PS-02"} | values))
    with pytest.raises(ValidationError) as edited:
        standards.edit_standard(standard=other, **why, **(STANDARD | values))
    for refused in (made, edited):
        assert list(refused.value.error_dict) == [field]
        assert said in refused.value.message_dict[field][0]
    assert (Standard.objects.count(), AuditEntry.objects.count()) == (2, entries)


@pytest.mark.parametrize(
    ("values", "field", "said"),
    [
        ({"number": "C-0"}, "number", "Certificate C-0 of this standard is here already."),
        ({"valid_until": LONG_AGO}, "valid_until", "2020-01-06 is not after the calibration on 2020-01-06."),
    ],
)
def test_a_certificate_is_refused_by_the_rule_it_breaks(
    cast: Cast, why: dict[str, Any], values: dict[str, Any], field: str, said: str
) -> None:
    held = make_standard(cast.plant)
    Certificate.objects.update(number="C-0")
    typed = {
        "number": "C-1", "laboratory": "Fernhollow Metrology", "calibrated_on": LONG_AGO,
        "valid_until": LONG_AGO + datetime.timedelta(days=365), "remarks": "",
    }  # fmt: skip
    with pytest.raises(ValidationError) as refused:
        standards.add_certificate(standard=held, **why, **(typed | values))
    assert refused.value.message_dict == {field: [said]}


def test_a_point_list_of_a_name_that_is_taken_is_refused(cast: Cast, why: dict[str, Any]) -> None:
    make_point_list(cast.plant, name="Nine points")
    other = make_point_list(cast.plant, name="Five points")
    typed = {"name": "Nine points", "points": "0 50 100", "for_square_root": False}
    said = {"name": ["“Nine points” is the name of another point list of this plant."]}
    with pytest.raises(ValidationError) as made:
        pointlists.create_point_list(plant=cast.plant, **why, **typed)
    with pytest.raises(ValidationError) as edited:
        pointlists.edit_point_list(point_list=other, **why, **typed)
    assert made.value.message_dict == edited.value.message_dict == said
    assert PointList.objects.filter(name="Nine points").count() == 1


def test_a_short_name_that_another_line_of_the_part_has_is_refused(cast: Cast, why: dict[str, Any]) -> None:
    make_guidance(cast.plant, key="permit")
    other = make_guidance(cast.plant, key="bypass")
    said = {"key": ["“permit” is the short name of another line of this part."]}
    with pytest.raises(ValidationError) as made:
        guiding.add_line(plant=cast.plant, **why, part="caution", order=5, key="permit", text="Permit in hand")
    with pytest.raises(ValidationError) as edited:
        guiding.edit_line(line=other, **why, key="permit")
    assert made.value.message_dict == edited.value.message_dict == said
    guiding.add_line(plant=cast.plant, **why, part="checklist", order=5, key="permit", text="Permit given back")
    guiding.withdraw_line(line=GuidanceLine.objects.get(part="caution", key="permit"), **why)
    assert guiding.edit_line(line=other, **why, key="permit").key == "permit"


def test_what_an_act_refuses_stands_beside_its_field_with_all_that_was_typed(cast: Cast, client_as: ClientAs) -> None:
    typed = {name: value or "" for name, value in STANDARD.items()} | {"reason": "bought"}
    page = client_as(cast.engineer).post("/standards/new/", typed | {"low": "800", "location": "shelf four"})
    text = page.content.decode()
    assert page.status_code == 200
    assert "The upper end 700.0 is not above the lower end 800." in text
    assert 'value="shelf four"' in text and 'value="800"' in text
