"""What the page of a finished test shows, read from its record."""

from __future__ import annotations

import datetime
import math
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any, Final
from zoneinfo import ZoneInfo

from django.utils.safestring import SafeString

from calibration.contexts.figures import Figure, figures_of
from calibration.contexts.results import Result, result_of
from calibration.models import Record, Run, Signature, StandardUse, Standing, Test
from calibration.queries.rereading import ReadRun, judged_run
from calibration.records.basis import Basis
from calibration.records.canonical import FIRST_HASH
from register.engineering.typed import NumberError, decimals_of, format_significant
from register.figures import places_of

if TYPE_CHECKING:
    from calibration.drawing.charts import LimitPoint

#: Inputs at which the limits of a plot are worked out.
_NODES: Final = 161

MILLIAMPS: Final = "mA"
OF_SPAN: Final = "% of span"
CSS: Mapping[str, str] = {
    "pass": "ok",
    "conditional pass": "near",
    "conditional fail": "out",
    "fail": "out",
    "not decidable": "unknown",
    "incomplete": "unknown",
}


@dataclass(frozen=True, slots=True)
class Row:
    """One reading as the table shows it, expected in the unit in which the output was measured.

    A point without reading has no result.
    """

    point: str
    applied: str = ""
    applied_unit: str = ""
    expected: str = ""
    measured: str = ""
    output_unit: str = ""
    digital: str = ""
    digital_unit: str = ""
    result: Result | None = None
    entered: str = ""


@dataclass(frozen=True, slots=True)
class RunView:
    """A run with its table, its verdict and its figures; a unit is empty where its rows have several."""

    kind: str
    tested_on: datetime.date
    verdict: str
    css: str
    tolerance_words: str
    why: str
    limit: str
    limit_unit: str
    unit: str
    output_unit: str
    formula: str
    rows: tuple[Row, ...]
    figures: tuple[Figure, ...]
    conditions: tuple[tuple[str, str], ...]
    standards: tuple[StandardUse, ...]
    decimals: Mapping[str, int]
    by_input: bool
    with_digital: bool
    digital_unit: str
    differs: bool


@dataclass(frozen=True, slots=True)
class SignatureView:
    who: str
    meaning: str
    at: str
    remarks: str
    position: int
    hash: str


@dataclass(frozen=True)
class TestView:
    """Everything about one version of a test."""

    test: Test
    record: Record
    basis: Basis
    runs: tuple[RunView, ...]
    signatures: tuple[SignatureView, ...]
    first_link: bool
    low_cut: str


def view_of(record: Record) -> TestView:
    """The page's view of a record whose runs, readings, standards and signatures are at hand."""
    test = record.test
    basis = Basis.read(record, record.head_id)
    zone = ZoneInfo(record.plant.time_zone)
    done = test.outcome == Test.Outcome.DONE
    read = [judged_run(run, basis, complete=done) for run in record.runs.all()]
    return TestView(
        test=test,
        record=record,
        basis=basis,
        runs=tuple(_run_view(one, basis, zone) for one in read),
        signatures=tuple(_signature_view(row) for row in record.signatures.all()),
        first_link=record.previous_hash == FIRST_HASH,
        low_cut=format_significant(record.low_cut_percent, 4) if record.low_cut_percent else "",
    )


def acceptance_of(test: Test, standing: Standing | None) -> str:
    """What a test means for the due date of its tag, as the tag stands now."""
    if not test.accepted:
        return "Not accepted: the due date stays where it was."
    if test.tag_id is None or standing is None:
        return "Accepted; a test on the bench moves no due date."
    last = standing.last_accepted_on if standing.transmitter_id == test.transmitter_id else None
    if last == test.tested_on:
        return f"Accepted: the next due date counts from {test.tested_on}."
    if last is not None and last > test.tested_on:
        return f"Accepted; the next due date counts from the later test of {last}."
    return (
        "Accepted, but the due date does not count from it: it was made in another range or with another head than the "
        "tag has now, or before the transmitter was fitted, repaired, re-ranged or given its head."
    )


def plot_of(record: Record) -> SafeString | None:
    """Errors against their limits as a picture; None where nothing was read."""
    from calibration.drawing.charts import ErrorPoint, error_plot
    from calibration.metrology.signal import saturated
    from register.engineering.units import label

    basis = Basis.read(record, record.head_id)
    series: dict[str, list[ErrorPoint]] = {}
    applied: list[float] = []
    for run in record.runs.all():
        judged = judged_run(run, basis, complete=False).judged
        if judged is None:
            continue
        readings = judged.judgement.readings
        edge = saturated(readings.measured)
        series[run.kind] = [
            ErrorPoint(
                input=float(readings.applied[place]),
                error=float(readings.error[place]),
                up=judged.points[place].direction > 0,
                clipped=bool(edge[place]),
                outside=bool(readings.outside[place]),
            )
            for place in range(len(judged.points))
            if not math.isnan(float(readings.error[place]))
        ]
        applied += [point.input for point in series[run.kind]]
    if not any(series.values()):
        return None
    shows_left = basis.as_left is not None and Run.Kind.AS_LEFT in series
    return error_plot(
        title=f"Errors of the test of {record.test.tested_on}",
        description="Error of each reading against the input applied, between the limits of the tolerance.",
        found=series.get(Run.Kind.AS_FOUND, []),
        left=series.get(Run.Kind.AS_LEFT, []),
        limits=_limits(basis, Run.Kind.AS_FOUND, applied),
        left_limits=_limits(basis, Run.Kind.AS_LEFT, applied) if shows_left else [],
        input_unit=label(basis.unit),
    )


