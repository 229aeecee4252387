"""A small named cast and a small plant: rows as plain as they can be, each `make_` call one thing.

Everything has a sensible default, so that a test names only what it is about. Rows are stored directly,
not through the acts: a test of an act must not lean on another act.
"""

from __future__ import annotations

import datetime
import itertools
from dataclasses import dataclass, field
from typing import Any, TypeVar

from django.db.models import Model

from calibration.models import (
    Certificate,
    Entry,
    GuidanceLine,
    PointList,
    Reading,
    Record,
    Requirement,
    Run,
    Sheet,
    Signature,
    Standard,
    StandardUse,
    Test,
    ToleranceForm,
)
from register.models import (
    Area,
    Fitting,
    Maker,
    Measurand,
    MeasuringHead,
    Membership,
    Plant,
    Range,
    ReferenceKind,
    Role,
    Tag,
    Transmitter,
    TransmitterType,
    TypedQuantities,
    User,
)

PASSWORD = "well-kept secret 7"
R = TypeVar("R", bound=Model)
LONG_AGO = datetime.date(2020, 1, 6)
_numbers = itertools.count(1)


@dataclass
class Cast:
    """The people of one plant, one per role, and a planner of another plant."""

    plant: Plant
    other_plant: Plant
    planner: User
    technician: User
    engineer: User
    reviewer: User
    auditor: User
    administrator: User
    stranger: User
    by_role: dict[str, User] = field(default_factory=dict)


def make_plant(code: str = "", **values: Any) -> Plant:
    number = next(_numbers)
    code = code or f"plant-{number}"
    settings = {"name": f"Plant {number}", "barometric_pressure": "101.3", "barometric_unit": "kPa"} | values
    return _stored(Plant(code=code, **settings))


def make_person(username: str, *, plant: Plant | None = None, roles: tuple[str, ...] = (), **values: Any) -> User:
    """A person with the password `PASSWORD` and the given roles in one plant."""
    person = User(username=username, printed_name=values.pop("printed_name", username.replace("-", " ").title()))
    for name, value in values.items():
        setattr(person, name, value)
    person.set_password(PASSWORD)
    person.save()
    if plant:
        give_roles(person, plant, *roles)
    return person


def give_roles(person: User, plant: Plant, *roles: str) -> None:
    for role in roles:
        Membership.objects.create(user=person, plant=plant, role=role)


def make_cast() -> Cast:
    plant = make_plant("north", name="North works")
    other = make_plant("south", name="South works")
    people = {role: make_person(role, plant=plant, roles=(role,)) for role in Role.values}
    stranger = make_person("stranger", plant=other, roles=(Role.PLANNER,))
    return Cast(plant=plant, other_plant=other, stranger=stranger, by_role=people, **people)


def make_area(plant: Plant, code: str = "", **values: Any) -> Area:
    code = code or f"A{next(_numbers)}"
    settings = {"name": f"Area {code}", "ambient_min": "-10", "ambient_max": "40"} | values
    return _stored(Area(plant=plant, code=code, **settings))


def make_maker(name: str = "Quillhaven Gauge Works") -> Maker:
    return Maker.objects.get_or_create(name=name)[0]


def make_type(maker: Maker | None = None, **values: Any) -> TransmitterType:
    """A gauge-pressure type unless `measures` says otherwise; body rating 160 bar falling to 110 bar at 120 °C."""
    settings = {
        "designation": f"Q{next(_numbers)}",
        "measures": ReferenceKind.GAUGE,
        "body_rating": [["-40", "160"], ["38", "160"], ["120", "110"]],
        "one_side_limit": "160",
        "vacuum_limit": "0.03",
        "ambient_min": "-40",
        "ambient_max": "85",
        "process_min": "-40",
        "process_max": "120",
        "capsule_max": "120",
        "least_supply_v": 10.5,
        "digital": True,
    } | values
    return _stored(TransmitterType(maker=maker or make_maker(), **settings))


def make_head(type: TransmitterType | None = None, **values: Any) -> MeasuringHead:
    """A head of −1 to 16 bar with a least span of 0.16 bar."""
    settings = {
        "code": f"H{next(_numbers)}",
        "unit": "bar",
        "lrl": "-1",
        "url": "16",
        "least_span": "0.16",
        "accuracy_percent": 0.075,
        "accuracy_turndown": 10,
        "stability_percent": 0.2,
        "stability_months": 60,
    } | values
    return _stored(MeasuringHead(type=type or make_type(), **settings))


