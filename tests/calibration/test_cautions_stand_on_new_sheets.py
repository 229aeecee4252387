"""A plant's own cautions and checklist lines can always be answered, and none drains condensate legs."""

from __future__ import annotations

from collections.abc import Callable

import pytest
from django.core.exceptions import ValidationError
from django.test import Client

from calibration import sheets
from calibration.guiding import add_line, edit_line
from calibration.models import GuidanceLine
from calibration.provision import provide_defaults
from register.auditing import Actor
from register.models import Tag
from tests import cast as people
from tests.calibration.at_work import opened, to_as_found

ClientAs = Callable[[people.User], Client]
LINE = {
    "part": "caution", "order": "500", "key": "drain", "text": "Drain cup in place.", "applies": "always",
    "condensing": "as elsewhere", "answer": "tick", "required": "on", "reason": "house words",
}  # fmt: skip


@pytest.fixture
def client(client_as: ClientAs, cast: people.Cast) -> Client:
    return client_as(cast.engineer)


@pytest.fixture
def flow(tag: Tag) -> Tag:
    """FT-300, a differential-pressure tag in hot condensing service with an isolation sequence of two steps."""
    area = people.make_area(tag.plant, "30")
    row = people.make_tag(area, "FT-300", condensing_service=True, isolation_sequence="Keep it shut.\nShut the blocks.")
    people.make_range(row, reference="differential")
    head = people.make_head(people.make_type(measures="differential"))
    people.make_fitting(row, people.make_transmitter(tag.plant, head))
    people.make_requirement(row)
    return row


@pytest.mark.parametrize("typed", ["Vent-1", "VENT_2", "vent-3"])
def test_a_line_added_on_the_page_can_be_answered_on_the_sheet(
    client: Client, tag: Tag, cast: people.Cast, typed: str
) -> None:
    assert client.post("/guidance/new/", LINE | {"key": typed}).status_code == 302
    tablet = opened(tag, cast.technician)
    assert typed.lower() in [line["key"] for line in tablet.sheet.basis["cautions"]]
    to_as_found(tablet)
    tablet.sheet.refresh_from_db()
    assert tablet.sheet.stage == "as-found"


@pytest.mark.parametrize("typed", ["isolation-1", "Isolation-9", "vent 1", "vent.1", "Ventil-ö"])
def test_a_short_name_that_no_answer_can_be_kept_under_is_refused(client: Client, tag: Tag, typed: str) -> None:
    before = GuidanceLine.objects.count()
    page = client.post("/guidance/new/", LINE | {"key": typed}).content.decode()
    assert "Small letters, digits and hyphens only" in page
    assert f'value="{typed}"' in page
    assert GuidanceLine.objects.count() == before


def test_the_act_refuses_such_a_name_too(tag: Tag, cast: people.Cast) -> None:
    values = {"part": "caution", "order": 500, "text": "Drain cup in place."}
    for key in ("Vent-1", "isolation-1"):
        with pytest.raises(ValidationError):
            add_line(by=Actor(person=cast.engineer), plant=tag.plant, reason="house words", key=key, **values)


def test_a_tags_own_steps_stand_beside_all_lines_under_names_of_their_own(flow: Tag, cast: people.Cast) -> None:
    basis = opened(flow, cast.technician).sheet.basis
    keys = [line["key"] for line in basis["cautions"]]
    assert keys[-2:] == ["isolation-1", "isolation-2"]
    assert len(keys) == len(set(keys))


def test_no_new_name_brings_the_equaliser_line_into_condensing_service(flow: Tag, cast: people.Cast) -> None:
    line = GuidanceLine.objects.get(plant=flow.plant, key="equaliser")
    edit_line(by=Actor(person=cast.engineer), line=line, reason="house words", key="open-first")
    texts = [line["text"] for line in opened(flow, cast.technician).sheet.basis["cautions"]]
    assert not [text for text in texts if text.startswith("Open the equaliser")]
    assert [text for text in texts if "the equaliser stays shut" in text]


def test_the_zero_at_line_pressure_may_stay_empty_in_condensing_service_alone(flow: Tag, cast: people.Cast) -> None:
    line = GuidanceLine.objects.get(plant=flow.plant, key="zero-at-line")
    edit_line(by=Actor(person=cast.engineer), line=line, reason="house words", key="zero-read")

    def required() -> str:
        checklist = opened(flow, cast.technician).sheet.basis["checklist"]
        return next(line["required"] for line in checklist if line["key"] == "zero-read")

    assert required() == "no"
    Tag.objects.update(condensing_service=False)
    flow.refresh_from_db()
    assert required() == "yes"


def test_a_line_that_would_never_be_shown_is_refused(client: Client, tag: Tag) -> None:
    page = client.post("/guidance/new/", LINE | {"applies": "condensing", "condensing": "left out"}).content.decode()
    assert "never shows" in page
    assert not GuidanceLine.objects.filter(key="drain").exists()


def test_what_becomes_of_a_line_in_condensing_service_is_said_and_kept(client: Client, cast: people.Cast) -> None:
    provide_defaults(by=Actor(person=None), plant=cast.plant)
    assert "not shown in hot condensing service" in client.get("/guidance/").content.decode()
    line = GuidanceLine.objects.get(key="equaliser")
    page = client.get(f"/guidance/{line.pk}/edit/").content.decode()
    assert '<option value="left out" selected>' in page


def test_cautions_still_stop_a_sheet_until_they_are_answered(flow: Tag, cast: people.Cast) -> None:
    tablet = opened(flow, cast.technician)
    tablet.type({"confirm-tag": "FT-300", "confirm-serial": tablet.sheet.transmitter.serial})
    sheets.confirm(by=tablet.by, sheet_id=tablet.sheet.pk)
    with pytest.raises(ValidationError) as refused:
        sheets.pass_cautions(by=tablet.by, sheet_id=tablet.sheet.pk)
    assert "caution.isolation-1" in refused.value.message_dict
