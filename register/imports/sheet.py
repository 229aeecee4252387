"""The columns of a register in a file: one row a tag, with its process, range and fitted transmitter."""

from __future__ import annotations

from typing import Final

from register.engineering.units import TEMPERATURE
from register.imports.cells import Choice, Figure, Text, UnitOf, day, pressure_unit, yes_or_no
from register.imports.columns import Column
from register.models import Criticality, Measurand, Range, ReferenceKind, RootExtraction

PLACE: Final = "Tag and place"
PROCESS: Final = "Process"
SURROUNDINGS: Final = "Surroundings"
LOOP: Final = "Loop and control system"
ISOLATION: Final = "Isolation and hazards"
RANGE: Final = "Range"
DEVICE: Final = "Fitted transmitter"

_REFERENCE = Choice(tuple(ReferenceKind.choices), (("differential", "dp"), ("absolute", "abs"), ("gauge", "gage")))
_STATIC = Choice((("gauge", "gauge"), ("absolute", "absolute")), (("absolute", "abs"), ("gauge", "gage")))
_PRESSURE = Figure()
_TEMPERATURE = Figure()

COLUMNS: Final[tuple[Column, ...]] = (
    Column(
        "tag",
        "Tag",
        Text(40),
        "The ISA-5.1 number. A row belongs to the tag of this number; one that is not there yet is added. "
        "Left empty, the row is a transmitter in stores.",
        "PT-2041",
        PLACE,
        ("tag number", "tag no", "tag name", "tagname", "instrument tag", "instrument", "loop tag", "measuring point"),
    ),
    Column(
        "service",
        "Service",
        Text(160),
        "What is measured, in plain words.",
        "Feed water to drum",
        PLACE,
        ("description", "tag description", "service description", "duty"),
    ),
    Column(
        "area",
        "Area",
        Text(20),
        "Code of the area; needed for a new tag. An area that is not there yet is added.",
        "20",
        PLACE,
        ("area code", "plant area"),
    ),
    Column(
        "area_name", "Area name", Text(120), "Name of the area; used only for an area that is added.", "Boilers", PLACE
    ),
    Column(
        "measurand",
        "Measures",
        Choice(tuple(Measurand.choices), (("differential pressure", "dp"), ("differential pressure", "differential"))),
        "pressure, differential pressure, flow or level; needed for a new tag.",
        "pressure",
        PLACE,
        ("measurand", "measured variable", "variable", "measurement"),
    ),
    Column(
        "criticality",
        "Criticality",
        Choice(tuple(Criticality.choices)),
        "safety, environment, custody, quality, production or general.",
        "production",
        PLACE,
    ),
    Column("craft", "Craft", Text(40), "Who tests it.", "instrument", PLACE, ("trade",)),
    Column("location", "Location", Text(160), "How one gets there.", "Level 2, north stair", PLACE),
    Column(
        "outage_only",
        "Outage only",
        yes_or_no,
        "yes where it can be tested only in an outage.",
        "no",
        PLACE,
        ("shutdown only",),
    ),
    Column(
        "trip_function", "Trips", Text(160), "What this measurement can trip.", "", PLACE, ("trip", "trip function")
    ),
    Column(
        "out_of_service_on", "Out of service since", day, "A day as 2026-03-09; empty for a tag in service.", "", PLACE
    ),
    Column("medium", "Medium", Text(80), "What is in the line.", "water", PROCESS, ("fluid", "process fluid")),
    Column(
        "pressure_unit",
        "Pressure unit",
        pressure_unit,
        "Unit of the four pressures beside it: bar, kPa, psi, inH2O at 68 °F …; “psig” says the reference too.",
        "bar",
        PROCESS,
        ("static pressure unit", "process pressure unit"),
    ),
    Column(
        "pressure_reference",
        "Pressure reference",
        _STATIC,
        "gauge or absolute.",
        "gauge",
        PROCESS,
        ("static pressure reference",),
    ),
    Column(
        "operating_pressure", "Operating pressure", _PRESSURE, "Static pressure in normal operation.", "62", PROCESS
    ),
    Column(
        "design_pressure",
        "Design pressure",
        _PRESSURE,
        "Static pressure for which the line is designed.",
        "75",
        PROCESS,
    ),
    Column("lowest_pressure", "Lowest pressure", _PRESSURE, "Lowest static pressure, such as a vacuum.", "0", PROCESS),
    Column(
        "one_side_pressure",
        "Greatest pressure on one side",
        _PRESSURE,
        "What one side can see while the other is open. Empty: the design pressure.",
        "",
        PROCESS,
        ("one-side pressure",),
    ),
    Column(
        "temperature_unit",
        "Temperature unit",
        UnitOf((TEMPERATURE,)),
        "Unit of all temperatures of the row: °C, °F or K.",
        "°C",
        PROCESS,
    ),
    Column(
        "process_min",
        "Lowest process temperature",
        _TEMPERATURE,
        "At the transmitter.",
        "20",
        PROCESS,
        ("process min",),
    ),
    Column(
        "process_max",
        "Highest process temperature",
        _TEMPERATURE,
        "At the transmitter.",
        "85",
        PROCESS,
        ("process max",),
    ),
    Column(
        "ambient_min",
        "Lowest ambient",
        _TEMPERATURE,
        "Empty: as the area.",
        "",
        SURROUNDINGS,
        ("lowest ambient temperature",),
    ),
    Column(
        "ambient_max",
        "Highest ambient",
        _TEMPERATURE,
        "Empty: as the area.",
        "",
        SURROUNDINGS,
        ("highest ambient temperature",),
    ),
    Column(
        "tracing_temperature",
        "Heat tracing up to",
        _TEMPERATURE,
        "Empty: no heat tracing.",
        "",
        SURROUNDINGS,
        ("heat tracing",),
    ),
    Column(
        "supply_v",
        "Loop supply (V)",
        Figure(0, 60),
        "Voltage at the source of the loop.",
        "24",
        LOOP,
        ("supply voltage",),
    ),
    Column(
        "loop_ohm",
        "Loop resistance (ohm)",
        Figure(0, 10_000),
        "Outside the transmitter.",
        "270",
        LOOP,
        ("loop resistance (Ω)", "loop load"),
    ),
    Column(
        "root_extraction",
        "Square root taken",
        Choice(
            tuple(choice for choice in RootExtraction.choices if choice[0]),
            (("none", "no"), ("none", "not"), ("control system", "dcs"), ("control system", "system")),
        ),
        "transmitter, control system or none. A flow by differential pressure cannot be checked until this is said.",
        "none",
        LOOP,
    ),
    Column(
        "scale_low",
        "Scale low",
        Figure(),
        "Scale of the control system at 4 mA.",
        "0",
        LOOP,
        ("control-system scale, low",),
    ),
    Column(
        "scale_high",
        "Scale high",
        Figure(),
        "Scale of the control system at 20 mA.",
        "100",
        LOOP,
        ("control-system scale, high",),
    ),
    Column("scale_unit", "Scale unit", Text(20), "As on the operator's screen.", "bar", LOOP, ("control-system unit",)),
    Column(
        "isolation_sequence",
        "Isolation sequence",
        Text(2000, lines=True),
        "Valve by valve, one a line of the cell.",
        "",
        ISOLATION,
    ),
    Column(
        "vent_direction", "Vent direction", Text(160), "Where it vents to.", "to the drain", ISOLATION, ("vents to",)
    ),
    Column("oxygen_service", "Oxygen service", yes_or_no, "yes or no.", "no", ISOLATION),
    Column("toxic_service", "Toxic service", yes_or_no, "yes or no.", "no", ISOLATION),
    Column(
        "condensing_service",
        "Hot condensing service",
        yes_or_no,
        "yes where the legs must stay filled with condensate.",
        "no",
        ISOLATION,
        ("condensing service",),
    ),
    Column("hazardous_area", "Hazardous area", Text(80), "Its class or zone.", "zone 2", ISOLATION),
    Column(
        "lrv", "LRV", Figure(), "Input at 4 mA.", "0", RANGE, ("lower range value", "lower range-value", "range low")
    ),
    Column(
        "urv",
        "URV",
        Figure(),
        "Input at 20 mA; below LRV for a reverse range.",
        "100",
        RANGE,
        ("upper range value", "upper range-value", "range high"),
    ),
    Column(
        "range_unit",
        "Range unit",
        pressure_unit,
        "Unit of LRV and URV. A water column names its temperature: inH2O at 68 °F.",
        "bar",
        RANGE,
        ("unit of range", "engineering unit", "eu", "units"),
    ),
    Column(
        "range_reference",
        "Range reference",
        _REFERENCE,
        "gauge, absolute or differential. Empty: as the fitted transmitter measures.",
        "gauge",
        RANGE,
    ),
    Column(
        "transfer",
        "Output",
        Choice(tuple(Range.Transfer.choices), (("square root", "root"), ("square root", "sqrt"), ("linear", "lin"))),
        "linear or square root. Empty for a new range: linear.",
        "linear",
        RANGE,
        ("transfer", "transfer function", "output characteristic"),
    ),
    Column(
        "low_cut_percent",
        "Low cut (%)",
        Figure(0, 99),
        "Square root only: % of the input span.",
        "",
        RANGE,
        ("low cut",),
    ),
    Column(
        "below_cut",
        "Below the cut",
        Choice(tuple(Range.BelowCut.choices)),
        "Square root only: linear or zero.",
        "",
        RANGE,
    ),
    Column(
        "range_from",
        "Range from",
        day,
        "Day from which this range holds; a day to come is planned. Needed for another range than the one in force. "
        "Empty for the first range of a tag: the day on which the transmitter was fitted.",
        "2024-05-06",
        RANGE,
        ("effective from", "range effective from"),
    ),
    Column(
        "range_reason",
        "Reason for the range",
        Text(300),
        "Why the range changes; needed for another range than the one in force.",
        "",
        RANGE,
        ("range reason",),
    ),
    Column(
        "maker",
        "Maker",
        Text(120),
        "Maker, type and head must be known under “Types and heads”: the range is checked against their limits.",
        "",
        DEVICE,
        ("manufacturer", "make", "vendor"),
    ),
    Column(
        "type",
        "Type",
        Text(80),
        "Designation of the transmitter type.",
        "",
        DEVICE,
        ("transmitter type", "model", "designation"),
    ),
    Column(
        "head", "Head", Text(40), "Code of the measuring head.", "", DEVICE, ("measuring head", "head code", "capsule")
    ),
    Column(
        "serial",
        "Serial number",
        Text(60),
        "As on its plate. Maker and serial number say which transmitter it is; one that is not there yet is added.",
        "",
        DEVICE,
        ("serial", "serial no", "s/n", "sn"),
    ),
    Column(
        "fitted_on",
        "Fitted on",
        day,
        "Day on which it was fitted at the tag; needed when it is fitted there newly or in place of another one.",
        "2024-05-06",
        DEVICE,
        ("installed on", "installation date", "date fitted"),
    ),
    Column("fill_fluid", "Fill fluid", Text(60), "Of the measuring head.", "silicone", DEVICE),
    Column("seals", "Seals", Text(120), "Remote seals, if it has any.", "", DEVICE, ("remote seals",)),
    Column(
        "wetted_material", "Wetted material", Text(80), "What touches the process.", "316L", DEVICE, ("wetted parts",)
    ),
    Column("made_on", "Made on", day, "A day as 2026-03-09.", "", DEVICE, ("date of manufacture",)),
    Column(
        "remarks",
        "Transmitter remarks",
        Text(2000, lines=True),
        "Anything else about the device.",
        "",
        DEVICE,
        ("remarks",),
    ),
)
BY_KEY: Final = {column.key: column for column in COLUMNS}
#: Columns that are the tag's own, by the name of its field.
OF_TAG: Final = tuple(
    column.key
    for column in COLUMNS
    if column.group not in (RANGE, DEVICE) and column.key not in ("tag", "area", "area_name")
)
#: Typed values of a tag and the field that names their unit.
PRESSURES: Final = ("operating_pressure", "design_pressure", "lowest_pressure", "one_side_pressure")
TEMPERATURES: Final = ("process_min", "process_max", "ambient_min", "ambient_max", "tracing_temperature")
OF_RANGE: Final = ("lrv", "urv", "range_unit", "range_reference", "transfer", "low_cut_percent", "below_cut")
OF_DEVICE: Final = ("fill_fluid", "seals", "wetted_material", "made_on", "remarks")
