"""Sheets in a real browser with touch: saved field by field, kept without a connection, told to a second person."""

from __future__ import annotations

import re
from collections.abc import Callable, Iterator

import pytest
from playwright.sync_api import Browser, BrowserContext, Page, expect
from pytest_django.live_server_helper import LiveServer

from calibration import sheets, signing
from calibration.models import Entry, Sheet, Test
from calibration.provision import provide_defaults
from calibration.queries.drafts import Draft
from register.auditing import Actor
from tests import cast as people
from tests.calibration.at_work import Device, opened, to_adjustment, to_as_found, to_signature

pytestmark = [pytest.mark.browser, pytest.mark.django_db(transaction=True)]
SIZES = {"upright": {"width": 768, "height": 1024}, "lying": {"width": 1280, "height": 800}}
Tablet = Callable[..., Page]


@pytest.fixture
def crew(transactional_db: None) -> people.Cast:
    cast = people.make_cast()
    provide_defaults(by=Actor(person=None), plant=cast.plant)
    return cast


@pytest.fixture
def device(crew: people.Cast) -> Device:
    """A sheet of PT-100 that stands at as-found."""
    tag = people.make_ready_tag(people.make_area(crew.plant, "20"), "PT-100")
    device = opened(tag, crew.technician)
    to_as_found(device)
    return device


@pytest.fixture
def tablet(chromium: Browser, live_server: LiveServer) -> Iterator[Tablet]:
    """Give a page of a touch tablet in which a person is signed in."""
    contexts: list[BrowserContext] = []

    def in_hand(username: str, size: str = "upright") -> Page:
        context = chromium.new_context(viewport=SIZES[size], has_touch=True, is_mobile=True)  # type: ignore[arg-type]
        contexts.append(context)
        page = context.new_page()
        page.goto(f"{live_server.url}/sign-in/")
        page.fill("[name=username]", username)
        page.fill("[name=password]", people.PASSWORD)
        page.press("[name=password]", "Enter")
        page.wait_for_url(lambda url: "sign-in" not in url)
        return page

    yield in_hand
    for context in contexts:
        context.close()


def shown(page: Page, live_server: LiveServer, sheet: Sheet) -> Page:
    page.goto(f"{live_server.url}/sheets/{sheet.pk}/")
    return page


def leave(page: Page, name: str, text: str) -> None:
    page.fill(f"[name='{name}']", text)
    page.locator(f"[name='{name}']").blur()


@pytest.mark.parametrize("size", SIZES)
def test_a_reading_is_judged_while_typed_and_saved_when_left(
    tablet: Tablet, live_server: LiveServer, device: Device, size: str
) -> None:
    page = shown(tablet("technician", size), live_server, device.sheet)
    leave(page, "as-found.3.applied", "5")
    page.locator("[name='as-found.3.measured']").press_sequentially("12.1", delay=30)
    expect(page.locator("#r-as-found-3-note")).to_contain_text("+0.625")
    assert not Entry.objects.filter(field="as-found.3.measured").exists()
    page.locator("[name='as-found.3.measured']").blur()
    expect(page.locator("#saving")).to_contain_text("All saved")
    expect(page.locator("#sequence-as-found li.outside")).to_contain_text("50 %")
    expect(page.locator("#so-far-as-found")).to_contain_text("fail, out of tolerance")
    assert Draft(Sheet.objects.get()).text("as-found.3.measured") == "12.1"
    page.reload()
    assert page.input_value("[name='as-found.3.measured']") == "12.1"


def test_what_is_typed_without_a_connection_is_kept_and_sent_later(
    tablet: Tablet, live_server: LiveServer, device: Device
) -> None:
    page = shown(tablet("technician"), live_server, device.sheet)
    expect(page.locator("#saving")).not_to_contain_text("Saving")
    page.context.set_offline(True)
    leave(page, "as-found.4.applied", "7.5")
    leave(page, "as-found.4.measured", "16.02")
    expect(page.locator("#saving")).to_contain_text("No connection. 2 kept on this device")
    page.context.set_offline(False)
    expect(page.locator("#saving")).to_contain_text("All saved", timeout=15000)
    assert Draft(Sheet.objects.get()).text("as-found.4.measured") == "16.02"
    assert Entry.objects.filter(field="as-found.4.measured").count() == 1


BLOCKED = (
    "Object.defineProperty(window, 'localStorage', {get() { throw new DOMException('denied', 'SecurityError'); }})"
)
FULL = "Storage.prototype.setItem = () => { throw new DOMException('full', 'QuotaExceededError'); }"


