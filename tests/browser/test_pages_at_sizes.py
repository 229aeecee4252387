"""Every page of the demonstration plants: at a desk and on tablets, by day, by night and in the sun."""

from __future__ import annotations

from collections.abc import Iterable

import pytest
from playwright.sync_api import expect

from fixtures.demonstration.people import PASSWORD
from tests.browser.hands import SIZES, Crew, Hand
from tests.browser.walking import barriers, kind_of, shown_in, too_wide, untidy, walk

pytestmark = pytest.mark.browser
SITE = "demonstration"

#: Pages that look otherwise than the first of their kind, or that no link leads to.
STATES_OF_TAGS = ("FT-3118", "PT-3104", "LT-1125", "PT-4134", "LT-5125", "FT-1109", "PT-3106")
OTHERWISE = (
    *(f"/find/?q={number}" for number in STATES_OF_TAGS),
    "/find/",
    "/find/?q=PT-1",
    "/find/?q=no+such+thing",
    "/register/?text=zzzz",
    "/due/?state=overdue",
    "/tests/?text=zzzz",
)


def looked_over(
    hand: Hand, starts: Iterable[str], *, sizes: Iterable[str], themes: Iterable[str], seen: set[str]
) -> None:
    """Walk all pages not seen yet; all that is wrong with any of them is told at once."""
    wrong: list[str] = []
    first, *others = themes
    hand.chooses_theme(first)
    for address in walk(hand, starts, lambda kind: kind not in seen):
        page = hand.page
        found = untidy(page) + barriers(hand)
        for size in sizes:
            page.set_viewport_size(dict(zip(("width", "height"), SIZES[size], strict=True)))  # type: ignore[arg-type]
            found += too_wide(page)
        for theme in others:
            shown_in(page, theme)
            found += [f"{theme}: {barrier}" for barrier in barriers(hand, only_contrast=True)]
        wrong += [f"{address}: {what}" for what in found]
        seen.add(kind_of(address))
    assert not wrong, "\n".join(wrong)
    assert not hand.problems, "\n".join(hand.problems)


def test_every_page_of_the_office_fits_its_screen_and_its_readers(crew: Crew) -> None:
    seen: set[str] = set()
    engineer = crew("engineer", PASSWORD)
    looked_over(engineer, ("/", *OTHERWISE), sizes=("desk", "lying"), themes=("light", "dark"), seen=seen)
    assert {"/tags/N/", "/tests/N/", "/sheets/U/", "/standards/N/", "/audit/U/", "/tags/N/range/"} <= seen
    # Whoever comes after walks what only he can reach, and the first page of each kind that all share.
    for name, own in (
        ("administrator", {"/people/", "/people/N/", "/people/N/edit/", "/plants/new/"}),
        ("planner", {"/tags/N/defer/"}),
        ("reviewer", set[str]()),
        ("auditor", set[str]()),
    ):
        hand = crew(name, PASSWORD)
        before = len(seen)
        looked_over(hand, ("/", "/plants/", "/find/?q=PT-4134"), sizes=("desk",), themes=("dark",), seen=seen)
        assert own <= seen, f"{name} reached {len(seen) - before} kinds of page of his own"


def test_every_page_fits_a_tablet_in_the_sun(crew: Crew) -> None:
    technician = crew("technician", PASSWORD, size="upright")
    seen: set[str] = set()
    looked_over(technician, ("/", *OTHERWISE), sizes=("upright", "lying"), themes=("outdoor", "light"), seen=seen)
    assert {"/tags/N/", "/tests/N/", "/sheets/U/", "/tags/N/test/"} <= seen


