"""One demand against one limit, said in numbers that can be added again and in a sentence."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass
from functools import lru_cache

from register.engineering.findings import Finding, Said, Severity
from register.engineering.margins import ON_THE_LIMIT, severity_codes
from register.engineering.typed import format_number
from register.engineering.units import difference_from_si, from_si, label

# Margins below which a demand inside its limit is a caution: own choice, no source.
NARROW_SHARE = 0.05
NARROW_KELVIN = 5.0

LONGEST_SOURCE = 120
LONGEST_TEXT = 400


@dataclass(frozen=True, slots=True)
class Source:
    """Where a number stands: whose it is, what it is there, and how it reads there."""

    origin: str
    what: str
    si: float
    unit: str
    remark: str = ""

    def __str__(self) -> str:
        return clipped(f"{self.origin}: {self.what} {in_unit(self.si, self.unit)}{self.remark}", LONGEST_SOURCE)


@dataclass(frozen=True, slots=True)
class Side:
    """One of the two numbers of a comparison.

    `name` begins the sentence for a demand and follows "above" or "below" for a limit; `note` follows the number.
    """

    si: float
    name: str
    source: Source
    note: str = ""


@dataclass(frozen=True, slots=True)
class Share:
    """What a margin is stated as a percentage of: a difference in SI, and its name."""

    si: float
    name: str


@dataclass(frozen=True, slots=True)
class Comparison:
    """A demand that must not pass a limit, and the words for it.

    `narrow` is the margin [SI] below which the demand is a caution; `working` gives the lines of arithmetic that
    lead to the two numbers.
    """

    check: str
    demanded: Side
    limit: Side
    unit: str
    must_stay_below: bool
    share: Share | None = None
    narrow: float = 0.0
    working: tuple[Callable[[], str], ...] = ()
    advice: str = ""

    def finding(self) -> Finding:
        """Compare."""
        severity = _SEVERITIES[severity_codes(self.margin_si, self._size, self.narrow)]
        share = self.share if self.share is not None and self.share.si > 0 else None
        return Finding(
            check=self.check,
            severity=severity,
            words=self,
            unit=self.unit,
            demanded_si=self.demanded.si,
            limit_si=self.limit.si,
            margin_si=self.margin_si,
            share_si=None if share is None else share.si,
            percent_of="" if share is None else share.name,
            advice="" if severity is Severity.CLEAR else self.advice,
        )

    @property
    def margin_si(self) -> float:
        """Margin in SI; what is left by rounding alone is no margin."""
        margin = self.limit.si - self.demanded.si if self.must_stay_below else self.demanded.si - self.limit.si
        return 0.0 if abs(margin) <= ON_THE_LIMIT * self._size else margin

    @property
    def _size(self) -> float:
        return max(abs(self.demanded.si), abs(self.limit.si))

    @property
    def sentence(self) -> str:
        """Say the comparison."""
        found, said, unit = self.finding(), self._said(), short_label(self.unit)
        start = f"{self.demanded.name} {said.demanded} {unit}{self.demanded.note} is"
        end = f"{self.limit.name} of {said.limit}{self.limit.note}."
        if self.margin_si == 0:
            return clipped(f"{start} exactly at {end}", LONGEST_TEXT)
        share = f" ({said.percent.removeprefix('−')})" if said.percent else ""
        place = "above" if (self.margin_si < 0) == self.must_stay_below else "below"
        only = "only " if found.severity is Severity.CAUTION else ""
        return clipped(f"{start} {only}{said.margin.removeprefix('−')} {unit}{share} {place} {end}", LONGEST_TEXT)

    @property
    def arithmetic(self) -> str:
        """Show the numbers so that they can be added again."""
        said = self._said()
        first, second = (said.limit, said.demanded) if self.must_stay_below else (said.demanded, said.limit)
        lines = [line() for line in self.working]
        lines.append(f"{first} − {bracketed(second)} = {said.margin} {label(self.unit)}")
        if said.percent:
            lines.append(f"{said.margin} / {said.share} = {said.percent}")
        return clipped("; ".join(lines), LONGEST_TEXT)

    @property
    def demanded_source(self) -> str:
        """Say where the demand stands."""
        return str(self.demanded.source)

    @property
    def limit_source(self) -> str:
        """Say where the limit stands."""
        return str(self.limit.source)

    def _said(self) -> _Numbers:
        found = self.finding()
        shown = [from_si(side.si, self.unit) for side in (self.demanded, self.limit)]
        shown.append(difference_from_si(self.margin_si, self.unit))
        decimals = shared_decimals(*shown)
        share = None if found.share_si is None else difference_from_si(found.share_si, self.unit)
        return _Numbers(
            demanded=tidy(shown[0], decimals),
            limit=tidy(shown[1], decimals),
            margin=tidy(shown[2], decimals),
            share="" if share is None else tidy(share, shared_decimals(share)),
            percent=_percent(found.margin_percent),
        )


@dataclass(frozen=True, slots=True)
class _Numbers:
    demanded: str
    limit: str
    margin: str
    share: str
    percent: str


_SEVERITIES = tuple(Severity)


def cannot(check: str, missing: tuple[str, ...], why: str = "") -> Finding:
    """Say that a check cannot be made, and what it lacks."""
    if not why:
        why = f"{' and '.join(missing)} {'is' if len(missing) == 1 else 'are'} not recorded"
    sentence = clipped(f"Cannot be checked: {why}.", LONGEST_TEXT)
    return Finding(check, Severity.CANNOT_CHECK, Said(sentence), missing=missing)


def shared_decimals(*values: float) -> int:
    """Give the decimals that show the greatest value to six digits and the least difference to two.

    All numbers of a comparison are shown to the same decimals, so that a reader who adds them again meets no
    other last digit than one of rounding.
    """
    greatest = max(abs(value) for value in values)
    sizes = [math.floor(math.log10(abs(value))) for value in values if abs(value) > 1e-9 * greatest]
    return min(15, max(0, 5 - max(sizes), 1 - min(sizes))) if sizes else 0


def tidy(value: float, decimals: int) -> str:
    """Write a number to at most so many decimals, without trailing zeros, with a true minus sign."""
    text = format_number(value, decimals)
    return text.rstrip("0").rstrip(".") if "." in text else text


def bracketed(text: str) -> str:
    """Put a negative number in brackets, for use after a minus sign."""
    return f"({text})" if text.startswith("−") else text


@lru_cache(maxsize=8192)
def in_unit(si: float, unit: str) -> str:
    """Write an SI value in a unit with the unit's full label."""
    value = from_si(si, unit)
    return f"{tidy(value, shared_decimals(value))} {label(unit)}"


def short_label(unit: str) -> str:
    """Give the unit without its basis, for a sentence whose numbers are all in it."""
    return label(unit).partition(" (")[0]


def clipped(text: str, longest: int) -> str:
    """Cut a text to a length, marked with an ellipsis."""
    return text if len(text) <= longest else f"{text[: longest - 1]}…"


def _percent(percent: float | None) -> str:
    if percent is None:
        return ""
    small = 0 < abs(percent) < 0.095
    return f"{format_number(percent, 1 - math.floor(math.log10(abs(percent))) if small else 1)} %"
