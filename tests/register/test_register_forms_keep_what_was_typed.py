"""Forms of the register: errors beside the field in the user's words, and nothing typed is lost."""

from __future__ import annotations

from collections.abc import Callable
from html import unescape

import pytest
from django.test import Client

from register.forms.fields import DateField, NumberField, RegisterForm, TypedNumberField, WholeNumberField
from register.models import AuditEntry, Range, Tag, TransmitterType
from tests import cast as people

SignIn = Callable[[people.User], Client]


@pytest.fixture
def client(cast: people.Cast, client_as: SignIn) -> Client:
    return client_as(cast.engineer)


def page(response: object) -> str:
    return unescape(response.content.decode())  # type: ignore[attr-defined]


class Measured(RegisterForm):
    value = TypedNumberField(required=False)
    volts = NumberField(required=False, least=0, most=60)
    months = WholeNumberField(required=False)
    on = DateField(required=False)


@pytest.mark.parametrize("text", ["12.00", "12,5", "−0.25", "1e-3", "1 234.5"])
def test_a_number_is_kept_as_typed(text: str) -> None:
    form = Measured({"value": text})
    assert form.is_valid(), form.errors
    assert form.cleaned_data["value"] == text


def test_a_comma_that_may_mean_thousands_is_settled_by_the_habit_of_the_plant() -> None:
    assert "can be read as 1.234 or as 1234" in Measured({"value": "1,234"}).errors["value"][0]
    form = Measured({"value": "1,234"}, decimal_comma=True)
    assert form.is_valid()
    assert form.cleaned_data["value"] == "1.234"


@pytest.mark.parametrize(
    ("field", "text", "words"),
    [
        ("value", "12,5,0", "“12,5,0” has 2 decimal marks"),
        ("value", "12 bar", "“12 bar” is not a number"),
        ("value", "nan", "“nan” is not a number"),
        ("volts", "-1", "“-1” is below 0"),
        ("volts", "240", "“240” is above 60"),
        ("months", "1.5", "“1.5” is not a whole number"),
        ("on", "9/3/2026", "“9/3/2026” is not a date of the calendar written as 2026-03-09"),
        ("on", "2026-02-30", "“2026-02-30” is not a date of the calendar"),
    ],
)
def test_an_error_says_what_was_typed_and_what_would_be_right(field: str, text: str, words: str) -> None:
    form = Measured({field: text})
    assert words in form.errors[field][0]
    assert f'value="{text}"' in unescape(str(form[field]))


def test_a_tag_with_errors_comes_back_as_it_was_typed(cast: people.Cast, client: Client) -> None:
    area = people.make_area(cast.plant)
    sent = {
        "number": "PT-2041",
        "service": "Feed water to the drum",
        "measurand": "pressure",
        "area": area.pk,
        "criticality": "safety",
        "pressure_unit": "bar",
        "pressure_reference": "gauge",
        "operating_pressure": "12,5,0",
        "design_pressure": "16",
        "temperature_unit": "degC",
        "process_min": "60",
        "process_max": "20",
        "root_extraction": "none",
        "isolation_sequence": "1. open the equaliser",
    }
    html = page(client.post("/tags/new/", sent))
    assert not Tag.objects.exists()
    assert "“12,5,0” has 2 decimal marks" in html
    assert "60 °C is above the highest process temperature, 20 °C." in html
    for kept in ('value="PT-2041"', 'value="Feed water to the drum"', 'value="12,5,0"', "1. open the equaliser"):
        assert kept in html
    assert f'<option value="{area.pk}" selected>' in html


@pytest.mark.parametrize("text", ["1e305", "-1e305", "1e-310"])
@pytest.mark.parametrize("field", ["operating_pressure", "process_max", "loop_ohm"])
def test_a_number_that_no_arithmetic_can_bear_comes_back_with_all_the_rest(
    cast: people.Cast, client: Client, field: str, text: str
) -> None:
    tag = people.make_ready_tag(people.make_area(cast.plant), "PT-2041")
    sent = {
        "number": "PT-2041",
        "service": "Feed water to the drum",
        "measurand": "pressure",
        "area": tag.area_id,
        "criticality": "general",
        "pressure_unit": "MPa",
        "pressure_reference": "gauge",
        "temperature_unit": "degC",
        "reason": "design case",
        field: text,
    }
    response = client.post(f"/tags/{tag.pk}/edit/", sent)
    assert "to be a measured value" in response.context["form"].errors[field][0]
    assert 'value="Feed water to the drum"' in page(response)
    assert f'value="{text}"' in page(response)


