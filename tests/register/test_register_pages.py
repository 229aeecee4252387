"""Pages of the register: fragments are parts of their pages, and the number of queries is fixed."""

from __future__ import annotations

import datetime
import re
from collections.abc import Callable

import pytest
from django.db import connection
from django.test import Client
from django.test.utils import CaptureQueriesContext

from register import flagging
from register.models import Flag, Intervention, Plant, Transmitter
from register.queries import TransmitterFilter
from tests import cast as people

SignIn = Callable[[people.User], Client]
HTMX = {"HX-Request": "true"}


@pytest.fixture
def client(cast: people.Cast, client_as: SignIn) -> Client:
    return client_as(cast.engineer)


@pytest.fixture
def tag(cast: people.Cast) -> people.Tag:
    return people.make_ready_tag(people.make_area(cast.plant, "20"), "PT-2041")


@pytest.mark.parametrize("address", ["/transmitters/", "/transmitters/?text=s-", "/types/", "/makers/", "/plants/"])
def test_the_rows_of_a_list_are_a_part_of_its_page(client: Client, tag: people.Tag, address: str) -> None:
    part = client.get(address, headers=HTMX).content.decode()
    assert part.strip().startswith('<div id="rows">')
    assert part.strip() in client.get(address).content.decode()


def test_going_back_in_history_gives_the_whole_page(client: Client, tag: people.Tag) -> None:
    restored = client.get("/transmitters/", headers=HTMX | {"HX-History-Restore-Request": "true"})
    assert "<!doctype html>" in restored.content.decode()
    assert "HX-Request" in restored["Vary"]


def test_the_verdict_on_a_range_is_a_part_of_its_page(client: Client, tag: people.Tag) -> None:
    asked = f"/tags/{tag.pk}/range/?lrv=0&urv=20&unit=bar&reference=gauge&transfer=linear&below_cut=linear"
    part = client.get(asked, headers=HTMX).content.decode()
    assert part.strip().startswith('<section id="verdict"')
    assert part.strip() in client.get(asked).content.decode()


def test_a_range_is_judged_before_it_is_set(client: Client, tag: people.Tag) -> None:
    asked = f"/tags/{tag.pk}/range/?lrv=0&unit=bar&reference=gauge&transfer=linear&below_cut=linear&urv="
    broken = client.get(asked + "20", headers=HTMX).content.decode()
    assert "URV 20 bar is 4 bar (25.0 %) above the head&#x27;s upper limit of 16" in broken
    assert '<svg class="m strip"' in broken
    assert "all 6 checks pass" in client.get(asked + "12", headers=HTMX).content.decode()
    assert "all 6 checks pass" not in client.get(asked + "12,5,0", headers=HTMX).content.decode()
    assert not Flag.objects.filter(tag=tag, check_key="range_upper").exists()


def test_a_head_that_could_carry_a_broken_range_is_named_with_its_spares(
    cast: people.Cast, client: Client, tag: people.Tag
) -> None:
    kind = tag.current_fitting.transmitter.type  # type: ignore[union-attr]
    people.make_transmitter(cast.plant, people.make_head(kind, code="H9", url="40"), serial="V4-19022")
    asked = f"/tags/{tag.pk}/range/?lrv=0&unit=bar&reference=gauge&transfer=linear&below_cut=linear&urv=20"
    html = client.get(asked, headers=HTMX).content.decode()
    assert "H9: −1 to 40 bar" in html
    assert "V4-19022" in html


def test_a_transmitter_is_judged_before_it_is_fitted(cast: people.Cast, client: Client, tag: people.Tag) -> None:
    kind = tag.current_fitting.transmitter.type  # type: ignore[union-attr]
    people.make_transmitter(cast.plant, people.make_head(kind, url="6"), serial="V4-19022")
    html = client.get(f"/tags/{tag.pk}/swap/?transmitter=v4-19022", headers=HTMX).content.decode()
    assert "URV 10 bar is 4 bar" in html


def test_a_swap_by_serial_number(cast: people.Cast, client: Client, tag: people.Tag) -> None:
    old = tag.current_fitting.transmitter  # type: ignore[union-attr]
    people.make_transmitter(cast.plant, old.head, serial="V4-19022")
    sent = {
        "transmitter": "v4-19022",
        "on": cast.plant.today().isoformat(),
        "whereabouts": "repair",
        "reason": "zero drifts",
    }
    assert client.post(f"/tags/{tag.pk}/swap/", sent).status_code == 302
    tag.refresh_from_db()
    assert tag.current_fitting.transmitter.serial == "V4-19022"  # type: ignore[union-attr]
    assert Transmitter.objects.get(pk=old.pk).whereabouts == "repair"


def test_an_unknown_serial_number_is_refused_beside_its_field(
    cast: people.Cast, client: Client, tag: people.Tag
) -> None:
    people.make_transmitter(cast.other_plant, serial="V4-19022")
    sent = {"transmitter": "V4-19022", "on": "2026-03-09", "whereabouts": "stores", "reason": "?"}
    form = client.post(f"/tags/{tag.pk}/swap/", sent).context["form"]
    assert "No transmitter of this plant has the serial number “V4-19022”" in form.errors["transmitter"][0]