@pytest.mark.parametrize("storage", [BLOCKED, FULL])
def test_a_tablet_that_keeps_nothing_says_so_and_saves_all_the_same(
    tablet: Tablet, live_server: LiveServer, device: Device, storage: str
) -> None:
    page = tablet("technician")
    page.add_init_script(storage)
    shown(page, live_server, device.sheet)
    leave(page, "as-found.4.measured", "16.02")
    expect(page.locator("#saving")).to_contain_text("All saved")
    expect(page.locator("#saving")).to_contain_text("This tablet keeps nothing")
    assert Draft(Sheet.objects.get()).text("as-found.4.measured") == "16.02"
    page.context.set_offline(True)
    leave(page, "as-found.5.measured", "20.01")
    expect(page.locator("#saving")).to_contain_text("No connection. 1 on this page alone")
    page.context.set_offline(False)
    expect(page.locator("#saving")).to_contain_text("All saved", timeout=15000)
    assert Draft(Sheet.objects.get()).text("as-found.5.measured") == "20.01"


def test_a_queue_longer_than_a_browser_sends_at_once_goes_out_in_parts(
    tablet: Tablet, live_server: LiveServer, device: Device
) -> None:
    page = shown(tablet("technician"), live_server, device.sheet)
    expect(page.locator("#saving")).not_to_contain_text("Saving")
    page.context.set_offline(True)
    sizes: list[int] = []
    page.on("request", lambda request: sizes.append(len(request.post_data or "")))
    for number in range(1, 80):
        page.fill("[name='as-found.1.measured']", f"{number:02} " + "x" * 1500)
        page.locator("[name='as-found.1.measured']").blur()
    expect(page.locator("#saving")).to_contain_text("79 kept on this device")
    page.context.set_offline(False)
    expect(page.locator("#saving")).to_contain_text("All saved", timeout=30000)
    assert Draft(Sheet.objects.get()).text("as-found.1.measured").startswith("79 ")
    assert Entry.objects.filter(field="as-found.1.measured").count() == 79
    assert max(sizes) < 64 * 1024


def test_what_waits_goes_out_while_the_page_is_left(tablet: Tablet, live_server: LiveServer, device: Device) -> None:
    page = shown(tablet("technician"), live_server, device.sheet)
    expect(page.locator("#saving")).not_to_contain_text("Saving")
    page.fill("[name='as-found.4.measured']", "16.02")
    page.goto("about:blank")
    for _ in range(50):
        if Entry.objects.filter(field="as-found.4.measured", text="16.02").exists():
            return
        page.wait_for_timeout(100)
    raise AssertionError("what stood in the field did not arrive")


def test_what_the_server_did_not_take_stays_on_the_tablet_until_it_is_read(
    tablet: Tablet, live_server: LiveServer, device: Device
) -> None:
    page = shown(tablet("technician"), live_server, device.sheet)
    leave(page, "as-found.3.applied", "5")
    expect(page.locator("#saving")).to_contain_text("All saved")
    page.locator(".conditions > summary").click()
    page.context.set_offline(True)
    leave(page, "as-found.3.measured", "12.345")
    expect(page.locator("#saving")).to_contain_text("kept on this device")
    device.type({"as-found.ambient": "20"})
    sheets.could_not_test(by=device.by, reason="Plugged.", sheet_id=device.sheet.pk)
    page.context.set_offline(False)
    for _ in range(2):
        refused = page.locator("#refused")
        expect(refused).to_contain_text("reading 3, measured", timeout=15000)
        expect(refused).to_contain_text("12.345")
        expect(page.locator("#saving")).to_contain_text("All saved")
        page.reload()
    page.get_by_role("button", name="take away what was typed at as-found, reading 3").click()
    expect(page.locator("#refused")).to_be_hidden()
    page.reload()
    expect(page.locator("#refused")).to_be_hidden()


@pytest.mark.parametrize("end", ["signed", "abandoned"])
def test_what_was_not_handed_over_before_a_sheet_ended_is_still_shown(
    tablet: Tablet, live_server: LiveServer, crew: people.Cast, end: str
) -> None:
    device = opened(people.make_ready_tag(people.make_area(crew.plant, "20"), "PT-100"), crew.technician)
    to_signature(device)
    sheets.step_back(by=device.by, sheet_id=device.sheet.pk)
    page = shown(tablet("technician"), live_server, device.sheet)
    expect(page.locator("#saving")).not_to_contain_text("Saving")
    page.route("**/entries/", lambda route: route.abort())
    leave(page, "remarks", "The gasket weeps.")
    expect(page.locator("#saving")).to_contain_text("1 kept on this device")
    if end == "signed":
        sheets.return_to_service(by=device.by, sheet_id=device.sheet.pk)
        signing.sign(by=device.by, sheet_id=device.sheet.pk)
    else:
        sheets.abandon(by=device.by, reason="Begun by mistake.", sheet_id=device.sheet.pk)
    page.unroute("**/entries/")
    for _ in range(2):
        shown(page, live_server, device.sheet)
        expect(page.locator("#refused .typed")).to_have_text("The gasket weeps.")
    page.get_by_role("button", name="Take away what was typed at remarks").click()
    shown(page, live_server, device.sheet)
    expect(page.locator("#refused")).to_be_hidden()


