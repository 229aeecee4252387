"""The main job at the transmitter: two technicians with tablets, gloves on, and one sheet."""

from __future__ import annotations

import re
from typing import Final

from playwright.sync_api import Locator, Page, expect

from tests.browser.hands import Hand
from tests.browser.job_office import PASSWORD, POINTS, TODAY, current
from tests.browser.walking import barriers, untidy

TAG: Final = "FT-2043"
SERIAL: Final = "QH-10043"
#: Errors in % of span, point by point: too high at the upper end as found, and what is left after the adjustment.
AS_FOUND: Final = (0.2, 0.3, 0.4, 0.5, 0.6, 0.5, 0.4, 0.3, 0.2)
AS_LEFT: Final = (0.0, 0.025, 0.05, 0.05, 0.05, 0.05, 0.05, 0.025, 0.0)


def tap(page: Page, name: str) -> None:
    page.get_by_role("button", name=name, exact=True).tap()


def saved(page: Page) -> None:
    expect(page.locator("#saving")).to_contain_text("All saved")


def fits_the_hand(hand: Hand) -> None:
    """The stage fits the tablet, shuts nobody out, and everything that is touched is at least 48 px high."""
    assert untidy(hand.page) + barriers(hand) == []
    touched = hand.page.locator("#sheet :is(button, input:not([type=hidden]), select, textarea, summary)")
    for target in touched.all():
        if not target.is_visible():
            continue
        label = target.locator("xpath=ancestor::label[1]")
        box = (label if label.count() else target).bounding_box()
        assert box is not None
        assert box["height"] >= 47.5, target.evaluate("element => element.outerHTML")


def reading(page: Page, place: int) -> Locator:
    """The fields of a reading by its place in the run, which begins with 1."""
    return page.get_by_role("group", name=re.compile("%")).nth(place - 1)


def field(page: Page, place: int, name: str) -> Locator:
    return reading(page, place).get_by_label(re.compile(f"^{name}"))


def a_sheet_is_opened_from_the_due_list(technician: Hand) -> None:
    page = technician.goes_to("/due/")
    row = page.get_by_role("row", name=re.compile(TAG))
    expect(row).to_contain_text("in grace")
    row.get_by_role("link", name=TAG).tap()
    page.get_by_role("link", name="Start a test").tap()
    tap(page, "Open the sheet")
    expect(page.get_by_role("heading", name="Is this the right instrument?")).to_be_visible()
    fits_the_hand(technician)


def the_wrong_instrument_is_refused(technician: Hand) -> None:
    page = technician.page
    tag, serial = page.get_by_label("Tag on the plate"), page.get_by_label("Serial number on the nameplate")
    tag.fill(TAG)
    serial.fill("QH-10042")
    tap(page, "Confirm the instrument")
    expect(page.get_by_role("alert").filter(has_text="QH-10042").first).to_be_visible()
    expect(tag).to_have_value(TAG)
    serial.fill(SERIAL)
    serial.blur()
    saved(page)
    tap(page, "Confirm the instrument")
    expect(page.get_by_role("heading", name="Before you start")).to_be_visible()


def every_caution_is_answered(technician: Hand) -> None:
    page = technician.page
    expect(page.get_by_text("Site procedures, local codes and licensed practice come first.").first).to_be_visible()
    fits_the_hand(technician)
    tap(page, "All of this is done")
    expect(page.get_by_role("alert").first).to_be_visible()
    lines_are_answered(page, {"control room": "N. Orrowby, 10:20"})
    tap(page, "All of this is done")
    expect(page.get_by_role("heading", name="Which reference standards are used?")).to_be_visible()


def lines_are_answered(page: Page, texts: dict[str, str]) -> None:
    for box in page.get_by_role("listitem").get_by_role("checkbox").all():
        box.tap()
    for label, text in texts.items():
        answer = page.get_by_role("textbox", name=re.compile(label, re.I))
        answer.fill(text)
        answer.blur()
    saved(page)


def a_lapsed_standard_is_refused(technician: Hand) -> None:
    page = technician.page
    applies, measures = page.get_by_label("Applies the input"), page.get_by_label("Measures the output")
    applies.select_option(label=_offered(applies, "PS-09"))
    measures.select_option(label=_offered(measures, "MA-01"))
    saved(page)
    refusal = page.get_by_role("alert").filter(has_text="K-1850")
    expect(refusal.first).to_be_visible()
    fits_the_hand(technician)
    tap(page, "Begin the as-found run")
    expect(page.get_by_role("heading", name="Which reference standards are used?")).to_be_visible()
    applies.select_option(label=_offered(applies, "PS-01"))
    saved(page)
    expect(refusal).to_have_count(0)
    tap(page, "Begin the as-found run")
    expect(page.get_by_role("heading", name=re.compile("^As-found"), level=2)).to_be_visible()


def _offered(select: Locator, name: str) -> str:
    found = [text for text in select.get_by_role("option").all_inner_texts() if text.startswith(name)]
    assert len(found) == 1, found
    return found[0]


