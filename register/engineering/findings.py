"""What a limit check found, in numbers and in words."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from enum import StrEnum
from types import MappingProxyType

from register.engineering.units import label


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
CHECK_CHOICES: list[tuple[str, str]] = list(CHECKS.items())


@dataclass(frozen=True, slots=True)
class Finding:
    """Result of one check at one tag.

    `margin` is zero or more inside the limit and negative beyond it; `margin_percent` has its sign and is a
    percentage of what `percent_of` names. Numbers are None where the check compares none or cannot be made.
    """

    check: str
    severity: Severity
    sentence: str
    unit: str = ""
    si_unit: str = ""
    demanded_si: float | None = None
    limit_si: float | None = None
    margin_si: float | None = None
    demanded: float | None = None
    limit: float | None = None
    margin: float | None = None
    margin_percent: float | None = None
    percent_of: str = ""
    demanded_source: str = ""
    limit_source: str = ""
    arithmetic: str = ""
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


def worst(findings: Iterable[Finding]) -> Severity:
    """Give the severity of greatest concern; clear where there is no finding."""
    return max((finding.severity for finding in findings), key=lambda severity: severity.rank, default=Severity.CLEAR)
