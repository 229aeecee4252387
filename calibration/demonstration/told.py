"""Tells the tests of the demonstration to the act that writes records: who, with what, under which terms."""

from __future__ import annotations

import datetime
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, replace
from typing import Any
from zoneinfo import ZoneInfo

from calibration.models import Certificate, GuidanceLine, PointList, Requirement, Signature, Standard, Test
from calibration.opening import guidance_lines, terms_at, terms_on_the_bench
from calibration.records.basis import Basis
from calibration.records.content import ReadingContent, RecordContent, RunContent, SignatureContent, UseContent
from register.models import Fitting, Intervention, MeasuringHead, Plant, Range, Tag, Transmitter, User

LATE = datetime.date.max
REST = 600
"""Seconds between the last as-found and the first as-left reading."""


@dataclass(frozen=True, slots=True)
class Told:
    """The rows that tests of one plant point at, read once."""

    plant: Plant
    people: Mapping[str, User]
    tags: Mapping[str, Tag]
    transmitters: Mapping[str, Transmitter]
    heads: Mapping[int, MeasuringHead]
    point_lists: Mapping[str, PointList]
    standards: Mapping[str, Standard]
    certificates: Mapping[int, Sequence[Certificate]]
    fittings: Mapping[int, Sequence[Fitting]]
    ranges: Mapping[int, Sequence[Range]]
    requirements: Mapping[int, Sequence[Requirement]]
    new_heads: Mapping[int, Sequence[Intervention]]
    guidance: Sequence[GuidanceLine]

    @classmethod
    def read(cls, plant: Plant, people: Mapping[str, User]) -> Told:
        """Read what is registered in a plant."""
        standing = {"withdrawn_at__isnull": True, "applied_at__isnull": False}
        point_lists = PointList.objects.filter(plant=plant)
        return cls(
            plant=plant,
            people=people,
            tags={tag.number: tag for tag in Tag.objects.filter(plant=plant).select_related("plant", "area")},
            transmitters={
                transmitter.serial: transmitter
                for transmitter in Transmitter.objects.filter(plant=plant).select_related("maker", "type", "head")
            },
            heads=MeasuringHead.objects.in_bulk(),
            point_lists={row.points: row for row in point_lists},
            standards={standard.name: standard for standard in Standard.objects.filter(plant=plant)},
            certificates=_grouped(
                Certificate.objects.filter(standard__plant=plant).order_by("calibrated_on"), "standard_id"
            ),
            fittings=_grouped(Fitting.objects.filter(tag__plant=plant).order_by("fitted_on"), "tag_id"),
            ranges=_grouped(Range.objects.filter(tag__plant=plant, **standing).order_by("effective_from"), "tag_id"),
            requirements=_grouped(
                Requirement.objects.filter(tag__plant=plant, **standing)
                .select_related("point_list")
                .order_by("effective_from"),
                "tag_id",
            ),
            new_heads=_grouped(
                Intervention.objects.filter(transmitter__plant=plant, head_after__isnull=False).order_by("done_on"),
                "transmitter_id",
            ),
            guidance=guidance_lines(plant),
        )

    def content(self, row: Mapping[str, Any]) -> RecordContent:
        """The content of the record of one test, as it was first signed."""
        return self._content(_as_first_typed(row) if "correction" in row else row)

    def corrected(self, row: Mapping[str, Any], test_id: int) -> RecordContent:
        """The content of the second version of a test that was sent back."""
        first = self._content(row)
        person, correction = self.people[row["by"]], row["correction"]
        made = self._at(correction["on"], row["start"])
        return replace(
            first,
            made_at=made,
            signatures=tuple(self._signatures(row, person, made)),
            test_id=test_id,
            correction_reason=correction["reason"],
        )

    def _content(self, row: Mapping[str, Any]) -> RecordContent:
        on: datetime.date = row["on"]
        tag = self.tags[row["tag"]] if row["tag"] else None
        transmitter = self.transmitters[row["serial"]]
        person = self.people[row["by"]]
        began = self._at(on, row["start"])
        basis = self._basis(row, tag, transmitter, on)
        runs = tuple(self._runs(row, basis, began))
        ended = max(
            (reading.entered_at for run in runs for reading in run.readings if reading.entered_at), default=began
        )
        made = ended + datetime.timedelta(minutes=12)
        paper = bool(row.get("transcribed"))
        return RecordContent(
            plant_id=self.plant.pk,
            tag_id=tag.pk if tag else None,
            transmitter_id=transmitter.pk,
            fitting_id=self._fitting(tag, on).pk if tag else None,
            tested_on=on,
            adjusted=bool(row.get("adjusted")),
            basis=basis,
            runs=runs,
            made_at=made,
            made_by_id=person.pk,
            outcome=row.get("outcome", Test.Outcome.DONE),
            transcribed=paper,
            answers=self._answers(row, basis, tag, transmitter, person),
            signatures=() if paper else tuple(self._signatures(row, person, made)),
        )

    def _at(self, day: datetime.date, clock: str) -> datetime.datetime:
        return datetime.datetime.combine(day, datetime.time.fromisoformat(clock), tzinfo=ZoneInfo(self.plant.time_zone))

    def _basis(self, row: Mapping[str, Any], tag: Tag | None, transmitter: Transmitter, on: datetime.date) -> Basis:
        head = self._head(transmitter, on)
        if tag is None:
            return terms_on_the_bench(
                transmitter=transmitter,
                head=head,
                point_list=self.point_lists[row["points"]],
                values={**row["range"], "mpe_form": row["mpe"]["form"], "mpe_percent": row["mpe"]["percent"]},
            )
        used = _last(self.ranges[tag.pk], "effective_from", on)
        requirement = _last(self.requirements[tag.pk], "effective_from", on)
        return terms_at(
            tag=tag,
            transmitter=transmitter,
            head=head,
            used=used,
            requirement=requirement,
            lines=self.guidance,
        )

    def _head(self, transmitter: Transmitter, on: datetime.date) -> MeasuringHead:
        """The head that was in it on the day."""
        later = [change for change in self.new_heads.get(transmitter.pk, ()) if change.done_on > on]
        head_id = later[0].head_before_id if later else transmitter.head_id
        assert head_id is not None
        return self.heads[head_id]

    def _fitting(self, tag: Tag, on: datetime.date) -> Fitting:
        return next(
            fitting
            for fitting in reversed(self.fittings[tag.pk])
            if fitting.fitted_on <= on <= (fitting.removed_on or LATE)
        )

    def _runs(self, row: Mapping[str, Any], basis: Basis, began: datetime.datetime) -> Iterator[RunContent]:
        asked = basis.point_list()
        assert asked is not None
        standards = tuple(self._uses(row))
        at, step = began, datetime.timedelta(seconds=row["step"])
        for run in row["runs"]:
            readings = []
            for applied, measured, percent, direction, cycle in zip(
                run["applied"].split(),
                run["measured"].split(),
                asked.points,
                asked.directions,
                asked.cycles,
                strict=True,
            ):
                at += step
                readings.append(
                    ReadingContent(
                        applied=applied,
                        measured=measured,
                        direction="up" if direction > 0 else "down",
                        nominal_percent=float(percent),
                        cycle=int(cycle),
                        entered_at=None if row.get("transcribed") else at,
                    )
                )
            at += datetime.timedelta(seconds=REST)
            yield RunContent(
                kind=run["kind"],
                tested_on=row["on"],
                readings=tuple(readings),
                standards=standards,
                ambient=run["ambient"],
                ambient_unit="degC",
            )

    def _uses(self, row: Mapping[str, Any]) -> Iterator[UseContent]:
        for part, name in zip(("applied", "measured"), row.get("standards", ()), strict=False):
            standard = self.standards[name]
            certificate = _last(self.certificates[standard.pk], "calibrated_on", row["on"])
            lapsed = certificate.valid_until < row["on"]
            yield UseContent(
                part=part,
                standard_id=standard.pk,
                certificate_id=certificate.pk,
                exception=row["exception"] if lapsed else "",
                exception_by_id=self.people["engineer"].pk if lapsed else None,
            )

    def _answers(
        self, row: Mapping[str, Any], basis: Basis, tag: Tag | None, transmitter: Transmitter, person: User
    ) -> dict[str, Any]:
        found: dict[str, Any] = {name: row[name] for name in ("remarks", "could_not_test") if name in row}
        if row.get("adjusted"):
            found["adjustment"] = row["remarks"]
        if row.get("transcribed"):
            return found
        found["confirmed"] = {"tag": tag.number if tag else "", "serial": transmitter.serial}
        for part in ("cautions", "checklist"):
            if part == "checklist" and not row["runs"]:
                continue
            found[part] = [
                {
                    "key": line["key"],
                    "text": line["text"],
                    "answer": self._answer(line, row) if line["required"] == "yes" else "",
                    "by": str(person),
                }
                for line in basis.notes.get(part, ())
            ]
        if "exception" in row:
            found["exceptions"] = [
                {"standard": row["standards"][0], "reason": row["exception"], "by": str(self.people["engineer"])}
            ]
        found["entered_by"] = [str(person)]
        return found

    def _answer(self, line: Mapping[str, str], row: Mapping[str, Any]) -> str:
        if line["answer"] == "reading":
            return str(row.get("line_zero", "4.000"))
        if line["answer"] == "tick":
            return "yes"
        return f"shift leader, {row['start']}"

    def _signatures(self, row: Mapping[str, Any], person: User, made: datetime.datetime) -> Iterator[SignatureContent]:
        yield self._signature(Signature.Meaning.PERFORMED, person, made)
        reviewer = self.people[row["reviewer"]]
        if "reviewed" in row:
            at = self._at(row["reviewed"], "09:40") + datetime.timedelta(minutes=row["step"])
            yield self._signature(Signature.Meaning.REVIEWED, reviewer, at)
        if "sent_back" in row:
            at = self._at(row["sent_back"], "09:40") + datetime.timedelta(minutes=row["step"])
            yield self._signature(Signature.Meaning.SENT_BACK, reviewer, at, row["sent_back_remarks"])

    def _signature(
        self, meaning: Signature.Meaning, person: User, at: datetime.datetime, remarks: str = ""
    ) -> SignatureContent:
        return SignatureContent(
            meaning=meaning,
            person_id=person.pk,
            printed_name=str(person),
            signed_at=at,
            time_zone=self.plant.time_zone,
            remarks=remarks,
        )


def _as_first_typed(row: Mapping[str, Any]) -> dict[str, Any]:
    """The row with the mistyped reading, sent back instead of reviewed."""
    correction = row["correction"]
    found, *others = row["runs"]
    measured = found["measured"].split()
    measured[correction["place"]] = correction["first"]
    kept = {name: value for name, value in row.items() if name != "reviewed"}
    sent_back = {name: correction[name] for name in ("sent_back", "sent_back_remarks")}
    return kept | sent_back | {"runs": [found | {"measured": " ".join(measured)}, *others]}


def _grouped(rows: Any, name: str) -> dict[int, list[Any]]:
    groups: dict[int, list[Any]] = {}
    for row in rows:
        groups.setdefault(getattr(row, name), []).append(row)
    return groups


def _last(rows: Sequence[Any], name: str, on: datetime.date) -> Any:
    """The last row that had begun on a day."""
    return [row for row in rows if getattr(row, name) <= on][-1]
