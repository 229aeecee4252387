"""The columns of requirements in a file: one row a tag, with tolerance, interval and point list."""

from __future__ import annotations

from typing import Final

from calibration.models import Requirement, ToleranceForm
from register.engineering.units import PRESSURE
from register.imports.cells import CellError, Choice, Figure, Number, Text, UnitOf, day
from register.imports.columns import Column

TOLERANCE: Final = "Tolerance"
SCHEDULE: Final = "Schedule"
#: No test shows less; a cell that holds 0.5 % in the format of a percentage holds 0.005.
LEAST_PERCENT: Final = 0.01


def percent(text: str, decimal_comma: bool) -> Number:
    """Read a tolerance in percent."""
    number = _FIGURE(text, decimal_comma)
    if number.value <= 0:
        raise CellError(f"“{text}” is not above zero; nothing could be inside it.")
    if number.value < LEAST_PERCENT:
        raise CellError(
            f"{text} % is finer than any test shows. A spreadsheet cell in the format of a percentage holds 0.005 for "
            "0.5 %: write 0.5 in a cell of plain numbers."
        )
    return number


_FIGURE: Final = Figure(longest=20)


COLUMNS: Final[tuple[Column, ...]] = (
    Column("tag", "Tag", Text(40), "The number of a tag that is registered.", "PT-2041", "", ("tag number", "tag no")),
    Column(
        "mpe_form",
        "Tolerance stated as",
        Choice(
            tuple(ToleranceForm.choices),
            (
                ("percent of span", "% of span"),
                ("percent of reading", "% of reading"),
                ("absolute", "input units"),
                ("larger", "larger of both"),
                ("sum", "sum of both"),
            ),
        ),
        "percent of span, percent of reading (with a floor in input units), absolute (input units), larger or sum (of "
        "percent of span and input units). Empty: percent of span, or absolute where only input units are given.",
        "percent of span",
        TOLERANCE,
        ("tolerance form", "tolerance in"),
    ),
    Column(
        "mpe_percent",
        "Tolerance (%)",
        percent,
        "Maximum permissible error, in percent of span or reading.",
        "0.5",
        TOLERANCE,
        ("tolerance", "mpe", "mpe %", "maximum permissible error"),
    ),
    Column(
        "mpe_input",
        "Tolerance (input units)",
        Figure(longest=20),
        "Maximum permissible error, in the unit beside it.",
        "",
        TOLERANCE,
    ),
    Column(
        "as_left_percent",
        "As-left tolerance (%)",
        percent,
        "Tolerance after an adjustment. Empty: as the tolerance itself.",
        "0.25",
        TOLERANCE,
        ("as-left tolerance",),
    ),
    Column(
        "as_left_input", "As-left tolerance (input units)", Figure(longest=20), "In the unit beside it.", "", TOLERANCE
    ),
    Column("input_unit", "Tolerance unit", UnitOf((PRESSURE,)), "Unit of the figures in input units.", "", TOLERANCE),
    Column(
        "decision_rule",
        "Decision rule",
        Choice(tuple(Requirement.Rule.choices)),
        "simple acceptance.",
        "simple acceptance",
        TOLERANCE,
    ),
    Column(
        "point_list",
        "Point list",
        Text(400),
        "Name of a point list of the plant, or its points: 0 25 50 75 100 75 50 25 0.",
        "Five points, up and down",
        TOLERANCE,
        ("points", "test points"),
    ),
    Column(
        "interval_months",
        "Interval (months)",
        Figure(1, 240, whole=True),
        "Months from one test to the next.",
        "12",
        SCHEDULE,
        ("interval",),
    ),
    Column(
        "anchor",
        "Counted from",
        Choice(
            tuple(Requirement.Anchor.choices), (("last test", "last accepted test"), ("calendar", "fixed calendar"))
        ),
        "last test or calendar. Empty: last test.",
        "last test",
        SCHEDULE,
    ),
    Column("anchor_on", "Calendar begins", day, "Day on which a fixed calendar begins.", "", SCHEDULE),
    Column(
        "grace_days",
        "Grace (days)",
        Figure(0, 3650, whole=True),
        "Days after due that are still in grace. Empty: a quarter of the interval.",
        "",
        SCHEDULE,
        ("grace",),
    ),
    Column(
        "lead_days",
        "Window opens before due (days)",
        Figure(0, 3650, whole=True),
        "How long before the due date its window opens. Empty for a new requirement: 42.",
        "42",
        SCHEDULE,
        ("window",),
    ),
    Column(
        "requirement_from",
        "Requirement from",
        day,
        "Day from which it holds; a day to come is planned. Needed for another requirement than the one in force. "
        "Empty for the first of a tag: the day on which its transmitter was fitted.",
        "2024-05-06",
        SCHEDULE,
    ),
    Column(
        "requirement_reason",
        "Reason for the requirement",
        Text(300),
        "Why it changes; needed for another requirement than the one in force.",
        "",
        SCHEDULE,
    ),
)
LABELS: Final = {column.key: column.label for column in COLUMNS}
OF_REQUIREMENT: Final = tuple(
    column.key for column in COLUMNS if column.key not in ("tag", "requirement_from", "requirement_reason")
)