def make_transmitter(plant: Plant, head: MeasuringHead | None = None, **values: Any) -> Transmitter:
    head = head or make_head()
    settings = {"serial": f"S-{next(_numbers):05}"} | values
    return _stored(Transmitter(plant=plant, maker=head.type.maker, type=head.type, head=head, **settings))


def make_tag(area: Area, number: str = "", **values: Any) -> Tag:
    """A gauge-pressure tag at 6 bar operating, 10 bar design, 20 to 60 °C."""
    settings = {
        "service": "Cooling water to the condenser",
        "measurand": Measurand.PRESSURE,
        "medium": "water",
        "operating_pressure": "6",
        "design_pressure": "10",
        "process_min": "20",
        "process_max": "60",
        "supply_v": 24.0,
        "loop_ohm": 250.0,
    } | values
    return _stored(Tag(plant=area.plant, area=area, number=number or f"PT-{next(_numbers):04}", **settings))


def make_range(tag: Tag, lrv: str = "0", urv: str = "10", unit: str = "bar", **values: Any) -> Range:
    """The current range of a tag, unless `applied_at=None` makes it a planned one."""
    effective_from = values.pop("effective_from", LONG_AGO)
    settings = {
        "reference": ReferenceKind.GAUGE,
        "reason": "first range",
        "applied_at": _noon(effective_from),
    } | values
    row = _stored(Range(tag=tag, lrv=lrv, urv=urv, unit=unit, effective_from=effective_from, **settings))
    if row.applied_at and not row.withdrawn_at:
        tag.current_range = row
        tag.save()
    return row


def make_fitting(tag: Tag, transmitter: Transmitter | None = None, **values: Any) -> Fitting:
    """Where a transmitter is fitted; current unless `removed_on` is given."""
    transmitter = transmitter or make_transmitter(tag.plant)
    settings = {"fitted_on": LONG_AGO, "fitted_reason": "commissioned"} | values
    row = _stored(Fitting(tag=tag, transmitter=transmitter, **settings))
    if row.removed_on is None:
        tag.current_fitting = row
        tag.save()
        transmitter.whereabouts = Transmitter.Whereabouts.FITTED
        transmitter.save()
    return row


def make_point_list(plant: Plant, points: str = "0 25 50 75 100 75 50 25 0", **values: Any) -> PointList:
    return _stored(PointList(plant=plant, points=points, **({"name": f"Points {next(_numbers)}"} | values)))


def make_requirement(tag: Tag, **values: Any) -> Requirement:
    """0.5 % of span every twelve months, counted from the last test."""
    effective_from = values.pop("effective_from", LONG_AGO)
    settings = {
        "mpe_form": ToleranceForm.SPAN,
        "mpe_percent": "0.5",
        "as_left_percent": "0.25",
        "interval_months": 12,
        "reason": "first requirement",
        "applied_at": _noon(effective_from),
    } | values
    if "point_list" not in settings:
        settings["point_list"] = tag.plant.point_lists.first() or make_point_list(tag.plant)
    return _stored(Requirement(tag=tag, effective_from=effective_from, **settings))


def make_standard(plant: Plant, *, certified: bool = True, **values: Any) -> Standard:
    """A pressure standard of 0 to 20 bar with a certificate that outlasts every test date, unless not `certified`."""
    settings = {
        "name": f"RS-{next(_numbers):03}",
        "kind": Standard.Kind.PRESSURE,
        "serial": f"RS{next(_numbers):05}",
        "unit": "bar",
        "reference": ReferenceKind.GAUGE,
        "low": "0",
        "high": "20",
        "spec_reading_percent": 0.02,
    } | values
    row = _stored(Standard(plant=plant, **settings))
    if certified:
        make_certificate(row)
    return row


def make_meter(plant: Plant, **values: Any) -> Standard:
    """A current standard of 0 to 25 mA."""
    settings = {"kind": Standard.Kind.CURRENT, "unit": "mA", "reference": "", "low": "0", "high": "25"} | values
    return make_standard(plant, **settings)