def test_typing_again_over_what_was_not_taken_is_no_clash_with_oneself(
    tablet: Tablet, live_server: LiveServer, device: Device
) -> None:
    device.type({"remarks": "first"})
    sheets.could_not_test(by=device.by, reason="Plugged.", sheet_id=device.sheet.pk)
    page = shown(tablet("technician"), live_server, device.sheet)
    leave(page, "remarks", "x" * 2001)
    expect(page.locator("#f-remarks-note")).to_contain_text("2001 were typed")
    leave(page, "remarks", "second")
    expect(page.locator("#saving")).to_contain_text("All saved")
    kept = Draft(Sheet.objects.get()).fields["remarks"]
    assert (kept.clashes, kept.text) == (False, "second")


def test_a_step_with_something_not_taken_shows_it_in_its_field(
    tablet: Tablet, live_server: LiveServer, device: Device
) -> None:
    sheets.could_not_test(by=device.by, reason="Plugged.", sheet_id=device.sheet.pk)
    device.type({f"checklist.{line['key']}": "yes" for line in device.sheet.basis["checklist"]})
    page = shown(tablet("technician"), live_server, device.sheet)
    page.fill("[name=remarks]", "x" * 2001)
    with page.expect_navigation():
        page.get_by_role("button", name="It is back in service").click()
    expect(page.locator("[name=remarks]")).to_have_value("x" * 2001)
    expect(page.get_by_role("alert").filter(has_text="Not gone on")).to_be_visible()
    page.reload()
    assert page.url == f"{live_server.url}/sheets/{device.sheet.pk}/"
    expect(page.locator("#refused .typed")).to_have_text("x" * 2001)
    assert Sheet.objects.get().stage == "return"
    page.fill("[name=remarks]", "short")
    with page.expect_navigation():
        page.get_by_role("button", name="It is back in service").click()
    assert Sheet.objects.get().stage == "sign"
    assert Draft(Sheet.objects.get()).text("remarks") == "short"


def test_a_choice_that_still_waits_is_chosen_again_after_a_reload(
    tablet: Tablet, live_server: LiveServer, crew: people.Cast
) -> None:
    device = opened(people.make_ready_tag(people.make_area(crew.plant, "20"), "PT-100"), crew.technician)
    to_adjustment(device)
    page = shown(tablet("technician"), live_server, device.sheet)
    page.route("**/entries/", lambda route: route.abort())
    page.get_by_label("Not adjusted").check()
    expect(page.locator("#saving")).to_contain_text("kept on this device")
    page.reload()
    expect(page.get_by_label("Not adjusted")).to_be_checked()
    with page.expect_navigation():
        page.get_by_role("button", name="Go on").click()
    assert Draft(Sheet.objects.get()).text("adjust.choice") == "not adjusted"
    assert Sheet.objects.get().stage == "return"


def test_a_field_still_open_survives_a_reload(tablet: Tablet, live_server: LiveServer, device: Device) -> None:
    page = shown(tablet("technician"), live_server, device.sheet)
    page.fill("[name='as-found.5.measured']", "20.01")
    page.reload()
    expect(page.locator("[name='as-found.5.measured']")).to_have_value("20.01")
    expect(page.locator("#saving")).to_contain_text("All saved")
    assert Draft(Sheet.objects.get()).text("as-found.5.measured") == "20.01"


def test_a_lost_session_keeps_page_and_queue(tablet: Tablet, live_server: LiveServer, device: Device) -> None:
    page = shown(tablet("technician"), live_server, device.sheet)
    page.context.clear_cookies(name="sessionid")
    leave(page, "as-found.7.measured", "12.0")
    expect(page.locator("#saving")).to_contain_text("Signed out: sign in again in another window. 1 kept")
    assert page.input_value("[name='as-found.7.measured']") == "12.0"
    other = page.context.new_page()
    other.goto(f"{live_server.url}/sign-in/")
    other.fill("[name=username]", "technician")
    other.fill("[name=password]", people.PASSWORD)
    other.press("[name=password]", "Enter")
    other.wait_for_url(lambda url: "sign-in" not in url)
    expect(page.locator("#saving")).to_contain_text("All saved", timeout=15000)
    assert Draft(Sheet.objects.get()).text("as-found.7.measured") == "12.0"