def test_every_form_fits_a_tablet(crew: Crew) -> None:
    engineer = crew("engineer", PASSWORD, size="lying")
    wrong = []
    for address in walk(
        engineer,
        ("/",),
        lambda kind: kind.endswith(("/new/", "/edit/", "/range/", "/requirement/")) or kind.count("/") <= 3,
    ):
        for size in ("lying", "upright"):
            engineer.page.set_viewport_size(dict(zip(("width", "height"), SIZES[size], strict=True)))  # type: ignore[arg-type]
            wrong += [f"{address}: {what}" for what in too_wide(engineer.page)]
    assert not wrong, "\n".join(wrong)
    assert not engineer.problems, "\n".join(engineer.problems)


def test_pages_for_people_who_are_not_signed_in_are_whole(crew: Crew) -> None:
    visitor = crew("visitor")
    for theme in ("light", "dark", "outdoor"):
        visitor.chooses_theme(theme)
        page = visitor.goes_to("/due/")
        expect(page.get_by_role("heading", name="Sign in")).to_be_visible()
        assert untidy(page) + barriers(visitor) == []
    page.get_by_label("Sign-in name").fill("planner")
    page.get_by_label("Password").fill("not this one")
    page.get_by_role("button", name="Sign in").click()
    expect(page.get_by_role("alert")).to_be_visible()
    assert page.get_by_label("Sign-in name").input_value() == "planner"
    assert not visitor.problems, "\n".join(visitor.problems)


def test_a_page_that_does_not_exist_says_so_in_the_frame_of_the_site(crew: Crew) -> None:
    auditor = crew("auditor", PASSWORD)
    with auditor.expecting(403, 404):
        for address in ("/nowhere/", "/tags/999999/", "/tags/new/"):
            page = auditor.goes_to(address)
            assert untidy(page) + barriers(auditor) == [], address
    assert not auditor.problems, "\n".join(auditor.problems)


def test_the_keyboard_finds_a_tag_and_walks_a_list(crew: Crew) -> None:
    planner = crew("planner", PASSWORD)
    page = planner.goes_to("/register/")
    first, second = (row.get_by_role("link").first for row in page.locator("table[data-keys] tbody tr").all()[:2])
    page.keyboard.press("j")
    expect(first).to_be_focused()
    page.keyboard.press("j")
    expect(second).to_be_focused()
    page.keyboard.press("k")
    expect(first).to_be_focused()
    number = first.inner_text()
    page.keyboard.press("Enter")
    expect(page.get_by_role("heading", level=1)).to_contain_text(number)
    page.keyboard.press("/")
    search = page.get_by_role("searchbox", name="Tag or serial number")
    expect(search).to_be_focused()
    page.keyboard.type("pt-3106")
    page.keyboard.press("Enter")
    expect(page.get_by_role("heading", level=1)).to_contain_text("PT-3106")
    page.keyboard.press("Tab")
    expect(page.get_by_role("link", name="To the page")).to_be_focused()
    assert not planner.problems, "\n".join(planner.problems)


def test_keys_that_speech_input_would_press_can_be_turned_off(crew: Crew) -> None:
    planner = crew("planner", PASSWORD)
    page = planner.goes_to("/register/")
    said = page.get_by_text("down and up a list, ")
    expect(said).to_be_visible()
    page.locator("summary", has_text="Nell Orrowby").click()
    page.get_by_label("Keys / j k").select_option("off")
    page.keyboard.press("Escape")
    expect(said).to_be_hidden()
    for _ in range(2):
        for key in ("/", "j", "k"):
            page.keyboard.press(key)
        expect(page.locator("tr.at")).to_have_count(0)
        expect(page.get_by_role("searchbox", name="Tag or serial number")).not_to_be_focused()
        planner.goes_to("/register/")
        expect(said).to_be_hidden()
    page.locator("summary", has_text="Nell Orrowby").click()
    page.get_by_label("Keys / j k").select_option("")
    page.keyboard.press("Escape")
    page.keyboard.press("/")
    expect(page.get_by_role("searchbox", name="Tag or serial number")).to_be_focused()
    assert not planner.problems, "\n".join(planner.problems)