def changes_between(before: Mapping[str, Any], after: Mapping[str, Any]) -> list[tuple[str, str, str]]:
    """What a later version says differently: field, before, after.

    Parameters
    ----------
    before, after : mapping
        Contents of two versions, parsed.
    """
    one, other = dict(_flat(before)), dict(_flat(after))
    return [
        (name, one.get(name, ""), other.get(name, ""))
        for name in dict.fromkeys([*one, *other])
        if one.get(name, "") != other.get(name, "")
    ]


def csv_rows(record: Record) -> Iterator[tuple[str, ...]]:
    """Readings of a record, one row each, figures with a decimal point."""
    basis = Basis.read(record, record.head_id)
    for run in record.runs.all():
        read = judged_run(run, basis, complete=False)
        if read.judged is None:
            continue
        judged = read.judged.judgement.readings
        for place, row in enumerate(read.readings):
            yield (
                run.kind,
                run.tested_on.isoformat(),
                str(row.order),
                str(row.cycle),
                "" if row.nominal_percent is None else format_significant(row.nominal_percent, 6).replace("−", "-"),
                row.direction,
                row.applied,
                row.applied_unit,
                row.measured,
                row.measured_unit,
                f"{float(judged.limits.ideal_ma[place]):.6f}",
                f"{float(judged.error[place]):.6f}",
                str(judged.verdicts[place]),
                row.digital,
                row.digital_unit,
            )


CSV_HEAD = (
    "run", "date", "reading", "cycle", "point (%)", "direction", "applied", "applied unit", "measured", "measured unit",
    "expected (mA)", "error (% of span)", "verdict", "digital value", "digital unit",
)  # fmt: skip


def _limits(basis: Basis, kind: str, applied: Sequence[float]) -> list[LimitPoint]:
    """Limits of the error [% of span] at the inputs applied and between them, so close that the curve shows."""
    import numpy as np

    from calibration.drawing.charts import LimitPoint

    inputs = np.union1d(np.linspace(min(applied), max(applied), _NODES), applied)
    limits = basis.tolerance(kind).limits(inputs, basis.signal())
    return [LimitPoint(*map(float, at)) for at in zip(inputs, limits.least, limits.upper, strict=True)]


def _run_view(read: ReadRun, basis: Basis, zone: ZoneInfo) -> RunView:
    from calibration.metrology.tolerance import Quantity
    from register.engineering.units import label

    run, judged = read.run, read.judged
    tolerance = basis.tolerance(run.kind)
    figures = getattr(run, "figures", None)
    verdict = figures.verdict if figures else ""
    rows = tuple(_rows(read, zone))
    outputs = [row.output_unit for row in rows if row.result]
    return RunView(
        kind=run.kind,
        tested_on=run.tested_on,
        verdict=verdict,
        css=CSS.get(verdict, "unknown"),
        tolerance_words=judged.judgement.tolerance_words if judged else "",
        why=figures.why if figures else "",
        limit=tolerance.words(label(basis.unit)),
        limit_unit=label(basis.unit) if tolerance.quantity is Quantity.INPUT else "% of span",
        unit=_shared([row.applied_unit for row in rows if row.result], label(basis.unit)),
        output_unit=_shared(outputs, MILLIAMPS),
        formula=_formula(outputs),
        rows=rows,
        figures=tuple(figures_of(judged)) if judged else (),
        conditions=tuple(_conditions(run)),
        standards=tuple(run.standards.all()),
        decimals={
            "applied": _decimals([row.applied for row in rows]),
            "expected": _decimals([row.expected for row in rows]),
            "measured": _decimals([row.measured for row in rows]),
            "digital": _decimals([row.digital for row in rows]),
            "error": _decimals([row.result.error for row in rows if row.result]),
            "input_error": _decimals([row.result.input_error for row in rows if row.result]),
        },
        by_input=tolerance.quantity is Quantity.INPUT,
        with_digital=any(row.digital for row in rows),
        digital_unit=_shared([row.digital_unit for row in rows if row.digital], label(basis.unit)),
        differs=judged is not None and bool(verdict) and str(judged.judgement.verdict) != verdict,
    )


