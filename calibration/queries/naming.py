"""What the ids in records are called today, so that a record can be read without the register."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from typing import Any

from calibration.models import Certificate, Standard
from calibration.records.content import RecordContent
from register.models import MeasuringHead, Tag, Transmitter


@dataclass(frozen=True, slots=True)
class Names:
    """Names of everything that a batch of records points at, read with one query a kind."""

    tags: Mapping[int, Tag]
    transmitters: Mapping[int, Transmitter]
    heads: Mapping[int, MeasuringHead]
    standards: Mapping[int, Standard]
    certificates: Mapping[int, Certificate]

    @classmethod
    def of(cls, contents: Sequence[RecordContent]) -> Names:
        uses = [use for content in contents for run in content.runs for use in run.standards]
        return cls(
            tags=Tag.objects.select_related("area").in_bulk(
                {content.tag_id for content in contents if content.tag_id is not None}
            ),
            transmitters=Transmitter.objects.select_related("maker", "type").in_bulk(
                {content.transmitter_id for content in contents}
            ),
            heads=MeasuringHead.objects.in_bulk({content.basis.head_id for content in contents}),
            standards=Standard.objects.in_bulk({use.standard_id for use in uses}),
            certificates=Certificate.objects.in_bulk(
                {use.certificate_id for use in uses if use.certificate_id is not None}
            ),
        )

    def told(self, content: RecordContent) -> RecordContent:
        """The content with the names of its instrument and its standards in the notes of its basis."""
        notes = dict(content.basis.notes)
        if "instrument" not in notes:
            notes["instrument"] = instrument(
                self.tags[content.tag_id] if content.tag_id is not None else None,
                self.transmitters[content.transmitter_id],
                self.heads[content.basis.head_id],
            )
        notes["standards"] = [
            self._standard(standard_id, certificate_id)
            for standard_id, certificate_id in sorted(
                {(use.standard_id, use.certificate_id or 0) for run in content.runs for use in run.standards}
            )
        ]
        return replace(content, basis=replace(content.basis, notes=notes))

    def _standard(self, standard_id: int, certificate_id: int) -> dict[str, Any]:
        standard = self.standards[standard_id]
        described: dict[str, Any] = {
            "id": standard.pk,
            "number": standard.name,
            "kind": standard.kind,
            "maker": standard.maker,
            "designation": standard.designation,
            "serial": standard.serial,
        }
        certificate = self.certificates.get(certificate_id)
        if certificate is not None:
            described |= {
                "certificate_id": certificate.pk,
                "certificate": certificate.number,
                "laboratory": certificate.laboratory,
                "calibrated_on": certificate.calibrated_on,
                "valid_until": certificate.valid_until,
            }
        return described


def instrument(tag: Tag | None, transmitter: Transmitter, head: MeasuringHead) -> dict[str, Any]:
    """What an instrument is called: tag, service, area, maker, serial number, type and head."""
    return {
        "tag": tag.number if tag else "",
        "service": tag.service if tag else "",
        "area": str(tag.area) if tag else "",
        "maker": transmitter.maker.name,
        "serial": transmitter.serial,
        "designation": transmitter.type.designation,
        "head": str(head),
    }
