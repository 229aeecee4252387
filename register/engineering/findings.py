"""What a limit check found, in numbers and in words."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field
from enum import StrEnum
from types import MappingProxyType
from typing import Protocol

from register.engineering.units import difference_from_si, from_si, label


class Severity(StrEnum):
    """How a demand stands to its limit."""

    CLEAR = "clear"
    CANNOT_CHECK = "cannot check"
    CAUTION = "caution"
    VIOLATION = "violation"

    @property
    def rank(self) -> int:
        """Order of concern, 0 for clear to 3 for a violation."""
        return list(Severity).index(self)


CHECKS: Mapping[str, str] = MappingProxyType(
    {
        "range_lower": "Range against the head's lower limit",
        "range_upper": "Range against the head's upper limit",
        "least_span": "Span against the head's least span",
        "greatest_span": "Span against the head's greatest span",
        "square_root": "Square root on a differential pressure",
        "square_root_place": "Square root taken in one place",
        "static_pressure": "Static pressure against the body rating",
        "one_side": "Pressure on one side against the one-side limit",
        "lowest_pressure": "Lowest pressure against the vacuum limit",
        "ambient_low": "Lowest ambient against the type's limit",
        "ambient_high": "Highest ambient against the type's limit",
        "process_low": "Lowest process temperature against the type's limit",
        "process_high": "Highest process temperature against the type's limit",
        "tracing": "Heat tracing against the capsule's limit",
        "supply_voltage": "Supply against the transmitter's lift-off voltage",
        "loop_resistance": "Loop resistance against what the supply can drive",
    }
)


class Words(Protocol):
    """What a finding says; made only when it is read, since most findings of a fleet never are."""

    @property
    def sentence(self) -> str:
        """The finding as a tradesman would say it."""

    @property
    def arithmetic(self) -> str:
        """The numbers as a line that can be added again; empty where none are compared."""

    @property
    def demanded_source(self) -> str:
        """Where the demand stands."""

    @property
    def limit_source(self) -> str:
        """Where the limit stands."""


@dataclass(frozen=True, slots=True)
class Said:
    """Words of a finding that compares no numbers."""

    sentence: str
    demanded_source: str = ""
    limit_source: str = ""
    arithmetic: str = ""


@dataclass(frozen=True, slots=True)
class Finding:
    """Result of one check at one tag.

    Numbers are in SI and, as properties, in the user's `unit`; None where the check compares none or cannot be
    made. A margin is zero or more inside the limit and negative beyond it; `share_si` is what 100 % of it is, and
    `percent_of` names that.
    """

    check: str
    severity: Severity
    words: Words = field(compare=False, repr=False)
    unit: str = ""
    demanded_si: float | None = None
    limit_si: float | None = None
    margin_si: float | None = None
    share_si: float | None = None
    percent_of: str = ""
    missing: tuple[str, ...] = ()
    advice: str = ""

    @property
    def title(self) -> str:
        """Name of the check for people."""
        return CHECKS[self.check]

    @property
    def unit_label(self) -> str:
        """Label of the unit of demand, limit and margin; empty where the check compares no numbers."""
        return label(self.unit) if self.unit else ""

    @property
    def demanded(self) -> float | None:
        """The demand in the user's unit."""
        return None if self.demanded_si is None else from_si(self.demanded_si, self.unit)

    @property
    def limit(self) -> float | None:
        """The limit in the user's unit."""
        return None if self.limit_si is None else from_si(self.limit_si, self.unit)

    @property
    def margin(self) -> float | None:
        """The margin in the user's unit."""
        return None if self.margin_si is None else difference_from_si(self.margin_si, self.unit)

    @property
    def margin_percent(self) -> float | None:
        """The margin as a percentage of what `percent_of` names."""
        return None if self.margin_si is None or self.share_si is None else self.margin_si / self.share_si * 100.0

    @property
    def sentence(self) -> str:
        """The finding as a tradesman would say it."""
        return self.words.sentence

    @property
    def arithmetic(self) -> str:
        """The numbers as a line that can be added again; empty where none are compared."""
        return self.words.arithmetic

    @property
    def demanded_source(self) -> str:
        """Where the demand stands."""
        return self.words.demanded_source

    @property
    def limit_source(self) -> str:
        """Where the limit stands."""
        return self.words.limit_source


def worst(findings: Iterable[Finding]) -> Severity:
    """Give the severity of greatest concern; clear where there is no finding."""
    return max((finding.severity for finding in findings), key=lambda severity: severity.rank, default=Severity.CLEAR)