def make_certificate(standard: Standard, **values: Any) -> Certificate:
    settings = {
        "number": f"C-{next(_numbers):04}",
        "laboratory": "Fernhollow Metrology",
        "calibrated_on": LONG_AGO,
        "valid_until": datetime.date(2099, 12, 31),
    } | values
    return _stored(Certificate(standard=standard, **settings))


def make_guidance(plant: Plant, **values: Any) -> GuidanceLine:
    settings = {
        "part": GuidanceLine.Part.CAUTION,
        "order": 10,
        "key": f"line-{next(_numbers)}",
        "text": "Permit and control-room consent in hand",
    } | values
    return _stored(GuidanceLine(plant=plant, **settings))


def make_ready_tag(area: Area, number: str = "", **values: Any) -> Tag:
    """A tag with range, fitted transmitter and requirement: all that a test needs."""
    tag = make_tag(area, number, **values)
    make_range(tag)
    make_fitting(tag)
    make_requirement(tag)
    return tag


def make_sheet(tag: Tag, person: User, **values: Any) -> Sheet:
    """An open sheet of the transmitter fitted at a tag; its basis is bare."""
    settings = {"opened_at": _noon(LONG_AGO), "basis": {}} | _range_columns(tag) | values
    fitting = tag.current_fitting
    assert fitting is not None
    return _stored(
        Sheet(plant=tag.plant, tag=tag, fitting=fitting, transmitter=fitting.transmitter, opened_by=person, **settings)
    )


def make_entry(sheet: Sheet, person: User, field: str = "remarks", text: str = "", **values: Any) -> Entry:
    settings = {
        "device": "desk",
        "sequence": next(_numbers),
        "typed_at": _noon(LONG_AGO),
        "received_at": _noon(LONG_AGO),
    } | values
    return _stored(Entry(sheet=sheet, person=person, field=field, text=text, **settings))


def make_record(tag: Tag, person: User, **values: Any) -> Record:
    """A signed record of one as-found run with one reading, row by row: not a link that the chain would take."""
    fitting = tag.current_fitting
    assert fitting is not None
    test = Test(
        plant=tag.plant,
        tag=tag,
        fitting=fitting,
        transmitter=fitting.transmitter,
        state=Test.State.SIGNED,
        tested_on=LONG_AGO,
        accepted=True,
    )
    test.save()
    settings = (
        {"made_by": person, "made_at": _noon(LONG_AGO), "head": fitting.transmitter.head, "basis": {}}
        | _link()
        | values
    )
    record = _stored(Record(test=test, plant=tag.plant, **_range_columns(tag), **settings))
    test.current_record = record
    test.save()
    run = _stored(Run(record=record, kind=Run.Kind.AS_FOUND, tested_on=LONG_AGO))
    _stored(
        Reading(
            run=run,
            order=1,
            direction="up",
            applied="5.00",
            applied_unit="bar",
            applied_si=5e5,
            measured="12.01",
            measured_ma=12.01,
        )
    )
    standard = make_standard(tag.plant)
    _stored(
        StandardUse(run=run, part=StandardUse.Part.APPLIED, standard=standard, certificate=standard.certificates.get())
    )
    _stored(
        Signature(
            record=record,
            meaning=Signature.Meaning.PERFORMED,
            person=person,
            printed_name=str(person),
            signed_at=_noon(LONG_AGO),
            time_zone="UTC",
            plant=tag.plant,
            **_link(),
        )
    )
    return record


def _link() -> dict[str, Any]:
    """Columns of a link of the chain that no check of the chain would take."""
    number = next(_numbers)
    return {"position": number, "content": "{}", "previous_hash": "0" * 64, "hash": f"{number:064x}"}


def _range_columns(tag: Tag) -> dict[str, Any]:
    names = (
        "lrv",
        "urv",
        "unit",
        "reference",
        "lrv_si",
        "urv_si",
        "transfer",
        "low_cut_percent",
        "below_cut",
    )
    return {name: getattr(tag.current_range, name) for name in names}


def _noon(day: datetime.date) -> datetime.datetime:
    return datetime.datetime.combine(day, datetime.time(12), tzinfo=datetime.UTC)


def _stored(row: R) -> R:
    if isinstance(row, TypedQuantities):
        row.set_si()
    row.save()
    return row