def readings_are_judged_as_they_are_typed(technician: Hand) -> None:
    """Three readings; then the page is loaded again and has lost nothing."""
    page = technician.page
    fits_the_hand(technician)
    field(page, 1, "Applied").fill("0.00")
    field(page, 1, "Measured").press_sequentially(current(0, AS_FOUND[0]), delay=20)
    # Judged before the field is left.
    expect(reading(page, 1).get_by_role("status")).to_contain_text("+0.200")
    for place in (2, 3):
        reading_is_typed(page, place, POINTS[place - 1], AS_FOUND[place - 1])
    saved(page)
    page.reload()
    for place in (1, 2, 3):
        expect(field(page, place, "Measured")).to_have_value(current(POINTS[place - 1], AS_FOUND[place - 1]))
        expect(reading(page, place).get_by_role("status")).to_contain_text(f"{AS_FOUND[place - 1]:+.3f}")
    expect(page.get_by_role("button", name="Close as-left")).to_have_count(0)


def reading_is_typed(page: Page, place: int, point: float, error: float, *, word: str = "inside") -> None:
    field(page, place, "Applied").fill(f"{point:.2f}")
    field(page, place, "Measured").fill(current(point, error))
    field(page, place, "Measured").blur()
    expect(reading(page, place).get_by_role("status")).to_contain_text(f"{error:+.3f}")
    expect(reading(page, place).get_by_role("status")).to_contain_text(word)


def two_people_see_both_versions(technician: Hand, second: Hand) -> None:
    """The second is told of the first; what both typed is shown to both, and the first keeps his own."""
    page, other = technician.page, second.goes_to("/sheets/")
    other.get_by_role("link", name=TAG).tap()
    expect(other.get_by_text("is on this sheet too")).to_contain_text("Tam Eddlewick")
    reading_is_typed(page, 4, POINTS[3], AS_FOUND[3])
    saved(page)
    field(other, 4, "Measured").fill("16.020")
    field(other, 4, "Measured").blur()
    clash = reading(other, 4).get_by_role("alert")
    expect(clash).to_contain_text(f"{current(POINTS[3], AS_FOUND[3])} typed by Tam Eddlewick")
    expect(clash).to_contain_text("16.020 typed by you")
    page.reload()
    mine = reading(page, 4).get_by_role("alert")
    expect(mine).to_contain_text("16.020 typed by Jo Hazzlewray")
    fits_the_hand(technician)
    mine.get_by_role("button", name="Keep mine").tap()
    expect(reading(page, 4).get_by_role("alert")).to_have_count(0)
    expect(field(page, 4, "Measured")).to_have_value(current(POINTS[3], AS_FOUND[3]))


def as_found_is_closed_before_adjustment_opens(technician: Hand) -> None:
    page = technician.page
    for place, (point, error) in enumerate(zip(POINTS, AS_FOUND, strict=True), start=1):
        if place > 4:
            reading_is_typed(page, place, point, error, word="outside" if error > 0.5 else "inside")
    saved(page)
    expect(page.get_by_role("paragraph").filter(has_text="As-found so far:")).to_contain_text("fail")
    tap(page, "Close as-found")
    expect(page.get_by_role("heading", name="Was it adjusted?")).to_be_visible()
    expect(page.get_by_label(re.compile("^Measured"))).to_have_count(0)
    fits_the_hand(technician)


def it_is_adjusted_and_read_again(technician: Hand) -> None:
    page = technician.page
    page.get_by_role("radio", name="Adjusted", exact=True).tap()
    log = page.get_by_label("What was adjusted, and how")
    log.fill("span trimmed at 100 %")
    log.blur()
    saved(page)
    tap(page, "Go on")
    expect(page.get_by_role("heading", name=re.compile("^As-left"), level=2)).to_be_visible()
    for place, (point, error) in enumerate(zip(POINTS, AS_LEFT, strict=True), start=1):
        field(page, place, "Applied").fill(f"{point:.2f}")
        field(page, place, "Measured").fill(current(point, error))
        field(page, place, "Measured").blur()
    saved(page)
    expect(page.get_by_role("paragraph").filter(has_text="As-left so far:")).to_contain_text("pass")
    tap(page, "Close as-left")
    expect(page.get_by_role("heading", name="Return to service")).to_be_visible()


def it_goes_back_into_service(technician: Hand) -> None:
    """The checklist asks for the zero read at line pressure."""
    page = technician.page
    fits_the_hand(technician)
    lines_are_answered(page, {"zero read at line pressure": "4.003", "control room sees": "N. Orrowby, 11:40"})
    tap(page, "It is back in service")
    expect(page.get_by_role("heading", name="Read it, then sign")).to_be_visible()


def it_is_signed_with_the_password(technician: Hand) -> None:
    page = technician.page
    fits_the_hand(technician)
    password = page.get_by_label(re.compile("^Your password"))
    password.fill("not this one")
    tap(page, "Sign")
    expect(page.get_by_role("alert").filter(has_text="Nothing is signed")).to_be_visible()
    password.fill(PASSWORD)
    tap(page, "Sign")
    expect(page.get_by_role("heading", level=1)).to_have_text(f"{TAG} test of {TODAY}")
