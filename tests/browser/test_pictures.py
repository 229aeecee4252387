"""The pictures of README: what they show is there, and they stay small.

With FOUNDLEFT_IMAGES they are written into that folder, else into one that is thrown away.
"""

from __future__ import annotations

import os
import re
from io import BytesIO
from pathlib import Path
from typing import Final

import pytest
from PIL import Image
from playwright.sync_api import Locator, Page, expect

from fixtures.demonstration.people import PASSWORD
from tests.browser.hands import Crew
from tests.browser.site import TOP

pytestmark = pytest.mark.browser
SITE = "demonstration"
LARGEST_BYTES: Final = 200_000
#: Drift of the zero with its prediction, and a test found outside: see the table of the demonstration in DEVELOPERS.md.
DRIFTING: Final = "PT-2113"
FAILED: Final = "FT-3117"


@pytest.fixture
def folder(tmp_path: Path) -> Path:
    wanted = Path(os.environ.get("FOUNDLEFT_IMAGES") or tmp_path)
    wanted.mkdir(parents=True, exist_ok=True)
    return wanted


def taken(folder: Path, name: str, shown: Page | Locator) -> str:
    """Take a picture of what is on the screen, or of one part of a page; its name."""
    path = folder / name
    picture = Image.open(BytesIO(shown.screenshot(animations="disabled", caret="initial")))
    # A palette that keeps the rare signal tones apart needs a third of the bytes of full colour.
    picture.convert("RGB").quantize(256, method=Image.Quantize.MAXCOVERAGE).save(path, optimize=True)
    assert 10_000 < path.stat().st_size <= LARGEST_BYTES, f"{name}: {path.stat().st_size} bytes"
    return name


def test_the_pictures_of_readme_show_what_they_say(crew: Crew, folder: Path) -> None:
    engineer = crew("engineer", PASSWORD, theme="light")
    page = engineer.goes_to("/register/")
    expect(page.get_by_role("row", name=re.compile("FT-1101"))).to_contain_text("0 to 100")
    names = {taken(folder, "register.png", page)}

    page = engineer.goes_to(f"/find/?q={DRIFTING}")
    expect(page.get_by_role("heading", name="How it stands")).to_be_visible()
    names.add(taken(folder, "tag.png", page))
    drift = page.locator("figure.chart")
    expect(drift.get_by_role("img")).to_be_visible()
    names.add(taken(folder, "drift.png", drift))

    planner = crew("planner", PASSWORD, theme="dark")
    page = planner.goes_to("/due/")
    expect(page.get_by_role("link", name=re.compile("overdue")).first).to_be_visible()
    names.add(taken(folder, "due.png", page))

    auditor = crew("auditor", PASSWORD, theme="light")
    page = auditor.goes_to(f"/find/?q={FAILED}")
    page.get_by_role("region", name="Tests").get_by_role("link").first.click()
    expect(page.get_by_role("main").get_by_role("paragraph").filter(has_text="As-found").first).to_contain_text("fail")
    page.set_viewport_size({"width": 1440, "height": 1240})
    names.add(taken(folder, "test.png", page))

    technician = crew("technician", PASSWORD, size="lying", theme="outdoor")
    page = technician.goes_to("/sheets/")
    page.get_by_role("link", name="PT-3106").tap()
    # The first reading of the way down, typed but not left, so that the picture shows it judged and in focus.
    reading = page.get_by_role("group", name=re.compile("^75 % down"))
    reading.get_by_label(re.compile("^Applied")).fill("90.00")
    reading.get_by_label(re.compile("^Measured")).press_sequentially("15.948")
    expect(reading.get_by_role("status")).to_contain_text("inside")
    names.add(taken(folder, "sheet.png", page))

    for hand in crew.hands:
        assert not hand.problems, f"{hand.name}: " + "\n".join(hand.problems)
    assert names == set(re.findall(r"\.github/images/([\w-]+\.png)", (TOP / "README.md").read_text()))