def _shared(units: Sequence[str], otherwise: str) -> str:
    """The one unit of a column, empty where there are several."""
    found = set(units) or {otherwise}
    return found.pop() if len(found) == 1 else ""


def _formula(outputs: Sequence[str]) -> str:
    """How the errors come about from the columns beside them."""
    ways = {
        MILLIAMPS: "(measured − expected) / 16 mA · 100 %",
        OF_SPAN: "measured − expected",
    }
    said = [ways[unit] for unit in ways if unit in outputs]
    if len(said) == 1:
        how = said[0]
    else:
        how = f"{said[0]} where the output was read in mA, {said[1]} where it was read in % of span" if said else ""
    return f"Error = {how}. Expected is the ideal output for the input actually applied." if how else ""


def _rows(read: ReadRun, zone: ZoneInfo) -> Iterator[Row]:
    from calibration.metrology.signal import percent_of_current
    from calibration.metrology.writing import fixed
    from register.engineering.units import label

    if read.judged is None:
        return
    readings = read.judged.judgement.readings
    for place, row in enumerate(read.readings):
        point = read.judged.points[place]
        result = result_of(readings, place, up=point.direction > 0)
        ideal, in_percent = float(readings.limits.ideal_ma[place]), row.measured_unit == "percent"
        # Two places more of a current, whose percent is 0.16 mA: the error can be worked out from what is shown.
        places = places_of(result.error) + (1 if in_percent else 2)
        yield Row(
            point=_point_words(point.nominal_percent, point.direction, point.cycle),
            applied=row.applied,
            applied_unit=label(row.applied_unit),
            expected=fixed(float(percent_of_current(ideal)) if in_percent else ideal, places),
            measured=row.measured,
            output_unit=OF_SPAN if in_percent else MILLIAMPS,
            digital=row.digital,
            digital_unit=label(row.digital_unit) if row.digital_unit else "",
            result=result,
            entered=row.entered_at.astimezone(zone).strftime("%H:%M:%S") if row.entered_at else "",
        )
    for point in read.judged.points[len(read.readings) :]:
        yield Row(_point_words(point.nominal_percent, point.direction, point.cycle))


def _point_words(percent: float | None, direction: int, cycle: int) -> str:
    way = "up" if direction > 0 else "down"
    words = way if percent is None else f"{percent:g} % {way}"
    return words if cycle == 1 else f"{words}, cycle {cycle}"


def _conditions(run: Run) -> Iterator[tuple[str, str]]:
    from register.engineering.units import label

    for name, text, unit in (
        ("Ambient temperature", run.ambient, run.ambient_unit),
        ("Standard below the transmitter by", run.height_difference, run.height_unit),
        ("Static pressure", run.static_pressure, run.static_unit),
    ):
        if text:
            yield name, f"{text} {label(unit) if unit else ''}".strip()


def _decimals(texts: Sequence[str]) -> int:
    most = 0
    for text in texts:
        if not text:
            continue
        try:
            most = max(most, decimals_of(text))
        except NumberError:
            continue
    return most


def _signature_view(row: Signature) -> SignatureView:
    at = row.signed_at.astimezone(ZoneInfo(row.time_zone))
    return SignatureView(
        who=row.printed_name,
        meaning=row.get_meaning_display(),
        at=f"{at:%Y-%m-%d %H:%M} {row.time_zone}",
        remarks=row.remarks,
        position=row.position,
        hash=row.hash,
    )


def _flat(content: Mapping[str, Any]) -> Iterator[tuple[str, str]]:
    """The parts of a content that a correction may change, named as a reader would."""
    yield "outcome", content["outcome"]
    yield "adjusted", content["adjusted"]
    answers = content.get("answers") or {}
    for name in ("adjustment", "remarks", "could_not_test"):
        yield name.replace("_", " "), str(answers.get(name, ""))
    for line in answers.get("checklist") or ():
        yield f"return to service: {line['text']}", line.get("answer", "")
    for run in content["runs"]:
        kind = run["kind"]
        yield f"{kind}: verdict", run.get("verdict", "")
        for name in ("ambient", "height_difference", "static_pressure"):
            yield f"{kind}: {name.replace('_', ' ')}", " ".join(run[name]).strip()
        for row in run["readings"]:
            percent = row["nominal_percent"].removesuffix(".0")
            where = f"{kind}: reading {row['order']}" + (f" ({percent} % {row['direction']})" if percent else "")
            yield f"{where}, applied", f"{row['applied']} {row['applied_unit']}"
            yield f"{where}, measured", f"{row['measured']} {row['measured_unit']}"
            if row["digital"]:
                yield f"{where}, digital value", f"{row['digital']} {row['digital_unit']}"
        for use in run["standards"]:
            yield f"{kind}: standard that {use['part']}", f"{use['standard']} {use['certificate']}"
