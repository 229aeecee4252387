"""Which reference standards may be used for a test, by the dates of their certificates."""

from __future__ import annotations

import datetime
from collections.abc import Iterable
from dataclasses import dataclass
from typing import Final

from calibration.models import Certificate, Run, Sheet, Standard
from register.figures import typed
from register.models import Plant

Kind = Standard.Kind
APPLIES: Final = frozenset({Kind.PRESSURE, Kind.DEAD_WEIGHT})
MEASURES: Final = frozenset({Kind.CURRENT})
BY_PART: Final = {"applied": APPLIES, "measured": MEASURES}
_WHAT: Final = {"applied": "applied the input", "measured": "measured the output"}


@dataclass(frozen=True, slots=True)
class Candidate:
    """A standard with the certificate that is the last on a day; `objection` says why it may not be used."""

    standard: Standard
    certificate: Certificate | None
    objection: str
    lapsed: bool

    @property
    def id(self) -> str:
        return str(self.standard.pk)

    def fits(self, part: str) -> bool:
        return self.standard.kind in BY_PART[part]

    @property
    def label(self) -> str:
        standard = self.standard
        held = f"{standard.name}, {typed(standard.low)} to {typed(standard.high)} {_unit(standard.unit)}"
        if self.objection:
            return f"{held} – {'certificate lapsed' if self.lapsed else standard.get_state_display()}"
        assert self.certificate is not None
        return f"{held} – certificate until {self.certificate.valid_until}"


def candidates(plant: Plant, on: datetime.date, *, also: Iterable[int | None] = ()) -> list[Candidate]:
    """Pressure and current standards of a plant that are in use, and those named in `also` whatever their state."""
    rows = Standard.objects.filter(plant=plant, kind__in=APPLIES | MEASURES).exclude(
        state__in=[Standard.State.WITHDRAWN, Standard.State.LOST]
    ) | Standard.objects.filter(plant=plant, pk__in=[pk for pk in also if pk is not None])
    found = list(rows.distinct().order_by("name"))
    newest: dict[int, Certificate] = {}
    for certificate in Certificate.objects.filter(
        standard__in=found, withdrawn_at=None, calibrated_on__lte=on
    ).order_by("calibrated_on", "id"):
        newest[certificate.standard_id] = certificate
    return [_candidate(standard, newest.get(standard.pk), on) for standard in found]


def number_of(text: str) -> int | None:
    """The id that a field names; None where it names none."""
    return int(text) if text.isascii() and text.isdigit() and len(text) < 19 else None


def exception_field(standard_id: int | str) -> str:
    return f"exception.{standard_id}"


def unfit(candidate: Candidate, part: str) -> str:
    """Why a standard is of no use for a part, whatever its certificate; empty where it is."""
    if candidate.fits(part):
        return ""
    return f"{candidate.standard} is no standard that {_WHAT[part]}."


def covers(candidate: Candidate, sheet: Sheet) -> str:
    """A caution where the range of a pressure standard does not reach the range of the transmitter."""
    standard = candidate.standard
    if standard.kind not in APPLIES:
        return ""
    low, high = sorted((sheet.lrv_si, sheet.urv_si))
    if standard.low_si <= low and high <= standard.high_si:
        return ""
    return (
        f"{standard.name} goes from {standard.low} to {standard.high} {_unit(standard.unit)}: "
        f"it does not reach all of {sheet.lrv} to {sheet.urv} {_unit(sheet.unit)}."
    )


def part_words(kind: str, part: str) -> str:
    run = "as-found" if kind == Run.Kind.AS_FOUND else "as-left"
    return f"the standard that {_WHAT[part]} ({run})"


def _candidate(standard: Standard, certificate: Certificate | None, on: datetime.date) -> Candidate:
    if standard.state != Standard.State.IN_USE:
        return Candidate(standard, certificate, f"{standard.name} is {standard.get_state_display()}.", lapsed=False)
    if certificate is None:
        return Candidate(standard, None, f"{standard.name} has no certificate.", lapsed=True)
    if certificate.valid_until < on:
        late = (on - certificate.valid_until).days
        return Candidate(
            standard,
            certificate,
            f"The certificate {certificate.number} of {standard.name} was relied on until {certificate.valid_until}, "
            f"{late} day{'' if late == 1 else 's'} ago.",
            lapsed=True,
        )
    return Candidate(standard, certificate, "", lapsed=False)


def _unit(key: str) -> str:
    from register.engineering.units import label

    return label(key)
