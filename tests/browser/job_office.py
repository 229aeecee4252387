"""The main job at a desk: a plant is opened, people get their roles, a register and a history are brought in."""

from __future__ import annotations

import csv
import datetime
import io
import re
from collections.abc import Mapping, Sequence
from typing import Final

from playwright.sync_api import Page, expect

from tests.browser.hands import Crew, Hand

PLANT: Final = "Tallowmere Works"
OTHER_PLANT: Final = "Eelbrook Depot"
FIRST_PASSWORD: Final = "handed over 4711"
PASSWORD: Final = "well-kept secret 7"
TODAY: Final = datetime.datetime.now(datetime.UTC).date()
#: Sign-in name, printed name, role.
STAFF: Final = (
    ("engineer", "Ida Corrowmere", "instrument engineer"),
    ("planner", "Nell Orrowby", "maintenance planner"),
    ("tam", "Tam Eddlewick", "technician"),
    ("jo", "Jo Hazzlewray", "technician"),
    ("reviewer", "Abel Torrowdane", "reviewer"),
    ("auditor", "Ruth Vennowick", "auditor (reads only)"),
)
STRANGER: Final = ("stranger", "Pru Ellanwyke", "maintenance planner")
INTERVAL_MONTHS: Final = 12


def days_ago(days: int) -> str:
    return (TODAY - datetime.timedelta(days=days)).isoformat()


def fill(page: Page, texts: Mapping[str, str]) -> None:
    """Type into fields by their labels, which may be followed by “if any”."""
    for label, text in texts.items():
        field = page.get_by_label(re.compile(rf"^\s*{re.escape(label)}( if any)?\s*$")).first
        if field.evaluate("field => field.tagName") == "SELECT":
            field.select_option(label=text)
        else:
            field.fill(text)


def press(page: Page, name: str) -> None:
    page.get_by_role("button", name=name, exact=True).click()


def table_text(rows: Sequence[Mapping[str, str]], separator: str = ",") -> bytes:
    """A file as a spreadsheet writes it, its headings from the first row."""
    written = io.StringIO()
    writer = csv.DictWriter(written, fieldnames=list(rows[0]), delimiter=separator, restval="")
    writer.writeheader()
    writer.writerows(rows)
    return written.getvalue().encode()


def the_first_administrator_opens_the_plant(crew: Crew) -> Hand:
    """With the code printed where the site was started; a wrong one is refused and nothing typed is lost."""
    hand = crew("administrator")
    page = hand.goes_to("/")
    expect(page.get_by_role("heading", level=1)).to_have_text("First plant, first administrator")
    passwords = {"Password": PASSWORD, "The password again": PASSWORD}
    fill(
        page,
        {
            "One-time code": "not-the-code",
            "Short name of the plant": "tallowmere",
            "Name of the plant": PLANT,
            "Time zone": "UTC",
            "Sign-in name": "administrator",
            "Printed name": "Otto Quenderby",
            **passwords,
        },
    )
    press(page, "Make plant and administrator")
    expect(page.get_by_text("This is not the code.")).to_be_visible()
    expect(page.get_by_label("Name of the plant", exact=True)).to_have_value(PLANT)
    fill(page, {"One-time code": hand.site.code, **passwords})
    press(page, "Make plant and administrator")
    expect(page.get_by_role("heading", level=1)).to_have_text(f"People of {PLANT}")
    return hand


def an_area_is_made(administrator: Hand) -> None:
    page = administrator.goes_to("/plants/")
    page.get_by_role("link", name="Add an area").first.click()
    fill(page, {"Area": "20", "Name": "Boiler house", "Lowest ambient": "5", "Highest ambient": "45"})
    press(page, "Add the area")
    expect(page.get_by_role("row", name=re.compile("Boiler house"))).to_contain_text("5 to 45")


def people_get_their_roles(administrator: Hand) -> None:
    for person in STAFF:
        _person_is_added(administrator, *person)
    administrator.goes_to("/plants/new/")
    fill(administrator.page, {"Code": "eelbrook", "Name": OTHER_PLANT})
    press(administrator.page, "Open the plant")
    expect(administrator.page.get_by_role("banner")).to_contain_text(OTHER_PLANT)
    _person_is_added(administrator, *STRANGER)


