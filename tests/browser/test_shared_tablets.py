"""One tablet, several people: whoever goes back after another has signed out sees nothing of his pages."""

from __future__ import annotations

import pytest
from playwright.sync_api import Page, expect

from fixtures.demonstration.people import PASSWORD
from tests.browser.hands import Crew

pytestmark = pytest.mark.browser
SITE = "demonstration"
A_TAG = "PT-3106"


def signs_out(page: Page) -> None:
    page.locator("summary", has_text="Nell Orrowby").click()
    page.get_by_role("button", name="Sign out").click()
    expect(page.get_by_role("heading", level=1)).to_have_text("Sign in")


def test_going_back_after_signing_out_leads_to_the_door(crew: Crew) -> None:
    planner = crew("planner", PASSWORD, size="lying")
    page = planner.goes_to("/register/")
    page.get_by_label("Words begin with").fill(A_TAG)
    expect(page.locator("#rows")).not_to_contain_text("PT-3104")
    expect(page.locator("#rows")).to_contain_text(A_TAG)
    page.locator("#rows").get_by_role("link", name=A_TAG).first.click()
    expect(page.get_by_role("heading", level=1)).to_contain_text(A_TAG)
    assert page.evaluate("Object.values(sessionStorage).filter(kept => kept.includes('PT-'))") == []
    signs_out(page)
    for _ in range(3):
        page.go_back()
        expect(page.get_by_label("Password")).to_be_visible()
        expect(page.get_by_text("PT-")).to_have_count(0)
    assert not planner.problems, "\n".join(planner.problems)


def test_going_back_to_an_earlier_filter_brings_its_rows_and_its_frame(crew: Crew) -> None:
    planner = crew("planner", PASSWORD)
    page = planner.goes_to("/register/")
    rows = page.locator("#rows tbody tr")
    many = rows.count()
    page.get_by_label("Words begin with").fill(A_TAG)
    expect(rows).to_have_count(1)
    page.go_back()
    expect(rows).to_have_count(many)
    expect(page.get_by_role("navigation", name="Pages", exact=True)).to_have_count(1)
    expect(page.get_by_label("Words begin with")).to_have_value("")
    page.go_forward()
    expect(rows).to_have_count(1)
    page.keyboard.press("j")
    expect(rows.get_by_role("link").first).to_be_focused()
    assert not planner.problems, "\n".join(planner.problems)
