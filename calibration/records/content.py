"""What a record consists of, as plain dataclasses, and the canonical object that is hashed."""

from __future__ import annotations

import datetime
import uuid
from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Any

from calibration.records.basis import Basis
from calibration.records.canonical import plain


@dataclass(frozen=True, slots=True)
class ReadingContent:
    """One reading; `direction` is "up" or "down", texts are kept as typed, an empty unit means that of the range."""

    applied: str
    measured: str
    direction: str
    nominal_percent: float | None = None
    cycle: int = 1
    applied_unit: str = ""
    measured_unit: str = "mA"
    digital: str = ""
    digital_unit: str = ""
    entered_at: datetime.datetime | None = None


@dataclass(frozen=True, slots=True)
class UseContent:
    """A reference standard in a run; `part` is "applied" or "measured"."""

    part: str
    standard_id: int
    certificate_id: int | None
    exception: str = ""
    exception_by_id: int | None = None


@dataclass(frozen=True, slots=True)
class RunContent:
    """One run; `kind` is "as-found" or "as-left"; readings in the order taken, without those that are missing."""

    kind: str
    tested_on: datetime.date
    readings: tuple[ReadingContent, ...]
    standards: tuple[UseContent, ...] = ()
    ambient: str = ""
    ambient_unit: str = ""
    height_difference: str = ""
    height_unit: str = ""
    static_pressure: str = ""
    static_unit: str = ""


@dataclass(frozen=True, slots=True)
class SignatureContent:
    """Who stands for the record; `meaning` is one of `Signature.Meaning`."""

    meaning: str
    person_id: int
    printed_name: str
    signed_at: datetime.datetime
    time_zone: str
    remarks: str = ""


@dataclass(frozen=True, slots=True)
class RecordContent:
    """One version of a test, complete.

    `outcome` is one of `Test.Outcome`; `could_not_test` belongs into `answers`. `test_id` and `correction_reason` are
    given for a later version only.
    """

    plant_id: int
    tag_id: int | None
    transmitter_id: int
    fitting_id: int | None
    tested_on: datetime.date
    adjusted: bool
    basis: Basis
    runs: tuple[RunContent, ...]
    made_at: datetime.datetime
    made_by_id: int | None
    outcome: str = "done"
    transcribed: bool = False
    answers: Mapping[str, Any] = field(default_factory=dict)
    signatures: tuple[SignatureContent, ...] = ()
    sheet_id: uuid.UUID | None = None
    test_id: int | None = None
    correction_reason: str = ""


def record_object(
    content: RecordContent,
    *,
    plant: str,
    position: int,
    test_id: int,
    version: int,
    supersedes: str,
    verdicts: Mapping[str, Mapping[str, str]],
) -> dict[str, Any]:
    """The object whose canonical form is hashed.

    Parameters
    ----------
    plant : str
        Code of the plant.
    position : int
        Place in the plant's chain.
    supersedes : str
        Hash of the version before, or empty.
    verdicts : mapping
        For each kind of run its "verdict" and "why".
    """
    basis = content.basis
    described: dict[str, Any] = {
        "form": "record",
        "plant": plant,
        "position": position,
        "test": test_id,
        "version": version,
        "supersedes": supersedes,
        "correction_reason": content.correction_reason,
        "transcribed": content.transcribed,
        "tag": content.tag_id,
        "transmitter": content.transmitter_id,
        "fitting": content.fitting_id,
        "head": basis.head_id,
        "sheet": content.sheet_id,
        "outcome": content.outcome,
        "tested_on": content.tested_on,
        "adjusted": content.adjusted,
        "made_by": content.made_by_id,
        "made_at": content.made_at,
        "range": {
            "lrv": basis.lrv,
            "urv": basis.urv,
            "unit": basis.unit,
            "reference": basis.reference,
            "transfer": basis.transfer,
            "low_cut_percent": float(basis.low_cut_percent),
            "below_cut": basis.below_cut,
        },
        "basis": basis.kept(),
        "answers": content.answers,
        "runs": [_run_object(run, basis.unit) | dict(verdicts.get(run.kind, {})) for run in content.runs],
    }
    result: dict[str, Any] = plain(described)
    return result


def signature_object(signature: SignatureContent, *, plant: str, position: int, record: str) -> dict[str, Any]:
    """The object whose canonical form is hashed for a signature; `record` is the hash of what is signed."""
    result: dict[str, Any] = plain(
        {
            "form": "signature",
            "plant": plant,
            "position": position,
            "record": record,
            "meaning": signature.meaning,
            "person": signature.person_id,
            "printed_name": signature.printed_name,
            "signed_at": signature.signed_at,
            "time_zone": signature.time_zone,
            "remarks": signature.remarks,
        }
    )
    return result


def _run_object(run: RunContent, unit: str) -> dict[str, Any]:
    return {
        "kind": run.kind,
        "tested_on": run.tested_on,
        "ambient": [run.ambient, run.ambient_unit],
        "height_difference": [run.height_difference, run.height_unit],
        "static_pressure": [run.static_pressure, run.static_unit],
        "readings": [
            {
                "order": order,
                "cycle": reading.cycle,
                "direction": reading.direction,
                "nominal_percent": None if reading.nominal_percent is None else float(reading.nominal_percent),
                "applied": reading.applied,
                "applied_unit": reading.applied_unit or unit,
                "measured": reading.measured,
                "measured_unit": reading.measured_unit,
                "digital": reading.digital,
                "digital_unit": reading.digital_unit,
                "entered_at": reading.entered_at,
            }
            for order, reading in enumerate(run.readings, start=1)
        ],
        "standards": [
            {
                "part": use.part,
                "standard": use.standard_id,
                "certificate": use.certificate_id,
                "exception": use.exception,
                "exception_by": use.exception_by_id,
            }
            for use in sorted(run.standards, key=lambda use: (use.part, use.standard_id))
        ],
    }