def _person_is_added(administrator: Hand, name: str, printed: str, role: str) -> None:
    page = administrator.goes_to("/people/new/")
    fill(
        page,
        {"Sign-in name": name, "Printed name": printed, "First password": FIRST_PASSWORD, "Reason": "works here now"},
    )
    page.get_by_role("checkbox", name=role, exact=True).check()
    press(page, "Add the person")
    expect(page.get_by_role("heading", level=1)).to_have_text(printed)
    expect(page.get_by_text(FIRST_PASSWORD)).to_be_visible()


def signs_in_for_the_first_time(crew: Crew, name: str, *, size: str = "desk", theme: str = "") -> Hand:
    """Whoever got a password from another chooses his own before anything else."""
    hand = crew(name, FIRST_PASSWORD, size=size, theme=theme)
    page = hand.page
    expect(page.get_by_role("heading", level=1)).to_have_text("Change your password")
    old, new, again = page.locator("main input[type=password]").all()
    old.fill(FIRST_PASSWORD)
    new.fill(PASSWORD)
    again.fill(PASSWORD)
    press(page, "Change the password")
    expect(page.get_by_text("Your password is changed.")).to_be_visible()
    return hand


def maker_type_and_head_are_written_down(engineer: Hand) -> None:
    page = engineer.goes_to("/makers/new/")
    fill(page, {"Maker": "Quillhaven Gauge Works"})
    press(page, "Add the maker")
    engineer.goes_to("/types/new/")
    fill(
        page,
        {
            "Maker": "Quillhaven Gauge Works",
            "Designation": "Heron D",
            "Measures": "differential",
            "One-side limit": "160",
            "Lowest ambient": "-20",
            "Highest ambient": "70",
            "Lowest process temperature": "-20",
            "Highest process temperature": "110",
            "Least supply voltage (V)": "12",
            "Temperature, row 1": "-20",
            "Pressure, row 1": "160",
            "Temperature, row 2": "110",
            "Pressure, row 2": "120",
        },
    )
    press(page, "Add the type")
    expect(page.get_by_role("heading", level=1)).to_contain_text("Heron D")
    page.get_by_role("link", name="Add a head").first.click()
    fill(page, {"Head": "D250", "Unit": "inH2O (68 °F)", "LRL": "-250", "URL": "250", "Least span": "5"})
    press(page, "Add the head")
    expect(page.get_by_role("row", name=re.compile("D250"))).to_contain_text("−250")


def register_rows() -> list[dict[str, str]]:
    """Three tags as a plant keeps them in a spreadsheet, under headings of its own."""
    common = {
        "Plant area": "20",
        "Measures": "flow",
        "Criticality": "production",
        "Pressure unit": "bar",
        "Pressure reference": "gauge",
        "Normal pressure": "8",
        "Design pressure": "10",
        "Temperature unit": "°C",
        "Lowest process temperature": "10",
        "Highest process temperature": "90",
        "Loop supply (V)": "24",
        "Loop resistance (ohm)": "250",
        "LRV": "0",
        "Range unit": "inH2O (68 °F)",
        "Output": "linear",
        "Range from": days_ago(3000),
        "Reason for the range": "data sheet",
        "Maker": "Quillhaven Gauge Works",
        "Type": "Heron D",
        "Head": "D250",
        "Fitted on": days_ago(3000),
    }
    own = (
        ("FT-2041", "Feed water to drum", "260", "QH-10041"),
        ("FT-2042", "Blow-down", "255", "QH-10042"),
        ("FT-2043", "Steam to turbine", "100", "QH-10043"),
    )
    return [
        {"Tag": tag, "Description": service, **common, "URV": urv, "Serial": serial}
        for tag, service, urv, serial in own
    ]


