"""The main job after the signature: what the test says, the new date, the review, and the auditor's walk."""

from __future__ import annotations

import datetime
import re

from playwright.sync_api import Page, expect

from tests.browser.hands import Hand
from tests.browser.job_office import PASSWORD, TODAY, fill, press
from tests.browser.job_sheet import SERIAL, TAG


def a_year_later(day: datetime.date) -> datetime.date:
    """The same day of the next year; a 29th of February falls due on the 28th."""
    try:
        return day.replace(year=day.year + 1)
    except ValueError:
        return day.replace(year=day.year + 1, day=28)


def the_test_shows_plot_figures_and_verdict(technician: Hand) -> None:
    page = technician.page
    lines = page.get_by_role("main").get_by_role("paragraph")
    expect(lines.filter(has_text=re.compile("^As-found"))).to_contain_text("fail, out of tolerance")
    expect(lines.filter(has_text=re.compile("^As-left"))).to_contain_text("pass, in tolerance")
    expect(page.get_by_role("img", name=re.compile("^Errors of the test"))).to_be_visible()
    found = page.get_by_role("region", name="Readings, as-found")
    # 100 % up: 20.096 mA where 20 mA is ideal, (20.096 − 20) / 16 · 100 % = +0.600 % of span.
    expect(found.get_by_role("row", name=re.compile("^100 %"))).to_contain_text("+0.600")
    figures = page.get_by_role("table").filter(has_text="Non-linearity, terminal-based").first
    # Zero error: mean of both readings at 0 %; span error: +0.600 at 100 % less that.
    expect(figures.get_by_role("row", name=re.compile("^Zero error"))).to_contain_text("+0.200")
    expect(figures.get_by_role("row", name=re.compile("^Span error"))).to_contain_text("+0.400")
    page.get_by_text(re.compile("^Return to service, ")).tap()
    expect(page.get_by_text(re.compile("^Zero read at line pressure"))).to_be_visible()
    expect(page.get_by_text(f"Accepted: the next due date counts from {TODAY}")).to_be_visible()


def the_due_date_has_moved(planner: Hand) -> None:
    page = planner.goes_to("/due/")
    row = page.get_by_role("row", name=re.compile(TAG))
    expect(row).to_contain_text("not due")
    expect(row).to_contain_text(a_year_later(TODAY).isoformat())


def the_record_is_reviewed(reviewer: Hand) -> None:
    page = reviewer.goes_to("/tests/")
    page.get_by_role("row", name=re.compile(rf"{TODAY}.*{TAG}")).get_by_role("link").first.click()
    page.get_by_role("link", name="Review the record").click()
    review = page.get_by_role("group", name="Reviewed")
    review.get_by_label("Your password").fill(PASSWORD)
    press(page, "Sign the review")
    expect(page.get_by_role("row", name=re.compile("Abel Torrowdane"))).to_contain_text("reviewed")


def the_auditor_walks_from_drift_to_certificate(auditor: Hand) -> None:
    """Three taps: test, standard, certificate. Nothing on the way can be changed."""
    page = auditor.goes_to(f"/find/?q={SERIAL}")
    expect(page.get_by_role("heading", level=1)).to_contain_text(SERIAL)
    page.goto(f"{auditor.site.url}/find/?q={TAG}")
    expect(page.get_by_role("img", name=re.compile("drift", re.I)).first).to_be_visible()
    # Seven as-founds, each paired with the as-left before it: six pairs, and so a rate with its band.
    expect(page.get_by_role("definition").filter(has_text=re.compile("% of span a year")).first).to_be_visible()
    changes_nothing(page)
    page.get_by_role("region", name="Tests").get_by_role("link", name=str(TODAY)).click()
    expect(page.get_by_role("heading", level=1)).to_have_text(f"{TAG} test of {TODAY}")
    changes_nothing(page)
    page.get_by_role("link", name="PS-01").first.click()
    expect(page.get_by_role("heading", level=1)).to_contain_text("PS-01")
    changes_nothing(page)
    page.go_back()
    page.get_by_role("link", name="K-2201").first.click()
    row = page.get_by_role("row", name=re.compile("K-2201")).first
    expect(row).to_be_in_viewport()
    expect(row).to_contain_text("Ondrevale Pressure Laboratory")
    used = page.get_by_role("table").filter(has_text="In them it")
    used.get_by_role("link", name=str(TODAY)).click()
    expect(page.get_by_role("heading", level=1)).to_have_text(f"{TAG} test of {TODAY}")


def the_auditor_reads_what_was_changed(auditor: Hand) -> None:
    page = auditor.goes_to("/audit/")
    changes_nothing(page)
    fill(page, {"Thing": "FT-2041", "Field": "range"})
    press(page, "Show")
    changed = page.get_by_role("row", name=re.compile("FT-2041")).filter(has_text="the flow never goes above that")
    expect(changed.first).to_contain_text("Ida Corrowmere")
    changed.first.get_by_role("link").first.click()
    expect(page.get_by_role("definition").filter(has_text="the flow never goes above that")).to_be_visible()


def changes_nothing(page: Page) -> None:
    """All that a reader may press shows, finds, takes out a copy, or signs out."""
    allowed = re.compile("^(Go|Show|Sign out|Take .*|)$")
    names = [button.inner_text().strip() for button in page.get_by_role("button").all() if button.is_visible()]
    assert all(allowed.match(name) for name in names), names
    verbs = re.compile("^(Change|Swap|Remove|Add|Set|Start|Withdraw|Accept|Correct|Defer|Register|Bring)\\b")
    links = [link.inner_text().strip() for link in page.get_by_role("main").get_by_role("link").all()]
    assert not [link for link in links if verbs.match(link) and link != "Register"], links


def a_stranger_finds_nothing(stranger: Hand, address: str) -> None:
    """A planner of another plant: the pages of this one do not exist for him."""
    with stranger.expecting(404):
        for path in (address, "/register/?plant=tallowmere"):
            page = stranger.goes_to(path)
            expect(page.get_by_text(TAG)).to_have_count(0)
            assert page.request.get(page.url).status == 404, path
    page = stranger.goes_to(f"/find/?q={TAG}")
    expect(page.get_by_text("No tag and no serial number begins so.")).to_be_visible()
    page = stranger.goes_to("/due/")
    expect(page.get_by_text(TAG)).to_have_count(0)
