"""Opens sheets: for a tag, for a spare on the bench, for the correction of a signed test. The basis is fixed here."""

from __future__ import annotations

import uuid
from collections.abc import Iterable, Iterator, Mapping
from typing import Any, Final

from django.core.exceptions import ValidationError
from django.db import transaction
from django.utils import timezone

from calibration.models import Entry, GuidanceLine, PointList, Requirement, Sheet, Test
from calibration.models.guidance import ISOLATION
from calibration.queries.naming import instrument
from calibration.records.basis import Basis
from calibration.reopening import entries_of
from register.auditing import Act, Actor
from register.models import Fitting, MeasuringHead, Plant, Range, Tag, Transmitter, User

Applies = GuidanceLine.Applies
SITE_FIRST: Final = "Site procedures, local codes and licensed practice come first."


@transaction.atomic
def open_sheet(*, by: Actor, reason: str, tag: Tag, sheet_id: uuid.UUID) -> Sheet:
    """Open a sheet for what is fitted at a tag today; the same id a second time gives the sheet already opened.

    Raises
    ------
    ValidationError
        The tag lacks a transmitter, a range or a requirement, or the id belongs to another sheet.
    """
    locked = (
        Tag.objects.select_for_update(of=("self",))
        .select_related("plant", "area", "current_range", "current_fitting")
        .get(pk=tag.pk)
    )
    if opened := _already(sheet_id, tag_id=locked.pk):
        return opened
    lacking = what_is_lacking(locked)
    if lacking:
        raise ValidationError(lacking)
    fitting, used, requirement = locked.current_fitting, locked.current_range, current_requirement(locked)
    assert fitting is not None and used is not None and requirement is not None
    transmitter = _transmitter(fitting.transmitter_id)
    basis = terms_at(tag=locked, transmitter=transmitter, head=transmitter.head, used=used, requirement=requirement)
    return _opened(by, reason, sheet_id, locked.plant, transmitter, basis, tag=locked, fitting=fitting)


@transaction.atomic
def open_bench_sheet(
    *,
    by: Actor,
    reason: str,
    transmitter: Transmitter,
    sheet_id: uuid.UUID,
    point_list: PointList,
    values: Mapping[str, Any],
) -> Sheet:
    """Open a sheet for a spare that is fitted nowhere; range and tolerance are typed in.

    Parameters
    ----------
    values : mapping
        Columns of a range (lrv, urv, unit, reference, transfer, low_cut_percent, below_cut) and of a requirement
        (mpe_form, mpe_percent, mpe_input, as_left_percent, as_left_input, input_unit).

    Raises
    ------
    ValidationError
        The transmitter is fitted at a tag, a figure does not fit the others, or the id belongs to another sheet.
    """
    locked = _transmitter(transmitter.pk, lock=True)
    if opened := _already(sheet_id, transmitter_id=locked.pk):
        return opened
    fitted = Fitting.objects.filter(transmitter=locked, removed_on=None).select_related("tag").first()
    if fitted is not None:
        raise ValidationError(f"It is fitted at {fitted.tag}: open the sheet from that tag.")
    basis = terms_on_the_bench(transmitter=locked, head=locked.head, point_list=point_list, values=values)
    _checked(basis)
    return _opened(by, reason, sheet_id, locked.plant, locked, basis)


@transaction.atomic
def open_correction(*, by: Actor, reason: str, test: Test, sheet_id: uuid.UUID) -> Sheet:
    """Open a sheet that corrects a signed test: the basis and every field as recorded, to be changed and signed again.

    Raises
    ------
    ValidationError
        No reason, the test is transcribed, or a correction is already open.
    """
    if test.tag_id is not None:
        # The new sheet names the tag, which locks it too, and the tag comes before the test.
        Tag.objects.select_for_update().get(pk=test.tag_id)
    locked = (
        Test.objects.select_for_update(of=("self",))
        .select_related("plant", "tag", "transmitter", "fitting", "current_record")
        .get(pk=test.pk)
    )
    if opened := _already(sheet_id, corrects_id=locked.pk):
        return opened
    if not reason.strip():
        raise ValidationError({"reason": "Say what is to be corrected: the reason stays with the record."})
    record = locked.current_record
    if record is None or record.transcribed:
        raise ValidationError("A transcribed test was signed by nobody and is not corrected here.")
    going = Sheet.objects.filter(corrects=locked, ended_at=None).select_related("opened_by").first()
    if going is not None:
        raise ValidationError(f"{going.opened_by} already has a correction of this test open.")
    basis = Basis.read(record, record.head_id)
    now = timezone.now()
    sheet = Sheet(
        pk=sheet_id,
        plant=locked.plant,
        tag=locked.tag,
        transmitter=locked.transmitter,
        fitting=locked.fitting,
        stage=Sheet.Stage.CORRECT,
        corrects=locked,
        opened_by=_person(by),
        opened_at=now,
        **basis.columns(),
    )
    sheet.basis["head_id"] = record.head_id
    sheet.save(force_insert=True)
    Entry.objects.bulk_create(entries_of(record, sheet, by=_person(by), at=now, reason=reason))
    act = Act(by=by, reason=reason)
    act.created(sheet, plant=locked.plant_id)
    act.write()
    return sheet