def the_register_is_brought_in(engineer: Hand) -> None:
    """A bad row is named by line, column and reason; the mended file goes in whole."""
    rows = register_rows()
    page = engineer.goes_to("/register/")
    page.get_by_role("link", name="Import a register").first.click()
    _a_file_is_chosen(page, "list.csv", table_text([*rows[:2], rows[2] | {"URV": "hundred"}]))
    expect(page.get_by_role("row", name=re.compile("Plant area"))).to_contain_text("20")
    unknown = page.get_by_role("row", name=re.compile("Normal pressure")).get_by_role("combobox")
    expect(unknown).to_have_value("")
    unknown.select_option(label="Operating pressure")
    press(page, "Check the file")
    bad = page.get_by_role("region", name="Bad rows").get_by_role("row").nth(1)
    expect(bad).to_contain_text("4")
    expect(bad).to_contain_text("URV")
    expect(bad).to_contain_text("hundred")
    expect(page.get_by_role("button", name=re.compile("^Bring it in"))).to_have_count(0)
    page.get_by_role("link", name="choose it again").click()
    _a_file_is_chosen(page, "list.csv", table_text(rows))
    page.get_by_role("row", name=re.compile("Normal pressure")).get_by_role("combobox").select_option(
        label="Operating pressure"
    )
    _checked_and_brought_in(page, "register of the old list", shown="FT-2043")
    page = engineer.goes_to("/register/")
    for row in rows:
        expect(page.get_by_role("link", name=row["Tag"])).to_be_visible()


def the_same_file_changes_nothing(engineer: Hand) -> None:
    page = engineer.goes_to("/import/register/")
    _a_file_is_chosen(page, "list.csv", table_text(register_rows(), separator=";"))
    page.get_by_role("row", name=re.compile("Normal pressure")).get_by_role("combobox").select_option(
        label="Operating pressure"
    )
    press(page, "Check the file")
    expect(page.get_by_text("This file changes nothing.")).to_be_visible()


def _a_file_is_chosen(page: Page, name: str, content: bytes) -> None:
    page.get_by_label("File", exact=True).set_input_files({"name": name, "mimeType": "text/csv", "buffer": content})
    press(page, "Look at the file")


def _checked_and_brought_in(page: Page, reason: str, *, shown: str) -> None:
    press(page, "Check the file")
    expect(page.get_by_role("region", name="What is new")).to_contain_text(shown)
    fill(page, {"Reason": reason})
    page.get_by_role("button", name=re.compile("^Bring it in")).click()


def a_range_above_its_head_is_told_with_its_arithmetic(engineer: Hand) -> None:
    page = engineer.goes_to("/find/?q=FT-2041")
    flag = page.get_by_role("listitem").filter(has_text="Violation")
    expect(flag).to_contain_text("URV 260 inH2O is 10 inH2O (4.0 %) above the head's upper limit of 250.")
    expect(flag).to_contain_text("250 − 260 = −10 inH2O (68 °F)")
    expect(flag).to_contain_text("compared with measuring head D250")


def one_flag_is_accepted_with_reason_and_end(engineer: Hand) -> None:
    page = engineer.goes_to("/find/?q=FT-2042")
    page.get_by_role("link", name="Accept with a reason").first.click()
    press(page, "Accept the flag")
    expect(page.get_by_text("Say why: the reason stays with the change.")).to_be_visible()
    until = (TODAY + datetime.timedelta(days=90)).isoformat()
    fill(page, {"Accepted up to": until, "Why it can be accepted": "a larger head is ordered"})
    press(page, "Accept the flag")
    flag = page.get_by_role("listitem").filter(has_text="Accepted until")
    expect(flag).to_contain_text(f"Accepted until {until} by Ida Corrowmere: a larger head is ordered")


def the_other_is_ranged_anew(engineer: Hand) -> None:
    page = engineer.goes_to("/find/?q=FT-2041")
    page.get_by_role("link", name="Change the range").click()
    fill(page, {"URV": "200", "Reason": "the flow never goes above that"})
    press(page, "Set the range")
    expect(page.get_by_text("No limit is exceeded")).to_be_visible()
    expect(page.get_by_role("listitem").filter(has_text="Violation")).to_have_count(0)


