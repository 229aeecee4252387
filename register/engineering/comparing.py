"""One demand against one limit, said in numbers that can be added again and in a sentence."""

from __future__ import annotations

import math
from dataclasses import dataclass

from register.engineering.findings import Finding, Severity
from register.engineering.margins import ON_THE_LIMIT, lower_margin, severity_codes, upper_margin
from register.engineering.typed import format_number
from register.engineering.units import SI_UNIT, difference_from_si, from_si, kind_of, label

# Margins below which a demand inside its limit is a caution: own choice, no source.
NARROW_SHARE = 0.05
NARROW_KELVIN = 5.0

LONGEST_SOURCE = 120
LONGEST_TEXT = 400


@dataclass(frozen=True, slots=True)
class Side:
    """One of the two numbers of a comparison.

    `name` begins the sentence for a demand and follows "above" or "below" for a limit; `note` follows the number;
    `source` says where the number stands.
    """

    si: float
    name: str
    source: str
    note: str = ""


@dataclass(frozen=True, slots=True)
class Share:
    """What a margin is stated as a percentage of: a difference in SI, and its name."""

    si: float
    name: str


@dataclass(frozen=True, slots=True)
class Comparison:
    """A demand that must not pass a limit; `narrow` is the margin [SI] below which it is a caution."""

    check: str
    demanded: Side
    limit: Side
    unit: str
    must_stay_below: bool
    share: Share | None = None
    narrow: float = 0.0
    working: tuple[str, ...] = ()
    advice: str = ""

    def finding(self) -> Finding:
        """Compare, and say it."""
        demanded, limit = self.demanded.si, self.limit.si
        margin_si = float((upper_margin if self.must_stay_below else lower_margin)(demanded, limit))
        size = max(abs(demanded), abs(limit))
        if abs(margin_si) <= ON_THE_LIMIT * size:
            margin_si = 0.0
        severity = list(Severity)[severity_codes(margin_si, size, self.narrow)]
        margin = difference_from_si(margin_si, self.unit)
        base = None if self.share is None or not self.share.si > 0 else difference_from_si(self.share.si, self.unit)
        percent = None if base is None else margin / base * 100.0
        shown = (from_si(demanded, self.unit), from_si(limit, self.unit))
        decimals = shared_decimals(*shown, margin)
        said = _Said(
            demanded=tidy(shown[0], decimals),
            limit=tidy(shown[1], decimals),
            margin=tidy(margin, decimals),
            percent=_percent(percent),
        )
        return Finding(
            check=self.check,
            severity=severity,
            sentence=clipped(self._sentence(said, margin, severity), LONGEST_TEXT),
            unit=self.unit,
            si_unit=SI_UNIT[kind_of(self.unit)],
            demanded_si=demanded,
            limit_si=limit,
            margin_si=margin_si,
            demanded=shown[0],
            limit=shown[1],
            margin=margin,
            margin_percent=percent,
            percent_of="" if percent is None or self.share is None else self.share.name,
            demanded_source=clipped(self.demanded.source, LONGEST_SOURCE),
            limit_source=clipped(self.limit.source, LONGEST_SOURCE),
            arithmetic=clipped("; ".join((*self.working, self._arithmetic(said, base))), LONGEST_TEXT),
            advice="" if severity is Severity.CLEAR else self.advice,
        )

    def _sentence(self, said: _Said, margin: float, severity: Severity) -> str:
        unit = short_label(self.unit)
        start = f"{self.demanded.name} {said.demanded} {unit}{self.demanded.note} is"
        end = f"{self.limit.name} of {said.limit}{self.limit.note}."
        if margin == 0:
            return f"{start} exactly at {end}"
        share = f" ({said.percent.removeprefix('−')})" if said.percent else ""
        place = "above" if (margin < 0) == self.must_stay_below else "below"
        only = "only " if severity is Severity.CAUTION else ""
        return f"{start} {only}{said.margin.removeprefix('−')} {unit}{share} {place} {end}"

    def _arithmetic(self, said: _Said, base: float | None) -> str:
        first, second = (said.limit, said.demanded) if self.must_stay_below else (said.demanded, said.limit)
        line = f"{first} − {bracketed(second)} = {said.margin} {label(self.unit)}"
        if base is None:
            return line
        return f"{line}; {said.margin} / {tidy(base, shared_decimals(base))} = {said.percent}"


@dataclass(frozen=True, slots=True)
class _Said:
    demanded: str
    limit: str
    margin: str
    percent: str


def cannot(check: str, missing: tuple[str, ...], why: str = "", unit: str = "") -> Finding:
    """Say that a check cannot be made, and what it lacks."""
    if not why:
        why = f"{' and '.join(missing)} {'is' if len(missing) == 1 else 'are'} not recorded"
    return Finding(
        check=check,
        severity=Severity.CANNOT_CHECK,
        sentence=clipped(f"Cannot be checked: {why}.", LONGEST_TEXT),
        unit=unit,
        si_unit=SI_UNIT[kind_of(unit)] if unit else "",
        missing=missing,
    )


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