def terms_at(
    *,
    tag: Tag,
    transmitter: Transmitter,
    head: MeasuringHead,
    used: Range,
    requirement: Requirement,
    lines: Iterable[GuidanceLine] | None = None,
) -> Basis:
    """What a test at a tag is judged by and what is shown with it.

    Plant, area and type are at hand on the rows; `lines`: those of `guidance_lines`, where many terms are worked out.
    """
    return Basis.of(
        used=used,
        requirement=requirement,
        head=head,
        decimal_comma=tag.plant.decimal_comma,
        notes={
            "head_id": head.pk,
            "range_id": used.pk,
            "requirement_id": requirement.pk,
            "point_list": requirement.point_list.name,
            "instrument": instrument(tag, transmitter, head),
            "facts": _facts(tag),
            "units": {"temperature": tag.temperature_unit, "static": tag.pressure_unit},
            "digital": transmitter.type.digital,
            "site_first": SITE_FIRST,
            **_guidance(guidance_lines(tag.plant) if lines is None else lines, tag, transmitter, used.transfer),
        },
    )


def terms_on_the_bench(
    *, transmitter: Transmitter, head: MeasuringHead, point_list: PointList, values: Mapping[str, Any]
) -> Basis:
    """What a test of a spare is judged by; `values` as `open_bench_sheet` takes them."""
    used = Range(**{name: values[name] for name in _RANGE if name in values})
    asked = Requirement(**{name: values[name] for name in _TOLERANCE if name in values}, point_list=point_list)
    return Basis.of(
        used=used,
        requirement=asked,
        head=head,
        decimal_comma=transmitter.plant.decimal_comma,
        notes={
            "head_id": head.pk,
            "point_list": point_list.name,
            "instrument": instrument(None, transmitter, head),
            "units": {"temperature": transmitter.type.temperature_unit, "static": transmitter.type.pressure_unit},
            "digital": transmitter.type.digital,
            "site_first": SITE_FIRST,
            **_guidance(guidance_lines(transmitter.plant), None, transmitter, used.transfer),
        },
    )


def what_is_lacking(tag: Tag) -> list[str]:
    """What must be recorded before a tag can be tested, in sentences."""
    lacking = []
    if tag.out_of_service_on is not None:
        lacking.append(f"{tag} is out of service since {tag.out_of_service_on}: put it back into service first.")
    if tag.current_fitting_id is None:
        lacking.append(f"No transmitter is fitted at {tag}: record the fitting first.")
    if tag.current_range_id is None:
        lacking.append(f"{tag} has no range: an engineer sets LRV and URV first.")
    if current_requirement(tag) is None:
        lacking.append(f"{tag} has no requirement: an engineer sets tolerance, interval and point list first.")
    return lacking


def current_requirement(tag: Tag) -> Requirement | None:
    """The requirement in force, its point list at hand."""
    return (
        tag.requirements.filter(applied_at__isnull=False, withdrawn_at__isnull=True)
        .select_related("point_list")
        .order_by("-effective_from", "-id")
        .first()
    )


_RANGE: Final = ("lrv", "urv", "unit", "reference", "transfer", "low_cut_percent", "below_cut")
_TOLERANCE: Final = ("mpe_form", "mpe_percent", "mpe_input", "as_left_percent", "as_left_input", "input_unit")


def _opened(
    by: Actor,
    reason: str,
    sheet_id: uuid.UUID,
    plant: Plant,
    transmitter: Transmitter,
    basis: Basis,
    *,
    tag: Tag | None = None,
    fitting: Fitting | None = None,
) -> Sheet:
    sheet = Sheet(
        pk=sheet_id,
        plant=plant,
        tag=tag,
        transmitter=transmitter,
        fitting=fitting,
        opened_by=_person(by),
        opened_at=timezone.now(),
        **basis.columns(),
    )
    sheet.save(force_insert=True)
    act = Act(by=by, reason=reason)
    act.created(sheet, plant=plant)
    act.write()
    return sheet


def _already(sheet_id: uuid.UUID, **belongs: int) -> Sheet | None:
    opened = Sheet.objects.filter(pk=sheet_id).first()
    if opened is None:
        return None
    if any(getattr(opened, name) != value for name, value in belongs.items()):
        raise ValidationError("This sheet number belongs to another instrument; load the page again.")
    return opened


def _person(by: Actor) -> User:
    if by.person is None:
        raise ValidationError("A sheet is opened by a person.")
    return by.person