def test_the_second_person_sees_both_versions_and_settles_them(
    tablet: Tablet, live_server: LiveServer, device: Device
) -> None:
    first = shown(tablet("technician"), live_server, device.sheet)
    second = shown(tablet("engineer"), live_server, device.sheet)
    leave(first, "as-found.3.measured", "12.01")
    expect(first.locator("#saving")).to_contain_text("All saved")
    leave(second, "as-found.3.measured", "12.02")
    clash = second.locator("#r-as-found-3-note .clash")
    expect(clash).to_contain_text("12.01 typed by Technician")
    expect(clash).to_contain_text("12.02 typed by you")
    expect(first.locator("#news")).to_contain_text("Engineer typed “12.02”", timeout=20000)
    with second.expect_navigation():
        clash.get_by_text("Take theirs").click()
    assert second.input_value("[name='as-found.3.measured']") == "12.01"


def test_a_text_left_in_the_same_moment_as_the_button_goes_with_it(
    tablet: Tablet, live_server: LiveServer, device: Device
) -> None:
    page = shown(tablet("technician"), live_server, device.sheet)
    fieldsets = page.locator("fieldset.reading")
    for place in range(fieldsets.count()):
        expected = fieldsets.nth(place).locator(".expected").inner_text()
        nominal, ideal = re.findall(r"[0-9.]+", expected)
        inputs = fieldsets.nth(place).locator("input[inputmode=decimal]")
        inputs.nth(0).fill(nominal)
        inputs.nth(1).fill(ideal)
    with page.expect_navigation():
        page.get_by_role("button", name="Close as-found").click()
    expect(page.locator("h2", has_text="Was it adjusted?")).to_be_visible()
    assert not Draft(Sheet.objects.get()).clashes


def test_the_sign_button_serves_pads_without_a_minus(tablet: Tablet, live_server: LiveServer, device: Device) -> None:
    page = shown(tablet("technician"), live_server, device.sheet)
    page.fill("[name='as-found.1.applied']", "0.02")
    page.get_by_role("button", name="Change the sign of Applied").first.click()
    assert page.input_value("[name='as-found.1.applied']") == "-0.02"
    page.locator("[name='as-found.1.applied']").blur()
    expect(page.locator("#saving")).to_contain_text("All saved")
    assert Draft(Sheet.objects.get()).text("as-found.1.applied") == "-0.02"


def test_what_is_typed_again_as_it_stood_leaves_nothing_to_save(
    tablet: Tablet, live_server: LiveServer, device: Device
) -> None:
    page = shown(tablet("technician"), live_server, device.sheet)
    leave(page, "as-found.1.measured", "4.01")
    expect(page.locator("#saving")).to_contain_text("All saved")
    page.fill("[name='as-found.1.measured']", "4.0")
    expect(page.locator("#saving")).to_contain_text("Not saved yet")
    page.fill("[name='as-found.1.measured']", "4.01")
    page.locator("[name='as-found.1.measured']").blur()
    expect(page.locator("#saving")).to_contain_text("All saved")
    assert Entry.objects.filter(field="as-found.1.measured").count() == 1


@pytest.mark.parametrize("size", SIZES)
def test_every_target_is_large_enough_for_a_glove(
    tablet: Tablet, live_server: LiveServer, device: Device, size: str
) -> None:
    page = shown(tablet("technician", size), live_server, device.sheet)
    page.locator(".conditions > summary").click()
    targets = page.locator(
        "#sheet :is(input:not([type=hidden]), select, button, textarea, summary, .sequence a, .other-actions a)"
    )
    assert targets.count() > 40
    for target in targets.all():
        box = target.bounding_box()
        assert box is not None
        # 12 mm at 96 px an inch is 45 px; the look asks for 48. A tick counts with its label.
        assert box["height"] >= 47.5, target.evaluate("element => element.outerHTML")


def test_a_signature_asks_for_the_password_and_leads_to_the_test(
    tablet: Tablet, live_server: LiveServer, crew: people.Cast
) -> None:
    tag = people.make_ready_tag(people.make_area(crew.plant, "20"), "PT-100")
    device = opened(tag, crew.technician)
    to_signature(device, (0.6,) * 9, (0.1,) * 9)
    page = shown(tablet("technician"), live_server, device.sheet)
    page.fill("#password", "wrong")
    with page.expect_navigation():
        page.get_by_role("button", name="Sign", exact=True).click()
    expect(page.locator("#password-error")).to_contain_text("Nothing is signed")
    page.fill("#password", people.PASSWORD)
    with page.expect_navigation():
        page.get_by_role("button", name="Sign", exact=True).click()
    expect(page.locator("h1")).to_contain_text("PT-100 test of")
    assert page.url.endswith(f"/tests/{Test.objects.get().pk}/")