@pytest.mark.parametrize(("lrv", "urv"), [("0", "1e30"), ("-1e30", "1e30"), ("0", "1e-30"), ("1e30", "0")])
def test_the_greatest_and_the_least_numbers_that_are_read_are_judged(
    cast: people.Cast, client: Client, lrv: str, urv: str
) -> None:
    tag = people.make_ready_tag(people.make_area(cast.plant), "PT-2041")
    asked = {"lrv": lrv, "urv": urv, "unit": "MPa", "reference": "gauge", "transfer": "linear", "below_cut": "linear"}
    judged = client.get(f"/tags/{tag.pk}/range/", asked, headers={"HX-Request": "true"})
    assert judged.status_code == 200
    assert judged.context["verdict"].broken
    stored = client.post(
        f"/tags/{tag.pk}/range/", asked | {"effective_from": cast.plant.today().isoformat(), "reason": "a test"}
    )
    assert stored["Location"] == f"/tags/{tag.pk}/"
    assert client.get(stored["Location"]).status_code == 200


def test_a_range_that_no_arithmetic_can_bear_is_not_judged(cast: people.Cast, client: Client) -> None:
    tag = people.make_ready_tag(people.make_area(cast.plant), "PT-2041")
    asked = {
        "lrv": "0",
        "urv": "1e305",
        "unit": "MPa",
        "reference": "gauge",
        "transfer": "linear",
        "below_cut": "linear",
    }
    judged = client.get(f"/tags/{tag.pk}/range/", asked)
    assert judged.context["verdict"] is None


def test_a_tag_that_is_right_is_stored(cast: people.Cast, client: Client) -> None:
    area = people.make_area(cast.plant)
    sent = {
        "number": " PT-2041 ",
        "measurand": "pressure",
        "area": area.pk,
        "criticality": "general",
        "pressure_unit": "psi",
        "pressure_reference": "gauge",
        "design_pressure": "150",
        "temperature_unit": "degF",
        "root_extraction": "none",
        "supply_v": "24",
    }
    response = client.post("/tags/new/", sent)
    tag = Tag.objects.get()
    assert response["Location"] == f"/tags/{tag.pk}/"
    assert (tag.number, tag.design_pressure, tag.supply_v) == ("PT-2041", "150", 24.0)
    assert tag.design_pressure_pa == pytest.approx(150 * 6894.757293168)  # NIST SP 811: 1 psi = 6.894 757 kPa


def test_what_the_act_refuses_stands_beside_its_field(cast: people.Cast, client: Client) -> None:
    tag = people.make_ready_tag(people.make_area(cast.plant))
    sent = {
        "lrv": "5.0",
        "urv": "5",
        "unit": "bar",
        "reference": "gauge",
        "transfer": "linear",
        "below_cut": "linear",
        "effective_from": cast.plant.today().isoformat(),
        "reason": "pump changed",
    }
    response = client.post(f"/tags/{tag.pk}/range/", sent)
    form = response.context["form"]
    assert "a range without a span" in form.errors["urv"][0]
    html = page(response)
    assert 'value="5.0"' in html
    assert "pump changed" in html
    assert Range.objects.filter(tag=tag).count() == 1


def test_a_change_without_a_reason_is_not_made(cast: people.Cast, client: Client) -> None:
    tag = people.make_tag(people.make_area(cast.plant))
    response = client.post(f"/tags/{tag.pk}/service/", {"on": cast.plant.today().isoformat(), "reason": "  "})
    assert "Say why: the reason stays with the change." in page(response)
    assert Tag.objects.get().out_of_service_on is None


def test_a_body_rating_is_typed_in_rows_and_half_a_row_is_refused(cast: people.Cast, client: Client) -> None:
    maker = people.make_maker()
    sent = {
        "maker": maker.pk,
        "designation": "Q40",
        "measures": "gauge",
        "pressure_unit": "bar",
        "temperature_unit": "degC",
        "temperature_0": "-40",
        "pressure_0": "160,0",
        "temperature_1": "",
        "pressure_1": "",
        "temperature_2": "120",
        "pressure_2": "",
    }
    html = page(client.post("/types/new/", sent))
    assert "What may the body carry at 120?" in html
    assert 'value="160,0"' in html
    client.post("/types/new/", sent | {"pressure_2": "110"})
    assert TransmitterType.objects.get().body_rating == [["-40", "160,0"], ["120", "110"]]


def test_what_another_person_changed_meanwhile_is_told_once(cast: people.Cast, client: Client) -> None:
    tag = people.make_tag(people.make_area(cast.plant), medium="water")
    opened = client.get(f"/tags/{tag.pk}/edit/").context["form"]
    AuditEntry.objects.create(
        at=tag.created_at,
        kind="changed",
        person_name="A. Berg",
        thing_type="register.tag",
        thing_id=str(tag.pk),
        thing_label=tag.number,
        field="medium",
        before="water",
        after="glycol",
    )
    shown = {name: opened[name].value() for name in opened.fields}
    ticked = {name: value for name, value in shown.items() if value is not None and value is not False}
    sent = ticked | {"medium": "brine", "reason": "loop sheet"}
    refused = client.post(f"/tags/{tag.pk}/edit/", sent)
    assert "A. Berg changed medium from “water” to “glycol” after you opened this page." in page(refused)
    again = sent | {"seen": refused.context["form"]["seen"].value()}
    assert client.post(f"/tags/{tag.pk}/edit/", again).status_code == 302
    assert Tag.objects.get().medium == "brine"
