"""Reference standards: registering, certificates, and how they stand today."""

from __future__ import annotations

import datetime
from collections.abc import Callable

import pytest
from django.test import Client

from calibration.contexts.standard import reliance
from calibration.models import Certificate, GuidanceLine, PointList, Standard
from calibration.provision import provide_defaults
from register.auditing import Actor
from register.models import AuditEntry, User
from tests.cast import Cast, make_standard

STANDARD = {
    "name": "PS-01", "kind": "pressure", "maker": "", "designation": "", "serial": "771", "unit": "kPa",
    "reference": "gauge", "low": "0", "high": "700.0", "spec_reading_percent": "0,02", "spec_scale_percent": "",
    "spec_absolute": "", "resolution": "0.01", "state": "in use", "location": "shop", "reason": "bought",
}  # fmt: skip

ClientAs = Callable[[User], Client]


def test_a_standard_is_registered_as_typed_and_leaves_an_entry(cast: Cast, client_as: ClientAs) -> None:
    answer = client_as(cast.engineer).post("/standards/new/", STANDARD)
    made = Standard.objects.get()
    assert answer.status_code == 302
    assert (made.high, made.high_si, made.spec_reading_percent) == ("700.0", 700_000.0, 0.02)
    assert made.specification == "±(0.02 % of reading)"
    assert AuditEntry.objects.get(thing_type="calibration.standard").reason == "bought"


def test_a_wrong_standard_is_refused_beside_its_fields_and_nothing_typed_is_lost(
    cast: Cast, client_as: ClientAs
) -> None:
    typed = STANDARD | {"unit": "mA", "low": "7oo", "location": "shelf four"}
    page = client_as(cast.engineer).post("/standards/new/", typed).content.decode()
    assert not Standard.objects.exists()
    assert "mA is not a unit of pressure" in page
    assert 'value="7oo"' in page and 'value="shelf four"' in page


def test_the_same_number_twice_is_said_beside_the_number(cast: Cast, client_as: ClientAs) -> None:
    client = client_as(cast.engineer)
    client.post("/standards/new/", STANDARD)
    page = client.post("/standards/new/", STANDARD | {"serial": "772"}).content.decode()
    assert "has a standard PS-01 already" in page
    assert Standard.objects.count() == 1


def test_certificates_are_added_and_withdrawn_and_the_standard_says_until_when(cast: Cast, client_as: ClientAs) -> None:
    client = client_as(cast.engineer)
    client.post("/standards/new/", STANDARD)
    made = Standard.objects.get()
    today = made.plant.today()
    values = {
        "number": "C-9", "laboratory": "Marrow Lane laboratory", "calibrated_on": today.isoformat(),
        "valid_until": (today + datetime.timedelta(days=300)).isoformat(), "remarks": "", "reason": "yearly",
    }  # fmt: skip
    wrong = client.post(f"/standards/{made.pk}/certificates/new/", values | {"valid_until": today.isoformat()})
    assert "is not after the calibration" in wrong.content.decode()
    assert client.post(f"/standards/{made.pk}/certificates/new/", values).status_code == 302
    assert "in date" in client.get("/standards/").content.decode()
    certificate = Certificate.objects.get()
    assert client.post(f"/certificates/{certificate.pk}/withdraw/", {"reason": ""}).status_code == 200
    client.post(f"/certificates/{certificate.pk}/withdraw/", {"reason": "wrong standard"})
    assert "no certificate" in client.get("/standards/").content.decode()
    assert "wrong standard" in client.get(f"/standards/{made.pk}/").content.decode()


@pytest.mark.parametrize(
    ("days", "words"), [(-1, "certificate lapsed"), (0, "certificate lapses soon"), (43, "in date")]
)
def test_the_last_day_of_a_certificate_still_counts(days: int, words: str) -> None:
    today = datetime.date(2026, 3, 9)
    assert reliance(Standard(state="in use"), today + datetime.timedelta(days=days), today).words == words


def test_a_standard_at_the_laboratory_says_so_before_its_certificate() -> None:
    today = datetime.date(2026, 3, 9)
    assert reliance(Standard(state="at the laboratory"), today, today).words == "at the laboratory"


def test_a_stranger_sees_no_standard_of_another_plant(cast: Cast, client_as: ClientAs) -> None:
    client_as(cast.engineer).post("/standards/new/", STANDARD)
    assert client_as(cast.stranger).get(f"/standards/{Standard.objects.get().pk}/").status_code == 404