def standards_get_their_certificates(planner: Hand) -> None:
    """Two that hold, and one whose certificate has lapsed."""
    pressure = {"Kind": "pressure", "Unit": "inH2O (68 °F)", "Measures against": "differential"}
    pressure |= {"Lower end of range": "-1000", "Upper end of range": "1000", "± % of full scale": "0.01"}
    current = {"Kind": "current (mA)", "Unit": "mA", "Lower end of range": "0", "Upper end of range": "24"}
    _standard(planner, {"Number": "PS-01", "Serial number": "51001", **pressure}, "K-2201", lasts=200)
    _standard(planner, {"Number": "PS-09", "Serial number": "51009", **pressure}, "K-1850", lasts=-30)
    _standard(planner, {"Number": "MA-01", "Serial number": "77001", **current}, "K-2202", lasts=200)
    page = planner.goes_to("/standards/")
    expect(page.get_by_role("row", name=re.compile("PS-09"))).to_contain_text("certificate lapsed")


def _standard(planner: Hand, texts: Mapping[str, str], certificate: str, *, lasts: int) -> None:
    page = planner.goes_to("/standards/new/")
    fill(page, {**texts, "Maker": "Quillhaven Gauge Works", "Reason": "bought"})
    press(page, "Register it")
    page.get_by_role("link", name="Add a certificate").click()
    fill(
        page,
        {
            "Certificate number": certificate,
            "Laboratory": "Ondrevale Pressure Laboratory",
            "Calibrated on": days_ago(365 - lasts),
            "Relied on until": days_ago(-lasts),
            "Remark for the audit trail": "as it came with the standard",
        },
    )
    press(page, "Add the certificate")
    expect(page.get_by_role("row", name=re.compile(certificate))).to_be_visible()


def a_requirement_is_set(engineer: Hand) -> None:
    page = engineer.goes_to("/find/?q=FT-2043")
    page.get_by_role("link", name=re.compile("requirement")).first.click()
    fill(
        page,
        {
            "Tolerance, %": "0.5",
            "As-left tolerance, %": "0.25",
            "Interval (months)": str(INTERVAL_MONTHS),
            "Point list": "Five points, up and down",
            "From": days_ago(3000),
            "Reason": "balance of the boiler house",
        },
    )
    press(page, "Set the requirement")
    expect(page.get_by_text("±0.5 % of span").first).to_be_visible()
    expect(page.get_by_text("never tested").first).to_be_visible()


#: Six years of as-found tests: how long ago, and the error of all points in % of span. Nothing was adjusted.
HISTORY: Final = ((2226, 0.02), (1861, 0.09), (1496, 0.12), (1131, 0.21), (765, 0.25), (400, 0.33))
POINTS: Final = (0, 25, 50, 75, 100, 75, 50, 25, 0)


def current(point: float, error: float) -> str:
    """What a multimeter shows: 4 to 20 mA with an error in % of span, in thousandths of a milliampere."""
    return f"{4 + 0.16 * (point + error):.3f}"


def past_tests_are_brought_in(engineer: Hand) -> None:
    rows = [
        {
            "Tag": "FT-2043",
            "Serial": "QH-10043",
            "Date": days_ago(age),
            "Run": "as-found",
            "Applied": f"{point:.2f}",
            "Applied unit": "inH2O (68 °F)",
            "Measured": current(point, error),
            "Tested by": "R. Tollemarsh",
        }
        for age, error in HISTORY
        for point in POINTS
    ]
    page = engineer.goes_to("/tests/")
    page.get_by_role("link", name="Bring in past tests").click()
    _a_file_is_chosen(page, "history.csv", table_text(rows))
    _checked_and_brought_in(page, "history on paper", shown=days_ago(400))
    page = engineer.goes_to("/find/?q=FT-2043")
    drift = page.get_by_role("img", name=re.compile("drift", re.I)).first
    expect(drift).to_be_visible()
    expect(page.get_by_text("in grace").first).to_be_visible()