def test_a_flag_is_accepted_and_the_acceptance_withdrawn(cast: people.Cast, client: Client, tag: people.Tag) -> None:
    people.make_range(tag, "0", "20", effective_from=datetime.date(2021, 1, 1))
    flagging.recompute([tag.pk])
    flag = Flag.objects.get(tag=tag, check_key="range_upper")
    until = cast.plant.today() + datetime.timedelta(days=60)
    sent = {"until": until.isoformat(), "reason": "never above 15 bar"}
    assert client.post(f"/flags/{flag.pk}/accept/", sent).status_code == 302
    flag.refresh_from_db()
    assert (flag.accepted_until, flag.accepted_by) == (until, cast.engineer)
    assert client.post(f"/flags/{flag.pk}/withdraw/", {"reason": "pump changed"}).status_code == 302
    flag.refresh_from_db()
    assert flag.accepted_until is None


def test_an_intervention_and_a_new_head_are_noted(cast: people.Cast, client: Client, tag: people.Tag) -> None:
    transmitter = tag.current_fitting.transmitter  # type: ignore[union-attr]
    today = cast.plant.today().isoformat()
    sent = {"kind": "flush", "done_on": today, "breaks_history": "on", "reason": "plugged line"}
    assert client.post(f"/transmitters/{transmitter.pk}/interventions/new/", sent).status_code == 302
    other = people.make_head(transmitter.type)
    sent = {"head": str(other.pk), "how": "put in", "on": today, "reason": "overranged"}
    assert client.post(f"/transmitters/{transmitter.pk}/head/", sent).status_code == 302
    kinds = Intervention.objects.filter(tag=tag).order_by("id").values_list("kind", flat=True)
    assert list(kinds) == ["flush", "new head"]
    transmitter.refresh_from_db()
    assert transmitter.head == other


def test_an_administrator_opens_a_plant_and_administers_it(cast: people.Cast, client_as: SignIn) -> None:
    sent = {"code": "East", "name": "East works", "time_zone": "Europe/Paris", "barometric_unit": "kPa"}
    client = client_as(cast.administrator)
    assert client.post("/plants/new/", sent).status_code == 302
    plant = Plant.objects.get(code="east")
    assert list(plant.memberships.values_list("user", "role")) == [(cast.administrator.pk, "administrator")]
    refused = client.post("/plants/new/", sent | {"time_zone": "Paris"})
    assert "belongs to another plant" not in refused.content.decode()
    assert "is not a time zone name" in str(refused.context["form"].errors["time_zone"])


def fill(cast: people.Cast, count: int) -> None:
    area = people.make_area(cast.plant)
    for _ in range(count):
        people.make_ready_tag(area)


@pytest.mark.parametrize(
    "address", ["/transmitters/", "/types/", "/makers/", "/plants/", "/find/?q=PT", "/heads/{head}/"]
)
def test_the_number_of_queries_does_not_grow_with_the_rows(cast: people.Cast, client: Client, address: str) -> None:
    fill(cast, 2)
    address = address.format(head=people.make_transmitter(cast.plant).head.pk)
    client.get(address)
    counts = []
    for more in (0, 6):
        fill(cast, more)
        with CaptureQueriesContext(connection) as queries:
            assert client.get(address).status_code == 200
        counts.append(len(queries))
    assert counts[0] == counts[1]


@pytest.mark.parametrize(("text", "after"), [("", ""), ("s-0", ""), ("", "S-00")])
@pytest.mark.parametrize("narrowed", ["", "whereabouts", "type_id", "head_id"])
def test_every_filter_of_transmitters_is_followed_in_the_order_of_the_list(
    cast: people.Cast, narrowed: str, text: str, after: str
) -> None:
    """No row is sorted: the page is a stretch of an index."""
    device = people.make_transmitter(cast.plant)
    values = {name: getattr(device, name) for name in (narrowed,) if name}
    rows = TransmitterFilter(cast.plant, text=text, **values).rows().order_by("search_key", "pk")
    if after:
        rows = rows.filter(search_key__gte=after)
    if connection.vendor == "postgresql":
        with connection.cursor() as cursor:
            cursor.execute(
                "SET LOCAL enable_seqscan = off; SET LOCAL enable_bitmapscan = off; SET LOCAL enable_sort = off"
            )
    plan = rows[:51].explain()
    index = {"": "serial", "type_id": "type", "head_id": "head"}.get(narrowed, narrowed)
    assert f"transmitter_by_{index}" in plan
    assert "TEMP B-TREE" not in plan
    assert "->  Sort" not in plan


def test_transmitters_stand_in_the_order_of_their_serial_numbers_whatever_their_capitals(
    cast: people.Cast, client: Client
) -> None:
    serials = ["b-2", "A-1", "a-3", "B<4>", "a-10"]
    for serial in serials:
        people.make_transmitter(cast.plant, serial=serial)
    page = client.get("/transmitters/").content.decode()
    found = re.findall(r'<td class="key"><a class="mono" href="/transmitters/\d+/">([^<]+)</a>', page)
    assert found == ["A-1", "a-10", "a-3", "b-2", "B&lt;4&gt;"]


def test_a_transmitter_in_the_list_says_where_it_is(cast: people.Cast, client: Client, tag: people.Tag) -> None:
    people.make_transmitter(cast.plant, serial="away", whereabouts="repair")
    people.make_transmitter(cast.plant, serial="gone", whereabouts="scrapped")
    page = client.get("/transmitters/").content.decode()
    assert f'<a class="mono" href="/tags/{tag.pk}/">PT-2041</a></td><td class="nowrap">{people.LONG_AGO}</td>' in page
    assert '<span class="state near">away for repair</span></td><td>–</td>' in page
    assert '<span class="state quiet">scrapped</span></td><td>–</td>' in page