def test_a_new_plant_begins_with_point_lists_and_guidance_once(cast: Cast) -> None:
    provide_defaults(by=Actor(person=cast.engineer), plant=cast.plant)
    before = PointList.objects.count(), GuidanceLine.objects.count()
    provide_defaults(by=Actor(person=cast.engineer), plant=cast.plant)
    assert (PointList.objects.count(), GuidanceLine.objects.count()) == before
    assert before[0] >= 4 and before[1] >= 15
    roots = PointList.objects.filter(for_square_root=True)
    # common practice, no source: a square-root test starts at 5 to 10 % of input
    assert roots and all(float(held.points.split()[0]) >= 5 for held in roots)


def test_point_lists_are_tidied_and_wrong_ones_are_refused(cast: Cast, client_as: ClientAs) -> None:
    client = client_as(cast.engineer)
    values = {"name": "Three points", "points": " 0  50 100 50 0 ", "reason": "quick look"}
    assert client.post("/point-lists/new/", values).status_code == 302
    assert PointList.objects.get().points == "0 50 100 50 0"
    page = client.post("/point-lists/new/", values | {"name": "Other", "points": "0 fifty 100"}).content.decode()
    assert "fifty" in page and PointList.objects.count() == 1
    held = PointList.objects.get()
    client.post(f"/point-lists/{held.pk}/withdraw/", {"reason": "too coarse"})
    held.refresh_from_db()
    assert held.withdrawn_at is not None


def test_guidance_lines_are_edited_by_the_engineer_and_read_by_the_auditor(cast: Cast, client_as: ClientAs) -> None:
    provide_defaults(by=Actor(person=cast.engineer), plant=cast.plant)
    line = GuidanceLine.objects.get(key="permit")
    values = {
        "part": line.part, "order": "10", "key": "permit", "text": "Permit board signed.", "applies": "always",
        "condensing": "as elsewhere",
        "answer": "tick", "required": "on", "reason": "house words",
    }  # fmt: skip
    assert client_as(cast.engineer).post(f"/guidance/{line.pk}/edit/", values).status_code == 302
    page = client_as(cast.auditor).get("/guidance/").content.decode()
    assert "Permit board signed." in page and f"/guidance/{line.pk}/edit/" not in page
    assert client_as(cast.auditor).post(f"/guidance/{line.pk}/edit/", values).status_code == 403
    assert AuditEntry.objects.filter(field="text", after="Permit board signed.", reason="house words").exists()
    clash = client_as(cast.engineer).post("/guidance/new/", values)
    assert "short name of another line" in clash.content.decode()


@pytest.mark.parametrize("name", ["certificate", "point list", "line"])
def test_what_was_withdrawn_is_neither_withdrawn_again_nor_edited(cast: Cast, client_as: ClientAs, name: str) -> None:
    provide_defaults(by=Actor(person=None), plant=cast.plant)
    made: Certificate | PointList | GuidanceLine = {
        "certificate": lambda: make_standard(cast.plant).certificates.get(),
        "point list": lambda: PointList.objects.filter(plant=cast.plant)[0],
        "line": lambda: GuidanceLine.objects.filter(plant=cast.plant)[0],
    }[name]()
    start = {"certificate": "/certificates", "point list": "/point-lists", "line": "/guidance"}[name]
    client = client_as(cast.engineer)
    assert client.post(f"{start}/{made.pk}/withdraw/", {"reason": "first"}).status_code == 302
    made.refresh_from_db()
    at = made.withdrawn_at
    again = client.post(f"{start}/{made.pk}/withdraw/", {"reason": "second"})
    assert "was withdrawn already" in again.content.decode()
    if name != "certificate":
        typed = {
            "name": "Other",
            "points": "0 100",
            "part": "caution",
            "order": "1",
            "key": "other",
            "text": "Other words",
            "applies": "always",
            "condensing": "as elsewhere",
            "answer": "tick",
            "reason": "third",
        }
        edited = client.post(f"{start}/{made.pk}/edit/", typed)
        assert "was withdrawn already" in edited.content.decode(), edited.context["form"].errors
        assert 'value="third"' in edited.content.decode() or ">\nthird</textarea>" in edited.content.decode()
    made.refresh_from_db()
    assert made.withdrawn_at == at
    assert getattr(made, "withdrawn_reason", "first") == "first"
    assert set(AuditEntry.objects.filter(thing_id=str(made.pk), kind="changed").values_list("reason", flat=True)) == {
        "first"
    }