def _transmitter(pk: int, *, lock: bool = False) -> Transmitter:
    rows = Transmitter.objects.select_related("plant", "maker", "type", "head")
    if lock:
        rows = rows.select_for_update(of=("self",))
    return rows.get(pk=pk)


def _checked(basis: Basis) -> None:
    """Refuse typed terms that cannot be tested against."""
    try:
        signal = basis.signal()
        basis.columns()
    except ValueError as error:
        raise ValidationError({"urv": str(error)}) from error
    try:
        basis.tolerance("as-found")
        basis.tolerance("as-left")
    except ValueError as error:
        raise ValidationError({"mpe_form": str(error)}) from error
    asked = basis.point_list()
    if asked is not None and signal.is_square_root and min(asked.points) < basis.low_cut_percent:
        raise ValidationError({"point_list": "The list has points below the low cut; choose one that begins above it."})


def _facts(tag: Tag) -> list[dict[str, str]]:
    """What the technician should know of the process before he opens a valve."""
    return list(_each_fact(tag))


def _each_fact(tag: Tag) -> Iterator[dict[str, str]]:
    from register.engineering.units import label

    kind = "gauge" if tag.pressure_reference == "gauge" else "absolute"
    if tag.medium:
        yield {"what": "Medium", "value": tag.medium}
    for what, text, unit in (
        ("Operating pressure", tag.operating_pressure, f"{label(tag.pressure_unit)} {kind}"),
        ("Design pressure", tag.design_pressure, f"{label(tag.pressure_unit)} {kind}"),
        ("Highest process temperature", tag.process_max, label(tag.temperature_unit)),
        ("Heat tracing up to", tag.tracing_temperature, label(tag.temperature_unit)),
    ):
        if text:
            yield {"what": what, "value": f"{text} {unit}"}
    for what, text in (
        ("Trips", tag.trip_function),
        ("Vents to", tag.vent_direction),
        ("Hazardous area", tag.hazardous_area),
        ("Location", tag.location),
    ):
        if text:
            yield {"what": what, "value": text}


def guidance_lines(plant: Plant) -> list[GuidanceLine]:
    """Cautions and checklist lines of a plant as they are worded today, in their order."""
    return list(GuidanceLine.objects.filter(plant=plant, withdrawn_at=None).order_by("part", "order", "id"))


def _guidance(
    lines: Iterable[GuidanceLine], tag: Tag | None, transmitter: Transmitter, transfer: str
) -> dict[str, list[dict[str, str]]]:
    """Cautions and return-to-service checklist as they are worded today, and the tag's own isolation sequence."""
    applies = _applies(tag, transmitter, transfer)
    condensing = tag is not None and tag.condensing_service
    parts: dict[str, list[dict[str, str]]] = {"cautions": [], "checklist": []}
    for line in lines:
        if line.applies not in applies:
            continue
        # Opening the equaliser would drain the condensate legs: a line that asks for it must not stand here.
        if condensing and line.condensing == GuidanceLine.Condensing.LEFT_OUT:
            continue
        # On the bench the plant's lines are there to be read; there is nothing to isolate or to hand back.
        excused = tag is None or (condensing and line.condensing == GuidanceLine.Condensing.MAY_STAY_EMPTY)
        required = line.required and not excused
        part = "cautions" if line.part == GuidanceLine.Part.CAUTION else "checklist"
        parts[part].append(_line(line.key, line.text, line.answer, required=required))
    steps = tag.isolation_sequence.splitlines() if tag is not None else ()
    parts["cautions"] += [
        _line(f"{ISOLATION}{number}", step.strip(), GuidanceLine.Answer.TICK, required=True)
        for number, step in enumerate((step for step in steps if step.strip()), start=1)
    ]
    return parts


def _line(key: str, text: str, answer: str, *, required: bool) -> dict[str, str]:
    return {"key": key, "text": text, "answer": str(answer), "required": "yes" if required else "no"}


def _applies(tag: Tag | None, transmitter: Transmitter, transfer: str) -> set[str]:
    on = {Applies.ALWAYS: True, Applies.DIFFERENTIAL: transmitter.type.measures == "differential"}
    on[Applies.SQUARE_ROOT] = transfer == "square root"
    if tag is not None:
        on |= {
            Applies.CONDENSING: tag.condensing_service,
            Applies.OXYGEN: tag.oxygen_service,
            Applies.TOXIC: tag.toxic_service,
            Applies.TRIP: bool(tag.trip_function),
            Applies.HAZARDOUS: bool(tag.hazardous_area),
            Applies.TRACED: bool(tag.tracing_temperature),
            Applies.SQUARE_ROOT: transfer == "square root" or tag.root_extraction not in ("", "none"),
        }
    return {key.value for key, applies in on.items() if applies}


def open_sheets(tag: Tag) -> list[Sheet]:
    """Sheets of a tag that are not ended, newest first."""
    return list(Sheet.objects.filter(tag=tag, ended_at=None).select_related("opened_by"))
