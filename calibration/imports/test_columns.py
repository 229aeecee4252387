"""The columns of past tests in a file: one row a reading."""

from __future__ import annotations

import datetime
from typing import Final, NamedTuple

from calibration.imports.requirement_columns import percent
from calibration.models import Run, ToleranceForm
from register.engineering.units import CURRENT, PRESSURE, RATIO
from register.imports.cells import CellError, Choice, Figure, Text, UnitOf, clock, day, pressure_unit, yes_or_no
from register.imports.columns import Column
from register.models import Range, ReferenceKind

WHICH: Final = "Which test"
READING: Final = "Reading"
TEST: Final = "About the test"
TERMS: Final = "Range and tolerance, where they are not those of the register"


class Moment(NamedTuple):
    """A day, and the time of day where it is known."""

    day: datetime.date
    time: datetime.time | None


def moment(text: str, decimal_comma: bool) -> Moment:
    """Read a day, with or without the time: 2024-05-06 14:30."""
    date, _, time = text.replace("T", " ").partition(" ")
    if not time.strip():
        return Moment(day(date, decimal_comma), None)
    try:
        return Moment(day(text, decimal_comma), None)
    except CellError:
        return Moment(day(date, decimal_comma), clock(time.strip(), decimal_comma))


COLUMNS: Final[tuple[Column, ...]] = (
    Column(
        "tag",
        "Tag",
        Text(40),
        "The number of the tag. Tag, serial number or both say what was tested; what was fitted on that day is found.",
        "PT-2041",
        WHICH,
        ("tag number", "tag no", "tag name", "instrument tag"),
    ),
    Column(
        "maker",
        "Maker",
        Text(120),
        "Maker of the transmitter; needed where a serial number is known of several makers.",
        "",
        WHICH,
        ("manufacturer",),
    ),
    Column(
        "serial",
        "Serial number",
        Text(60),
        "As on its plate. Without a tag, the test belongs to the tag where it was fitted on that day, or to the bench.",
        "",
        WHICH,
        ("serial", "serial no", "s/n", "sn"),
    ),
    Column(
        "tested_on",
        "Test date",
        moment,
        "Day of the test as 2024-05-06, with the time if it is known: 2024-05-06 14:30.",
        "2024-05-06",
        WHICH,
        ("date", "tested on", "date of test", "calibration date", "calibrated on"),
    ),
    Column(
        "test",
        "Test number",
        Text(60),
        "Tells two tests of one day apart; anything will do. Empty: one test a day.",
        "",
        WHICH,
        ("test no", "record number", "certificate number"),
    ),
    Column(
        "run",
        "Run",
        Choice(tuple(Run.Kind.choices), (("as-found", "found"), ("as-left", "left"))),
        "as-found or as-left. Empty: as-found.",
        "as-found",
        WHICH,
        ("as found/as left", "as-found/as-left"),
    ),
    Column(
        "order",
        "Order",
        Figure(0, 1000, whole=True),
        "Place of the reading in its run. Empty: as the rows follow each other.",
        "1",
        READING,
        ("reading", "reading no", "sequence"),
    ),
    Column(
        "cycle",
        "Cycle",
        Figure(1, 100, whole=True),
        "Where a run goes up and down several times. Empty: found from the readings.",
        "",
        READING,
    ),
    Column(
        "nominal",
        "Nominal (%)",
        Figure(-10, 110),
        "The point aimed at, in percent of the input span. Given for all readings of a run or for none; empty: named "
        "from the inputs applied.",
        "25",
        READING,
        ("nominal", "point", "point (%)", "test point"),
    ),
    Column(
        "direction",
        "Direction",
        Choice((("up", "up"), ("down", "down")), (("up", "rising"), ("down", "falling"), ("up", "u"), ("down", "d"))),
        "up or down. Empty: found from the readings.",
        "up",
        READING,
    ),
    Column("applied", "Applied", Text(40), "Input actually applied.", "2.500", READING, ("applied input", "input")),
    Column(
        "applied_unit",
        "Applied unit",
        UnitOf((PRESSURE,)),
        "Unit of the applied input. Empty: that of the range.",
        "bar",
        READING,
        ("input unit",),
    ),
    Column(
        "measured",
        "Measured",
        Text(40),
        "Output that was read.",
        "8.004",
        READING,
        ("measured output", "output", "reading (mA)"),
    ),
    Column(
        "measured_unit",
        "Measured unit",
        UnitOf((CURRENT, RATIO)),
        "mA, or % of the output span. Empty: mA.",
        "mA",
        READING,
        ("output unit",),
    ),
    Column(
        "digital",
        "Digital value",
        Text(40),
        "What the transmitter itself said it read, where that was written down too.",
        "",
        READING,
        ("digital reading",),
    ),
    Column(
        "digital_unit",
        "Digital unit",
        UnitOf((PRESSURE,)),
        "Unit of the digital value. Empty: that of the range.",
        "",
        READING,
    ),
    Column(
        "adjusted",
        "Adjusted",
        yes_or_no,
        "yes where it was adjusted. Empty: yes if there is an as-left run.",
        "no",
        TEST,
    ),
    Column(
        "applied_standard",
        "Standard for the input",
        Text(40),
        "Number of the reference standard that applied the input; it must be known under “Standards”.",
        "",
        TEST,
        ("input standard", "pressure standard"),
    ),
    Column(
        "measured_standard",
        "Standard for the output",
        Text(40),
        "Number of the reference standard that measured the output.",
        "",
        TEST,
        ("output standard", "current standard", "multimeter"),
    ),
    Column(
        "performed_by", "Performed by", Text(120), "Name of who made the test.", "", TEST, ("technician", "tested by")
    ),
    Column(
        "remarks",
        "Remarks",
        Text(1000),
        "Anything else that was written down.",
        "",
        TEST,
        ("remark", "comment", "notes"),
    ),
    Column(
        "could_not_test",
        "Why it could not be tested",
        Text(300),
        "For a visit without a test: the reason, in one row without readings.",
        "",
        TEST,
        ("could not be tested", "not tested because", "reason not tested"),
    ),
    Column(
        "lrv",
        "LRV",
        Figure(),
        "Range of the day; these columns win over the register.",
        "",
        TERMS,
        ("lower range value",),
    ),
    Column("urv", "URV", Figure(), "LRV, URV and their unit are given together.", "", TERMS, ("upper range value",)),
    Column(
        "range_unit",
        "Range unit",
        pressure_unit,
        "Unit of LRV and URV. A water column names its temperature: inH2O at 68 °F.",
        "",
        TERMS,
    ),
    Column(
        "range_reference",
        "Range reference",
        Choice(tuple(ReferenceKind.choices)),
        "gauge, absolute or differential. Empty: as the transmitter measures.",
        "",
        TERMS,
    ),
    Column(
        "transfer",
        "Output characteristic",
        Choice(tuple(Range.Transfer.choices), (("square root", "sqrt"), ("square root", "root"))),
        "linear or square root. Empty: linear, where LRV and URV are given.",
        "",
        TERMS,
        ("transfer", "transfer function"),
    ),
    Column(
        "mpe_form",
        "Tolerance stated as",
        Choice(tuple(ToleranceForm.choices), (("percent of span", "% of span"), ("absolute", "input units"))),
        "As for requirements. Empty: percent of span, where a tolerance is given.",
        "",
        TERMS,
        ("tolerance form",),
    ),
    Column("mpe_percent", "Tolerance (%)", percent, "Tolerance of the day.", "", TERMS, ("tolerance", "mpe")),
    Column("mpe_input", "Tolerance (input units)", Figure(longest=20), "Tolerance of the day.", "", TERMS),
    Column("input_unit", "Tolerance unit", UnitOf((PRESSURE,)), "Unit of a tolerance in input units.", "", TERMS),
    Column(
        "as_left_percent",
        "As-left tolerance (%)",
        percent,
        "Tolerance after an adjustment. Empty: as the tolerance itself.",
        "",
        TERMS,
        ("as-left tolerance",),
    ),
)
LABELS: Final = {column.key: column.label for column in COLUMNS}
OF_RANGE: Final = ("lrv", "urv", "range_unit", "range_reference", "transfer")
OF_TOLERANCE: Final = ("mpe_form", "mpe_percent", "mpe_input", "input_unit", "as_left_percent")
#: What must be the same in all rows of a test, wherever it is given.
OF_TEST: Final = (
    *("adjusted", "performed_by", "remarks", "could_not_test"),
    *OF_RANGE,
    *OF_TOLERANCE,
)
#: What must be the same in all rows of a run.
OF_RUN: Final = ("applied_standard", "measured_standard")
#: What only somebody who has read something can have written down.
OF_READING: Final = ("applied", "measured", "digital", *OF_RUN)
