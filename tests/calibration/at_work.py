"""A technician at work: short words for filling in a sheet through the acts."""

from __future__ import annotations

import datetime
import itertools
import uuid
from collections.abc import Mapping, Sequence
from dataclasses import dataclass

from django.utils import timezone

from calibration import sheets, signing
from calibration.models import Record, Sheet, Standard
from calibration.opening import open_sheet
from calibration.queries.drafts import Draft
from calibration.queries.entries import NewEntry
from calibration.storing_entries import Stored, add_entries
from register.auditing import Actor
from register.models import Tag, User
from tests import cast as people
from tests.calibration.described import NINE


@dataclass
class Device:
    """One tablet in the hands of one person."""

    person: User
    sheet: Sheet
    name: str = "tablet-a"

    def __post_init__(self) -> None:
        self.numbers = itertools.count(1)

    @property
    def by(self) -> Actor:
        return Actor(person=self.person)

    def entry(self, field: str, text: str, *, base: uuid.UUID | None = None, **values: object) -> NewEntry:
        settings: dict[str, object] = {
            "id": uuid.uuid4(),
            "field": field,
            "text": text,
            "device": self.name,
            "sequence": next(self.numbers),
            "base": base,
            "typed_at": timezone.now(),
        } | values
        return NewEntry(**settings)  # type: ignore[arg-type]

    def send(self, *entries: NewEntry) -> Stored:
        return add_entries(by=self.by, sheet_id=self.sheet.pk, entries=entries)

    def type(self, texts: Mapping[str, str]) -> Stored:
        """Fill in fields as somebody who sees the sheet as it stands."""
        draft = Draft(Sheet.objects.get(pk=self.sheet.pk))
        entries = [
            self.entry(name, text, base=draft.fields[name].entry.id if name in draft.fields else None)
            for name, text in texts.items()
        ]
        stored = self.send(*entries)
        assert not stored.refused, stored.refused
        return stored


def opened(tag: Tag, person: User, name: str = "tablet-a") -> Device:
    sheet = open_sheet(by=Actor(person=person), reason="", tag=tag, sheet_id=uuid.uuid4())
    return Device(person, sheet, name)


def run_texts(kind: str, errors: Sequence[float] = (0.0,) * 9, points: Sequence[int] = NINE) -> dict[str, str]:
    """Texts of a run on a 0 to 10 bar range with errors in % of span."""
    texts = {}
    for place, (point, error) in enumerate(zip(points, errors, strict=True), start=1):
        texts[f"{kind}.{place}.applied"] = f"{point / 10:g}"
        texts[f"{kind}.{place}.measured"] = f"{4 + 0.16 * (point + error):.4f}"
    return texts


def standards_of(tag: Tag) -> tuple[Standard, Standard]:
    """A pressure and a current standard of the tag's plant, made where there are none."""
    pressure = Standard.objects.filter(plant=tag.plant, kind="pressure").first() or people.make_standard(tag.plant)
    meter = Standard.objects.filter(plant=tag.plant, kind="current").first() or people.make_meter(tag.plant)
    return pressure, meter


def to_as_found(device: Device) -> None:
    sheet = device.sheet
    if sheet.tag is not None:
        device.type({"confirm-tag": sheet.tag.number})
    device.type({"confirm-serial": sheet.transmitter.serial})
    sheets.confirm(by=device.by, sheet_id=sheet.pk)
    device.type({f"caution.{line['key']}": "yes" for line in sheet.basis["cautions"]})
    sheets.pass_cautions(by=device.by, sheet_id=sheet.pk)
    pressure, meter = (
        standards_of(sheet.tag) if sheet.tag else (people.make_standard(sheet.plant), people.make_meter(sheet.plant))
    )
    device.type({"as-found.applied-with": str(pressure.pk), "as-found.measured-with": str(meter.pk)})
    sheets.choose_standards(by=device.by, sheet_id=sheet.pk, kind="as-found")


def to_adjustment(device: Device, found: Sequence[float] = (0.0,) * 9) -> None:
    to_as_found(device)
    device.type(run_texts("as-found", found))
    sheets.close_as_found(by=device.by, sheet_id=device.sheet.pk)


def to_signature(device: Device, found: Sequence[float] = (0.0,) * 9, left: Sequence[float] | None = None) -> None:
    to_adjustment(device, found)
    if left is None:
        device.type({"adjust.choice": "not adjusted"})
        sheets.record_adjustment(by=device.by, sheet_id=device.sheet.pk)
    else:
        device.type({"adjust.choice": "adjusted", "adjust.log": "Zero trimmed by −0.6 %."})
        sheets.record_adjustment(by=device.by, sheet_id=device.sheet.pk)
        device.type(run_texts("as-left", left))
        sheets.close_as_left(by=device.by, sheet_id=device.sheet.pk)
    answer_checklist(device)


def answer_checklist(device: Device) -> None:
    texts = {
        f"checklist.{line['key']}": "4.002" if line["answer"] == "reading" else "yes"
        for line in device.sheet.basis["checklist"]
    }
    device.type(texts)
    sheets.return_to_service(by=device.by, sheet_id=device.sheet.pk)


def signed(device: Device, found: Sequence[float] = (0.0,) * 9, left: Sequence[float] | None = None) -> Record:
    """A record of a sheet filled in from first to last."""
    to_signature(device, found, left)
    return signing.sign(by=device.by, sheet_id=device.sheet.pk)


def day(year: int, month: int, number: int) -> datetime.datetime:
    return datetime.datetime(year, month, number, 9, tzinfo=datetime.UTC)
